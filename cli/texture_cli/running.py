"""Run a command: errors become one line and an exit code, warnings are counted, talk goes to stderr."""

from __future__ import annotations

import json
import os
import sys
import warnings
from collections import Counter
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any, NoReturn

import typer

__all__ = ["Report", "run"]

DONE, FAILED, WRONG_INPUT, INTERRUPTED = 0, 1, 2, 130
MOST_NOTES = 3  # a summary has to fit a screen


@dataclass(frozen=True)
class Report:
    """What a command has to say when it is done: lines for a person, an object for a program."""

    lines: list[str]
    data: Mapping[str, Any]
    code: int = DONE


def run(work: Callable[[Any], Report], *, quiet: bool, as_json: bool) -> None:
    """Call `work` with a progress display and print its report.

    Exit codes: 0 done, 1 the run failed, 2 wrong usage or input, 130 interrupted. A traceback is shown
    only where the environment variable TEXTURE_DEBUG is set.
    """
    from texture.errors import OutputError, StructureError, TextureError
    from texture_cli.progress import make_progress

    try:
        with warnings.catch_warnings(record=True) as caught:
            warnings.simplefilter("always")
            with make_progress(quiet=quiet) as progress:
                report = work(progress)
    except KeyboardInterrupt:
        _stop("interrupted; earlier results are as they were", INTERRUPTED)
    except (OutputError, StructureError) as error:
        _stop(str(error), FAILED)
    except TextureError as error:
        _stop(str(error), WRONG_INPUT)
    except MemoryError:
        _stop("not enough memory for this grid; choose larger cells or smaller bounds", FAILED)
    except Exception as error:
        first = next(iter(str(error).splitlines()), "")[:300]
        _stop(
            f"a fault of the program, please report it ({type(error).__name__}: {first}); TEXTURE_DEBUG=1 shows where",
            FAILED,
        )
    if as_json:
        sys.stdout.write(json.dumps(report.data, ensure_ascii=False, allow_nan=False) + "\n")
    if not quiet:
        for line in [*report.lines, *_grouped(caught)]:
            typer.echo(line, err=True)
    raise typer.Exit(report.code)


def _stop(message: str, code: int) -> NoReturn:
    if os.environ.get("TEXTURE_DEBUG") and sys.exc_info()[0] is not None:
        raise
    typer.echo(f"texture: {message}", err=True)
    raise typer.Exit(code)


def _grouped(caught: list[warnings.WarningMessage]) -> list[str]:
    """One line for each distinct warning of ours, with its count, at most three; others are kept for debugging."""
    from texture.errors import TextureWarning

    ours = Counter(
        str(w.message)
        for w in caught
        if issubclass(w.category, TextureWarning) or os.environ.get("TEXTURE_DEBUG") is not None
    )
    lines = [f"note: {text}" + (f" ({count} times)" if count > 1 else "") for text, count in ours.most_common()]
    if len(lines) > MOST_NOTES and os.environ.get("TEXTURE_DEBUG") is None:
        lines = [*lines[:MOST_NOTES], f"note: and {len(lines) - MOST_NOTES} more kinds; TEXTURE_DEBUG=1 shows them"]
    return lines
