"""The journal: who confirmed, noted, decided and signed, one line each.

Append-only, in a file of its own beside the log. Nothing is ever changed: taking
something back is a new entry that withdraws an old one. Each line carries the hash of
the line before, so an altered, removed, added or moved line is found and named. What a
chain cannot show by itself is that its last lines are gone: ``check(head=...)`` holds
it against a head printed on a signed report.
"""

from __future__ import annotations

import json
import os
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import datetime
from pathlib import Path
from typing import IO, Any

import pandas as pd

from engine.errors import EntryRefused, JournalBroken, UnknownId
from engine.journal.entry import (
    GENESIS,
    LONGEST_ENTRY_BYTES,
    Entry,
    digest,
    is_sound,
    line_of,
    written,
)

VERDICT_COLUMNS = ("finding_id", "verdict", "reason", "at", "actor", "role", "seq")

_Mark = tuple[int, int, int]


class Journal:
    """An opened journal; the file need not exist before the first entry."""

    def __init__(self, path: Path) -> None:
        self.path = path
        self._read: tuple[_Mark, tuple[Entry, ...]] | None = None

    def append(
        self,
        *,
        at: datetime,
        actor: str,
        role: str,
        action: str,
        object: str,
        new: Any,
        old: Any = None,
        reason: str = "",
    ) -> Entry:
        """Write one entry at the end and return it.

        Raises   EntryRefused if the entry cannot be kept; JournalBroken if what stands
                 in the file does not hold, for nothing is added to a broken chain.
        """
        with self._opened_alone() as file:
            entries = self._entries_in(file)
            entry = written(
                seq=len(entries) + 1,
                at=at,
                actor=actor,
                role=role,
                action=action,
                object=object,
                old=old,
                new=new,
                reason=reason,
                previous=entries[-1].hash if entries else GENESIS,
            )
            file.seek(0, os.SEEK_END)
            file.write(line_of(entry) + b"\n")
            file.flush()
            os.fsync(file.fileno())
            self._read = (_mark(file), (*entries, entry))
        return entry

    def withdraw(
        self, seq: int, *, at: datetime, actor: str, role: str, reason: str = ""
    ) -> Entry:
        """Take an earlier entry back by a new one; both stay in the file.

        Raises   UnknownId if no entry of that number stands.
        """
        standing = {entry.seq for entry in self.standing()}
        if seq not in standing:
            raise UnknownId(f"no entry {seq} stands in {self.path.name}")
        return self.append(
            at=at,
            actor=actor,
            role=role,
            action="withdraw",
            object=str(seq),
            new=None,
            reason=reason,
        )

    def entries(self) -> tuple[Entry, ...]:
        """Every entry, oldest first, the chain checked.

        Raises   JournalBroken naming the line that does not hold.
        """
        if not self.path.exists():
            return ()
        with self._opened() as file:
            return self._entries_in(file)

    def standing(self, action: str | None = None) -> list[Entry]:
        """Entries that nobody has withdrawn, oldest first, of one action or all."""
        entries = self.entries()
        gone = {entry.object for entry in entries if entry.action == "withdraw"}
        return [
            entry
            for entry in entries
            if entry.action != "withdraw"
            and str(entry.seq) not in gone
            and action in {None, entry.action}
        ]

    def verdicts(self) -> pd.DataFrame:
        """The latest standing verdict of each actor on each finding.

        Columns  finding_id, verdict, reason, at (UTC), actor, role, seq (its entry).
        """
        latest = {(e.object, e.actor): e for e in self.standing("verdict")}
        rows = [
            (e.object, e.new, e.reason, e.at_utc, e.actor, e.role, e.seq)
            for e in latest.values()
        ]
        frame = pd.DataFrame(rows, columns=list(VERDICT_COLUMNS))
        kinds = {**dict.fromkeys(VERDICT_COLUMNS, "str"), "at": "datetime64[us]"}
        return frame.astype({**kinds, "seq": "int64"})

    @property
    def head(self) -> str:
        """The hash of the last entry: print it where the file cannot reach."""
        entries = self.entries()
        return entries[-1].hash if entries else GENESIS

    def check(self, head: str | None = None) -> int:
        """Read the whole file again and return how many entries hold.

        ``head`` is one printed earlier, in full or its beginning: it must still stand
        in the chain.
        Raises   JournalBroken naming the line, or the head that is gone.
        """
        self._read = None
        entries = self.entries()
        known = [GENESIS, *(entry.hash for entry in entries)]
        if head is not None and not any(hash.startswith(head) for hash in known):
            raise JournalBroken(
                f"{self.path}: no entry ends the chain at {head[:12]}; "
                "lines at the end are gone or this is another journal"
            )
        return len(entries)

    @contextmanager
    def _opened(self) -> Iterator[IO[bytes]]:
        try:
            with self.path.open("rb") as file:
                yield file
        except OSError as error:
            raise JournalBroken(self._unreadable(error)) from None

    @contextmanager
    def _opened_alone(self) -> Iterator[IO[bytes]]:
        try:
            file = os.fdopen(
                os.open(self.path, os.O_RDWR | os.O_CREAT | os.O_APPEND, 0o600), "r+b"
            )
        except OSError as error:
            raise JournalBroken(self._unreadable(error)) from None
        with file, _locked(file):
            yield file

    def _unreadable(self, error: OSError) -> str:
        return f"{self.path} cannot be read or written: {error.strerror or error}"

    def _entries_in(self, file: IO[bytes]) -> tuple[Entry, ...]:
        mark = _mark(file)
        if self._read is None or self._read[0] != mark:
            self._read = (mark, tuple(_chained(file, self.path)))
        return self._read[1]


def open_journal(path: str | os.PathLike[str]) -> Journal:
    """The journal in that file.

    Raises   JournalBroken if there is a file and it does not hold.
    """
    journal = Journal(Path(path))
    journal.check()
    return journal


def _chained(file: IO[bytes], path: Path) -> Iterator[Entry]:
    """Each entry whose line is exactly what would have been written, in its place."""
    previous = GENESIS
    file.seek(0)
    number = 0
    while line := file.readline(LONGEST_ENTRY_BYTES + 2):
        number += 1
        where = f"{path} line {number}"
        if not line.endswith(b"\n"):
            raise JournalBroken(f"{where} is cut short or too long for an entry")
        entry = _entry(line[:-1], where)
        if entry.previous != previous or entry.seq != number:
            raise JournalBroken(
                f"{where} does not follow the line before it; "
                "a line was removed, added or moved"
            )
        previous = entry.hash
        yield entry


def _entry(line: bytes, where: str) -> Entry:
    try:
        content = json.loads(line)
        entry = Entry(**content)
        same = line_of(entry) == line
        fits = is_sound(entry)
    except (ValueError, TypeError, RecursionError, OverflowError, EntryRefused):
        raise JournalBroken(f"{where} is not a journal entry") from None
    if not fits:
        raise JournalBroken(f"{where} is not a journal entry")
    del content["hash"]
    if not same or digest(content) != entry.hash:
        raise JournalBroken(f"{where} was altered; it does not match its hash")
    return entry


def _mark(file: IO[bytes]) -> _Mark:
    found = os.fstat(file.fileno())
    return found.st_ino, found.st_size, found.st_mtime_ns


@contextmanager
def _locked(file: IO[bytes]) -> Iterator[None]:
    """Nobody else appends meanwhile, in this program or another."""
    if sys.platform == "win32":
        import msvcrt

        file.seek(0)
        msvcrt.locking(file.fileno(), msvcrt.LK_LOCK, 1)
        try:
            yield
        finally:
            file.seek(0)
            msvcrt.locking(file.fileno(), msvcrt.LK_UNLCK, 1)
    else:
        import fcntl

        fcntl.flock(file.fileno(), fcntl.LOCK_EX)
        try:
            yield
        finally:
            fcntl.flock(file.fileno(), fcntl.LOCK_UN)
