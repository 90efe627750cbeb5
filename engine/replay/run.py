"""The replay itself: columns to physics to answers to findings, batch by batch."""

from __future__ import annotations

import json
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import duckdb
import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq

from engine.columns import words_of
from engine.errors import OutputUnwritable
from engine.log import Log
from engine.log.context import build_context
from engine.physics.balance import alternatives, balance
from engine.policy import Policy
from engine.replay.batches import (
    answer_arrow,
    balance_arrow,
    batch_of,
    finding_arrow,
)
from engine.replay.filters import read_filters
from engine.replay.scenario import Scenario, apply_facts, changed_policy
from engine.replay.sensors import read_sensors
from engine.rules import ALL_RULES
from engine.version import VERSION

BATCH_ROWS = 32_768
Progress = Callable[[float, str], None]

_BATCHES = """
SELECT treatment.*, context.* EXCLUDE (treatment_id)
FROM treatment JOIN context USING (treatment_id)
"""

_ASKED_VIEW = """
CREATE VIEW asked AS
SELECT treatment.*, context.* EXCLUDE (treatment_id),
       balance.* EXCLUDE (treatment_id)
FROM treatment JOIN context USING (treatment_id) JOIN balance USING (treatment_id)
"""

_FINDINGS = """
SELECT treatment_id || ':' || rule_id AS finding_id, treatment_id, rule_id,
       family, strength
FROM fired JOIN rule USING (rule_id)
"""


@dataclass(frozen=True, eq=False)
class Replay:
    """Every logged treatment judged by one policy: a small database to ask.

    Tables   the log's own views; ``context``, ``balance``, ``answer``, ``finding``,
             ``rule``, ``reading``, ``filter_life``, ``sensor_drift``; and the view
             ``asked``, one row for each treatment replayed with all its columns.
    """

    log: Log
    policy: Policy
    scenario: Scenario | None
    stamp: dict[str, Any]
    _told: dict[str, pd.DataFrame] = field(default_factory=dict)

    def frame(self, sql: str, params: Any = None) -> pd.DataFrame:
        """The rows a query gives, as a table."""
        return self.log.frame(sql, params)

    def history(self, sql: str, params: Any = None) -> pd.DataFrame:
        """The rows of a query over the whole log, asked once: no replay changes."""
        key = f"{sql}{params}"
        if key not in self._told:
            self._told[key] = self.frame(sql, params)
        return self._told[key].copy()

    def close(self) -> None:
        """Gives the memory back."""
        self._told.clear()
        self.log.close()


@dataclass(frozen=True, eq=False)
class Replayed:
    """One batch after the physics and the rules."""

    treatment_id: np.ndarray
    balance: dict[str, np.ndarray]
    answers: dict[str, np.ndarray] = field(default_factory=dict)


def replay(
    log: Log,
    policy: Policy,
    scenario: Scenario | None = None,
    progress: Progress | None = None,
    batch_rows: int = BATCH_ROWS,
) -> Replay:
    """Replays every treatment of the log that was not withheld.

    Asks      each rule of each treatment; works out where its dose went and what
              every other allowed site would have given.
    Progress  called with the share done (0 to 1) and what is being done.
    Raises    ScenarioInvalid if the scenario does not fit the log or the policy.
    """
    policy = changed_policy(policy, scenario)
    own = _prepared(log, policy, scenario, progress)
    writer = own.cursor()
    first = True
    for done in _batches(own, policy, progress, batch_rows):
        _keep(writer, "balance", _balance(done), first)
        _keep(writer, "answer", answer_arrow(done.treatment_id, done.answers), first)
        _keep(writer, "fired", finding_arrow(done.treatment_id, done.answers), first)
        first = False
    writer.execute(f"CREATE VIEW finding AS {_FINDINGS}")
    writer.execute(_ASKED_VIEW)
    return Replay(own, policy, scenario, _stamp(own, policy, scenario))


def replay_to(
    log: Log,
    policy: Policy,
    folder: Path,
    scenario: Scenario | None = None,
    progress: Progress | None = None,
    batch_rows: int = BATCH_ROWS,
) -> dict[str, Any]:
    """Replays into balance, answers and findings Parquet files, and run.json.

    Memory does not grow with the log: each batch is written and let go. Returns what
    run.json holds; an earlier run stays until this one is whole.
    Raises   OutputUnwritable if the folder cannot be written.
    """
    policy = changed_policy(policy, scenario)
    _make_room(folder)
    own = _prepared(log, policy, scenario, progress)
    files: dict[str, pq.ParquetWriter] = {}
    try:
        for done in _batches(own, policy, progress, batch_rows):
            for name, table in _tables(own, done).items():
                if name not in files:
                    files[name] = pq.ParquetWriter(
                        _building(folder, name), table.schema
                    )
                files[name].write_table(table)
        for writer in files.values():
            writer.close()
        stamp = _stamp(own, policy, scenario)
        _put_in_place(folder, files, stamp)
    except OSError as problem:
        raise OutputUnwritable(f"{folder} cannot be written: {problem}") from None
    finally:
        for name, writer in files.items():
            writer.close()
            _building(folder, name).unlink(missing_ok=True)
        own.close()
    return stamp


def _make_room(folder: Path) -> None:
    """The folder, ready to be written.

    Raises   OutputUnwritable if it cannot be.
    """
    try:
        folder.mkdir(parents=True, exist_ok=True)
        probe = _building(folder, "probe")
        probe.touch()
        probe.unlink()
    except OSError as problem:
        raise OutputUnwritable(f"{folder} cannot be written: {problem}") from None


def _building(folder: Path, name: str) -> Path:
    return folder / f".{name}.building"


def _put_in_place(folder: Path, names: Iterable[str], stamp: dict[str, Any]) -> None:
    """All files at once, run.json last: it stands for a run that is whole."""
    (folder / "run.json").unlink(missing_ok=True)
    for name in names:
        _building(folder, name).replace(folder / f"{name}.parquet")
    (folder / "run.json").write_text(json.dumps(stamp, indent=2), "utf-8")


def _prepared(
    log: Log, policy: Policy, scenario: Scenario | None, progress: Progress | None
) -> Log:
    """A private connection with everything the batches need standing in tables."""
    say = progress or (lambda share, what: None)
    own = log.reopened()
    cursor = own.cursor()
    say(0.0, "reading the log")
    for column in ("shift", "filter_trend"):
        words = ", ".join(f"'{word}'" for word in words_of(column))
        cursor.execute(f"CREATE TYPE {column}_words AS ENUM ({words})")
    apply_facts(cursor, scenario)
    say(0.02, "following the filters")
    read_filters(cursor, policy)
    read_sensors(cursor, policy)
    say(0.08, "placing each treatment in time")
    build_context(cursor, policy, own.site_zone)
    cursor.register("rule_rows", _rule_table())
    cursor.execute("CREATE TABLE rule AS FROM rule_rows")
    return own


def _batches(
    own: Log, policy: Policy, progress: Progress | None, batch_rows: int
) -> Iterator[Replayed]:
    say = progress or (lambda share, what: None)
    total = own.cursor().execute("SELECT count(*) FROM context").fetchone()
    n_all = total[0] if total else 0
    reader = own.cursor().sql(_BATCHES).to_arrow_reader(batch_rows)
    n_done = 0
    empty = True
    for arrow in reader:
        if arrow.num_rows or empty:
            yield _replayed(batch_of(arrow), policy)
            empty = False
        n_done += arrow.num_rows
        say(0.1 + 0.9 * n_done / max(n_all, 1), f"{n_done:,} of {n_all:,} treatments")
    if empty:
        yield _replayed(batch_of(pa.RecordBatch.from_pylist([], reader.schema)), policy)


def _replayed(rows: dict[str, np.ndarray], policy: Policy) -> Replayed:
    dose = {**balance(rows), **alternatives(rows)}
    seen = {**rows, **dose}
    answers = {rule.id: rule.answer(seen, policy) for rule in ALL_RULES}
    return Replayed(rows["treatment_id"], dose, answers)


def _balance(done: Replayed) -> pa.Table:
    return balance_arrow(done.treatment_id, done.balance, list(words_of("site")))


def _tables(own: Log, done: Replayed) -> dict[str, pa.Table]:
    cursor = own.cursor()
    cursor.register("fired", finding_arrow(done.treatment_id, done.answers))
    return {
        "balance": _balance(done),
        "answers": answer_arrow(done.treatment_id, done.answers),
        "findings": cursor.sql(_FINDINGS).to_arrow_table(),
    }


def _keep(
    writer: duckdb.DuckDBPyConnection, name: str, table: pa.Table, first: bool
) -> None:
    writer.register("block", table)
    verb = f"CREATE TABLE {name} AS" if first else f"INSERT INTO {name}"
    writer.execute(f"{verb} SELECT * FROM block")
    writer.unregister("block")


def _rule_table() -> pa.Table:
    return pa.table(
        {
            "rule_id": [rule.id for rule in ALL_RULES],
            "family": [rule.family for rule in ALL_RULES],
            "title": [rule.title for rule in ALL_RULES],
            "strength": [rule.strength for rule in ALL_RULES],
        }
    )


def _stamp(own: Log, policy: Policy, scenario: Scenario | None) -> dict[str, Any]:
    accounts = own.accounts()
    treatments = own.cursor().execute("SELECT count(*) FROM context").fetchone()
    return {
        "engine_version": VERSION,
        "log_fingerprint": own.fingerprint,
        "policy_name": policy.name,
        "policy_hash": policy.hash,
        "scenario": scenario.name if scenario else None,
        "treatments": treatments[0] if treatments else 0,
        "rows_in": int(accounts["rows_in"].sum()),
        "rows_used": int(accounts["rows_used"].sum()),
        "rows_refused": int(accounts["rows_refused"].sum()),
    }
