"""Every report, by its kind, as a file: printable HTML, PDF or a workbook."""

from __future__ import annotations
