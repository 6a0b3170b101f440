"""What people look at: maps, charts and the one offline page."""

from texture.report.design import design_picture
from texture.report.page import write_page
from texture.report.pictures import result_picture, write_error_figures, write_figures
from texture.report.words import CAUTIONS, versions_line

__all__ = [
    "CAUTIONS",
    "design_picture",
    "result_picture",
    "versions_line",
    "write_error_figures",
    "write_figures",
    "write_page",
]
