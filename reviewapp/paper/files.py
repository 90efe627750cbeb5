"""A report as the bytes of a file, by the ending of its name."""

from __future__ import annotations

from engine.errors import SourceUnreadable
from reviewapp.paper.pdf import NOT_INSTALLED, is_installed, pdf
from reviewapp.paper.workbook import workbook
from reviewapp.report import Banner, Report, page

# Ending, what a button calls it, and the media type.
ENDINGS = {
    ".html": ("Printable page", "text/html"),
    ".pdf": ("PDF", "application/pdf"),
    ".xlsx": (
        "Tables (xlsx)",
        "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet",
    ),
}


def file_of(report: Report, banner: Banner, ending: str) -> bytes:
    """The whole file.

    Raises   SourceUnreadable for an ending no report has, or for a PDF where the
             package that sets it is not installed.
    """
    check_ending(ending)
    if ending == ".pdf":
        return pdf(report.title, banner, report.sections)
    if ending == ".xlsx":
        return workbook(report.title, banner, report.tables)
    return page(report.title, banner, report.sections).encode("utf-8")


def check_ending(ending: str) -> None:
    """Raises SourceUnreadable for an ending that cannot be written here."""
    if ending not in ENDINGS:
        known = ", ".join(ENDINGS)
        raise SourceUnreadable(f"a report ends in {known}; got {ending or 'no ending'}")
    if ending == ".pdf" and not is_installed():
        raise SourceUnreadable(NOT_INSTALLED)
