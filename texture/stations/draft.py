"""Look at files of samples and write a starting recipe: what was recognised, an example of each, and every doubt."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import numpy.typing as npt

from texture.errors import RecipeError, SampleError
from texture.recipe import Intake, Samples
from texture.stations.audit import AuditLog
from texture.stations.certificates import CERTIFICATES
from texture.stations.draft_lines import bed_lines, column_lines, target_lines, toml_path, toml_text
from texture.stations.files import is_blank, read_sheets
from texture.stations.plausible import (
    DepthAt,
    Extent,
    depth_doubts,
    extent_doubts,
    extent_of,
    look_like_minutes,
    overlap,
)
from texture.stations.rows import read_rows
from texture.stations.sources import Source, find_source, sheets_with_samples
from texture.stations.where import shown

__all__ = ["draft_recipe"]

DETECTION_LIMIT = 0.005  # of the recipe's default; a draft only counts rows with it
DOUBTFUL = ("DOUBT", "tells the unit", "headings say", "is not known here", "cannot be told")  # words of notes
MANY_ASIDE = 0.2  # of a file's rows; more need a word on why
ROWS_SHOWN = 4  # of a file in which no table was found


@dataclass
class _Look:
    """What was found in one file."""

    file: Path
    block: Samples
    source: Source | None = None
    error: str = ""
    shown: list[str] = field(default_factory=list)
    counts: dict[str, int] = field(default_factory=dict)
    notes: list[str] = field(default_factory=list)
    doubts: list[str] = field(default_factory=list)
    extent: Extent | None = None
    places: tuple[npt.NDArray[np.float64], ...] = ()
    rows: npt.NDArray[np.int64] | None = None
    deepest_m: tuple[float, ...] = ()

    @property
    def metres(self) -> bool:
        """Whether positions are easting and northing."""
        return self.source is not None and not {"latitude", "position"} & set(self.source.columns)


def draft_recipe(
    files: Sequence[str | Path],
    base: str | Path,
    grid: str | Path | None = None,
    grid_extent: Extent | None = None,
    title: str = "Untitled bed",
    depth_at: DepthAt | None = None,
) -> str:
    """Write a starting recipe as TOML text.

    Nothing is guessed silently: what was taken for what stands in the recipe, each with an example, and what is in
    doubt stands there as a comment. A file that cannot be read as it is becomes a comment with its reason; if no file can,
    its block is written all the same, for a person to fill in what is missing.

    Parameters
    ----------
    files : sequence of path
    base : path
        Folder in which the recipe will lie; paths are written relative to it.
    grid : path, optional
        Grid file of the target; without one, a raster around the stations is proposed.
    grid_extent : (west, south, east, north), optional, degrees
        Extent of the grid, by which a projection that no file names can be told.
    title : str
    depth_at : callable (longitude, latitude) → depth in metres, optional
        The grid's depth at the nearest cell, NaN off the grid and on land; reported depths are held against it.

    Returns
    -------
    text : str

    Raises
    ------
    SampleError
        If not one of the files holds cells that can be read.
    """
    looks = [look for file in files for look in _looks(Path(file))]
    known = _together([look.extent for look in looks if look.extent] + ([grid_extent] if grid_extent else []))
    looks = [_with_projection(look, grid_extent or known) for look in looks]
    for look in looks:
        _doubt_position(look, grid_extent, depth_at)
    none = all(look.error for look in looks)
    if none and not any(look.source is not None or look.shown for look in looks):
        raise SampleError("; ".join(look.error for look in looks))
    lines = [
        "# A draft: read it through, above all where it says DOUBT. Paths are relative to this file.",
        "",
        f"title = {toml_text(title)}",
        'output = "out"',
        "",
    ]
    for look in looks:
        lines += _block_lines(look, Path(base), none)
    lines += target_lines(_together([look.extent for look in looks if look.extent]), Path(base), grid)
    lines += bed_lines(
        sum(look.counts.get("evidence", 0) for look in looks), [d for look in looks for d in look.deepest_m]
    )
    return "\n".join(lines) + "\n"


def _looks(file: Path) -> list[_Look]:
    """One look for a file, or for each of its sheets where several hold samples."""
    try:
        names = sheets_with_samples(Samples(file=file))
    except SampleError:
        names = []
    return [_look(file, sheet=name) for name in names] if len(names) > 1 else [_look(file)]


def _look(file: Path, crs: str | None = None, sheet: str | None = None) -> _Look:
    look = _Look(file, Samples(file=file, crs=crs, sheet=sheet))
    try:
        look.source = find_source(look.block)
        frame, notes = read_rows(look.source, look.block, Intake(), DETECTION_LIMIT, AuditLog())
    except (SampleError, RecipeError) as error:
        look.error = str(error)
        look.shown = _first_rows(look) if look.source is None else []
        return look
    said = [*look.source.sheet.notes, *look.source.notes, *notes]
    doubtful = [note for note in said if any(words in note for words in DOUBTFUL)]
    look.notes = [note for note in said if note not in doubtful]
    look.doubts += [f"DOUBT: {note.replace('DOUBT: ', '')}" for note in doubtful]
    look.counts = {str(k): int(v) for k, v in frame["fate"].value_counts().items()}
    aside = frame.loc[frame["fate"] == "set_aside", "reason"]
    if len(aside) > MANY_ASIDE * sum(look.counts.values()):
        most = aside.value_counts()
        look.doubts.append(
            f"DOUBT: {len(aside)} rows are set aside, most often because: {most.index[0]} ({most.iloc[0]} rows)"
        )
    lon, lat = frame["longitude"].to_numpy(), frame["latitude"].to_numpy()
    if "latitude" in look.source.columns and look_like_minutes(lon, lat):
        look.doubts.append(
            "DOUBT: no position has decimals of .60 or more: these may be degrees and minutes typed as decimals; "
            'then say degrees = "minutes"'
        )
    look.extent = extent_of(lon, lat)
    core = frame["deep"].to_numpy(dtype=bool) & np.isfinite(frame[["mud", "bottom_m"]].to_numpy(np.float64)).all(axis=1)
    look.deepest_m = tuple(frame["bottom_m"].to_numpy(np.float64)[core].tolist())
    look.places, look.rows = (lon, lat, frame["depth_m"].to_numpy()), frame["row"].to_numpy()
    return look


def _first_rows(look: _Look) -> list[str]:
    """The first filled rows of a file in which no table was found; empty if it cannot be read at all."""
    try:
        sheets = read_sheets(look.file)
    except SampleError:
        return []
    lines = []
    for sheet in sheets:
        filled = [(i + 1, row) for i, row in enumerate(sheet.rows) if any(not is_blank(c) for c in row)]
        for number, row in filled[:ROWS_SHOWN]:
            cells = " | ".join(shown(c) for c in row if not is_blank(c))
            lines.append(f"{f'sheet {sheet.name!r}, ' if sheet.name else ''}row {number}: {cells[:150]}")
    return lines


def _doubt_position(look: _Look, grid: Extent | None, depth_at: DepthAt | None) -> None:
    if not look.places or look.rows is None:
        return
    lon, lat, depth = look.places
    missed = extent_doubts(lon, lat, grid, look.metres) if grid is not None else []
    told = depth_doubts(lon, lat, depth, look.rows, depth_at, look.metres) if depth_at is not None else []
    if any("if this is cured" in line for line in told):
        missed = []  # the depths say it better
    look.doubts += missed + [line for line in told if line.startswith("DOUBT")]
    look.notes += [line for line in told if not line.startswith("DOUBT")]


def _together(extents: list[Extent]) -> Extent | None:
    if not extents:
        return None
    west, south, east, north = zip(*extents, strict=True)
    return min(west), min(south), max(east), max(north)


def _with_projection(look: _Look, around: Extent | None) -> _Look:
    """Try the UTM zones of WGS 84 on metres without a system; the one that falls on the grid is proposed."""
    if "without a coordinate system" not in look.error:
        return look
    if around is None:
        look.doubts.append(
            "DOUBT: easting and northing without a system; give crs, no other file or grid tells where this is"
        )
        return look
    fits: list[_Look] = []
    first, last = (int((x + 180.0) // 6.0) + 1 for x in (around[0], around[2]))
    for zone in range(max(1, first - 1), min(60, last + 1) + 1):
        for code in (32600 + zone, 32700 + zone):
            tried = _look(look.file, f"EPSG:{code}", look.block.sheet)
            if not tried.error and tried.extent is not None and overlap(tried.extent, around):
                fits.append(tried)
    if not fits:
        look.doubts.append("DOUBT: easting and northing in no UTM zone around here; give crs")
        return look
    found = fits[0]
    also = ", ".join(str(f.block.crs) for f in fits[1:])
    found.doubts.append(
        f"DOUBT: no file says which system these metres are in; {found.block.crs} puts them where the others are"
        + (f", and so do {also}" if also else "")
    )
    return found


def _block_lines(look: _Look, base: Path, none_read: bool) -> list[str]:
    """The block of one file; of one that cannot be read as it is, as a comment unless no other file can be read either."""
    if not look.error:
        return _readable_lines(look, base)
    lines = [f"# {doubt}" for doubt in look.doubts]
    lines.append(f"# {'DOUBT: not' if none_read else 'NOT'} READ: {look.error}".replace("not READ", "not read yet"))
    lines += [f"# {row}" for row in look.shown]
    block = _readable_lines(_Look(look.file, look.block, look.source), base) if look.source is not None else [
        "[[samples]]", f"file = {toml_path(look.file, base)}", "# header_row = 1", "", "[samples.columns]",
        *(f'# {role} = "the heading there"' for role in ("id", "latitude", "longitude", "mud", "sand", "gravel")), "",
    ]  # fmt: skip
    if "without a coordinate system" in look.error:
        block.insert(2, '# crs = "EPSG:…"               # the system of easting and northing')
    return lines + [line if none_read or not line or line.startswith("#") else f"# {line}" for line in block]


def _readable_lines(look: _Look, base: Path) -> list[str]:
    source = look.source
    lines = [f"# {note}" for note in look.notes]
    lines += [f"# {doubt}" for doubt in look.doubts]
    if look.counts:
        fates = ", ".join(f"{look.counts[f]} {f.replace('_', ' ')}" for f in look.counts)
        lines.append(f"# rows: {fates}")
    if source is None:
        return lines
    lines += ["[[samples]]", f"file = {toml_path(look.file, base)}"]
    own = source.sheet.own_header
    if source.table.where.sheet and not (own and source.table.where.sheet == CERTIFICATES):
        lines.append(f"sheet = {toml_text(source.table.where.sheet)}")
    if own or source.sheet.across:
        lines.append(f'layout = "{"certificates" if own else "columns"}"')
    if look.block.crs:
        lines.append(f"crs = {toml_text(look.block.crs)}")
    lines += [
        'basis = "whole"                 # "below_2mm" if the laboratory saw only what passed 2 mm',
        'blank_means = "not_measured"    # "zero" if an empty cell says that there is none',
        '# credit = "whose data these are, and under which licence"   # stands on the page and in the files',
    ]
    if source.joined is not None and source.joined.places.where.sheet:
        lines.append(f"join = {{ sheet = {toml_text(source.joined.places.where.sheet)} }}")
    lines += ["", "[samples.columns]", *column_lines(source), ""]
    return lines
