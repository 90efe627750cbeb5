"""How each treatment was set up, as it was written down."""

from __future__ import annotations

import numpy as np
import pandas as pd

from engine.simulate import prevalence
from engine.simulate.draws import hidden, hours, stream, unsaid, words
from engine.simulate.places import FOULED_BARE_DAYS, Places, local_hour

TRACHEOSTOMY = 0.85  # of the step-down unit
SINGLE_LIMB = 0.25  # of the step-down unit
OUTPUT_ML_MIN = {"jet": 0.25, "vibrating_mesh": 0.4, "ultrasonic": 0.8}
MODE_TEXT = {
    "vcv": "AC/VC",
    "pcv": "AC/PC",
    "prvc": "PRVC",
    "psv": "PS",
    "simv": "SIMV/VC",
    "aprv": "APRV",
    "cpap": "CPAP",
    None: "VC+PS mix",
}
_GOOD = {
    ("jet", False): ("inspiratory_limb",),
    ("jet", True): ("humidifier_inlet", "ventilator_outlet"),
    ("vibrating_mesh", False): ("inspiratory_limb", "wye"),
    ("vibrating_mesh", True): ("humidifier_inlet", "ventilator_outlet"),
    ("ultrasonic", False): ("inspiratory_limb", "wye"),
    ("ultrasonic", True): ("humidifier_inlet", "ventilator_outlet"),
    ("pmdi_spacer", False): ("inspiratory_limb",),
    ("pmdi_spacer", True): ("inspiratory_limb",),
}
_OTHER = {
    "jet": ("wye", "humidifier_outlet", "inspiratory_limb", "airway_side"),
    "vibrating_mesh": ("wye", "airway_side", "inspiratory_limb", "humidifier_outlet"),
    "ultrasonic": ("airway_side", "humidifier_outlet", "expiratory_limb"),
    "pmdi_spacer": ("wye", "airway_side", "humidifier_outlet"),
}


def set_up(due: pd.DataFrame, places: Places, seed: int) -> pd.DataFrame:
    """The treatment table, and beside it what was so but not always written."""
    table = due.copy()
    table["treatment_id"] = [f"T{n:07d}" for n in range(1, len(due) + 1)]
    table["unit_token"] = places.unit[due["place"]]
    table["ventilator_token"] = places.ventilator[due["place"]]
    table["after"] = (due["started_at"] >= places.taught).to_numpy()
    _drugs_and_generators(table, seed)
    _breathing(table, places, seed)
    _humidity(table, seed)
    _sites(table, seed)
    _filters(table, places, seed)
    _times(table, seed)
    return table


def _drugs_and_generators(table: pd.DataFrame, seed: int) -> None:
    rng, n = stream(seed, "generators"), len(table)
    drugs = prevalence.DRUGS
    index = table["drug"].to_numpy()
    table["drug_class"] = np.array([d.drug_class for d in drugs], object)[index]
    table["nominal_dose_mg"] = np.array([d.dose_mg for d in drugs])[index]
    fill = np.array([d.fill_ml for d in drugs])[index]
    generator = words(rng, prevalence.GENERATORS, n)
    inhaled = (table["drug_class"] == "bronchodilator").to_numpy()
    swap = (generator == "pmdi_spacer") & ~inhaled
    generator[swap] = np.where(rng.random(swap.sum()) < 0.6, "jet", "vibrating_mesh")
    table["drug"] = np.array([d.name for d in drugs], object)[index]
    generator[(table["drug"] == "epoprostenol").to_numpy()] = "vibrating_mesh"
    pmdi = generator == "pmdi_spacer"
    jet = generator == "jet"
    diluted = np.where(jet & (rng.random(n) < 0.3), fill + 1.0, fill)
    table["generator"] = generator
    table["fill_volume_ml"] = hidden(rng, np.where(pmdi, np.nan, diluted), 0.08)
    table["actuations_count"] = np.where(pmdi, rng.choice([4.0, 6.0, 8.0], n), np.nan)
    table.loc[pmdi, "nominal_dose_mg"] = 0.09 * table.loc[pmdi, "actuations_count"]
    late = rng.random(n) < prevalence.UNSYNCHRONISED_PMDI
    synchrony = np.where(
        pmdi, np.where(late, "continuous", "inspiration_synchronised"), "continuous"
    ).astype(object)
    driven = jet & (rng.random(n) < 0.12)
    synchrony[driven] = "inspiration_synchronised"
    table["synchrony"] = unsaid(~generator.astype(bool), synchrony)
    external = rng.random(n) < prevalence.EXTERNAL_GAS_OF_JETS
    gas = np.where(jet, np.where(external & ~driven, "external", "ventilator"), "none")
    table["gas_source"] = hidden(rng, gas.astype(object), 0.10)
    flow = np.where(jet, rng.choice([6.0, 7.0, 8.0], n), np.nan)
    table["generator_gas_lpm"] = hidden(rng, flow, 0.25)


def _breathing(table: pd.DataFrame, places: Places, seed: int) -> None:
    rng, n = stream(seed, "breathing"), len(table)
    code, patients = pd.factorize(table["patient_token"])
    many = len(patients)
    step_down = (table["unit_token"] == "Cedar step-down").to_numpy()
    mode = words(rng, prevalence.MODES, many)[code]
    table["mode"], table["mode_text"] = mode, [MODE_TEXT[m] for m in mode]
    supported = np.isin(mode.astype(str), ["psv", "cpap"])
    tidal = rng.normal(430, 60, many).clip(280, 620)[code] + rng.normal(0, 15, n)
    rate = rng.integers(14, 25, many)[code] + rng.integers(-1, 2, n)
    ti = rng.choice([0.8, 0.9, 1.0, 1.1, 1.2], many)[code]
    ti = np.where(mode == "aprv", 3.5, ti)
    rate = np.where(mode == "aprv", 14, rate).astype(float)
    falling = np.isin(mode.astype(str), ["pcv", "prvc", "psv", "aprv"])
    peak = tidal / ti * 60 / 1000 * np.where(falling, rng.uniform(1.5, 1.9, n), 1.0)
    table["tidal_volume_ml"] = hidden(rng, tidal.round(), 0.04)
    table["respiratory_rate_bpm"] = hidden(rng, rate, 0.02)
    table["inspiratory_time_s"] = hidden(rng, ti, 0.10)
    table["inspiratory_pause_s"] = np.where(mode == "vcv", 0.2, np.nan)
    flow = np.where(mode == "aprv", np.nan, peak.round())
    table["peak_inspiratory_flow_lpm"] = hidden(rng, flow, 0.30)
    table["peep_cmh2o"] = rng.choice([5.0, 5.0, 6.0, 8.0, 10.0, 12.0], many)[code]
    table["spontaneous_breaths"] = unsaid(~supported, True)
    airway = step_down & (rng.random(many)[code] < TRACHEOSTOMY)
    table["airway"] = np.where(airway, "tracheostomy", "endotracheal")
    table["tube_id_mm"] = hidden(rng, rng.choice([7.0, 7.5, 8.0, 8.0], many)[code], 0.1)
    single = step_down & (rng.random(many)[code] < SINGLE_LIMB)
    table["circuit"] = np.where(single, "single_limb", "dual_limb")
    bias = places.bias_lpm[table["place"].to_numpy()]
    table["bias_so"] = bias
    said = rng.random(n)
    table["bias_flow_lpm"] = np.where(said < prevalence.MISSING_BIAS, np.nan, bias)
    assumed = said < prevalence.MISSING_BIAS + prevalence.ASSUMED_BIAS
    table["bias_flow_assumed"] = unsaid(said < prevalence.MISSING_BIAS, assumed)


def _humidity(table: pd.DataFrame, seed: int) -> None:
    rng, n = stream(seed, "humidity"), len(table)
    code, patients = pd.factorize(table["patient_token"])
    unit = table["unit_token"].to_numpy()
    heated_share = np.select([unit == "Alder ICU", unit == "Birch ICU"], [0.9, 0.35], 0)
    heated = rng.random(len(patients))[code] < heated_share
    passive = np.where(rng.random(len(patients))[code] < 0.5, "hme", "hmef")
    kind = np.where(heated, "heated_humidifier", passive).astype(object)
    table["humidification"] = hidden(rng, kind, prevalence.MISSING_FIELD)
    heater = words(rng, prevalence.HEATER, n)
    on = unsaid(~heater.astype(bool), heater == "on")
    table["heated_humidifier_on"] = unsaid(~heated, on)
    birch_before = (unit == "Birch ICU") & ~table["after"].to_numpy()
    left_in = np.where(
        birch_before, prevalence.HME_IN_LINE_BIRCH_BEFORE, prevalence.HME_IN_LINE
    )
    drawn = rng.random(n)
    in_line = drawn < left_in
    state = np.where(in_line, "in_line", np.where(drawn < 0.75, "removed", "bypassed"))
    state = np.where(heated, "none", state).astype(object)
    table["hme_in_line_so"] = in_line & ~heated
    silent = ~heated & (rng.random(n) < prevalence.HME_UNSAID)
    table["hme_state"] = unsaid(silent, state)
    off = (heated & (heater == "off")) | (~heated & ~in_line)
    resumed = rng.choice(np.array([True, False, None], object), n, p=[0.7, 0.05, 0.25])
    table["humidification_resumed"] = unsaid(~off, resumed)


def _sites(table: pd.DataFrame, seed: int) -> None:
    rng, n = stream(seed, "sites"), len(table)
    after = table["after"].to_numpy()
    share = np.where(
        after, prevalence.PREFERRED_SITE_AFTER, prevalence.PREFERRED_SITE_BEFORE
    )
    good = rng.random(n) < share
    bias = table["bias_so"].to_numpy() > 0
    generator = table["generator"].to_numpy()
    pick = rng.random(n)
    site = np.full(n, None, dtype=object)
    for (kind, runs), choices in _GOOD.items():
        here = good & (generator == kind) & (bias == runs)
        site[here] = _picked(choices, pick[here])
    for kind, choices in _OTHER.items():
        here = ~good & (generator == kind)
        site[here] = _picked(choices, pick[here])
    nothing = ~generator.astype(bool)
    site[nothing] = _picked(("wye", "inspiratory_limb"), pick[nothing])
    hour = local_hour(table["started_at"].to_numpy())
    night = (hour >= 23) | (hour < 7)
    habit = np.where(
        after,
        prevalence.JET_AT_WYE_NIGHTS_AFTER,
        prevalence.JET_AT_WYE_NIGHTS_BEFORE,
    )
    alder_nights = night & (table["unit_token"] == "Alder ICU").to_numpy()
    at_wye = alder_nights & (generator == "jet") & (rng.random(n) < habit)
    site[at_wye] = "wye"
    table.loc[at_wye, "synchrony"] = "continuous"
    table["jet_at_wye_night"] = at_wye
    limb = site == "inspiratory_limb"
    far = np.where(generator == "jet", rng.choice([15.0, 45.0, 50.0, 60.0], n), 15.0)
    table["distance_from_wye_cm"] = hidden(rng, np.where(limb, far, np.nan), 0.3)
    table["site"] = hidden(rng, site, prevalence.MISSING_FIELD)
    table["generator"] = generator


def _filters(table: pd.DataFrame, places: Places, seed: int) -> None:
    rng, n = stream(seed, "filter states"), len(table)
    said = np.where(
        table["after"].to_numpy(),
        words(rng, prevalence.FILTER_AFTER, n),
        words(rng, prevalence.FILTER_BEFORE, n),
    )
    token = table["ventilator_token"].to_numpy()
    late = (
        table["started_at"] >= places.end - pd.Timedelta(days=FOULED_BARE_DAYS)
    ).to_numpy()
    fouled = (token == places.fouled) & late
    said[fouled] = unsaid(rng.random(fouled.sum()) >= 0.9, "absent")
    always = np.isin(token.astype(str), [places.electronics, places.vasodilator])
    always |= np.isin(token.astype(str), list(places.unlogged))
    said[always] = "present"
    single = (table["circuit"] == "single_limb").to_numpy() & ~always
    said[single] = None
    table["filter_so"] = np.where(
        said.astype(bool), said == "present", rng.random(n) < 0.75
    )
    table["filter_so"] &= ~single
    table["expiratory_filter"] = said


def _times(table: pd.DataFrame, seed: int) -> None:
    rng, n = stream(seed, "times"), len(table)
    rate = np.array([OUTPUT_ML_MIN.get(str(kind), 0.3) for kind in table["generator"]])
    volume = table["fill_volume_ml"].fillna(3.0).to_numpy()
    minutes = volume / rate * rng.uniform(0.75, 1.3, n)
    minutes = np.where(table["generator"] == "pmdi_spacer", 3.0, minutes)
    odd = rng.random(n) < 0.03
    minutes = np.where(odd, minutes * rng.choice([0.25, 4.0], n), minutes)
    ended = table["started_at"].to_numpy() + hours(minutes / 60.0)
    swapped = rng.random(n) < prevalence.FALSE_ENTRIES
    ended = np.where(swapped, table["started_at"].to_numpy() - hours(0.5), ended)
    gone = rng.random(n) < prevalence.MISSING_END
    table["ended_at"] = np.where(gone, np.datetime64("NaT"), ended)
    table["charted_at"] = table["started_at"].to_numpy() + hours(rng.gamma(1.5, 0.5, n))
    missed = rng.random(n) < prevalence.NOT_GIVEN
    table["status"] = np.where(missed, "not_given", "given")


def _picked(choices: tuple[str, ...], drawn: np.ndarray) -> np.ndarray:
    names = np.array(choices, dtype=object)
    return names[np.minimum((drawn * len(names)).astype(int), len(names) - 1)]
