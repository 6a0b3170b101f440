"""Stations as they travel, and the law that no spreadsheet row is ever lost.

Every filled row of a sheet has exactly one fate: it is *used*, *merged* into the used row of its repeats,
kept as *evidence* (hard ground), *set aside* with a reason, or is *no sample* (title, header, note, total).
So rows read = used + merged + evidence + set aside + not samples, for each sheet and altogether.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from texture.errors import SampleError
from texture.stations.audit import AUDIT_COLUMNS, as_text

if TYPE_CHECKING:
    import geopandas as gpd
    import pandas as pd

__all__ = ["DEEPER_COLUMNS", "FATES", "LEDGER_COLUMNS", "TABLE_COLUMNS", "Stations", "check_conservation"]

FATES = ("used", "merged", "evidence", "set_aside", "not_samples")
LEDGER_COLUMNS = ("file", "sheet", "row", "id", "fate", "reason", "station")
DEEPER_COLUMNS = (
    "id", "survey", "longitude", "latitude", "top_m", "bottom_m", "mud", "sand", "gravel", "kind", "note", "file", "sheet", "row",
)  # fmt: skip
TABLE_COLUMNS = (
    "id", "survey", "longitude", "latitude", "mud", "sand", "gravel", "kind", "file", "sheet", "row",
    "date", "depth_m", "resolution", "repeats", "repeat_sd_mud", "repeat_sd_sand", "repeat_sd_gravel",
    "position_accuracy_m", "description", "described_class", "mud_low", "mud_high", "sand_low", "sand_high",
    "gravel_low", "gravel_high", "median_phi",
    "mud_below_mm", "gravel_above_mm",
)  # fmt: skip


@dataclass(frozen=True)
class Stations:
    """Samples of the bed at places, and what became of every row they were read from.

    Parameters
    ----------
    table : GeoDataFrame, EPSG:4326, index 0 … n-1
        One row for each station, `TABLE_COLUMNS` first. Fractions of 1, NaN where a part is not known: a row
        that knows only its mud has sand and gravel NaN; mud and sand without gravel are shares of what passed
        2 mm. Rows of kind `hard_ground` have no fractions, and those of kind `description` none either: their words
        name a class in `described_class`, and those of kind `median_only` only a `median_phi`. Rows that are not exact
        (`<1`, `5-10`) have the limits of every known part in `<part>_low` and `<part>_high`, NaN in all other rows.
        `mud_below_mm` and `gravel_above_mm` are the sizes at which the parts were cut, NaN where nothing says.
    audit : DataFrame
        file, sheet, row, column, old, new, rule: every reading that was not plain and every change.
    ledger : DataFrame
        `LEDGER_COLUMNS`: the fate of each row read; `station` is the row's number in `table`, or -1.
    rows_read : dict (file, sheet) → int
        Filled rows of each sheet that was read, counted before anything was understood of them.
    notes : tuple of str
        What a person should know: units found, coordinate operations, sheets not read, hidden rows.
    deeper : DataFrame
        `DEEPER_COLUMNS`: what cores found below the surface layer, from the top of each interval to its bottom in metres
        below the bed (NaN where not told), at the place as read. Fractions are NaN where only words tell of the interval;
        `note` holds such words, and those on how the core ended or what was recovered. Most of these rows are set aside as
        samples of the surface; intervals that begin above `intake.surface_m` and reach below it are used there too.
    """

    table: gpd.GeoDataFrame
    audit: pd.DataFrame
    ledger: pd.DataFrame
    rows_read: dict[tuple[str, str], int]
    notes: tuple[str, ...] = field(default=())
    deeper: pd.DataFrame = field(default_factory=lambda: no_rows(DEEPER_COLUMNS))

    def __post_init__(self) -> None:
        check_conservation(self)

    @property
    def set_aside(self) -> pd.DataFrame:
        """Rows set aside: file, sheet, row, id, reason."""
        rows = self.ledger[self.ledger["fate"] == "set_aside"]
        return rows[["file", "sheet", "row", "id", "reason"]].reset_index(drop=True)

    @property
    def samples(self) -> gpd.GeoDataFrame:
        """The stations with sediment: `table` without hard ground, its row numbers kept as index."""
        return self.table[self.table["kind"] != "hard_ground"]

    @property
    def hard_ground(self) -> gpd.GeoDataFrame:
        """The places where rock, stones or an empty grab tell of hard ground."""
        return self.table[self.table["kind"] == "hard_ground"]

    @property
    def counts(self) -> dict[str, int]:
        """rows_read, rows_used, rows_merged, rows_evidence, rows_set_aside, rows_not_samples, stations.

        `stations` counts the stations with sediment; each has one used row.
        """
        fates = self.ledger["fate"].value_counts()
        counts = {"rows_read": sum(self.rows_read.values())}
        counts |= {f"rows_{fate}": int(fates.get(fate, 0)) for fate in FATES}
        counts["stations"] = int((self.table["kind"] != "hard_ground").sum())
        return counts

    @property
    def accounts(self) -> pd.DataFrame:
        """The same counts for each file and sheet: file, sheet, rows_read and one column for each fate."""
        import pandas as pd

        fates = (
            pd.crosstab([self.ledger["file"], self.ledger["sheet"]], self.ledger["fate"]) if len(self.ledger) else None
        )
        rows = []
        for (file, sheet), read in self.rows_read.items():
            row: dict[str, Any] = {"file": file, "sheet": sheet, "rows_read": read}
            for fate in FATES:
                here = fates is not None and fate in fates.columns and (file, sheet) in fates.index
                row[fate] = (
                    int(np.asarray(fates[fate])[fates.index.get_loc((file, sheet))])
                    if here and fates is not None
                    else 0
                )
            rows.append(row)
        return pd.DataFrame(rows, columns=["file", "sheet", "rows_read", *FATES])

    def with_changes(
        self,
        values: dict[str, npt.ArrayLike] | None = None,
        changed: npt.ArrayLike | None = None,
        rule: str = "",
        drop: npt.ArrayLike | None = None,
        reason: str | Sequence[str] = "",
        notes: Sequence[str] = (),
    ) -> Stations:
        """Return new stations with some values changed (audited) and some stations set aside.

        Parameters
        ----------
        values : dict column → array, shape (n_stations,), optional
            New values; only those of `changed` rows are taken.
        changed : bool array, shape (n_stations,), optional
            Stations that change; needs `rule`, the words of the audit's rule.
        drop : bool array, shape (n_stations,), optional
            Stations to set aside, with all rows that were merged into them; needs `reason`, one text or one
            for each station of the table.
        notes : sequence of str

        Raises
        ------
        ValueError
            If a change comes without its rule, or a drop without its reason.
        """
        table, audit = self.table, self.audit
        if values is not None:
            table, audit = _changed(table, audit, values, changed, rule)
        ledger = self.ledger
        if drop is not None:
            table, ledger = _dropped(table, ledger, np.asarray(drop, dtype=bool), reason)
        return replace(self, table=table, audit=audit, ledger=ledger, notes=(*self.notes, *notes))

    def with_outliers(
        self, z: npt.ArrayLike, rows: npt.ArrayLike | None = None, coordinates: Sequence[str] | None = None
    ) -> Stations:
        """Return new stations with leave-one-out standardised errors in the column `held_out_z`, the large ones audited.

        Nothing is dropped; see `texture.stations.outliers.flag_outliers`.

        Parameters
        ----------
        z : array-like, shape (m,) or (m, d)
        rows : int array-like, shape (m,), optional
            Row of `table` of each error; all rows in order if absent.
        coordinates : sequence of str, length d, optional
        """
        import pandas as pd

        from texture.stations.outliers import flag_outliers

        errors = np.asarray(z, dtype=np.float64)
        errors = errors[:, None] if errors.ndim == 1 else errors
        index = np.arange(len(self.table)) if rows is None else np.asarray(rows, dtype=np.int64)
        of_all = np.full((len(self.table), errors.shape[1]), np.nan)
        of_all[index] = errors
        worst, flagged = flag_outliers(self.table, of_all, coordinates)
        table = self.table.assign(held_out_z=worst)
        audit = pd.concat([self.audit, flagged], ignore_index=True) if len(flagged) else self.audit
        audit = audit.sort_values(["file", "sheet", "row"], kind="stable", ignore_index=True)
        return replace(self, table=table, audit=audit)

    @property
    def outliers(self) -> pd.DataFrame:
        """Stations flagged by `with_outliers`, the furthest out first: id, survey, file, sheet, row, held_out_z."""
        import pandas as pd

        from texture.stations.outliers import FLAGGED_FROM

        columns = ["id", "survey", "file", "sheet", "row", "held_out_z"]
        if "held_out_z" not in self.table.columns:
            return no_rows(columns)
        size = self.table["held_out_z"].abs()
        order = size[size > FLAGGED_FROM].sort_values(ascending=False, kind="stable").index
        return pd.DataFrame(self.table.loc[order, columns]).reset_index(drop=True)

    def plot(self, part: str = "mud", ax: Any = None) -> Any:
        """Draw the stations on matplotlib axes; see `texture.stations.drawing.plot_stations`."""
        from texture.stations.drawing import plot_stations

        return plot_stations(self, part, ax)

    def __len__(self) -> int:
        return len(self.table)

    def __repr__(self) -> str:
        c = self.counts
        surveys = self.samples["survey"].nunique()
        lines = [
            f"Stations: {c['stations']} with sediment from {surveys} survey{'s' * (surveys != 1)}, {c['rows_evidence']} on hard ground",
            f"  rows read {c['rows_read']} = used {c['rows_used']} + merged {c['rows_merged']} + evidence {c['rows_evidence']}"
            f" + set aside {c['rows_set_aside']} + not samples {c['rows_not_samples']}; {len(self.audit)} audit rows",
        ]
        return "\n".join(lines + self._extent_line())

    def _extent_line(self) -> list[str]:
        if not len(self.table):
            return []
        west, south, east, north = self.table.total_bounds
        kinds = ", ".join(f"{n} {kind}" for kind, n in self.table["kind"].value_counts().items())
        return [f"  longitude {west:.4f} to {east:.4f}, latitude {south:.4f} to {north:.4f}; {kinds}"]

    def _repr_html_(self) -> str:
        import html

        head = html.escape(repr(self)).replace("\n", "<br>")
        return f"<p>{head}</p>{self.table.drop(columns='geometry').head(8).to_html(border=0, na_rep='')}"


def no_rows(columns: Sequence[str]) -> pd.DataFrame:
    """A table of these columns without rows."""
    import pandas as pd

    return pd.DataFrame({c: pd.Series(dtype=object) for c in columns})


def check_conservation(stations: Stations) -> None:
    """Hold the ledger against the rows counted in the files and against the table.

    Raises
    ------
    SampleError
        If a row is lost, counted twice or has a fate that the table contradicts. That is a fault of the program,
        never of the file.
    """
    ledger, table = stations.ledger, stations.table

    def broken(what: str) -> SampleError:
        return SampleError(
            f"the account of spreadsheet rows does not add up ({what}); this is a fault in Seabed Texture, please report it"
        )

    if not set(ledger["fate"]) <= set(FATES):
        raise broken(f"unknown fates {sorted(set(ledger['fate']) - set(FATES))}")
    if ledger.duplicated(["file", "sheet", "row"]).any():
        raise broken("a row has two fates")
    entered = ledger.groupby(["file", "sheet"], sort=False).size().to_dict()
    for place, read in stations.rows_read.items():
        if entered.get(place, 0) != read:
            raise broken(f"{' '.join(place)}: {read} rows read, {entered.get(place, 0)} accounted for")
    if set(entered) - set(stations.rows_read):
        raise broken("rows of a sheet that was not read")
    on_station = ledger["station"].to_numpy() >= 0
    if (on_station != ledger["fate"].isin(["used", "merged", "evidence"]).to_numpy()).any():
        raise broken("a row's fate and its station disagree")
    used = ledger.loc[ledger["fate"].isin(["used", "evidence"]), "station"].to_numpy()
    if len(used) != len(table) or len(np.unique(used)) != len(table):
        raise broken(f"{len(table)} stations, {len(used)} rows used or kept as evidence")
    if (ledger["fate"] == "evidence").sum() != (table["kind"] == "hard_ground").sum():
        raise broken("evidence rows and hard-ground stations disagree")


def _changed(
    table: gpd.GeoDataFrame,
    audit: pd.DataFrame,
    values: dict[str, npt.ArrayLike],
    changed: npt.ArrayLike | None,
    rule: str,
) -> tuple[gpd.GeoDataFrame, pd.DataFrame]:
    import pandas as pd

    if changed is None or not rule:
        raise ValueError("a change needs the stations it changes and a rule for the audit")
    hit = np.asarray(changed, dtype=bool)
    table = table.copy()
    blocks = [audit]
    for column, new in values.items():
        new = np.asarray(new)
        block = table.loc[hit, ["file", "sheet", "row"]].reset_index(drop=True)
        block["column"] = column
        block["old"] = [as_text(v) for v in table.loc[hit, column]]
        block["new"] = [as_text(v) for v in new[hit]]
        block["rule"] = rule
        blocks.append(block)
        table.loc[hit, column] = new[hit]
    if {"longitude", "latitude"} & set(values):
        table = _with_points(table)
    joined = pd.concat([b for b in blocks if len(b)], ignore_index=True) if any(len(b) for b in blocks) else audit
    joined = joined[list(AUDIT_COLUMNS)].sort_values(["file", "sheet", "row"], kind="stable", ignore_index=True)
    return table, joined


def _dropped(
    table: gpd.GeoDataFrame, ledger: pd.DataFrame, drop: npt.NDArray[np.bool_], reason: str | Sequence[str]
) -> tuple[gpd.GeoDataFrame, pd.DataFrame]:
    if drop.any() and not (reason if isinstance(reason, str) else any(reason)):
        raise ValueError("stations are set aside only with a reason")
    reasons = np.array([reason] * len(table) if isinstance(reason, str) else list(reason), dtype=object)
    ledger = ledger.copy()
    station = ledger["station"].to_numpy()
    gone = (station >= 0) & drop[station]
    ledger.loc[gone, "fate"] = "set_aside"
    ledger.loc[gone, "reason"] = reasons[station[gone]]
    number = np.where(drop, -1, np.cumsum(~drop) - 1)
    ledger["station"] = np.where(station >= 0, number[station], -1)
    return table[~drop].reset_index(drop=True), ledger


def _with_points(table: gpd.GeoDataFrame) -> gpd.GeoDataFrame:
    import geopandas as gpd

    points = gpd.points_from_xy(table["longitude"], table["latitude"], crs="EPSG:4326")
    return gpd.GeoDataFrame(table.drop(columns="geometry", errors="ignore"), geometry=points, crs="EPSG:4326")
