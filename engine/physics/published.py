"""Published and independently computed values beside what the engine gives for them.

The tables lie in engine/evidence/published, shipped with the engine: one row a value,
printed as it was printed, its source and tolerance beside it. ``verify_lines`` is what
``aerosol-review verify`` prints; the tests hold the same rows.
"""

from __future__ import annotations

import csv
import json
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from importlib import resources
from typing import Any, TypeAlias

import numpy as np

from engine.evidence import droplet
from engine.evidence import tube as tube_figures
from engine.physics import air, breathing, droplets, limb, lung, room, saline, tube, wye
from engine.units import ML_PER_L, S_PER_MIN

WYE_TOLERANCE = 0.01
CLEARANCE_TOLERANCE_MIN = 0.6  # the table rounds to whole minutes
ML_PER_S_PER_LPM = ML_PER_L / S_PER_MIN

Inputs = dict[str, Any]
Values: TypeAlias = np.ndarray | float


@dataclass(frozen=True, kw_only=True)
class VerifyLine:
    """One value from outside and what the engine gives for it."""

    table: str
    quantity: str
    inputs: str
    published: float
    engine: float
    tolerance: float  # largest difference allowed
    source: str
    known: str  # read, from memory, or computed by another program

    @property
    def ok(self) -> bool:
        """Whether the two agree."""
        return abs(self.engine - self.published) <= self.tolerance

    @property
    def text(self) -> str:
        """The line as it is printed."""
        mark = "ok " if self.ok else "OUT"
        return (
            f"{mark} {self.quantity} {self.inputs}: published {self.published:.6g}, "
            f"engine {self.engine:.6g}, within {self.tolerance:.2g} "
            f"({self.known}; {self.source})"
        )


def verify_lines() -> list[VerifyLine]:
    """Every value of the shipped tables that the physics covers, one line each."""
    return [*_physics_lines(), *_wye_lines(), *_clearance_lines()]


def engine_value(quantity: str, inputs: Inputs) -> float:
    """What the engine gives for a quantity named as in the tables.

    Raises   KeyError for a quantity the physics does not cover.
    """
    if quantity not in CHECKS:
        family = next(name for name in _FAMILIES if quantity.startswith(name))
        return float(_FAMILIES[family](quantity.removeprefix(family), inputs))
    return float(CHECKS[quantity](inputs))


def covers(quantity: str) -> bool:
    """Whether the physics has something to say about this quantity."""
    return quantity in CHECKS or quantity.startswith(tuple(_FAMILIES))


# --- the tables ------------------------------------------------------------------


def published_table(name: str) -> list[dict[str, str]]:
    """The rows of one of the shipped tables, as text."""
    folder = resources.files("engine.evidence") / "published"
    return list(csv.DictReader((folder / name).read_text("utf-8").splitlines()))


def _physics_lines() -> Iterator[VerifyLine]:
    for row in published_table("physics_values.csv"):
        value = float(row["value"])
        relative = float(row["tolerance_relative"] or 0)
        absolute = float(row["tolerance_absolute"] or 0)
        yield VerifyLine(
            table="physics_values.csv",
            quantity=row["quantity"],
            inputs=row["inputs"],
            published=value,
            engine=engine_value(row["quantity"], json.loads(row["inputs"])),
            tolerance=max(
                relative * abs(value), absolute, half_last_place(row["value"])
            ),
            source=row["source"],
            known=row["known"],
        )


def half_last_place(printed: str) -> float:
    """Half of the last place of a value as it was printed."""
    digits, _, power = printed.lower().partition("e")
    places = len(digits.partition(".")[2])
    return 0.5 * 10.0 ** (int(power or 0) - places)


def _wye_lines() -> Iterator[VerifyLine]:
    for row in published_table("wye_values.csv"):
        inputs = json.loads(row["inputs"])
        for column, function in _WYE_COLUMNS.items():
            settles = inputs.get("lam_per_s", 0) > 0
            if not row[column] or (column == "one_stirred_tank" and settles):
                continue
            yield VerifyLine(
                table="wye_values.csv",
                quantity=f"split at the Y, {column.replace('_', ' ')}",
                inputs=f"{row['case']} {row['inputs']}",
                published=float(row[column]),
                engine=function(inputs),
                tolerance=WYE_TOLERANCE,
                source="slow reference calculation",
                known="computed",
            )


def _clearance_lines() -> Iterator[VerifyLine]:
    for row in published_table("air_changes.csv"):
        changes = float(row["air_changes_per_h"])
        for column, efficiency in (("minutes_99", 0.99), ("minutes_999", 0.999)):
            yield VerifyLine(
                table="air_changes.csv",
                quantity="clearance_minutes",
                inputs=f"{changes:g} air changes an hour, {efficiency:.1%}",
                published=float(row[column]),
                engine=float(room.clearance_min(changes, efficiency)),
                tolerance=CLEARANCE_TOLERANCE_MIN,
                source=row["source"],
                known=row["known"],
            )


# --- droplets and air ------------------------------------------------------------


def _slip(i: Inputs) -> Values:
    law = i.get("law", droplets.DEFAULT_SLIP)
    return droplets.slip_correction(i["d_um"], i["lambda_um"], law)


def _hinds_slip(i: Inputs) -> Values:
    return droplets.slip_correction(i["d_um"], i["lambda_um"], "hinds1999")


_SLIP_NAMES = {"hinds": "hinds1999", "icrp": "icrp66"}


def _gas(i: Inputs) -> tuple[float, float]:
    """Viscosity and mean free path from temperature where they are not given."""
    kelvin = i.get("T_K", float(droplet.ROOM_K))
    viscosity = i.get("mu", air.air_viscosity_pa_s(kelvin))
    return viscosity, i.get("lambda_um", air.mean_free_path_um(kelvin))


def _slip_of(i: Inputs) -> Values:
    """Slip given as a number, or by the name of its law."""
    slip = i.get("slip", droplets.DEFAULT_SLIP)
    if not isinstance(slip, str):
        return slip
    law = _SLIP_NAMES.get(slip, slip)
    return droplets.slip_correction(i["d_um"], _gas(i)[1], law)


def _relaxation(i: Inputs) -> Values:
    density = i.get("rho", float(droplet.WATER_KG_PER_M3))
    return droplets.relaxation_time_s(i["d_um"], _slip_of(i), _gas(i)[0], density)


def _settling(i: Inputs) -> Values:
    density = i.get("rho", float(droplet.WATER_KG_PER_M3))
    return droplets.settling_velocity_m_per_s(
        i["d_um"], _slip_of(i), _gas(i)[0], density
    )


def _stopping(i: Inputs) -> Values:
    return droplets.stopping_distance_m(_relaxation(i), i["v0"])


def _stokes(i: Inputs) -> Values:
    return droplets.stokes_number(_relaxation(i), i["U"], i["D"])


def _diffusion(i: Inputs) -> Values:
    viscosity, _ = _gas(i)
    return droplets.diffusion_coefficient_m2_per_s(
        i["d_um"], _slip_of(i), viscosity, i["T_K"]
    )


def _aerodynamic(i: Inputs) -> Values:
    return droplets.aerodynamic_diameter_um(
        i["d_um"], i["rho_gcc"], i["chi"], i["lambda_um"]
    )


def _mean_over_sizes(
    mmad_um: float, gsd: float, function: Callable[[np.ndarray], np.ndarray]
) -> float:
    sizes = droplets.size_nodes_um(mmad_um, gsd)
    return float(function(sizes) @ droplets.size_weights())


# --- limb and tube ---------------------------------------------------------------


def _laminar(i: Inputs) -> Values:
    return limb.settled_laminar_frac(
        i["v_ts"], i["L_m"], i["U"], i["D_m"], i.get("theta", 0)
    )


def _mixed(i: Inputs) -> Values:
    return limb.settled_mixed_frac(
        i["v_ts"], i["L_m"], i["U"], i["D_m"], i.get("theta", 0)
    )


def _airway(i: Inputs) -> Values:
    return tube.lost_frac(
        i["d_um"],
        i["Q_lpm"],
        i["ID_mm"],
        i["L_cm"] if i.get("straight", True) else 0.0,
        i.get("angle_deg", 90),
        i.get("T_K", float(tube_figures.TUBE_GAS_K)),
        i.get("rho_air", float(tube_figures.TUBE_GAS_KG_PER_M3)),
    )


def _infant_tube(i: Inputs) -> Values:
    return _mean_over_sizes(
        i["mmad_um"],
        i["gsd_assumed"],
        lambda d: tube.lost_frac(
            d, i["Q_lpm"], i["ID_mm"], i["L_cm_assumed"], i["angle_deg_assumed"]
        ),
    )


def _limb_and_tube(i: Inputs) -> Values:
    """1.5 m of 22 mm tubing and an 8 mm tube at 30 L/min, two seconds parked."""
    limb_m, bore_m, flow_lpm, parked_s = 1.5, 0.022, 30.0, 2.0
    velocity = tube.mean_velocity_m_per_s(flow_lpm, bore_m / tube.M_PER_MM)

    def passed(d: np.ndarray) -> np.ndarray:
        tau_s = droplets.droplet_relaxation_s(d, float(tube_figures.TUBE_GAS_K))
        falls = tau_s * float(droplet.GRAVITY_M_PER_S2)
        moving = limb.settled_laminar_frac(falls, limb_m, velocity, bore_m)
        still = limb.settled_still_frac(falls, parked_s, bore_m)
        return (1 - moving) * (1 - still) * (1 - tube.lost_frac(d, flow_lpm, 8.0))

    return _mean_over_sizes(i["mmad_um"], i["gsd"], passed)


# --- lung ------------------------------------------------------------------------


def _breath(i: Inputs) -> lung.Breath:
    flow: float = i.get("V_ml_s", 0.0)
    return lung.Breath(
        tidal_ml=i["VT_ml"],
        inspiratory_ml_per_s=i.get("Vi_ml_s", flow),
        expiratory_ml_per_s=i.get("Ve_ml_s", flow),
        dead_ml=i["V_tube_ml"],
        pause_s=i.get("pause_s", 0.0),
    )


def _part(found: lung.Deposition, region: str) -> np.ndarray:
    return {
        "TB": found.tracheobronchial,
        "BB": found.bronchi,
        "bb": found.bronchioles,
        "AI": found.alveolar,
        "exhaled": found.exhaled,
        "exhaled_at_Y": found.exhaled,
    }[region]


def _intubated(region: str, i: Inputs) -> Values:
    subject = lung.SUBJECTS[i.get("subject", "male")]
    if region == "exhaled_slice":
        d = np.asarray(i["d_ae_um"])
        return lung.exhaled_by_slices_frac(d, _breath(i), subject)
    found = lung.intubated_deposition(np.asarray(i["d_ae_um"]), _breath(i), subject)
    return _part(found, region)


def _intubated_poly(region: str, i: Inputs) -> Values:
    subject = lung.SUBJECTS[i.get("subject", "male")]
    return _mean_over_sizes(
        i["mmad_um"],
        i["gsd"],
        lambda d: _part(lung.intubated_deposition(d, _breath(i), subject), region),
    )


def _nose_share(i: Inputs) -> float:
    if i.get("fn") is not None:
        return i["fn"]
    return 0.0 if i.get("mode") == "mouth" else 1.0


def _icrp_poly(region: str, i: Inputs) -> Values:
    found = breathing.breathing_deposition_polydisperse(
        i["amad_um"],
        i["VT_ml"],
        i["V_ml_s"],
        i.get("subject", "male"),
        _nose_share(i),
        i["rho"],
        i["chi"],
        i.get("gsd"),
    )
    return found.by_key()[region]


def _icrp_mono(region: str, i: Inputs) -> Values:
    found = breathing.breathing_deposition(
        np.asarray(i["d_ae_um"]),
        i["VT_ml"],
        i["V_ml_s"],
        i.get("subject", "male"),
        _nose_share(i),
        i.get("rho", 1.0),
        i.get("chi", 1.0),
    )
    return found.by_key()[region]


def _worker(region: str, i: Inputs) -> Values:
    return breathing.reference_worker_deposition(i["amad_um"]).by_key()[region]


def _hinds(region: str, i: Inputs) -> Values:
    return breathing.hinds1999_deposition(i["d_um"])[region]


# --- the split at the Y ----------------------------------------------------------


def _y_plug(i: Inputs) -> Values:
    cycle = wye.cycle_of(
        tidal_ml=i["VT_ml"],
        inspiratory_s=i["TI_s"],
        expiratory_s=i["TE_s"],
        bias_ml_per_s=i["bias_lpm"] * ML_PER_S_PER_LPM,
    )
    output = wye.emission_of(cycle, "continuous")
    return wye.plug_flow(i["V_limb_ml"], cycle, output).share


def _wye_case(
    i: Inputs,
) -> tuple[list[tuple[np.ndarray, float]], wye.Cycle, wye.Emission]:
    def one(name: str, factor: float = 1.0) -> np.ndarray:
        return np.array([float(i.get(name, 0.0)) * factor])

    cycle = wye.cycle_of(
        tidal_ml=one("VT"),
        inspiratory_s=one("TI"),
        expiratory_s=one("TE"),
        bias_ml_per_s=one("bias_lpm", ML_PER_S_PER_LPM),
        gas_ml_per_s=one("drive_lpm", ML_PER_S_PER_LPM),
        dead_ml=one("Vt"),
        gas_is_added=i.get("drive_added", False),
        bias_in_inspiration=i.get("bias_in_insp", False),
        peak_ratio=np.array([2.0]) if i.get("wave") == "ramp" else 1.0,
    )
    parts = [(np.array([float(ml)]), float(n)) for ml, n in i.get("parts_mL_N", [])]
    return parts, cycle, wye.emission_of(cycle, i["emission"])


def _wye_plug(i: Inputs) -> float:
    parts, cycle, output = _wye_case(i)
    whole = sum(volume for volume, _ in parts)
    found = wye.plug_flow(whole, cycle, output)
    return float(found.airborne_frac(i.get("lam_per_s", 0.0))[0])


def _wye_dispersed(i: Inputs) -> float:
    if "d_up_mL" in i:
        return _wye_patient_side(i)
    found = wye.dispersed(*_wye_case(i))
    return float(found.airborne_frac(i.get("lam_per_s", 0.0))[0])


def _wye_one_tank(i: Inputs) -> float:
    parts, cycle, output = _wye_case(i)
    whole = sum(volume for volume, _ in parts)
    return float(wye.series_frac([(whole, 1.0)], cycle, output, 400)[0])


def _wye_mixed(i: Inputs) -> float:
    return float(wye.mixed_frac(_wye_case(i)[1])[0])


def _wye_patient_side(i: Inputs) -> float:
    _, _, output = _wye_case({**i, "bias_lpm": 0.0, "wave": "square"})
    at_once, waits = wye.patient_side(
        tidal_ml=i["VT"],
        inspiratory_s=i["TI"],
        expiratory_s=i["TE"],
        to_wye_ml=i["d_up_mL"],
        dead_ml=i["Vt"],
        emission_start_s=output.start_s,
        emission_stop_s=output.stop_s,
        gas_ml_per_s=i["drive_lpm"] * ML_PER_S_PER_LPM,
        time_constant_s=i["RC_s"],
    )
    return float(np.ravel(at_once + waits.share)[0])


_WYE_COLUMNS: dict[str, Callable[[Inputs], float]] = {
    "plug_flow": _wye_plug,
    "dispersed_parcel": _wye_dispersed,
    "one_stirred_tank": _wye_one_tank,
    "uniform_phase_limit": _wye_mixed,
    "dispersed_exact_series": _wye_dispersed,
    "dispersed_tank_march": _wye_dispersed,
}

# --- quantity -> how the engine gives it -----------------------------------------

CHECKS: dict[str, Callable[[Inputs], Any]] = {
    "slip_correction": _slip,
    "slip_correction_hinds": _hinds_slip,
    "settling_velocity": _settling,
    "settling_velocity_no_slip": lambda i: _settling({**i, "slip": 1.0}),
    "relaxation_time": _relaxation,
    "stopping_distance": _stopping,
    "stokes_tau_u_over_d": _stokes,
    "diffusion_coefficient": _diffusion,
    "aerodynamic_diameter": _aerodynamic,
    "air_viscosity": lambda i: air.air_viscosity_pa_s(i["T_K"]),
    "humid_air_viscosity": lambda i: air.air_viscosity_pa_s(i["T_K"]),
    "humid_air_density": lambda i: air.humid_air_density_kg_per_m3(i["T_K"], i["RH"]),
    "mean_free_path": lambda i: 1e-6 * air.mean_free_path_um(i["T_K"], i["p_Pa"]),
    "saturation_vapour_density": lambda i: air.saturation_vapour_mg_per_l(i["T_K"]),
    "lognormal_mass_between": lambda i: droplets.lognormal_between_frac(
        i["mmad_um"], i["gsd"], i["from_um"], i["to_um"]
    ),
    "hatch_choate_cmd": lambda i: droplets.count_median_um(i["mmd_um"], i["gsd"]),
    "hatch_choate_sauter": lambda i: droplets.sauter_mean_um(i["mmd_um"], i["gsd"]),
    "settle_still_tube": lambda i: limb.settled_still_frac(
        i["v_ts"], i["t_s"], i["D_m"]
    ),
    "settle_tube_laminar": _laminar,
    "settle_tube_turbulent": _mixed,
    "bend_pui_turbulent": lambda i: tube.bend_turbulent_frac(
        i["stk_pui"] / 2, i["angle_deg"]
    ),
    "bend_brockmann_turbulent_stk_doubled": lambda i: tube.bend_brockmann_frac(
        i["stk"], i["angle_deg"]
    ),
    "bend_pui_laminar": lambda i: tube.bend_laminar_frac(
        i["stk_tau_u_over_d"], i["angle_deg"]
    ),
    "vd_plus_liu_agarwal": lambda i: tube.wall_velocity_liu_agarwal(i["tau_plus"]),
    "artificial_airway_loss": _airway,
    "ett_share_deposited": _infant_tube,
    "limb_and_tube_penetration": _limb_and_tube,
    "nacl_osmotic_coefficient": lambda i: saline.osmotic_coefficient(i["molality"]),
    "nacl_growth_factor_dry_to_wet": lambda i: saline.dry_growth_factor(i["rh"]),
    "isotonic_saline_water_activity": lambda i: saline.water_activity(
        i["mass_fraction"]
    ),
    "isotonic_droplet_diameter_ratio": lambda i: saline.diameter_ratio(
        i["mass_fraction0"], i["rh"]
    ),
    "droplet_ratio_in_airway_99.5": lambda i: saline.airway_diameter_ratio(
        i["mass_fraction0"]
    ),
    "evaporation_diameter_ratio": lambda i: saline.evaporated(
        i["liquid_mg_per_L"], i["T_K"], i["rh0"], i["mass_fraction0"]
    )[0],
    "clearance_minutes": lambda i: room.clearance_min(i["ach"], i["efficiency"]),
    "room_concentration": lambda i: room.concentration_per_m3(
        i["E_per_min"], i["V_m3"], i["k_per_h"], i["t_emit_min"], i["t_min"]
    ),
    "room_intake": lambda i: room.inhaled(
        i["E_per_min"],
        i["V_m3"],
        i["k_per_h"],
        i["t_emit_min"],
        i["t_end_min"],
        i["breathe_L_min"],
    ),
    "y_split_plug_flow": _y_plug,
}

# the beginning of a quantity's name -> by the rest of it, which names the region
_FAMILIES: dict[str, Callable[[str, Inputs], Any]] = {
    "icrp66_poly_": _icrp_poly,
    "icrp66_mono_": _icrp_mono,
    "icrp130_worker_": _worker,
    "intubated_poly_": _intubated_poly,
    "intubated_": _intubated,
    "hinds_": _hinds,
}
