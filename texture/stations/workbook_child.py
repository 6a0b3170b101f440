"""Read one workbook in a process of its own and hand its cells back through standard output.

The reading library allocates the whole rectangle between the first and the last cell and aborts the
interpreter when memory runs out; no `except` catches that. Here it can only take this process with it.
Run as a script, never imported by the program: it knows nothing of the package, so it starts quickly.
"""

import pickle
import resource
import sys

import python_calamine as calamine


def main(path: str, memory_bytes: int, only: str | None) -> None:
    """Write a pickled dict: either `sheets` (name, hidden, merged, rows) or `error` (kind, text)."""
    out = sys.stdout.buffer
    resource.setrlimit(resource.RLIMIT_AS, (memory_bytes, memory_bytes))
    answer: dict[str, object]
    try:
        book = calamine.CalamineWorkbook.from_path(path)
        sheets: list[dict[str, object]] = []
        for info in book.sheets_metadata:
            if info.typ is not calamine.SheetTypeEnum.WorkSheet:
                continue
            if only is not None and info.name != only:
                sheets.append({"name": info.name, "rows": None})
                continue
            sheet = book.get_sheet_by_name(info.name)
            # Headers are near the top; a sheet may hold tens of thousands of merged ranges further down.
            merged = [(a, b, c, d) for (a, b), (c, d) in sheet.merged_cell_ranges or [] if a < 500][:5000]
            sheets.append(
                {
                    "name": info.name,
                    "hidden": info.visible is not calamine.SheetVisibleEnum.Visible,
                    "merged": merged,
                    "rows": sheet.to_python(skip_empty_area=False),
                }
            )
        answer = {"sheets": sheets}
    except MemoryError:
        answer = {"error": ("memory", "")}
    except calamine.PasswordError:
        answer = {"error": ("password", "")}
    except BaseException as error:
        answer = {"error": (type(error).__name__, str(error))}
    pickle.dump(answer, out, protocol=5)


if __name__ == "__main__":
    main(sys.argv[1], int(sys.argv[2]), sys.argv[3] if len(sys.argv) > 3 else None)
