"""The department's placement table, matched where part of the setup is not logged.

Which row decides depends on six facts of the setup. For a fact that is not logged,
every word it could have been is tried: a site's class is known only where all the rows
that could decide agree on it. All of that is worked out once for each policy, for every
setup there can be; a treatment then only looks its own up.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from engine.batch import Batch, is_above, is_below, size
from engine.columns import words_of
from engine.policy import Policy
from engine.policy.sections import PlacementRow
from engine.ternary import NO, UNKNOWN, YES, Ternary

CLASSES = ("preferred", "acceptable", "discordant", "not listed")
PREFERRED, ACCEPTABLE, DISCORDANT, NOT_LISTED = map(np.int8, range(len(CLASSES)))
CANNOT_TELL = np.int8(-1)

SITES = words_of("site")[:-1]
_BIAS = ("none", "present")
# The facts a row may ask for, with the words each can be.
_FACTS: dict[str, tuple[str, ...]] = {
    "generator": words_of("generator")[:-1],
    "synchrony": words_of("synchrony")[:-1],
    "bias_flow": _BIAS,
    "humidification": words_of("humidification")[:-1],
    "mode": words_of("mode")[:-1],
    "circuit": words_of("circuit")[:-1],
}
# The rows are kept as bits; a policy holds no more of them than fit.
_BIT = np.uint64(1)


@dataclass(frozen=True, eq=False)
class Table:
    """The placement table of one policy, opened out.

    ``setup``      for every combination of facts (last place of each: not logged), the
                   number of its kind
    ``could``      kind x row: whether that row could decide; last column: no row
    ``classes``    kind x site (last: not logged): class, or cannot tell
    ``speaks``, ``discordant``   kind x site, as ternary codes
    ``contested``, ``banded``    kind, as ternary codes
    """

    setup: np.ndarray
    could: np.ndarray
    classes: np.ndarray
    speaks: np.ndarray
    discordant: np.ndarray
    contested: np.ndarray
    banded: np.ndarray


def site_class(rows: Batch, policy: Policy) -> np.ndarray:
    """Class of each logged site: index into ``CLASSES``; -1 cannot tell."""
    table = _table(policy.placement)
    return table.classes[_kind(rows, policy, table), rows["site"]]


def class_of(rows: Batch, policy: Policy, site: np.ndarray) -> np.ndarray:
    """As ``site_class``, of another site (codes; -1 not known)."""
    table = _table(policy.placement)
    return table.classes[_kind(rows, policy, table), site]


def preferred_sites(rows: Batch, policy: Policy) -> np.ndarray:
    """n x sites, true where every row that could decide prefers the site."""
    table = _table(policy.placement)
    return table.classes[_kind(rows, policy, table), :-1] == PREFERRED


def rows_that_could_decide(
    rows: Batch, policy: Policy, index: int
) -> tuple[PlacementRow, ...]:
    """The rows of the table that may hold for one treatment of the batch."""
    table = _table(policy.placement)
    could = table.could[_kind(rows, policy, table)[index]]
    return tuple(row for row, may in zip(policy.placement, could, strict=False) if may)


def table_speaks(rows: Batch, policy: Policy) -> Ternary:
    """Whether the table says anything about the logged site in this setup."""
    table = _table(policy.placement)
    return Ternary(table.speaks[_kind(rows, policy, table), rows["site"]])


def site_is_discordant(rows: Batch, policy: Policy) -> Ternary:
    """Whether the table counts the logged site as discordant."""
    table = _table(policy.placement)
    return Ternary(table.discordant[_kind(rows, policy, table), rows["site"]])


def row_is_contested(rows: Batch, policy: Policy) -> Ternary:
    """Whether sources differ on the row that decides."""
    table = _table(policy.placement)
    return Ternary(table.contested[_kind(rows, policy, table)])


def row_has_a_band(rows: Batch, policy: Policy) -> Ternary:
    """Whether the row that decides gives a distance from the Y."""
    table = _table(policy.placement)
    return Ternary(table.banded[_kind(rows, policy, table)])


def distance_outside_band(rows: Batch, policy: Policy) -> Ternary:
    """Whether the logged distance lies outside the band of the row that decides."""
    table = _table(policy.placement)
    kind = _kind(rows, policy, table)
    lowest, highest = np.full(size(rows), YES), np.full(size(rows), NO)
    for i, row in enumerate(policy.placement):
        if row.distance_from_wye_cm is None:
            continue
        low, high = row.distance_from_wye_cm
        distance = rows["distance_from_wye_cm"]
        outside = (is_below(distance, low) | is_above(distance, high)).codes
        could = table.could[kind, i]
        lowest = np.where(could, np.minimum(lowest, outside), lowest)
        highest = np.where(could, np.maximum(highest, outside), highest)
    return Ternary(np.where(lowest == highest, lowest, UNKNOWN))


def _kind(rows: Batch, policy: Policy, table: Table) -> np.ndarray:
    """The kind of each treatment's setup; a code of -1 takes the last place."""
    from_lpm = policy.generator_use.bias_flow_runs_from_lpm
    flow = rows["bias_flow_lpm"]
    bias = np.where(np.isnan(flow), -1, flow >= from_lpm).astype(np.int8)
    codes = [bias if fact == "bias_flow" else rows[fact] for fact in _FACTS]
    return table.setup[tuple(codes)]


@lru_cache(maxsize=16)
def _table(placement: tuple[PlacementRow, ...]) -> Table:
    masks, setup = np.unique(_masks(placement), return_inverse=True)
    bits = np.arange(len(placement) + 1, dtype=np.uint64)
    could = (masks[:, None] >> bits[None, :]) & _BIT == _BIT
    # One line a row of the table, and a last one for "no row": nothing is listed.
    listed = np.full((len(placement) + 1, len(SITES)), NOT_LISTED)
    for i, row in enumerate(placement):
        for site in SITES:
            listed[i, SITES.index(site)] = _class_in(row, site)
    contested = np.array([row.strength == "contested" for row in placement] + [False])
    banded = np.array([row.distance_from_wye_cm is not None for row in placement])
    agreed = _agreed(could[:, :, None], listed[None, :, :])
    return Table(
        setup=setup.reshape([len(words) + 1 for words in _FACTS.values()]),
        could=could,
        classes=_with_unlogged_site(agreed, CANNOT_TELL),
        speaks=_with_unlogged_site(_told(could, listed != NOT_LISTED), UNKNOWN),
        discordant=_with_unlogged_site(_told(could, listed == DISCORDANT), UNKNOWN),
        contested=_told(could, contested[:, None])[:, 0],
        banded=_told(could, np.append(banded, False)[:, None])[:, 0],
    )


def _masks(placement: tuple[PlacementRow, ...]) -> np.ndarray:
    """For every combination of facts, the rows that could decide it, as bits."""
    shape = [len(words) for words in _FACTS.values()]
    first = np.full(shape, len(placement), dtype=np.uint64)
    for i, row in reversed(list(enumerate(placement))):
        first[np.ix_(*(_words_asked(row, fact) for fact in _FACTS))] = i
    masks = _BIT << first
    for axis in range(masks.ndim):
        any_word = np.bitwise_or.reduce(masks, axis=axis, keepdims=True)
        masks = np.concatenate([masks, any_word], axis=axis)
    return masks


def _words_asked(row: PlacementRow, fact: str) -> list[int]:
    """Codes of the words of this fact the row holds for; all where it asks none."""
    words = _FACTS[fact]
    asked = getattr(row, fact)
    if fact == "bias_flow":
        asked = (asked,) if asked else ()
    return [words.index(word) for word in (asked or words)]


def _class_in(row: PlacementRow, site: str) -> np.int8:
    if site in row.preferred:
        return PREFERRED
    if site in row.acceptable:
        return ACCEPTABLE
    return DISCORDANT if site in row.discordant else NOT_LISTED


def _agreed(could: np.ndarray, listed: np.ndarray) -> np.ndarray:
    """The class all rows that could decide give a site; -1 where they differ."""
    lowest = np.where(could, listed, NOT_LISTED).min(axis=1)
    highest = np.where(could, listed, PREFERRED).max(axis=1)
    return np.where(lowest == highest, lowest, CANNOT_TELL).astype(np.int8)


def _told(could: np.ndarray, truth: np.ndarray) -> np.ndarray:
    """Ternary codes, kind x column: what all rows that could decide agree on."""
    every = np.where(could[:, :, None], truth[None, :, :], True).all(axis=1)
    some = np.where(could[:, :, None], truth[None, :, :], False).any(axis=1)
    return np.where(every, YES, np.where(some, UNKNOWN, NO)).astype(np.int8)


def _with_unlogged_site(by_site: np.ndarray, unknown: np.int8) -> np.ndarray:
    """A last column for a site that is not logged: known only where all agree."""
    same = (by_site == by_site[:, :1]).all(axis=1)
    return np.column_stack([by_site, np.where(same, by_site[:, 0], unknown)])
