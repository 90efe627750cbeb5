"""The journal of verdicts, notes, decisions and sign-offs."""

from engine.journal.book import Journal, open_journal
from engine.journal.entry import ACTIONS, VERDICTS, Entry

__all__ = ["ACTIONS", "VERDICTS", "Entry", "Journal", "open_journal"]
