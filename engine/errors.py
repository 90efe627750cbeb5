"""Every error a reader can meet, each one clear line: what, where, what to do.

EngineError
  LogUnreadable      the file is not a log we can open safely
  PolicyInvalid      a policy file names a wrong key or value
  ScenarioInvalid    a scenario names an unknown column, word or policy key
  SourceUnreadable   a raw export cannot be taken in
  UnknownId          no treatment, filter or incident of that id
  NothingToReview    the period holds no treatments
  JournalBroken      the hash chain of the journal does not hold
  EntryRefused       an entry says something the journal cannot keep
"""


class EngineError(Exception):
    """Base of all errors meant for the reader; its text is one line."""


class LogUnreadable(EngineError):
    """The file is missing, not a log, hostile or of another schema."""


class PolicyInvalid(EngineError):
    """A policy file cannot be used; names file, key and allowed values."""


class ScenarioInvalid(EngineError):
    """A scenario names something the log or the policy does not have."""


class SourceUnreadable(EngineError):
    """A raw export cannot be read at all (a bad row is not an error)."""


class UnknownId(EngineError):
    """The id asked for is not in the log."""


class NothingToReview(EngineError):
    """There are no treatments in the period asked for."""


class JournalBroken(EngineError):
    """A journal entry was altered, removed or reordered."""


class OutputUnwritable(EngineError):
    """A file or folder asked for cannot be written."""


class SharingRefused(EngineError):
    """A copy for sharing would still name a device, a person or a day."""


class EntryRefused(EngineError):
    """A journal entry is not written: unknown action or verdict, no actor, too long."""
