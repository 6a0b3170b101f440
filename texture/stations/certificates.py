"""Certificates of laboratories, one sample each: on sheets of their own or stacked on one sheet, turned into one table.

A certificate is a form: labels with their values beside them, and often a small table of sizes with weights, some of them
with a tare. Each becomes one row; what a label calls its value becomes a heading, and so does each size.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass, field, replace

from texture.stations.files import Cell, Sheet, is_blank
from texture.stations.headings import PARTS, is_tare, is_unit, plain, role_of, unit_in
from texture.stations.sizes import is_pan, scale_unit, size_in
from texture.stations.tables import looks_like_value

__all__ = ["CERTIFICATES", "gather_certificates"]

CERTIFICATES = "certificates"  # what takes the place of a sheet's name where each is on a sheet of its own
LONGEST = 5000  # rows up to which a sheet is looked through for stacked certificates
FORM = 300  # rows up to which a whole sheet may be one certificate
ALIKE = 0.5  # share of labels that certificates of one laboratory have in common
_CUMULATIVE = re.compile(r"\b(cum\w*|passing|finer|coarser|durchgang|passant)\b")
_GROSS = re.compile(
    r"\b(gross|with (tare|dish|sieve)|(sieve|dish|tare) (and|\+|with) \w+|sample (and|\+) \w+|brutto|bruto)\b"
)
_SIZES = re.compile(
    r"\b(size|sieve|fraction|aperture|mesh|class|diameter|phi|sieb\w*|korngro\w*|tamiz|tamices|tamis|zeef\w*|peneira|setaccio)\b"
)


@dataclass
class _Form:
    """What one certificate says: heading → cell, in order."""

    values: dict[str, Cell] = field(default_factory=dict)
    wide: bool = False

    @property
    def roles(self) -> set[str]:
        return {found[0] for label in self.values if (found := role_of(label)) is not None}

    @property
    def sizes(self) -> int:
        return sum(size_in(label, None) is not None for label in self.values)

    def is_one(self, named: bool) -> bool:
        """Whether it tells of one sample: an id or a place, and what it consists of."""
        roles = self.roles
        what = self.sizes >= 3 or bool(roles & {*PARTS, "description", "median_size"})
        return not self.wide and what and len(roles) >= 2 - (self.sizes >= 3) and (named or "id" in roles)


def gather_certificates(sheets: Sequence[Sheet], forced: bool = False) -> list[Sheet]:
    """Put the certificates of a file into one sheet of one row each; other sheets stay as they are.

    Parameters
    ----------
    sheets : sequence of Sheet
    forced : bool
        Take a single certificate for one too. Without it at least two that are alike are wanted, for a form of one
        sample and a table turned on its side look the same.

    Returns
    -------
    sheets : list of Sheet
        The gathered one in the place of the first certificate, its first row the headings.
    """
    fewest = 1 if forced else 2
    out = [_unstacked(sheet) or sheet for sheet in sheets]
    forms = {
        i: form
        for i, sheet in enumerate(out)
        if not sheet.own_header and not sheet.hidden and len(sheet.rows) <= FORM and (forced or len(sheets) > 1)
        if (form := _read_form(sheet.rows)).is_one(named=bool(sheet.name))
    }
    first = next(iter(forms), -1)
    forms = {i: form for i, form in forms.items() if _alike(forms[first], form)}
    if len(forms) < fewest:
        return out
    for i, form in forms.items():
        if "id" not in form.roles:
            form.values = {"Sample": out[i].name, **form.values}
    note = f'{out[first].file}: {len(forms)} certificates, each on a sheet of its own; certificate 1 is on sheet "{out[first].name}"'
    gathered = _table_of(out[first], CERTIFICATES if out[first].name else "", list(forms.values()), note)
    return [gathered if i == first else sheet for i, sheet in enumerate(out) if i == first or i not in forms]


def _unstacked(sheet: Sheet) -> Sheet | None:
    """One row for each certificate stacked on a sheet; None if there are fewer than two."""
    if len(sheet.rows) > LONGEST:
        return None
    ids = [i for i, row in enumerate(sheet.rows) if _names_sample(row)]
    if len(ids) < 2:
        return None
    starts: list[int] = []
    for k, i in enumerate(ids):
        start = i
        while start > 0 and any(not is_blank(c) for c in sheet.rows[start - 1]):
            start -= 1
        starts.append(i if k > 0 and start <= ids[k - 1] else start)
    ends = [*starts[1:], len(sheet.rows)]
    forms = [_read_form(sheet.rows[a:b]) for a, b in zip(starts, ends, strict=True)]
    if not all(form.is_one(named=False) and _alike(forms[0], form) for form in forms):
        return None
    note = f"{sheet.file}: {len(forms)} certificates stacked on one sheet; certificate 1 begins in row {starts[0] + 1}"
    return _table_of(sheet, sheet.name, forms, note)


def _table_of(sheet: Sheet, name: str, forms: list[_Form], note: str) -> Sheet:
    headings = list(dict.fromkeys(label for form in forms for label in form.values))
    rows: list[list[Cell]] = [list(headings)]
    rows += [[form.values.get(label) for label in headings] for form in forms]
    return replace(sheet, name=name, rows=rows, merged=(), own_header=True, notes=(*sheet.notes, note))


def _alike(one: _Form, other: _Form) -> bool:
    a, b = set(one.values), set(other.values)
    return len(a & b) >= ALIKE * min(len(a), len(b))


def _names_sample(row: Sequence[Cell]) -> bool:
    form = _Form()
    _read_line(row, form)
    return not form.wide and any((role_of(label) or ("",))[0] == "id" for label in form.values)


def _read_form(rows: Sequence[Sequence[Cell]]) -> _Form:
    form = _Form()
    i = 0
    while i < len(rows):
        end = _read_sizes(rows, i, form)
        if end == i:
            _read_line(rows[i], form)
            end = i + 1
        i = end
    return form


def _read_line(row: Sequence[Cell], form: _Form) -> None:
    """Take in the pairs of label and value of one line."""
    filled = [c for c in row if not is_blank(c)]
    k = 0
    while k < len(filled):
        value: Cell
        label, value = _label(filled[k])
        k += 1
        if label is None:
            continue
        if value is None:
            last = k
            while last < len(filled) and _label(filled[last])[0] is None:
                last += 1
            values = filled[k:last]
            k = last
            if not values:
                continue
            if len(values) > 1 and is_unit(values[-1]) and not looks_like_value(values[-1]):
                label, values = f"{label} ({str(values[-1]).strip()})", values[:-1]
            angle = (role_of(label) or ("",))[0] in ("latitude", "longitude", "position")
            if len(values) > 1 and not angle:
                form.wide = True
                return
            value = values[0] if len(values) == 1 else " ".join(str(v) for v in values)
        form.values.setdefault(label, value)


def _label(cell: Cell) -> tuple[str | None, str | None]:
    """Label of a cell, and its value where both stand in it; no label where it names no role and ends in no colon."""
    if not isinstance(cell, str) or len(cell) > 80 or looks_like_value(cell):
        return None, None
    text = " ".join(cell.split())
    before, colon, after = text.partition(":")
    if colon and after.strip():
        return (before, after.strip()) if role_of(before) is not None else (None, None)
    if colon or role_of(text) is not None:
        return before.strip() or None, None
    return None, None


def _read_sizes(rows: Sequence[Sequence[Cell]], i: int, form: _Form) -> int:
    """Take in a table of sizes that begins at row i; the number of the first row after it, i if there is none."""
    heads = {c: cell for c, cell in enumerate(rows[i]) if not is_blank(cell)}
    if len(heads) < 2 or any(not isinstance(h, str) or looks_like_value(h) for h in heads.values()):
        return i
    names = {c: " ".join(str(h).split()) for c, h in heads.items()}
    sizes = next(iter(names))
    unit = scale_unit([names[sizes]])
    if unit is None and not _SIZES.search(plain(names[sizes])):
        return i
    end = i + 1
    found: dict[str, Sequence[Cell]] = {}
    while end < len(rows):
        cell = rows[end][sizes] if sizes < len(rows[end]) else None
        heading = _size_heading(cell, unit)
        if heading is None:
            break
        found[heading] = rows[end]
        end += 1
    if len(found) < 3:
        return i
    net, tare = _choose_weights({c: n for c, n in names.items() if c != sizes})
    for heading, row in found.items():
        amount = row[net] if net < len(row) else None
        form.values[f"{heading} {_of_value(names[net])}".strip()] = amount
        if tare is not None:
            form.values[f"{heading} tare (g)"] = row[tare] if tare < len(row) else None
    while end < len(rows) and (word := next((c for c in rows[end] if not is_blank(c)), None)) is not None:
        if not (
            isinstance(word, str)
            and plain(word).startswith(("total", "sum", "gesamt", "suma", "somme", "somma", "soma"))
        ):
            break
        end += 1
    return end


def _size_heading(cell: Cell, unit: str | None) -> str | None:
    if isinstance(cell, (int, float)) and not isinstance(cell, bool):
        return f"{cell:g} {unit}" if unit is not None else None
    if not isinstance(cell, str) or not cell.strip():
        return None
    if is_pan(cell):
        return "pan"
    own = unit_in(cell)
    if size_in(cell, unit) is None:
        return None
    return cell.strip() if own in ("phi", "mm", "um") else f"{cell.strip()} {unit}"


def _of_value(heading: str) -> str:
    """What a size's heading must say of its amounts: their unit, and whether they are cumulative."""
    words = plain(heading)
    unit = unit_in(heading)
    kind = (
        "cumulative retained"
        if re.search(r"\bcum\w*|\bcoarser", words) and not re.search(r"passing|finer", words)
        else ""
    )
    kind = kind or ("passing" if re.search(r"\b(passing|finer|durchgang|passant)\b", words) else "")
    sign = {"percent": "(%)", "g": "(g)"}.get(unit or "", "")
    return f"{kind} {sign}".strip()


def _choose_weights(names: dict[int, str]) -> tuple[int, int | None]:
    """Column of the amounts, and the column of the tare to take off them where there is no net weight."""
    words = {c: plain(name) for c, name in names.items()}
    gross = [c for c in names if _GROSS.search(words[c])]
    tare = [c for c in names if c not in gross and is_tare(names[c])]
    net = [c for c in names if c not in gross and c not in tare]
    single = [c for c in net if not _CUMULATIVE.search(words[c])]
    if single or net or not gross:
        return (single or net or list(names))[0], None
    return gross[0], tare[0] if tare else None
