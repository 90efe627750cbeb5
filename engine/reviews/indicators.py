"""The department's indicators, each declared once: what is counted, among which.

An indicator of treatments says in SQL whether a treatment belongs to it (``asked``)
and whether it counts (``hit``: true, false, NULL where the record does not say). It
reads the answers of the rules wherever a rule asks the same, so that a figure and the
findings behind it cannot differ.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal, TypedDict

from engine.evidence.review import (
    CONFIRMED_START_FRAC,
    FIELD_MISSING_START_FRAC,
    FILTER_FITTED_START_FRAC,
    FILTER_HOURS_START_FRAC,
    LOW_DELIVERY_RATIO,
    MISSED_START_FRAC,
    MODE_UNCLEAR_START_FRAC,
    NO_READING_START_FRAC,
    RESUMED_START_FRAC,
    STRONGER_ACTIONS_START_FRAC,
    UNLOGGED_START_FRAC,
)
from engine.evidence.shape import Number

Kind = Literal["treatments", "counted", "rate", "amount"]


class Counting(TypedDict):
    """The two SQL conditions of an indicator of treatments."""

    asked: str
    hit: str


@dataclass(frozen=True, kw_only=True)
class Indicator:
    """One line of the month.

    kind       treatments: a share of treatments, from ``asked`` and ``hit``
               counted: a share of something else; amount: a figure with its band;
               rate: a count per so many
    wanted     where it should go: up, down, or no side is wanted
    start      where to begin to look, a suggestion the department replaces
    rules      whose findings lie behind it
    of         what it is a share or an amount of
    """

    id: str
    title: str
    sentence: str  # "Filters were fitted in {value} of those where it is known"
    kind: Kind
    wanted: Literal["up", "down", "none"]
    of: str
    basis: str
    left_out: str = ""
    asked: str = ""
    hit: str = ""
    unit: str = "%"
    start: Number | None = None
    rules: tuple[str, ...] = ()
    estimate: bool = False

    @property
    def is_share(self) -> bool:
        return self.kind in {"treatments", "counted"}

    @property
    def wanted_side(self) -> int:
        """1 where a rise is wanted, -1 where a fall is, 0 where neither."""
        return {"up": 1, "down": -1, "none": 0}[self.wanted]

    @property
    def looks_below(self) -> bool:
        """Whether a figure below the start asks for a look; else one above does."""
        return self.wanted == "up" or self.id == "I21"

    @property
    def start_words(self) -> str:
        """``below 85 %``; empty without a start."""
        if self.start is None:
            return ""
        side = "below" if self.looks_below else "above"
        return f"{side} {100 * float(self.start):.3g} %"


def _fires(rule: str) -> Counting:
    """Counts where the rule fires, among those it could tell about."""
    return {
        "asked": f"{rule} <> 'not_asked'",
        "hit": f"CASE {rule} WHEN 'fires' THEN true WHEN 'silent' THEN false END",
    }


def _silent(rule: str) -> Counting:
    """Counts where the rule is silent."""
    return {
        "asked": f"{rule} <> 'not_asked'",
        "hit": f"CASE {rule} WHEN 'silent' THEN true WHEN 'fires' THEN false END",
    }


def _none_fires(rules: Sequence[str]) -> Counting:
    """Counts where no rule fires, among those where all that were asked could tell.

    A rule that fires beside one that cannot tell settles nothing: counting it would
    let only what is against the setup through.
    """
    told = ", ".join(rules)
    return {
        "asked": " OR ".join(f"{rule} <> 'not_asked'" for rule in rules),
        "hit": f"CASE WHEN 'cannot_tell' IN ({told}) THEN NULL"
        f" ELSE 'fires' NOT IN ({told}) END",
    }


_SETUP_RULES = ("FI01", "HU01", "PL01", "PL03", "GE01", "GE02")
_ESTIMATED = "delivered_frac IS NOT NULL"

INDICATORS: tuple[Indicator, ...] = (
    Indicator(
        id="I01",
        title="Filter in the expiratory limb",
        sentence="Filters were fitted in {value} of those where it is known",
        kind="treatments",
        wanted="up",
        of="nebulizer treatments on a circuit with two limbs",
        left_out="single-limb circuits, metered-dose inhalers",
        start=FILTER_FITTED_START_FRAC,
        rules=("FI01",),
        basis="Exhaled aerosol reaches sensor and room without one; advised in print.",
        **_silent("FI01"),
    ),
    Indicator(
        id="I02",
        title="HME left between generator and airway",
        sentence="An HME stood between generator and airway in {value}",
        kind="treatments",
        wanted="down",
        of="treatments with an HME charted",
        left_out="heated humidification, none",
        rules=("HU01",),
        basis="It catches most of the aerosol; each one is worth a look.",
        **_fires("HU01"),
    ),
    Indicator(
        id="I03",
        title="Site as the department's table has it",
        sentence="The site agreed with the department's table in {value}",
        kind="treatments",
        wanted="up",
        of="treatments whose setup the table speaks of",
        left_out="setups on which sources differ: see I03c",
        rules=("PL01", "PL03"),
        basis="The department's placement table; no outside target.",
        **_none_fires(("PL01", "PL03")),
    ),
    Indicator(
        id="I03c",
        title="Site agrees where sources differ",
        sentence="Where sources differ, the site followed the table in use in {value}",
        kind="treatments",
        wanted="none",
        of="treatments whose setup has published work on both sides",
        rules=("PL02",),
        basis="Shown so that it is not lost; neither side is counted against anyone.",
        **_silent("PL02"),
    ),
    Indicator(
        id="I04",
        title="Whole setup as the department has it",
        sentence="Filter, HME, site, gas and timing all agreed in {value}",
        kind="treatments",
        wanted="up",
        of="treatments where each of these that applies is known",
        rules=_SETUP_RULES,
        basis="All of I01 to I03, gas source and timing together.",
        **_none_fires(_SETUP_RULES),
    ),
    Indicator(
        id="I05",
        title="Filter past its hours",
        sentence="The filter was past its hours in {value}",
        kind="treatments",
        wanted="down",
        of="treatments with a filter in place",
        start=FILTER_HOURS_START_FRAC,
        rules=("FI04",),
        basis="The department's hours by drug class.",
        **_fires("FI04"),
    ),
    Indicator(
        id="I06",
        title="Filter over its resistance limit",
        sentence="The last reading of the filter was over the limit in {value}",
        kind="treatments",
        wanted="down",
        of="treatments with a reading in the window before the start",
        rules=("FI02",),
        basis="No published bedside limit; the department's own.",
        asked="FI02 <> 'not_asked' AND filter_reading_in_window IS NOT FALSE",
        hit=_fires("FI02")["hit"],
    ),
    Indicator(
        id="I07",
        title="Rise of filter resistance a treatment",
        sentence="The median filter rose by {value} a treatment",
        kind="amount",
        wanted="down",
        of="filters with enough readings at one flow",
        unit="cmH2O/(L/s)",
        basis="Theil-Sen slope against treatments through the filter.",
    ),
    Indicator(
        id="I08",
        title="Readings that look like a change nobody logged",
        sentence="Resistance fell as if to a new filter in {value}",
        kind="counted",
        wanted="down",
        of="pairs of readings of one filter",
        start=UNLOGGED_START_FRAC,
        rules=("FI05",),
        basis="A fall to a new filter's level inside one filter's readings.",
    ),
    Indicator(
        id="I09",
        title="No filter reading in the window",
        sentence="No reading stood in the window before the start in {value}",
        kind="treatments",
        wanted="down",
        of="treatments with a filter in place",
        start=NO_READING_START_FRAC,
        rules=("FI06",),
        basis="Without readings a loading filter is not seen.",
        **_fires("FI06"),
    ),
    Indicator(
        id="I10",
        title="Essential field missing",
        sentence="An essential field was blank in {value}",
        kind="treatments",
        wanted="down",
        of="all treatments",
        start=FIELD_MISSING_START_FRAC,
        rules=("RE01",),
        basis="What is not charted cannot be reviewed.",
        **_fires("RE01"),
    ),
    Indicator(
        id="I11",
        title="Estimated share of dose that passes the tube",
        sentence="By the estimate a median {value} of the dose passed the tube",
        kind="amount",
        wanted="none",
        of="treatments with an estimate",
        left_out="treatments with too much unrecorded to estimate",
        basis="Model estimate from bench work; reported, no target.",
        asked="true",
        hit=_ESTIMATED,
        estimate=True,
    ),
    Indicator(
        id="I12",
        title="Another site would have given twice as much",
        sentence="By the estimate another site gives at least twice as much in {value}",
        kind="treatments",
        wanted="down",
        of="treatments with an estimate",
        left_out="treatments with too much unrecorded to estimate",
        rules=("PL05",),
        basis="Against the same generator's best site, never an absolute dose.",
        asked="true",
        hit=f"CASE WHEN best_ratio IS NULL THEN NULL"
        f" ELSE best_ratio >= {float(LOW_DELIVERY_RATIO)}"
        " AND difference_shown = 1 END",
        estimate=True,
    ),
    Indicator(
        id="I13",
        title="People present without a filter",
        sentence="People were present without a filter for {value}",
        kind="amount",
        wanted="down",
        of="treatments with people, run time and filter recorded",
        unit="person-minutes in 100 treatments",
        basis="Trend only; no exposure limit exists for most drugs.",
    ),
    Indicator(
        id="I14",
        title="Estimated drug reaching the room",
        sentence="By the estimate {value} reached the room",
        kind="amount",
        wanted="down",
        of="treatments with an estimate and a dose",
        unit="µg a treatment",
        rules=("EX02",),
        basis="Model estimate; trend only.",
        estimate=True,
    ),
    Indicator(
        id="I15",
        title="Treatments not given",
        sentence="Of those ordered {value} were charted as not given",
        kind="counted",
        wanted="down",
        of="treatments charted as given or not given",
        left_out="how late a treatment was: the log holds no time due",
        start=MISSED_START_FRAC,
        basis="As charted; reasons are not in the log.",
    ),
    Indicator(
        id="I16",
        title="Jet driven by outside gas",
        sentence="The jet was driven by gas from outside the ventilator in {value}",
        kind="treatments",
        wanted="down",
        of="jet treatments",
        rules=("GE02",),
        basis="Outside gas adds volume and upsets triggering; each one is a case.",
        **_fires("GE02"),
    ),
    Indicator(
        id="I17",
        title="Humidification resumed afterwards",
        sentence="Humidification was charted as resumed in {value}",
        kind="treatments",
        wanted="up",
        of="treatments for which it was interrupted",
        start=RESUMED_START_FRAC,
        rules=("HU02",),
        basis="Advised in print to check; dry gas harms within hours.",
        **_silent("HU02"),
    ),
    Indicator(
        id="I18",
        title="Ventilators with many unfiltered treatments since a check",
        sentence="The department's count since the last check was passed by {value}",
        kind="counted",
        wanted="down",
        of="ventilators that gave treatments",
        rules=("SE02",),
        basis="The department's own count; no interval is published.",
    ),
    Indicator(
        id="I19",
        title="Flow-sensor events",
        sentence="Flow-sensor events came to {value}",
        kind="rate",
        wanted="down",
        of="treatments",
        unit="per 1,000 treatments",
        basis="Failed checks, sensors replaced, faults, incidents; reported ones only.",
    ),
    Indicator(
        id="I20",
        title="Mode text that names no one mode",
        sentence="The mode text named no one mode in {value}",
        kind="treatments",
        wanted="down",
        of="all treatments",
        start=MODE_UNCLEAR_START_FRAC,
        rules=("RE03",),
        basis="An unclear mode leaves the placement table without an answer.",
        **_fires("RE03"),
    ),
    Indicator(
        id="I21",
        title="Flags confirmed at review",
        sentence="Reviewers confirmed {value} of the flags they judged",
        kind="counted",
        wanted="none",
        of="flags confirmed or dismissed",
        start=CONFIRMED_START_FRAC,
        basis="Below half, the rule needs work, not the department.",
    ),
    Indicator(
        id="I22",
        title="Actions that change the system",
        sentence="{value} of the agreed actions are stronger or intermediate",
        kind="counted",
        wanted="up",
        of="actions agreed",
        start=STRONGER_ACTIONS_START_FRAC,
        basis="Reminders and training alone rarely hold.",
    ),
)

BY_ID = {each.id: each for each in INDICATORS}
OF_TREATMENTS = tuple(each for each in INDICATORS if each.kind == "treatments")
