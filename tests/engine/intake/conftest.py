"""Exports as somebody's program might write them, and what became of them."""

from datetime import datetime

import pytest

from engine.intake import take_in
from engine.log import open_log

CREATED = datetime(2026, 12, 1)


@pytest.fixture
def export(tmp_path):
    """Write an export: file name, head, rows, each a line of cells."""

    def write(name, *lines, encoding="utf-8", end="\n"):
        path = tmp_path / name
        path.write_bytes((end.join(lines) + end).encode(encoding))
        return path

    return write


@pytest.fixture
def taken(tmp_path):
    """Take exports in; give the report, the opened log, and its refused rows."""
    opened = []

    def take(*sources, zone="Europe/Berlin", mapping=None):
        into = tmp_path / "taken.duckdb"
        report = take_in(sources, into, zone, CREATED, mapping)
        log = open_log(into)
        opened.append(log)
        assert (report.tables.rows_in.sum()) == report.sources.rows_read.sum()
        return report, log, log.frame('SELECT * FROM refused ORDER BY source, "row"')

    yield take
    for log in opened:
        log.close()
