"""A whole invented department: its log, and apart from it what was really so."""

from __future__ import annotations

import os
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd

from engine.columns import TREATMENT
from engine.errors import EngineError, NothingToReview, OutputUnwritable
from engine.log import open_log, write_log
from engine.simulate import mounted, orders, service, setups
from engine.simulate.draws import stream, unsaid
from engine.simulate.places import ROOMS, SITE_ZONE, Places, places

PEOPLE_PRESENT = 2

INVENTED = "an invented department"


@dataclass(frozen=True)
class Department:
    """``tables`` as the log holds them; ``truth`` one row a planted fault.

    Truth   kind, rule_id that should find it, table and id of the row it sits in.
    """

    tables: dict[str, pd.DataFrame]
    truth: pd.DataFrame
    sessions: pd.DataFrame
    places: Places


def invent(
    months: int = 6, treatments_per_month: int = 800, seed: int = 1
) -> Department:
    """The department of this seed; the same seed gives the same rows.

    Raises   NothingToReview for less than one month or ten treatments a month, or a
             seed below 0.
    """
    if months < 1 or treatments_per_month < 10 or seed < 0:
        raise NothingToReview(
            "an invented department needs at least 1 month, 10 treatments a month and"
            f" a seed from 0 on; got {months}, {treatments_per_month} and {seed}"
        )
    where = places(months, treatments_per_month, stream(seed, "places"))
    patients = orders.stays(where, seed)
    due = orders.due(where, patients, seed, months * treatments_per_month)
    treated = setups.set_up(due, where, seed)
    uses = mounted.fitted(where, treated, seed)
    treated = _with_filter(treated, uses, seed)
    tables = {
        "treatment": treated[[c.name for c in TREATMENT.columns if c.name in treated]],
        "filter_use": uses.drop(
            columns=["place", "from_h", "to_h", "story", "new_so", "changed_h"]
        ),
        "filter_reading": mounted.readings(treated, uses, where, seed),
        "sensor_check": service.checks(where, seed),
        "service_event": service.events(where, uses, seed),
        "incident": service.incidents(where),
        "room": _rooms(),
        "clock_offset": service.clocks(where, seed),
        "bad_row": _refused(treated, seed),
    }
    return Department(tables, _truth(treated, uses, where), _sessions(where), where)


def write_department(
    path: str | os.PathLike[str],
    months: int = 6,
    treatments_per_month: int = 800,
    seed: int = 1,
) -> Department:
    """Writes the log, and its truth beside it as ``<name>.truth.csv``.

    The same seed gives the same bytes. The app never opens the truth. Takes the place
    of an earlier invented department only.
    Raises   OutputUnwritable where something else is there, or nothing can be.
    """
    path = Path(path)
    truth = path.with_suffix(".truth.csv")
    _refuse_to_overwrite(path, truth)
    made = invent(months, treatments_per_month, seed)
    try:
        _write(path, truth, made, seed)
    except OSError as problem:
        raise OutputUnwritable(f"{path} cannot be written: {problem}") from None
    return made


def _write(path: Path, truth: Path, made: Department, seed: int) -> None:
    write_log(
        path,
        made.tables,
        site_zone=SITE_ZONE,
        created_at=made.places.end.to_pydatetime(),
        sources=f"{INVENTED}, seed {seed}; nothing in it is real",
    )
    made.truth.to_csv(truth, index=False, lineterminator="\n")


def _refuse_to_overwrite(path: Path, truth: Path) -> None:
    if not path.parent.is_dir():
        raise OutputUnwritable(f"{path.parent} is not a folder; make it first")
    if not path.exists():
        if truth.exists():
            raise OutputUnwritable(f"{truth} is there already; give another name")
        return
    try:
        with open_log(path) as log:
            sources = str(log.frame("SELECT sources FROM log_info")["sources"].iloc[0])
    except EngineError:
        sources = ""
    if not sources.startswith(INVENTED):
        raise OutputUnwritable(f"{path} is there already; give another name")


def _with_filter(treated: pd.DataFrame, uses: pd.DataFrame, seed: int) -> pd.DataFrame:
    rng = stream(seed, "filter names")
    row = mounted.on_filter(treated, uses)
    name = unsaid(row < 0, uses["filter_id"].to_numpy()[np.maximum(row, 0)])
    said = (treated["expiratory_filter"] == "present").to_numpy()
    written = said & (rng.random(len(treated)) < 0.6)
    return treated.assign(filter_id=unsaid(~written, name), use=row)


def _rooms() -> pd.DataFrame:
    rows = [(unit, volume, changes) for unit, (volume, changes) in ROOMS.items()]
    names = ["unit_token", "volume_m3", "air_changes_per_h"]
    return pd.DataFrame(rows, columns=names).assign(people_count=PEOPLE_PRESENT)


def _refused(treated: pd.DataFrame, seed: int) -> pd.DataFrame:
    """Rows an intake refused: repeats and a few impossible entries."""
    rng = stream(seed, "refused")
    n = max(4, round(0.015 * len(treated)))
    chosen = np.sort(rng.choice(len(treated), n, replace=False))
    names = treated["treatment_id"].to_numpy()[chosen]
    table = pd.DataFrame(
        {
            "source": "flowsheet export",
            "row": chosen + 2,
            "table": "treatment",
            "column": "treatment_id",
            "code": "duplicate",
            "value": names,
            "message": [
                f"treatment_id {name} stands in an earlier row" for name in names
            ],
            "raw": [f'{{"treatment_id": "{name}"}}' for name in names],
        }
    )
    odd = [
        ("tidal_volume_ml", "out_of_range", "7.8", "must be from 2 to 3000"),
        ("site", "unknown_word", "by the window", "is not one of the sites"),
        ("started_at", "unreadable", "3/4/26 8:07", "is not an ISO 8601 time"),
    ]
    for place, (column, code, value, why) in enumerate(odd):
        table.loc[place, ["column", "code", "value"]] = [column, code, value]
        table.loc[place, "message"] = f"{column} {why}; got {value}"
    return table


def _sessions(where: Places) -> pd.DataFrame:
    return pd.DataFrame(
        {
            "held_at": [where.taught],
            "unit_token": ["all units"],
            "topic": ["Where each generator goes, HMEs, expiratory filters"],
        }
    )


def _truth(treated: pd.DataFrame, uses: pd.DataFrame, where: Places) -> pd.DataFrame:
    given = treated[treated["status"] == "given"]
    rows: list[tuple[str, str, str, str]] = []

    def plant(kind: str, rule_id: str, table: str, names: pd.Series | list) -> None:
        rows.extend((kind, rule_id, table, str(name)) for name in names)

    wye = given[given["jet_at_wye_night"] & (given["site"] == "wye")]
    plant("jet at the Y by night", "PL01", "treatment", wye["treatment_id"])
    upstream = given["site"].notna() & (given["site"] != "airway_side")
    hme = given[upstream & (given["hme_state"] == "in_line")]
    plant("HME left in", "HU01", "treatment", hme["treatment_id"])
    bare = given[given["expiratory_filter"] == "absent"]
    dual = bare[bare["circuit"] == "dual_limb"]
    dual = dual[dual["generator"].notna() & (dual["generator"] != "pmdi_spacer")]
    plant("no expiratory filter", "FI01", "treatment", dual["treatment_id"])
    for story, kind, rule in (
        ("runaway", "filter running away", "FI02"),
        ("unlogged", "filter changed without an entry", "FI05"),
    ):
        plant(kind, rule, "filter_use", uses[uses["story"] == story]["filter_id"])
    plant("sensor drifting", "SE03", "ventilator", [where.fouled])
    plant("many unfiltered since the last check", "SE02", "ventilator", [where.fouled])
    plant("fault after unfiltered treatments", "SE04", "ventilator", [where.fouled])
    clocks = [where.slow_clock, where.summer_clock]
    plant("clock off", "RE04", "ventilator", clocks)
    plant("aerosol film", "", "incident", ["I-2"])
    plant("electronics", "", "incident", ["I-1"])
    return pd.DataFrame(rows, columns=["kind", "rule_id", "table", "id"])
