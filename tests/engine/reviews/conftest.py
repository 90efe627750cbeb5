"""Logs written from a few rows, opened and replayed, for the reviews to be asked."""

from datetime import datetime

import pandas as pd
import pytest

from engine.log import open_log
from engine.log.schema import write_log
from engine.policy import load_policy
from engine.replay import replay


@pytest.fixture
def replayed(tmp_path):
    """``replayed(treatment=[...], incident=[...])``; closed when the test ends."""
    opened = []

    def made(**tables):
        path = tmp_path / "log.duckdb"
        frames = {name: pd.DataFrame(list(rows)) for name, rows in tables.items()}
        write_log(path, frames, "Etc/UTC", datetime(2026, 6, 1))
        log = open_log(path)
        done = replay(log, load_policy("common_practice"))
        opened.extend([done, log])
        return done

    yield made
    for each in opened:
        each.close()
