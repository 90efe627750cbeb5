"""Small words for sentences written from results; shared by the reviews."""

from __future__ import annotations

from collections.abc import Sequence


def counted(n: int, one: str, many: str | None = None) -> str:
    """``1 filter``, ``3 filters``; numbers with thousands apart."""
    return f"{n:,} {one if n == 1 else many or one + 's'}"


def listed(parts: Sequence[str]) -> str:
    """``a``, ``a and b``, ``a, b and c``."""
    if len(parts) < 2:
        return "".join(parts)
    return f"{', '.join(parts[:-1])} and {parts[-1]}"
