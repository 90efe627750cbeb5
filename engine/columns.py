"""Every column of the log, and every column the engine adds, declared once.

The data definition, the row checks, the import template, the data dictionary, the
labels on screen and the codes the physics reads all derive from this file.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

Kind = Literal["id", "token", "word", "number", "count", "yes_no", "time", "text"]

UNKNOWN = "unknown"


@dataclass(frozen=True, kw_only=True)
class Column:
    """One named series: what it holds, in which unit, and what it may hold."""

    name: str
    kind: Kind
    label: str
    help: str = ""
    unit: str = ""
    words: tuple[str, ...] = ()
    low: float | None = None
    high: float | None = None
    required: bool = False


@dataclass(frozen=True, kw_only=True)
class Table:
    """One table of the log; ``key`` names the column no two rows may share."""

    name: str
    label: str
    columns: tuple[Column, ...]
    key: str | None = None

    def column(self, name: str) -> Column:
        """The column of that name; KeyError if the table has none."""
        return {column.name: column for column in self.columns}[name]


def _id(name: str, label: str, help: str = "") -> Column:
    return Column(name=name, kind="id", label=label, help=help, required=True)


def _token(name: str, label: str, help: str = "", required: bool = False) -> Column:
    return Column(name=name, kind="token", label=label, help=help, required=required)


def _word(name: str, label: str, words: str, help: str = "") -> Column:
    return Column(
        name=name,
        kind="word",
        label=label,
        help=help,
        words=(*words.split(), UNKNOWN),
    )


def _number(
    name: str, label: str, unit: str, low: float, high: float, help: str = ""
) -> Column:
    return Column(
        name=name, kind="number", label=label, help=help, unit=unit, low=low, high=high
    )


def _count(name: str, label: str, high: float, help: str = "") -> Column:
    return Column(
        name=name, kind="count", label=label, help=help, unit="1", low=0, high=high
    )


def _yes_no(name: str, label: str, help: str = "") -> Column:
    return Column(name=name, kind="yes_no", label=label, help=help)


def _time(name: str, label: str, help: str = "", required: bool = False) -> Column:
    return Column(name=name, kind="time", label=label, help=help, required=required)


def _text(name: str, label: str, help: str = "") -> Column:
    return Column(name=name, kind="text", label=label, help=help)


GENERATORS = "jet breath_enhanced_jet vibrating_mesh ultrasonic pmdi_spacer"
SITES = (
    "ventilator_outlet humidifier_inlet humidifier_outlet inspiratory_limb wye "
    "airway_side expiratory_limb"
)
DRUG_CLASSES = (
    "bronchodilator steroid anti_infective mucoactive pulmonary_vasodilator other"
)
MODES = "vcv pcv prvc psv simv aprv cpap other"
SENSORS = "expiratory_flow inspiratory_flow pressure oxygen"
HARMS = "death severe moderate mild none"

TREATMENT = Table(
    name="treatment",
    label="Treatments",
    key="treatment_id",
    columns=(
        _id("treatment_id", "Treatment"),
        _word("status", "Status", "given not_given"),
        _time("started_at", "Started", "When the treatment began", required=True),
        _time("ended_at", "Ended"),
        _time("charted_at", "Charted", "When the entry was typed"),
        _token("unit_token", "Unit"),
        _token("bed_token", "Bed"),
        _token("patient_token", "Patient token", "Opaque token, never a record number"),
        _token("ventilator_token", "Ventilator"),
        _token("drug", "Drug", "Generic name as charted"),
        _word("drug_class", "Drug class", DRUG_CLASSES),
        _number("nominal_dose_mg", "Nominal dose", "mg", 0, 5000),
        _number("fill_volume_ml", "Fill volume", "mL", 0, 100),
        _word("generator", "Generator", GENERATORS),
        _word("synchrony", "Output", "continuous inspiration_synchronised"),
        _word("gas_source", "Driving gas", "none ventilator external"),
        _number("generator_gas_lpm", "Generator gas flow", "L/min", 0, 20),
        _count("actuations_count", "Actuations", 100),
        _number("mmad_um", "Droplet MMAD", "um", 0.1, 20),
        _number("gsd", "Geometric standard deviation", "1", 1, 5),
        _word("circuit", "Circuit", "dual_limb single_limb"),
        _word("site", "Site", SITES),
        _number("distance_from_wye_cm", "Distance from the Y", "cm", 0, 400),
        _word("humidification", "Humidification", "heated_humidifier hme hmef none"),
        _yes_no("heated_humidifier_on", "Heated humidifier on"),
        _word("hme_state", "HME", "none in_line bypassed removed"),
        _yes_no("humidification_resumed", "Humidification resumed after"),
        _word("airway", "Airway", "endotracheal tracheostomy"),
        _number("tube_id_mm", "Tube inner diameter", "mm", 2, 12),
        _word("mode", "Mode", MODES),
        _text("mode_text", "Mode as charted"),
        _yes_no("spontaneous_breaths", "Spontaneous breaths"),
        _number("bias_flow_lpm", "Bias flow", "L/min", 0, 60),
        _yes_no("bias_flow_assumed", "Bias flow from the ventilator default"),
        _number("tidal_volume_ml", "Tidal volume", "mL", 2, 3000),
        _number("respiratory_rate_bpm", "Respiratory rate", "/min", 1, 150),
        _number("inspiratory_time_s", "Inspiratory time", "s", 0.1, 15),
        _number("inspiratory_pause_s", "Inspiratory pause", "s", 0, 5),
        _number("peak_inspiratory_flow_lpm", "Peak inspiratory flow", "L/min", 1, 250),
        _number("peep_cmh2o", "PEEP", "cm[H2O]", 0, 50),
        _word("expiratory_filter", "Expiratory filter", "present absent"),
        _token("filter_id", "Filter"),
        _text("note", "Note"),
    ),
)

FILTER_USE = Table(
    name="filter_use",
    label="Filters in use",
    key="filter_id",
    columns=(
        _id("filter_id", "Filter"),
        _token("ventilator_token", "Ventilator", required=True),
        _word("filter_kind", "Filter kind", "pleated electrostatic hmef"),
        _time("installed_at", "Installed", required=True),
        _time("removed_at", "Removed"),
        _text("removal_reason", "Reason removed"),
        _number(
            "new_resistance_cmh2o_per_lps",
            "Resistance when new",
            "cm[H2O].s/L",
            0.1,
            30,
        ),
    ),
)

FILTER_READING = Table(
    name="filter_reading",
    label="Filter readings",
    key="reading_id",
    columns=(
        _id("reading_id", "Reading"),
        _token("filter_id", "Filter"),
        _token("ventilator_token", "Ventilator"),
        _time("read_at", "Read", required=True),
        _number("flow_lpm", "Test flow", "L/min", 1, 250),
        _number("pressure_drop_cmh2o", "Pressure drop", "cm[H2O]", 0, 100),
        _word("reading_source", "Taken from", "bench ventilator manometer"),
    ),
)

SENSOR_CHECK = Table(
    name="sensor_check",
    label="Sensor checks",
    key="check_id",
    columns=(
        _id("check_id", "Check"),
        _token("ventilator_token", "Ventilator", required=True),
        _word("sensor", "Sensor", SENSORS),
        _time("checked_at", "Checked", required=True),
        _word("outcome", "Outcome", "passed failed recalibrated replaced"),
        _number("inspired_volume_ml", "Inspired volume", "mL", 1, 5000),
        _number("exhaled_volume_ml", "Exhaled volume", "mL", 0, 5000),
    ),
)

SERVICE_EVENT = Table(
    name="service_event",
    label="Service events and alarms",
    key="event_id",
    columns=(
        _id("event_id", "Event"),
        _token("ventilator_token", "Ventilator", required=True),
        _time("happened_at", "Happened", required=True),
        _word(
            "kind",
            "Kind",
            "alarm fault repair filter_change circuit_change drain cleaning self_test",
        ),
        _token("code", "Code"),
        _text("note", "Note"),
    ),
)

INCIDENT = Table(
    name="incident",
    label="Incidents",
    key="incident_id",
    columns=(
        _id("incident_id", "Incident"),
        _token("ventilator_token", "Ventilator", required=True),
        _time("happened_at", "Happened", required=True),
        _word("sensor", "Sensor", SENSORS),
        _word("harm", "Harm", HARMS),
        _text("note", "Note"),
    ),
)

ROOM = Table(
    name="room",
    label="Rooms",
    key="unit_token",
    columns=(
        _id("unit_token", "Unit"),
        _number("volume_m3", "Room volume", "m3", 5, 2000),
        _number("air_changes_per_h", "Air changes", "/h", 0, 100),
        _count("people_count", "People present", 50),
    ),
)

CLOCK_OFFSET = Table(
    name="clock_offset",
    label="Clock offsets",
    columns=(
        _token("ventilator_token", "Ventilator", required=True),
        _time("measured_at", "Measured", required=True),
        _number(
            "offset_s",
            "Ventilator clock minus reference clock",
            "s",
            -172800,
            172800,
            "Negative when the ventilator clock is slow",
        ),
    ),
)

BAD_ROW = Table(
    name="bad_row",
    label="Refused rows",
    columns=(
        _text("source", "Source"),
        _count("row", "Row", 1e12),
        _text("table", "Table"),
        _text("column", "Column"),
        _text("code", "Code"),
        _text("value", "Value"),
        _text("message", "Why"),
        _text("raw", "Row as received"),
    ),
)

LOG_INFO = Table(
    name="log_info",
    label="About this log",
    columns=(
        _count("schema_version", "Schema version", 1e6),
        _text("site_zone", "Time zone of the site"),
        _time("created_at", "Written"),
        _text("sources", "Sources"),
    ),
)

SCHEMA_VERSION = 1

TABLES: tuple[Table, ...] = (
    TREATMENT,
    FILTER_USE,
    FILTER_READING,
    SENSOR_CHECK,
    SERVICE_EVENT,
    INCIDENT,
    ROOM,
    CLOCK_OFFSET,
    BAD_ROW,
    LOG_INFO,
)

# The tables whose rows are checked; the other two describe the log itself.
RECORD_TABLES = TABLES[:-2]

BAD_ROW_CODES: dict[str, str] = {
    "missing": "a value the row cannot do without is missing",
    "out_of_range": "a number lies outside what the column can hold",
    "unknown_word": "a word is not one of those the column allows",
    "wrong_order": "an end lies before its beginning",
    "duplicate": "the id stands in another row already",
    "unreadable": "the value cannot be read as the kind the column holds",
    "identifier": "the value looks like a name, a record number or a birth date",
}

# What the log room works out around each treatment before the rules are asked.
CONTEXT = Table(
    name="context",
    label="What stood around the treatment",
    key="treatment_id",
    columns=(
        _id("treatment_id", "Treatment"),
        _token("local_month", "Month", "Local calendar month of the start"),
        _word("shift", "Shift", "day evening night"),
        _number("duration_min", "Run time", "min", -1e6, 1e6),
        _token("filter_in_use_id", "Filter in use"),
        _word("filter_kind", "Filter kind", "pleated electrostatic hmef"),
        _number("filter_age_h", "Filter in use for", "h", 0, 1e5),
        _number(
            "filter_reading_cmh2o_per_lps",
            "Last filter resistance",
            "cm[H2O].s/L",
            0,
            200,
            "Last reading before the start, brought to the reference flow",
        ),
        _number("filter_reading_age_h", "Age of the last reading", "h", 0, 1e5),
        _yes_no("filter_reading_has_flow", "Last reading has its flow"),
        _yes_no(
            "filter_reading_in_window",
            "Reading in the window before the start",
            "No where the filter is known and was not read; unknown without a filter",
        ),
        _word(
            "filter_trend",
            "Filter",
            "steady rising near_limit over_limit too_few_readings",
            "State of the filter from its readings up to the treatment",
        ),
        _yes_no("filter_change_suspected", "First use after a suspected change"),
        _word(
            "sensor_last_outcome",
            "Last expiratory flow check",
            "passed failed recalibrated replaced",
        ),
        _number("hours_since_passed_check_h", "Since last passed check", "h", 0, 1e6),
        _count(
            "unfiltered_since_check_count",
            "Unfiltered treatments since the last passed check",
            1e7,
        ),
        _yes_no("volume_drifting", "Exhaled / inspired volume drifting"),
        _number("hours_to_fault_h", "Until the next flow-sensor fault", "h", 0, 1e6),
        _yes_no(
            "fault_soon_after",
            "Fault soon after",
            "No only where the ventilator has later records that show none",
        ),
        _number("clock_offset_s", "Clock offset", "s", -172800, 172800),
        _number("room_volume_m3", "Room volume", "m3", 5, 2000),
        _number("room_air_changes_per_h", "Air changes", "/h", 0, 100),
        _count("people_count", "People present", 50),
    ),
)

# Where the nominal dose went, in the order the aerosol meets the places.
FRACTIONS: dict[str, str] = {
    "generator_residual": "stays in the generator",
    "limb": "lost on the inspiratory side",
    "hme": "caught by the HME",
    "unused_past_wye": "swept past the Y unused",
    "tube": "left on the artificial airway",
    "tracheobronchial": "larger airways",
    "alveolar": "alveoli",
    "expiratory_limb": "lost on the expiratory limb",
    "filter": "held by the expiratory filter",
    "sensor_side": "reached the expiratory sensors",
    "room": "reached the room directly",
}

# Sites a generator can be logged at where placing it is a choice; the expiratory
# limb is a fault, never an alternative.
CHOICE_SITES: tuple[str, ...] = tuple(
    word for word in SITES.split() if word != "expiratory_limb"
)

ANSWERS: tuple[str, ...] = ("fires", "silent", "not_asked", "cannot_tell")


def words_of(column: str) -> tuple[str, ...]:
    """The allowed words of a treatment or context column, ``unknown`` last.

    Raises   KeyError if the column is not a word column.
    """
    return _WORDS[column]


def code_of(column: str, word: str) -> int:
    """The code a batch carries for this word of this column.

    Raises   ValueError if the column does not allow the word.
    """
    words = words_of(column)
    if word not in words:
        raise ValueError(f"{column} must be one of {', '.join(words)}; got {word}")
    return -1 if word == UNKNOWN else words.index(word)


def labels(tables: Sequence[Table] = (*TABLES, CONTEXT)) -> dict[str, str]:
    """Label by column name, units included, for table heads on screen."""
    return {
        column.name: f"{column.label}, {shown_unit(column.unit)}"
        if column.unit not in {"", "1"}
        else column.label
        for table in tables
        for column in table.columns
    }


def shown_unit(unit: str) -> str:
    """A UCUM unit as people at the bedside write it."""
    return _SHOWN_UNITS.get(unit, unit)


_SHOWN_UNITS = {
    "cm[H2O]": "cmH2O",
    "cm[H2O].s/L": "cmH2O/(L/s)",
    "um": "µm",
    "m3": "m³",
    "1": "",
}

_WORDS = {
    column.name: column.words
    for table in (CONTEXT, TREATMENT)
    for column in table.columns
    if column.kind == "word"
}
