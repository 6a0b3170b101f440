"""What people look at: maps, charts and the one offline page."""

from texture.report.page import CAUTIONS, result_picture, versions_line, write_page

__all__ = ["CAUTIONS", "result_picture", "versions_line", "write_page"]
