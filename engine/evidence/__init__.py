"""Published figures and their sources: the only home of any number we use."""

from __future__ import annotations

import importlib
import pkgutil

# The works first: loading them later would hide ``sources`` below behind the file.
from engine.evidence import sources as works
from engine.evidence.shape import Number, Source


def numbers() -> dict[str, Number]:
    """Every number by its constant's name, in the order the topics are read."""
    return {
        name: value
        for module in _topics()
        for name, value in vars(module).items()
        if isinstance(value, Number)
    }


def sources() -> dict[str, Source]:
    """Every source by its key."""
    return {v.key: v for v in vars(works).values() if isinstance(v, Source)}


def _topics() -> list:
    return [
        importlib.import_module(f"{__name__}.{found.name}")
        for found in pkgutil.iter_modules(__path__)
        if found.name not in {"shape", "sources"}
    ]
