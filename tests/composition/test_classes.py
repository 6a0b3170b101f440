import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from texture.composition import LogRatio, Scheme, class_numbers, class_odds, classify, find_scheme, scheme_names
from texture.composition.draws import normal_draws
from texture.errors import CompositionError

NAN = float("nan")

# Folk (1954), limits as in Folk, Petrology of Sedimentary Rocks, "Grain size nomenclature":
# gravel, sand, mud in percent.
FOLK = """0,95,5 S; 0,50.5,49.5 mS; 0,30,70 sM; 0,5,95 M; 0.005,95,4.995 S; 0.5,95,4.5 (g)S; 0.5,80,19.5 (g)mS;
2,40,58 (g)sM; 3,5,92 (g)M; 10,85,5 gS; 10,60,30 gmS; 10,30,60 gM; 10,0,90 gM; 40,58,2 sG; 40,40,20 msG; 40,10,50 mG;
85,10,5 G; 100,0,0 G; 79.9,20.1,0 sG; 29.9,70,0.1 gS; 4.9,86,9.1 (g)S; 0,100,0 S; 0,0,100 M"""
# Shepard (1954) and Folk (1954, from memory), sand, silt, clay in percent.
SHEPARD = """80,15,5 sand; 10,80,10 silt; 5,15,80 clay; 60,30,10 silty sand; 60,10,30 clayey sand; 30,60,10 sandy silt;
10,60,30 clayey silt; 30,10,60 sandy clay; 10,30,60 silty clay; 34,33,33 sand-silt-clay; 50,28,22 sand-silt-clay;
21,21,58 sand-silt-clay; 74,15,11 silty sand; 70,19,11 silty sand"""
FOLK_SSC = """80,15,5 zS; 60,10,30 cS; 74,15,11 mS; 30,60,10 sZ; 34,33,33 sM; 30,10,60 sC; 5,15,80 C"""

percents = arrays(np.float64, (30, 3), elements=st.integers(0, 100).map(float)).filter(
    lambda a: (a.sum(axis=1) > 0).all()
)


def points(text):
    numbers, codes = zip(*(entry.strip().split(" ", 1) for entry in text.replace("\n", " ").split(";")), strict=True)
    return np.array([[float(n) for n in row.split(",")] for row in numbers]), list(codes)


def folk(gravel_sand_mud, **kwargs):
    return classify(np.asarray(gravel_sand_mud, dtype=float)[..., ::-1], **kwargs)


@pytest.mark.parametrize("unit", [1.0, 0.01, 37.3, 1e-7])
def test_folk_points_in_any_unit(unit):
    rows, codes = points(FOLK)
    assert folk(rows * unit).tolist() == codes


@pytest.mark.parametrize("unit", [1.0, 0.01, 37.3])
@pytest.mark.parametrize(("scheme", "text"), [("shepard", SHEPARD), ("folk_ssc", FOLK_SSC)])
def test_sand_silt_clay_points_in_any_unit(scheme, text, unit):
    rows, codes = points(text)
    assert classify(rows * unit, scheme).tolist() == codes


# The text does not say who owns a line; ours goes to the coarser side, or to the class listed first.
@pytest.mark.parametrize(
    ("row", "allowed", "ours"),
    [
        ((80, 10, 10), {"G", "msG", "mG"}, "G"),
        ((30, 35, 35), {"mG", "msG", "gM", "gmS"}, "msG"),
        ((0, 90, 10), {"S", "mS"}, "S"),
        ((0, 50, 50), {"mS", "sM"}, "mS"),
        ((0, 10, 90), {"M", "sM"}, "sM"),
        ((0.01, 90, 9.99), {"S", "(g)S"}, "(g)S"),
    ],
)
def test_ties_have_one_owner_in_every_unit(row, allowed, ours):
    assert ours in allowed
    for unit in (1.0, 0.01, 1 / 3, 0.1, 7.7, 1e4):
        assert folk(np.multiply(row, unit)) == ours
    below = np.add(row, (-1e-5, -1e-5, 2e-5))  # a hundred times the tie's width
    if row[0] > 0:
        assert folk(below) != ours


def test_shepard_ties():
    rows = [[75, 15, 10], [60, 20, 20], [45, 45, 10], [70, 15, 15]]
    assert classify(rows, "shepard").tolist() == ["sand", "sand-silt-clay", "silty sand", "silty sand"]


# Mapping practice that takes 1 % for the trace; common practice, no source.
def test_trace_is_a_setting():
    assert folk([[0.5, 95, 4.5], [0.99, 50, 49.01], [1.5, 95, 3.5]], trace=0.01).tolist() == ["S", "mS", "(g)S"]


# Kaskela and others (2019), from memory.
GROUPS = {
    "mud": "M (g)M",
    "sandy mud": "sM (g)sM",
    "muddy sand": "mS (g)mS",
    "sand": "S (g)S",
    "coarse": "G sG gS",
    "mixed": "mG msG gM gmS",
}


@given(percents)
def test_groups_are_functions_of_the_fifteen_classes(rows):
    seven = {code: group for group, codes in GROUPS.items() for code in codes.split()}
    five = {"mud": "muddy", "sandy mud": "muddy", "muddy sand": "muddy"}
    fifteen = classify(rows)
    assert classify(rows, "folk_7").tolist() == [seven[c] for c in fifteen]
    assert classify(rows, "folk_5").tolist() == [five.get(seven[c], seven[c]) for c in fifteen]


@given(percents, st.sampled_from([1.0, 0.01, 1 / 3, 12.34, 1e-6]))
def test_units_never_change_a_class(rows, unit):
    for scheme in scheme_names():
        assert (classify(rows * unit, scheme) == classify(rows, scheme)).all()


def test_every_class_can_be_reached_and_has_words_and_a_number():
    grid = np.array([(i, j, 100 - i - j) for i in range(101) for j in range(101 - i)], dtype=float)
    for name in scheme_names():
        scheme = find_scheme(name)
        assert set(classify(grid, name)) == set(scheme.codes)
        assert set(class_numbers(grid, name)) == set(scheme.numbers)
        assert all(text.replace("_", "").isalpha() for text in scheme.flag_meanings())
    meanings = dict(zip(find_scheme("folk").codes, find_scheme("folk").flag_meanings(), strict=True))
    assert meanings["(g)mS"] == "slightly_gravelly_muddy_sand"


def test_unknown_rows_have_no_class():
    assert classify([[0.2, NAN, 0.1], [0, 1, 0]]).tolist() == ["", "S"]
    assert class_numbers([[0.2, NAN, 0.1], [0, 1, 0]]).tolist() == [0, 4]


def test_other_columns_are_matched_by_name():
    assert classify([10.0, 20, 60, 10], parts=["clay", "silt", "sand", "gravel"]) == "gmS"
    with pytest.raises(CompositionError, match="needs mud, sand, gravel; found only silt, sand, gravel"):
        classify([10.0, 20, 60], parts=["silt", "sand", "gravel"])


@pytest.mark.parametrize(
    ("fractions", "kwargs", "message"),
    [
        ([[0, 0, 0]], {}, "all parts are zero"),
        ([[-1, 0, 2]], {}, "found negative"),
        ([[1, 2]], {}, "expected 3 columns"),
        ([[1, 2, 3]], {"scheme": "fok"}, "scheme = 'fok', expected one of folk, "),
        ([[1, 2, 3]], {"scheme": "shepard", "trace": 0.01}, "no limit named trace; it has none"),
    ],
)
def test_what_cannot_be_classed_is_refused(fractions, kwargs, message):
    with pytest.raises(CompositionError, match=message):
        classify(fractions, **kwargs)


def own_table(**changes):
    table = {
        "title": "two",
        "source": "here",
        "parts": ["mud", "sand"],
        "classes": [
            {"code": "a", "number": 1, "words": "fine", "when": ["mud >= 0.5"]},
            {"code": "b", "number": 2, "words": "coarse", "when": []},
        ],
    }
    return {**table, **changes}


def test_a_table_of_ones_own():
    assert classify([[0.6, 0.4], [1, 2]], Scheme.from_table(own_table())).tolist() == ["a", "b"]


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"parts": ["clay", "sand"]}, "'mud' is no part"),
        ({"classes": [{"code": "a", "number": 1, "words": "x", "when": ["mud > 0.5"]}]}, "cannot read the condition"),
        ({"classes": [{"code": "a", "number": 0, "words": "x", "when": []}]}, "without repeats"),
        ({"classes": [{"code": "a", "words": "x", "when": []}]}, "the key 'number' is missing"),
    ],
)
def test_a_table_that_cannot_be_read_is_refused(changes, message):
    with pytest.raises(CompositionError, match=message):
        Scheme.from_table(own_table(**changes))


def test_a_table_with_a_gap_says_which_row():
    gap = own_table(classes=own_table()["classes"][:1])
    with pytest.raises(CompositionError, match=r"row 1 .*no class of 'two' takes \[0.2, 0.8\]"):
        classify([[0.6, 0.4], [0.2, 0.8]], Scheme.from_table(gap))


@pytest.mark.parametrize("kind", ["tree", "ilr", "shares"])
def test_odds_are_shares_of_draws(kind):
    lr = LogRatio(["mud", "sand", "gravel"], kind)
    mean, matrix = np.array([0.2, 0.4]), np.array([[0.3, 0.1], [0.1, 0.5]])
    odds = class_odds(lr, [mean, [NAN, 0.0]], np.stack([matrix] * 2), trace=0.01)
    y = mean + normal_draws(2, 2**15) @ np.linalg.cholesky(matrix).T
    codes = classify(lr.inverse(y), trace=0.01)
    truth = [(codes == code).mean() for code in find_scheme("folk").codes]
    np.testing.assert_allclose(odds.all[0], truth, rtol=0, atol=0.011)
    assert odds.all[0].sum() == pytest.approx(1.0)
    assert odds.probability[0] == odds.all[0].max()
    assert odds.number[0] == find_scheme("folk").numbers[int(np.argmax(odds.all[0]))]
    assert odds.number[1] == 0
    assert np.isnan(odds.probability[1])


def test_odds_of_a_certain_bed_are_its_class():
    lr = LogRatio(["clay", "silt", "sand", "gravel"])
    fractions = [[0.1, 0.2, 0.6, 0.1], [0.01, 0.02, 0.96, 0.01]]
    odds = class_odds(lr, lr.forward(fractions), np.zeros((2, 3)), "folk_7")
    np.testing.assert_array_equal(odds.number, class_numbers(fractions, "folk_7", parts=lr.parts))
    np.testing.assert_allclose(odds.probability, 1.0)
