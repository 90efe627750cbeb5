"""Opening and writing the treatment log."""

from engine.log.open import Log, fingerprint_of, open_log, stamp_of
from engine.log.schema import write_log

__all__ = ["Log", "fingerprint_of", "open_log", "stamp_of", "write_log"]
