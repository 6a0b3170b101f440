"""Every file of the corpus gives its table, its account and its audit; no row is lost in any of them."""

import numpy as np
import pytest

from tests.stations.corpus.cases import BASE, CASES
from tests.stations.samples import recipe_for
from texture.stations import read_samples

COUNTS = {
    "rows_read": 7,
    "rows_used": 6,
    "rows_merged": 0,
    "rows_evidence": 0,
    "rows_set_aside": 0,
    "rows_not_samples": 1,
    "stations": 6,
}


def test_the_corpus_is_as_large_as_it_claims():
    assert len(CASES) >= 90
    assert len({case.name for case in CASES}) == len(CASES)


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name)
def test_case(case, tmp_path):
    path = tmp_path / case.file
    path.write_bytes(case.content)
    stations = read_samples(recipe_for({"file": path, **case.block}))

    assert stations.counts == {**COUNTS, **case.counts}
    expected = {
        r[0]: dict(
            zip(
                ("latitude", "longitude", "mud", "sand", "gravel"),
                (r[1], r[2], r[3] / 100, r[4] / 100, r[5] / 100),
                strict=True,
            )
        )
        for r in BASE
        if r[0] not in case.gone
    }
    for name, values in case.changed.items():
        expected[name] = {**expected.get(name, {}), **values}
    table = stations.table.drop_duplicates("id").set_index("id")
    for name, values in expected.items():
        for column, value in values.items():
            found = table.loc[name, column]
            if isinstance(value, float):
                np.testing.assert_allclose(found, value, atol=case.atol, rtol=0, err_msg=f"{name} {column}")
            else:
                assert found == value, f"{name} {column}"
    assert [tuple(a) for a in stations.audit[["row", "column", "old", "new"]].itertuples(index=False)] == sorted(
        case.audit, key=lambda a: a[0]
    )
    reasons = stations.set_aside["reason"].tolist()
    assert len(reasons) == stations.counts["rows_set_aside"]
    for part, reason in zip(case.aside, reasons, strict=True):
        assert part in reason
    for part in case.notes:
        assert any(part in note for note in stations.notes), stations.notes
