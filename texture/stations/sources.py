"""Which sheets of a file hold the samples: one table, or results and positions that are joined on an id."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from dataclasses import dataclass, field, replace

from texture.errors import SampleError
from texture.recipe import Samples
from texture.stations.certificates import gather_certificates
from texture.stations.columns import Column, assign_columns
from texture.stations.files import Sheet, is_blank, read_sheets
from texture.stations.headings import PARTS, plain, role_of
from texture.stations.joins import Joined, best_ids, join_tables
from texture.stations.sizes import SizeColumn, size_columns
from texture.stations.tables import Table, find_table, no_table

__all__ = ["Source", "find_source", "sheets_with_samples"]

SIDE_BY_SIDE = 5000  # rows and columns up to which a sheet is tried with the two exchanged


@dataclass(frozen=True)
class Source:
    """One table of samples with the roles of its columns, and the table of their positions where that is another."""

    sheet: Sheet
    table: Table
    columns: dict[str, Column]
    sizes: list[SizeColumn] = field(default_factory=list)
    joined: Joined | None = None
    notes: tuple[str, ...] = ()

    @property
    def has_position(self) -> bool:
        """Whether the table itself tells where its samples were taken."""
        pairs = (("latitude", "longitude"), ("easting", "northing"), ("position",))
        return any(all(role in self.columns for role in pair) for pair in pairs)

    @property
    def has_shares(self) -> bool:
        """Whether the table tells what its samples consist of."""
        return self.is_measured or any(role in self.columns for role in ("description", "median_size"))

    @property
    def is_measured(self) -> bool:
        """Whether the table holds measured shares rather than words or a median size."""
        return bool(self.sizes) or any(role in self.columns for role in PARTS)


def find_source(block: Samples, label: str | None = None) -> Source:
    """Find the samples of one block of the recipe.

    A sheet that tells both where and what is taken first. Otherwise a sheet of results and a sheet of positions that
    share an id are joined.

    Parameters
    ----------
    block : Samples
    label : str, optional
        What the file is called in tables and messages; its name if absent.

    Raises
    ------
    SampleError
        If there is no such sheet, no table, or a table that cannot be understood.
    """
    sheets = [replace(s, file=label or s.file) for s in read_sheets(block.file)]
    error: SampleError | None = None
    try:
        source = _choose(block, _arranged(sheets, block))
        if source.has_shares or block.layout != "auto":
            return source
    except SampleError as problem:
        error = problem
        if block.layout != "auto":
            raise
    # Nothing tells what samples consist of: perhaps the file is the certificate of a single one.
    arranged = gather_certificates(sheets, forced=True)
    if any(s.own_header for s in arranged):
        try:
            return _choose(block, arranged)
        except SampleError:
            pass  # what was wrong with the file as it stands says more
    if error is not None:
        raise error
    return source


def _arranged(sheets: list[Sheet], block: Samples) -> list[Sheet]:
    """The sheets of a file with certificates gathered into one, as the recipe's `layout` says."""
    if block.layout in ("rows", "columns"):
        return sheets
    forced = block.layout == "certificates"
    if block.sheet is None:
        arranged = gather_certificates(sheets, forced)
    else:
        arranged = [gather_certificates([s], forced)[0] if s.name == block.sheet else s for s in sheets]
    if forced and not any(s.own_header for s in arranged):
        raise SampleError(
            f'{sheets[0].file}: no certificates found, expected labels such as "Sample" and "Latitude" with their values '
            'beside them; take layout = "certificates" out of the recipe'
        )
    return arranged


def _choose(block: Samples, sheets: list[Sheet]) -> Source:
    candidates = _named(sheets, block.sheet, block.file.name)
    found = [look for look in (_look(sheet, block) for sheet in candidates) if look is not None]
    if not found:
        raise no_table(candidates)
    sources = [s for s in found if isinstance(s, Source)]
    whole: list[Source] = []
    with_ids = sorted((s for s in sources if s.has_shares and "id" in s.columns), key=lambda s: not s.is_measured)
    results = next(iter(with_ids), None)
    source = None
    if block.join is None:
        whole = [s for s in sources if s.has_position and s.has_shares]
        shown = [s for s in whole if not s.sheet.hidden]
        if len(shown) > 1:
            names = ", ".join(f'"{s.sheet.name}"' for s in shown)
            raise SampleError(
                f"{sheets[0].file}: samples on {len(shown)} sheets, {names}; give each a samples block of its own with its sheet"
            )
        source = next(iter(shown or whole), None)
    if source is not None and not source.is_measured and results is not None and results.is_measured:
        source = None  # places with a word about each, and the results on another sheet
    if source is None and results is not None:
        source = _joined(results, _places(block, sheets, results), block)
    source = source or next(iter(whole), None)
    if source is None:
        if isinstance(found[0], SampleError):
            raise found[0]
        source = found[0]
    _check_mapped(source, block.columns)
    if block.skip and max(block.skip) > len(source.sheet.rows):
        raise source.table.where.error(
            f"skip = {max(block.skip)} in the recipe",
            f"numbers up to {len(source.sheet.rows)}",
            "correct skip",
        )
    return _with_unread(source, sheets)


def sheets_with_samples(block: Samples) -> list[str]:
    """Names of the sheets, hidden ones left out, that each tell both where and what."""
    looks = [_look(sheet, block) for sheet in _arranged(read_sheets(block.file), block) if not sheet.hidden]
    return [s.sheet.name for s in looks if isinstance(s, Source) and s.has_position and s.has_shares]


def _named(sheets: list[Sheet], name: str | None, file: str) -> list[Sheet]:
    if name is None:
        return sorted(sheets, key=lambda s: s.hidden)
    if hits := [s for s in sheets if s.name == name]:
        return hits
    names = [s.name for s in sheets if s.name]
    near = difflib.get_close_matches(name, names, n=1, cutoff=0.4)
    hint = f'did you mean "{near[0]}"?' if near else f"sheets there: {', '.join(names) or 'none, it is a text table'}"
    raise SampleError(f'{file}: no sheet "{name}"; {hint}')


def _look(sheet: Sheet, block: Samples, header_row: bool = True) -> Source | SampleError | None:
    """Understand one sheet as it stands or, where that tells nothing, with rows and columns exchanged."""
    upright = None if block.layout == "columns" and header_row else _understand(sheet, block, header_row)
    if isinstance(upright, Source) and (upright.has_shares or upright.has_position):
        return upright
    if block.layout == "rows" or sheet.own_header:
        return upright
    small = len(sheet.rows) <= SIDE_BY_SIDE and max((len(r) for r in sheet.rows), default=0) <= SIDE_BY_SIDE
    turned = _understand(sheet.turned(), block, header_row) if small and block.header_row is None else None
    if isinstance(turned, Source) and turned.has_shares and (turned.has_position or "id" in turned.columns):
        note = f"{sheet.file}: samples stand side by side; what is called a row of it is a column of the sheet"
        return replace(turned, notes=(*turned.notes, note))
    return upright


def _understand(sheet: Sheet, block: Samples, header_row: bool) -> Source | SampleError | None:
    """Understand one sheet; an error is kept, for it matters only if no other sheet will do."""
    skip = {n for n in block.skip if n <= len(sheet.rows)} if header_row and not sheet.own_header else set()
    kept = replace(sheet, rows=[[] if i + 1 in skip else row for i, row in enumerate(sheet.rows)]) if skip else sheet
    table = find_table(kept, block.columns, block.header_row if header_row else None)
    if table is None:
        return None
    left_out = [
        (n, "left out by the recipe's skip") for n in sorted(skip) if any(not is_blank(c) for c in sheet.rows[n - 1])
    ]
    table = replace(table, aside=[*table.aside, *left_out])
    # A heading that this sheet lacks may stand in the sheet it is joined with; `_check_mapped` sees to it.
    here = {role: heading for role, heading in block.columns.items() if _has_heading(table, heading)}
    try:
        columns = assign_columns(table, here)
        sizes = _sizes(table, columns)
    except SampleError as error:
        return error
    if sizes:
        columns = {role: c for role, c in columns.items() if role not in PARTS}
        if "id" not in columns and table.headings[0] and all(s.index != 0 for s in sizes):
            columns["id"] = Column("id", 0, table.headings[0])  # under "Size (mm)" stand the samples' names
    return Source(sheet, table, columns, sizes)


def _sizes(table: Table, columns: Mapping[str, Column]) -> list[SizeColumn]:
    """Size classes, unless parts are named in so many words: "<63 µm" beside "63-125 µm" is a class, "mud" is not."""
    parts = [c for role, c in columns.items() if role in PARTS]
    if any(c.named or (role_of(c.heading) or ("", 0))[1] >= 3 for c in parts):
        return []
    taken = {c.index for role, c in columns.items() if role not in PARTS}
    return size_columns(table.headings, table.lowest, table.units, taken, table.where)


def _has_heading(table: Table, heading: str) -> bool:
    return any(plain(h) == plain(heading) for h in (*table.headings, *table.lowest) if h)


def _places(block: Samples, sheets: list[Sheet], results: Source) -> Source | None:
    """Find the sheet of positions, as the recipe's `join` says or the first that has positions and ids."""
    join = block.join
    others = [s for s in sheets if s.name != results.sheet.name]
    if join is not None and join.file is not None:
        others = read_sheets(join.file)
    if join is not None and join.sheet is not None:
        others = _named(others, join.sheet, (join.file or block.file).name)
    for sheet in others:
        found = _look(sheet, block, header_row=False)
        if isinstance(found, Source) and found.has_position and ("id" in found.columns or (join and join.on)):
            return found
        if isinstance(found, SampleError) and join is not None:
            raise found
    if join is not None:
        names = ", ".join(s.name or s.file for s in others)
        raise SampleError(
            f"{block.file.name}: no table of positions with ids to join in {names}; correct join in the recipe"
        )
    return None


def _joined(results: Source, places: Source | None, block: Samples) -> Source | None:
    if places is None:
        return None
    columns = dict(places.columns)
    if block.join is not None and block.join.on is not None:
        columns["id"] = assign_columns(places.table, {"id": block.join.on})["id"]
    result_id, columns["id"] = best_ids(results.table, results.columns["id"], places.table, columns["id"])
    joined = join_tables(results.table, result_id, places.table, columns)
    return Source(
        results.sheet,
        results.table,
        {**results.columns, "id": result_id},
        results.sizes,
        joined,
        (*results.notes, *joined.notes),
    )


def _check_mapped(source: Source, mapped: Mapping[str, str]) -> None:
    """Raise for a mapped heading that stands in none of the tables."""
    tables = [source.table] + ([source.joined.places] if source.joined else [])
    for role, heading in mapped.items():
        if not any(_has_heading(table, heading) for table in tables):
            assign_columns(source.table, {role: heading})


def _with_unread(source: Source, sheets: list[Sheet]) -> Source:
    read = {source.table.where.sheet} | ({source.joined.places.where.sheet} if source.joined else set())
    unread = [s.name for s in sheets if s.name not in read]
    if not unread:
        return source
    note = f"{source.table.where.text()} read; not read: {', '.join(unread)}"
    return replace(source, notes=(*source.notes, note))
