"""What can be taught in one sitting, each with the system change that goes beside it.

A topic gathers the rules one conversation answers. Every rule belongs to one topic.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, kw_only=True)
class Topic:
    """One subject for a session.

    ``seen``     how what was seen reads: "the generator stood at a site ..."
    ``change``   a change to supplies, orders, records or layout that makes the usual
                 way the easy way; its strength as committees grade actions
    """

    id: str
    title: str
    rules: tuple[str, ...]
    seen: str
    why: str
    change: str
    change_strength: str


TOPICS: tuple[Topic, ...] = (
    Topic(
        id="site",
        title="Where the generator goes",
        rules=("PL01", "PL03", "PL04", "GE03"),
        seen="the generator stood where the department's table does not put it",
        why="Output made while the patient breathes out is stored upstream or swept "
        "past the Y; the site decides which.",
        change="Keep a T-piece of a marked colour at the usual site in every circuit "
        "set, one for each generator, so that the right place is the open one.",
        change_strength="stronger",
    ),
    Topic(
        id="both_sides",
        title="Sites on which sources differ",
        rules=("PL02", "PL05"),
        seen="the site was one on which published work differs",
        why="Benches disagree for reasons the estimate can show: limb volume, bias "
        "flow, breath length. Nothing here is wrong; it is worth knowing why.",
        change="Settle the row of the placement table at committee, with both sides "
        "written beside it, and date it for review.",
        change_strength="intermediate",
    ),
    Topic(
        id="hme",
        title="HME out of the aerosol's way",
        rules=("HU01", "HU03"),
        seen="an HME stood between generator and airway, or two humidifiers were "
        "charted at once",
        why="An HME in line catches most of the aerosol before the tube.",
        change="Stock HMEs with a bypass, or keep patients on regular aerosol on "
        "heated humidification by order set.",
        change_strength="stronger",
    ),
    Topic(
        id="resume",
        title="Humidification back on afterwards",
        rules=("HU02",),
        seen="it was not charted that humidification was resumed",
        why="Dry gas thickens secretions within hours.",
        change="One line in the treatment record that must be answered before the "
        "entry closes: humidification resumed, yes or no.",
        change_strength="intermediate",
    ),
    Topic(
        id="filter",
        title="A filter on every nebulizer treatment",
        rules=("FI01", "EX01", "EX02"),
        seen="a nebulizer ran without an expiratory filter, or much is estimated to "
        "have reached the room",
        why="Without one the exhaled aerosol reaches the flow sensor, the room and "
        "the people in it.",
        change="Put the filter in the same bag as the nebulizer, so that one is not "
        "opened without the other.",
        change_strength="stronger",
    ),
    Topic(
        id="filter_change",
        title="When a filter is changed",
        rules=("FI02", "FI03", "FI04"),
        seen="the filter was past its hours, over its limit or rising",
        why="A loading filter holds the breath out back; viscous drugs load it within "
        "hours.",
        change="Change by drug class on a printed schedule at the ventilator, with "
        "the next change time written on the filter.",
        change_strength="intermediate",
    ),
    Topic(
        id="filter_reading",
        title="Reading filters and logging changes",
        rules=("FI05", "FI06", "FI07"),
        seen="the filter was not read in the window, read without its flow, or "
        "changed without a log",
        why="Without readings at a known flow a loading filter is not seen coming.",
        change="A reading field with its flow in the shift check, and a barcode on "
        "filters that logs the change.",
        change_strength="intermediate",
    ),
    Topic(
        id="gas",
        title="Gas and fill of the jet",
        rules=("GE02", "GE06"),
        seen="the jet was driven by outside gas or held too small a fill",
        why="Outside gas adds to the breath and hides the patient's effort from the "
        "trigger; a small fill mostly stays in the cup.",
        change="Keep wall-gas tubing out of the ventilator aerosol set; issue unit "
        "doses at the department's fill.",
        change_strength="stronger",
    ),
    Topic(
        id="inhaler",
        title="Inhaler with the breath",
        rules=("GE01",),
        seen="the inhaler was used without a chamber or not with the breath in",
        why="An actuation outside inspiration goes mostly to the circuit wall.",
        change="A chamber that stays in the circuit, with the actuation count and "
        "timing printed on it.",
        change_strength="intermediate",
    ),
    Topic(
        id="run",
        title="Run time and drug for the generator",
        rules=("GE04", "GE05"),
        seen="the run did not fit fill and output, or the drug did not suit the "
        "generator",
        why="A run far from what fill and output allow means the dose was not "
        "what was charted; some drugs do not survive some generators.",
        change="Pair drug and generator in the order set; the pharmacy labels the "
        "exceptions.",
        change_strength="stronger",
    ),
    Topic(
        id="sensor",
        title="Flow sensors after unfiltered aerosol",
        rules=("SE01", "SE02", "SE03", "SE04"),
        seen="treatments were given after a failed check, after many unfiltered ones, "
        "or while the volumes drifted",
        why="Aerosol dries on the expiratory sensor and shifts what it reads.",
        change="A sensor check triggered by a count of unfiltered treatments, not by "
        "the calendar.",
        change_strength="intermediate",
    ),
    Topic(
        id="record",
        title="What the record needs",
        rules=("RE01", "RE02", "RE03", "RE04", "RE05"),
        seen="essential fields were blank, unclear or contradicted each other",
        why="What is not charted cannot be reviewed; most of what nobody can tell "
        "comes from a few blank fields.",
        change="Defaults filled in from the ventilator, required fields cut to the "
        "few that matter, clocks synchronised.",
        change_strength="intermediate",
    ),
)

BY_ID = {each.id: each for each in TOPICS}
TOPIC_OF = {rule: each.id for each in TOPICS for rule in each.rules}
