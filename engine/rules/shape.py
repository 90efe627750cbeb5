"""What a rule is: one question put to every treatment, and its four answers."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any, TypeAlias

import numpy as np

from engine.batch import Batch
from engine.columns import ANSWERS
from engine.evidence.shape import Number, Source
from engine.policy import Policy
from engine.policy.sections import Strength
from engine.rules.phrases import said
from engine.rules.wording import is_logged, label_of
from engine.ternary import Ternary

Condition: TypeAlias = Callable[[Batch, Policy], Ternary]

FIRES, SILENT, NOT_ASKED, CANNOT_TELL = (np.int8(i) for i in range(len(ANSWERS)))

FAMILIES: dict[str, str] = {
    "PL": "placement",
    "HU": "humidification",
    "GE": "generator use",
    "FI": "filter",
    "EX": "exposure",
    "SE": "sensor",
    "RE": "record",
}


@dataclass(frozen=True, kw_only=True)
class Rule:
    """One question: of whom it is asked, when it fires, what it says then.

    ``evidence`` holds what the rule rests on, ``against`` the works that found
    otherwise, ``columns`` every column it reads. ``says`` is filled by name, see
    ``wording``; ``would_change`` tells what would take the finding back.
    """

    id: str
    title: str
    question: str
    evidence: tuple[Number | Source, ...]
    strength: Strength
    columns: tuple[str, ...]
    when: Condition
    fires: Condition
    says: str
    would_change: str
    against: tuple[Source, ...] = ()

    @property
    def family(self) -> str:
        """The two letters of its family; ``FAMILIES`` has the name."""
        return self.id[:2]

    def answer(self, rows: Batch, policy: Policy) -> np.ndarray:
        """One code into ``columns.ANSWERS`` for each treatment.

        Not asked where ``when`` is no; cannot tell where ``when``, or then ``fires``,
        is unknown.
        """
        asked, fired = self.when(rows, policy), self.fires(rows, policy)
        answers = np.full(len(asked), CANNOT_TELL)
        answers[asked.no] = NOT_ASKED
        answers[asked.yes & fired.yes] = FIRES
        answers[asked.yes & fired.no] = SILENT
        return answers

    def sentence(self, row: Mapping[str, Any], policy: Policy) -> str:
        """What the rule says of one treatment it fired on; for the row on screen."""
        return said(self.says, row, policy)

    def not_logged(self, row: Mapping[str, Any]) -> tuple[str, ...]:
        """Labels of the columns the rule reads that this treatment does not hold."""
        return tuple(
            label_of(name) for name in self.columns if not is_logged(row.get(name))
        )


def all_of(*conditions: Condition) -> Condition:
    """Yes where every condition is."""

    def holds(rows: Batch, policy: Policy) -> Ternary:
        first, *rest = (condition(rows, policy) for condition in conditions)
        for each in rest:
            first = first & each
        return first

    return holds


def any_of(*conditions: Condition) -> Condition:
    """Yes where any condition is."""

    def holds(rows: Batch, policy: Policy) -> Ternary:
        first, *rest = (condition(rows, policy) for condition in conditions)
        for each in rest:
            first = first | each
        return first

    return holds


def is_not(condition: Condition) -> Condition:
    """Yes where the condition is no."""
    return lambda rows, policy: ~condition(rows, policy)


def as_charted(condition: Condition) -> Condition:
    """What the entry says: a blank says nothing and counts as no.

    Only for rules that judge the entry itself; for the setup a blank stays unknown.
    """
    return lambda rows, policy: Ternary.of(condition(rows, policy).yes)
