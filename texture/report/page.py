"""The one offline page: figures, tables and text of a result in a self-contained HTML file."""

from __future__ import annotations

from importlib import resources
from typing import TYPE_CHECKING

from texture.output.members_nc import NOT_A_BED
from texture.report import words
from texture.report.encode import Picture
from texture.report.explorer import explorer
from texture.report.methods_text import methods_paragraph
from texture.report.pictures import page_pictures
from texture.report.tables import page_tables

if TYPE_CHECKING:
    from texture.result import Result

__all__ = ["write_page"]


def write_page(result: Result, map_picture: Picture, settings: str, versions: str) -> str:
    """Return the page as HTML text; every value that came from outside is escaped.

    Parameters
    ----------
    result : Result
    map_picture : Picture
        As `result_picture` draws it.
    settings : str
        The resolved recipe, shown as it is; its paths must say nothing of the machine.
    versions : str
        One line of versions and seconds.
    """
    import jinja2

    template = resources.files("texture.report").joinpath("template.html").read_text(encoding="utf-8")
    environment = jinja2.Environment(autoescape=True, undefined=jinja2.StrictUndefined, trim_blocks=True)
    found = result.found
    methods, references = methods_paragraph(result)
    return environment.from_string(template).render(
        title=found.recipe.title,
        method_line=words.method_line(result),
        answer=result.answer(),
        hidden_line=words.hidden_line(result),
        explorer=explorer(result),
        figures={"parts": map_picture, **page_pictures(result)},
        tables=page_tables(result),
        map_notes=words.map_notes(result),
        notes=found.stations.notes,
        folds_line=words.folds_line(result),
        error_notes=words.error_notes(result),
        opinion_line=words.opinion_line(result),
        place_line=words.place_line(result),
        word_line=words.word_line(result),
        bed_notes=words.bed_notes(result),
        methods=methods,
        references=references,
        settings=settings,
        versions=versions,
        cautions=words.CAUTIONS,
        not_a_bed=NOT_A_BED,
    )
