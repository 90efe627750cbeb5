"""The table against a slow reading of it: try every word a blank could have been."""

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from engine.batch import from_values
from engine.columns import words_of
from engine.policy import load_policy
from engine.policy.sections import PlacementRow
from engine.rules import placement
from engine.ternary import NO, UNKNOWN, YES

SITES = words_of("site")[:-1]
WORDS = {
    "generator": words_of("generator")[:-1],
    "synchrony": words_of("synchrony")[:-1],
    "bias_flow": ("none", "present"),
    "humidification": words_of("humidification")[:-1],
    "mode": words_of("mode")[:-1],
    "circuit": words_of("circuit")[:-1],
}


def holds(row, setup):
    """Whether a row of the table matches a setup with nothing unknown."""
    for fact, word in setup.items():
        asked = getattr(row, fact)
        asked = (asked,) if isinstance(asked, str) else (asked or ())
        if asked and word not in asked:
            return False
    return True


def deciding(table, setup):
    """All rows (None: no row) that decide some setup the known facts leave open."""
    open_words = [[word] if word else WORDS[fact] for fact, word in setup.items()]
    found = set()
    for words in itertools.product(*open_words):
        whole = dict(zip(setup, words, strict=True))
        found.add(next((row for row in table if holds(row, whole)), None))
    return found


def listed(row, site):
    if row is None:
        return "not listed"
    for name in ("preferred", "acceptable", "discordant"):
        if site in getattr(row, name):
            return name
    return "not listed"


def batch_of(setup, site, distance=None):
    known = {fact: word for fact, word in setup.items() if fact != "bias_flow"}
    lpm = {"none": 0.0, "present": 3.0, None: None}[setup["bias_flow"]]
    return from_values(
        **known, bias_flow_lpm=lpm, site=site, distance_from_wye_cm=distance
    )


def ternary(answers):
    return YES if all(answers) else UNKNOWN if any(answers) else NO


def facts(draw_from=WORDS):
    return st.fixed_dictionaries(
        {fact: st.none() | st.sampled_from(words) for fact, words in draw_from.items()}
    )


def some(words, least=0):
    return st.lists(
        st.sampled_from(words), min_size=least, max_size=2, unique=True
    ).map(tuple)


@st.composite
def tables(draw):
    rows = []
    for i in range(draw(st.integers(1, 5))):
        sites = draw(st.permutations(SITES))
        cuts = sorted(draw(st.tuples(st.integers(1, 6), st.integers(1, 6))))
        rows.append(
            PlacementRow(
                id=f"row-{i}",
                generator=draw(some(WORDS["generator"], least=1)),
                synchrony=draw(some(WORDS["synchrony"])),
                bias_flow=draw(st.none() | st.sampled_from(WORDS["bias_flow"])),
                humidification=draw(some(WORDS["humidification"])),
                mode=draw(some(WORDS["mode"])),
                circuit=draw(some(WORDS["circuit"])),
                preferred=tuple(sites[: cuts[0]]),
                acceptable=tuple(sites[cuts[0] : cuts[1]]),
                discordant=tuple(sites[cuts[1] : cuts[1] + 1]),
                strength=draw(st.sampled_from(["majority", "contested"])),
                evidence=("COMMON_PRACTICE",),
                against=("HOU_2022",),
            )
        )
    return tuple(rows)


@settings(max_examples=150, deadline=None)
@given(table=tables(), setup=facts(), site=st.none() | st.sampled_from(SITES))
def test_a_class_is_known_only_where_every_row_that_could_decide_agrees(
    table, setup, site
):
    policy = load_policy().model_copy(update={"placement": table})
    could = deciding(table, setup)
    sites = [site] if site else SITES
    classes = {listed(row, each) for row in could for each in sites}
    batch = batch_of(setup, site)
    found = placement.site_class(batch, policy)[0]
    expected = placement.CLASSES.index(classes.pop()) if len(classes) == 1 else -1
    assert found == expected


@settings(max_examples=150, deadline=None)
@given(table=tables(), setup=facts(), site=st.sampled_from(SITES))
def test_each_question_to_the_table_is_told_by_the_rows_that_could_decide(
    table, setup, site
):
    policy = load_policy().model_copy(update={"placement": table})
    could = deciding(table, setup)
    classes = [listed(row, site) for row in could]
    batch = batch_of(setup, site)
    contested = [row is not None and row.strength == "contested" for row in could]
    told = {
        placement.table_speaks: [name != "not listed" for name in classes],
        placement.site_is_discordant: [name == "discordant" for name in classes],
        placement.row_is_contested: contested,
    }
    for question, answers in told.items():
        assert question(batch, policy).codes[0] == ternary(answers), question.__name__
    rows = placement.rows_that_could_decide(batch, policy, 0)
    assert set(rows) == could - {None}
    preferred = [
        all(listed(row, each) == "preferred" for row in could) for each in SITES
    ]
    assert placement.preferred_sites(batch, policy)[0].tolist() == preferred


@settings(max_examples=150, deadline=None)
@given(setup=facts(), distance=st.none() | st.floats(0, 200))
def test_a_distance_is_judged_only_where_the_bands_that_could_hold_agree(
    setup, distance
):
    policy = load_policy()
    could = deciding(policy.placement, setup)
    bands = [row.distance_from_wye_cm if row else None for row in could]
    batch = batch_of(setup, "inspiratory_limb", distance)
    has_band = placement.row_has_a_band(batch, policy).codes[0]
    assert has_band == ternary([band is not None for band in bands])
    if has_band != YES:
        return
    found = placement.distance_outside_band(batch, policy).codes[0]
    if distance is None:
        assert found == UNKNOWN
    else:
        outside = [not low <= distance <= high for low, high in bands]
        assert found == ternary(outside)


@pytest.mark.parametrize("policy", ["common_practice", "bench_2024"])
def test_the_whole_of_a_shipped_table_reads_as_its_rows_do(policy):
    """Every setup with nothing unknown, at every site."""
    policy = load_policy(policy)
    setups = list(itertools.product(*WORDS.values(), SITES))
    columns = {
        name: list(words)
        for name, words in zip([*WORDS, "site"], zip(*setups, strict=True), strict=True)
    }
    flows = [{"none": 0.0, "present": 3.0}[word] for word in columns.pop("bias_flow")]
    batch = from_values(**columns, bias_flow_lpm=flows)
    expected = []
    for *words, site in setups:
        setup = dict(zip(WORDS, words, strict=True))
        first = next((row for row in policy.placement if holds(row, setup)), None)
        expected.append(placement.CLASSES.index(listed(first, site)))
    assert placement.site_class(batch, policy).tolist() == expected


def test_a_bias_flow_counts_from_the_departments_flow_on():
    policy = load_policy()
    from_lpm = policy.generator_use.bias_flow_runs_from_lpm
    flows = [0.0, np.nextafter(from_lpm, 0), from_lpm, 5.0]
    batch = from_values(generator="ultrasonic", site="wye", bias_flow_lpm=flows)
    assert placement.site_is_discordant(batch, policy).codes.tolist() == [0, 0, 2, 2]


def test_another_site_can_be_asked_about():
    policy = load_policy()
    batch = from_values(generator="jet", site="wye", bias_flow_lpm=[3.0, None])
    inlet = np.array([SITES.index("humidifier_inlet")] * 2)
    assert placement.class_of(batch, policy, inlet).tolist() == [
        placement.CLASSES.index("preferred"),
        -1,
    ]
