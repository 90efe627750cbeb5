"""Small logs: one written by this project, one as another program might write it."""

from datetime import datetime

import duckdb
import pandas as pd
import pytest

from engine.columns import SCHEMA_VERSION, TABLES
from engine.log import write_log
from engine.log.schema import create


@pytest.fixture
def small(tmp_path):
    """A log of two treatments, one filter, one room."""
    path = tmp_path / "small.duckdb"
    tables = {
        "treatment": pd.DataFrame(
            {
                "treatment_id": ["T1", "T2"],
                "started_at": pd.to_datetime(["2026-01-05 08:00", "2026-01-05 12:00"]),
                "ended_at": pd.to_datetime(["2026-01-05 08:20", None]),
                "mode": ["vcv", None],
                "spontaneous_breaths": [True, None],
                "bias_flow_lpm": [2.0, None],
                "actuations_count": [None, 4],
                "note": ["seen", None],
            }
        ),
        "filter_use": pd.DataFrame(
            {
                "filter_id": ["F1"],
                "ventilator_token": ["V1"],
                "installed_at": pd.to_datetime(["2026-01-04"]),
            }
        ),
        "room": pd.DataFrame({"unit_token": ["north"], "volume_m3": [60.0]}),
    }
    write_log(path, tables, "Europe/Berlin", datetime(2026, 2, 1), "made by hand")
    return path


@pytest.fixture
def foreign(tmp_path):
    """Write a log with the tables given as text, rows as dicts of what was typed."""

    def make(name="foreign.duckdb", zone="Etc/UTC", types=None, **rows):
        path = tmp_path / name
        info = {"schema_version": SCHEMA_VERSION, "site_zone": zone}
        rows = {"treatment": [], "log_info": [info], **rows}
        with duckdb.connect(str(path)) as connection:
            create(connection)
            for table in TABLES:
                if table.name not in rows:
                    continue
                columns = ", ".join(
                    f'"{c.name}" {(types or {}).get(c.name, "VARCHAR")}'
                    for c in table.columns
                )
                connection.execute(f'DROP TABLE "{table.name}"')
                connection.execute(f'CREATE TABLE "{table.name}" ({columns})')
                for row in rows[table.name]:
                    names = ", ".join(f'"{name}"' for name in row)
                    holes = ", ".join("?" for _ in row)
                    connection.execute(
                        f'INSERT INTO "{table.name}" ({names}) VALUES ({holes})',
                        list(row.values()),
                    )
        return path

    return make
