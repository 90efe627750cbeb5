"""The circuit of one treatment, with the dose flowing along it to scale.

Ventilator at the left, inspiratory limb above, expiratory limb below, the Y and the
airway at the right. Every ribbon's width is its share of the nominal dose; what was
not logged is hatched; where the table or the estimate would put the generator, a
dashed outline stands.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from html import escape
from typing import Any

from engine.columns import FRACTIONS
from engine.physics.balance import REFUSALS
from engine.policy import Policy
from engine.rules import placement
from engine.rules.phrases import batch_of_one
from engine.rules.wording import is_logged, shown, word
from reviewapp.drawings.svg import (
    Colours,
    circle,
    drawing,
    hatching,
    line,
    rectangle,
    text,
)

WIDTH, HEIGHT = 1120.0, 452.0
SCALE = 66.0  # width of a ribbon that carries the whole nominal dose
INSPIRATORY_Y, EXPIRATORY_Y, AIRWAY_Y = 132.0, 322.0, 227.0
LIMB, AIRWAY = 76.0, 62.0  # outer width of the tubing drawn
VENTILATOR_X, WYE_X, TIP_X = 150.0, 800.0, 1034.0
HUMIDIFIER = (262.0, 366.0)
FILTER_X = 214.0
LONGEST_CM = 150.0
STATIONS: dict[str, float] = {
    "ventilator_outlet": 188.0,
    "humidifier_inlet": 240.0,
    "humidifier_outlet": 392.0,
    "inspiratory_limb": 590.0,
    "wye": 776.0,
    "airway_side": 900.0,
    "expiratory_limb": 520.0,
}


@dataclass(frozen=True, kw_only=True)
class Drawing:
    """What is drawn of one treatment; fractions are None where there is no estimate."""

    generator: str | None
    site: str | None
    distance_from_wye_cm: float | None
    circuit: str | None
    humidification: str | None
    heated_humidifier_on: bool | None
    hme_state: str | None
    expiratory_filter: str | None
    fractions: Mapping[str, tuple[float, float, float]] | None
    refusal: str
    table_sites: tuple[str, ...]
    estimate_site: str | None
    facts: tuple[str, ...]

    def frac(self, *places: str) -> float:
        """What ended in these places together; 0 without an estimate."""
        if self.fractions is None:
            return 0.0
        return sum(self.fractions[place][0] for place in places)

    def said(self, *places: str) -> str:
        """The same in words, with its band."""
        if self.fractions is None:
            return "cannot tell"
        point, low, high = (
            sum(self.fractions[place][end] for place in places) for end in range(3)
        )
        return band(point, low, high)


def band(point: float, low: float, high: float) -> str:
    """A share with its band, as written everywhere."""
    return f"{_percent(point)} % ({_percent(low)} to {_percent(min(high, 1.0))})"


def drawing_of(row: Mapping[str, Any], policy: Policy) -> Drawing:
    """The drawing of one treatment from its logged, context and balance columns."""
    one = batch_of_one(row)
    preferred = placement.preferred_sites(one, policy)[0]
    sites = tuple(s for s, yes in zip(placement.SITES, preferred, strict=True) if yes)
    refusal = int(row["refusal"]) if is_logged(row.get("refusal")) else 0
    names = (*FRACTIONS, "delivered")
    fractions = None
    if not refusal and all(is_logged(row.get(f"{n}_frac")) for n in names):
        fractions = {n: _ends(row, n) for n in names}
    differs = is_logged(row.get("difference_shown")) and row["difference_shown"] == 1
    facts = (
        "bias_flow_lpm",
        "tidal_volume_ml",
        "inspiratory_time_s",
        "respiratory_rate_bpm",
        "mmad_um",
    )
    return Drawing(
        generator=_word(row, "generator"),
        site=_word(row, "site"),
        distance_from_wye_cm=_value(row, "distance_from_wye_cm"),
        circuit=_word(row, "circuit"),
        humidification=_word(row, "humidification"),
        heated_humidifier_on=_value(row, "heated_humidifier_on"),
        hme_state=_word(row, "hme_state"),
        expiratory_filter=_word(row, "expiratory_filter"),
        fractions=fractions,
        refusal=REFUSALS[refusal] if refusal else "",
        table_sites=sites,
        estimate_site=_word(row, "best_site") if differs else None,
        facts=tuple(f"{_SHORT[name]} {shown(name, row.get(name))}" for name in facts),
    )


def circuit_svg(one: Drawing, colours: Colours, compact: bool = False) -> str:
    """The drawing; ``compact`` leaves the line of settings out."""
    height = 404.0 if compact else HEIGHT
    parts = [
        hatching("unsaid", colours, 6),
        *_tubing(one, colours),
        *_ribbons(one, colours),
        *_humidifier(one, colours),
        *_hme(one, colours),
        *_filter(one, colours),
        *_stations(one, colours),
        *_generators(one, colours),
        *_figures(one, colours),
    ]
    if not compact:
        words = " · ".join(one.facts)
        parts.append(text(24, 424, words, colours["faint"], 13))
        parts.append(text(24, 444, _FOOT, colours["faint"], 13))
    return drawing(WIDTH, height, _title(one), parts)


_SHORT = {
    "bias_flow_lpm": "bias flow",
    "tidal_volume_ml": "VT",
    "inspiratory_time_s": "Ti",
    "respiratory_rate_bpm": "rate",
    "mmad_um": "droplets",
}
_FOOT = (
    "Ribbons are to scale of the nominal dose. Model estimate from bench-based "
    "methods; needs clinical confirmation."
)


def _title(one: Drawing) -> str:
    generator = word("generator", one.generator) if one.generator else "generator"
    where = word("site", one.site) if one.site else "at a site that is not logged"
    estimate = f"past the tube {one.said('delivered')}"
    if one.fractions is None:
        estimate = f"no estimate: {one.refusal or 'not worked out'}"
    filtered = one.expiratory_filter or "not logged"
    return f"Circuit: {generator} {where}; expiratory filter {filtered}; {estimate}"


def _part(words: str, inside: str) -> str:
    """A part that takes the keyboard's focus and says its figure."""
    label = escape(words, quote=True)
    return (
        f'<g tabindex="0" role="img" aria-label="{label}">'
        f"<title>{escape(words)}</title>{inside}</g>"
    )


def _tubing(one: Drawing, colours: Colours) -> Iterator[str]:
    panel, edge, ink = colours["panel"], colours["lost"], colours["ink"]
    for y in (INSPIRATORY_Y, EXPIRATORY_Y):
        if y == EXPIRATORY_Y and one.circuit == "single_limb":
            continue
        yield rectangle(
            VENTILATOR_X, y - LIMB / 2, WYE_X - VENTILATOR_X, LIMB, panel, edge
        )
    top, bottom = INSPIRATORY_Y - LIMB / 2, EXPIRATORY_Y + LIMB / 2
    a, b = AIRWAY_Y - AIRWAY / 2, AIRWAY_Y + AIRWAY / 2
    yield (
        f'<path d="M{WYE_X} {top} C864 {top} 850 {a} 884 {a} L{TIP_X} {a} L{TIP_X} {b} '
        f"L884 {b} C850 {b} 864 {bottom} {WYE_X} {bottom} L{WYE_X} {EXPIRATORY_Y - 38} "
        f"C820 {EXPIRATORY_Y - 38} 820 {INSPIRATORY_Y + 38} {WYE_X} "
        f'{INSPIRATORY_Y + 38} Z" fill="{panel}" stroke="{edge}"/>'
    )
    yield (
        f'<path d="M{TIP_X} {a} q24 -38 42 -38 q22 0 22 {AIRWAY / 2 + 38} '
        f'q0 {AIRWAY / 2 + 38} -22 {AIRWAY / 2 + 38} q-18 0 -42 -38 Z" '
        f'fill="{panel}" stroke="{ink}" stroke-width="1.4"/>'
    )
    yield rectangle(24, 70, VENTILATOR_X - 24, 318, panel, ink)
    yield text(87, 96, "ventilator", ink, 14, "middle", 600)
    yield text(87, INSPIRATORY_Y + 5, "out", colours["faint"], 12, "middle")
    yield text(460, 72, "inspiratory limb", colours["faint"], 12, "middle")
    if one.circuit != "single_limb":
        yield text(460, 380, "expiratory limb", colours["faint"], 12, "middle")
    if one.circuit is None:
        yield rectangle(
            VENTILATOR_X,
            EXPIRATORY_Y - LIMB / 2,
            WYE_X - VENTILATOR_X,
            LIMB,
            "url(#unsaid)",
        )
        yield text(
            560, 380, "circuit not logged", colours["unknown"], 12, "middle", 600
        )
    yield _part(
        f"Expiratory flow sensor: {one.said('sensor_side')} estimated to stay on it",
        circle(118, EXPIRATORY_Y, 15, panel, ink)
        + f'<path d="M110 {EXPIRATORY_Y} q4 -9 8 0 t8 0" stroke="{ink}" fill="none" '
        'stroke-width="1.5"/>',
    )
    yield text(84, EXPIRATORY_Y + 34, "flow sensor", colours["faint"], 12, "middle")


def _ribbons(one: Drawing, colours: Colours) -> Iterator[str]:
    if one.fractions is None:
        yield text(
            560,
            AIRWAY_Y + 4,
            f"No estimate: {one.refusal or 'cannot tell'}",
            colours["unknown"],
            15,
            "middle",
            600,
        )
        return
    into_tube = one.frac("tube", "delivered")
    back = one.frac(
        "unused_past_wye", "expiratory_limb", "filter", "sensor_side", "room"
    )
    at_sensor = one.frac("sensor_side", "room")
    exhaled = max(one.frac("delivered") - one.frac("tracheobronchial", "alveolar"), 0)
    emitted = 1 - one.frac("generator_residual")
    teal, rust = colours["aerosol"], colours["fired"]
    x = _x_of(one.site, one.distance_from_wye_cm)
    if one.site not in {"airway_side", "expiratory_limb"}:
        arriving = max(emitted - one.frac("limb"), into_tube)
        yield _part(
            f"Inspiratory limb: {one.said('limb')} of the dose stays on the way",
            _taper(x, INSPIRATORY_Y, WYE_X, INSPIRATORY_Y, emitted, arriving, teal, 0.9)
            + _deposit(
                x, WYE_X, INSPIRATORY_Y + LIMB / 2 - 5, one.frac("limb"), colours
            ),
        )
        before = min(into_tube + one.frac("hme"), arriving)
        yield _bend(INSPIRATORY_Y, AIRWAY_Y - 10, before, teal, 0.9)
        swept = max(back - exhaled, 0)
        yield _bypass(swept, teal)
        start = 884.0
    else:
        before = into_tube + one.frac("hme")
        start = x
    if one.site != "expiratory_limb":
        mesh = 940.0
        yield _part(
            f"Past the tube: {one.said('delivered')} of the dose",
            _taper(start, AIRWAY_Y - 10, mesh, AIRWAY_Y - 10, before, before, teal, 0.9)
            + _taper(
                mesh,
                AIRWAY_Y - 10,
                TIP_X,
                AIRWAY_Y - 10,
                into_tube,
                one.frac("delivered"),
                teal,
                0.9,
            ),
        )
        yield _taper(
            TIP_X, AIRWAY_Y + 18, 884, AIRWAY_Y + 18, exhaled, exhaled, teal, 0.4
        )
        if one.circuit != "single_limb":
            returned = back if one.site == "airway_side" else exhaled
            if one.site == "airway_side":
                yield _taper(
                    x, AIRWAY_Y + 18, 884, AIRWAY_Y + 18, back, back, teal, 0.4
                )
            yield _bend(EXPIRATORY_Y, AIRWAY_Y + 18, returned, teal, 0.4)
    if one.circuit == "single_limb":
        yield _part(
            f"Leak port: {one.said('room')} reaches the room",
            _taper(
                884,
                AIRWAY_Y + 18,
                884,
                AIRWAY_Y + 92,
                one.frac("room"),
                one.frac("room"),
                rust,
                0.7,
                upright=True,
            ),
        )
        return
    held = one.frac("filter", "sensor_side", "room")
    yield _part(
        f"Expiratory limb holds {one.said('unused_past_wye', 'expiratory_limb')}",
        _taper(
            WYE_X, EXPIRATORY_Y, FILTER_X + 24, EXPIRATORY_Y, back, held, teal, 0.45
        ),
    )
    yield _part(
        f"Past the filter position: {one.said('sensor_side', 'room')}",
        _taper(
            FILTER_X, EXPIRATORY_Y, 134, EXPIRATORY_Y, at_sensor, at_sensor, rust, 0.9
        ),
    )


def _humidifier(one: Drawing, colours: Colours) -> Iterator[str]:
    left, right = HUMIDIFIER
    top = INSPIRATORY_Y + LIMB / 2
    state = {True: "on", False: "off", None: "on or off not logged"}
    if one.humidification == "heated_humidifier":
        words = f"humidifier, {state[one.heated_humidifier_on]}"
        yield rectangle(left, top, right - left, 46, colours["panel"], colours["lost"])
        if one.heated_humidifier_on is None:
            yield rectangle(left, top, right - left, 46, "url(#unsaid)")
        yield text((left + right) / 2, top + 62, words, colours["faint"], 12, "middle")
    elif one.humidification is None:
        yield rectangle(left, top, right - left, 46, "url(#unsaid)", colours["unknown"])
        yield text(
            (left + right) / 2,
            top + 62,
            "humidification not logged",
            colours["unknown"],
            12,
            "middle",
        )


def _hme(one: Drawing, colours: Colours) -> Iterator[str]:
    if one.humidification not in {"hme", "hmef"}:
        return
    name = "filter-HME" if one.humidification == "hmef" else "HME"
    x, top = 934.0, AIRWAY_Y - AIRWAY / 2 - 6
    tall = AIRWAY + 12
    below, paper = top + tall + 18, colours["paper"]
    if one.hme_state == "in_line":
        body = rectangle(x, top, 16, tall, colours["ink"])
        for i in range(6):
            y = top + 4 + i * (tall - 8) / 5
            body += line(x, y, x + 16, y + 4, colours["paper"], 1.3)
        yield _part(f"{name} in line: {one.said('hme')} caught", body)
        caught = f" holds {_percent(one.frac('hme'))} %" if one.fractions else ""
        words = f"{name} in line{caught}"
        yield text(x + 8, below, words, colours["ink"], 13, "middle", 600, paper)
    elif one.hme_state is None:
        yield _part(
            f"{name}: in line or not is not logged",
            rectangle(x, top, 16, tall, "url(#unsaid)", colours["unknown"]),
        )
        words = f"{name}: in line or not is not logged"
        yield text(x + 8, below, words, colours["unknown"], 13, "middle", 600, paper)
    else:
        words = f"{name} {one.hme_state}"
        yield text(x + 8, below, words, colours["faint"], 12, "middle")


def _filter(one: Drawing, colours: Colours) -> Iterator[str]:
    if one.circuit == "single_limb":
        return
    top, tall = EXPIRATORY_Y - LIMB / 2 - 6, LIMB + 12
    middle = FILTER_X + 12
    if one.expiratory_filter == "present":
        body = rectangle(FILTER_X, top, 24, tall, colours["ink"])
        for i in range(6):
            y = top + 5 + i * (tall - 12) / 5
            body += line(FILTER_X, y, FILTER_X + 24, y + 6, colours["paper"], 1.4)
        yield _part(f"Expiratory filter holds {one.said('filter')}", body)
        held = f"filter holds {_percent(one.frac('filter'))} %"
        words = held if one.fractions is not None else "filter"
        yield text(middle, top + tall + 18, words, colours["ink"], 13, "middle", 600)
    elif one.expiratory_filter == "absent":
        body = rectangle(FILTER_X, top, 24, tall, "none", colours["fired"])
        yield _part("No expiratory filter", body)
        yield text(
            middle, top + tall + 18, "no filter", colours["fired"], 13, "middle", 600
        )
    else:
        yield _part(
            "Expiratory filter not logged; the estimate shows the case without one",
            rectangle(FILTER_X, top, 24, tall, colours["panel"])
            + rectangle(FILTER_X, top, 24, tall, "url(#unsaid)", colours["unknown"]),
        )
        yield text(
            middle,
            top + tall + 18,
            "filter not logged",
            colours["unknown"],
            13,
            "middle",
            600,
        )


def _stations(one: Drawing, colours: Colours) -> Iterator[str]:
    for site, x in STATIONS.items():
        if site in {"airway_side", "expiratory_limb"}:
            continue
        y = INSPIRATORY_Y + LIMB / 2
        yield line(x, y + 2, x, y + 8, colours["faint"], 1)


def _generators(one: Drawing, colours: Colours) -> Iterator[str]:
    name = word("generator", one.generator) if one.generator else "generator not logged"
    labels: list[tuple[float, str, str]] = []
    if one.site is None:
        labels.append((460.0, f"{name}, site not logged", colours["unknown"]))
    else:
        x, y = _x_of(one.site, one.distance_from_wye_cm), _top_of(one.site)
        differs = bool(one.table_sites) and one.site not in one.table_sites
        fill = colours["fired"] if differs else colours["aerosol"]
        where = word("site", one.site)
        cm = one.distance_from_wye_cm
        if one.site == "inspiratory_limb":
            where += f", {cm:.0f} cm from the Y" if cm is not None else ""
        yield _part(f"Logged: {name} {where}", _stub(x, y, fill, fill, ""))
        labels.append((x, f"logged: {name} {where}", fill))
    for site, says in _suggested(one).items():
        x, y = _x_of(site, None), _top_of(site)
        yield _part(
            f"{says}: {word('site', site)}",
            _stub(x, y, "none", colours["aerosol"], "4 3"),
        )
        labels.append((x, f"{says}: {word('site', site)}", colours["aerosol"]))
    for row, (x, words, fill) in enumerate(sorted(labels, reverse=True)[:3]):
        anchor = "end" if x > 640 else "start"
        at = x + 14 if anchor == "end" else x - 8
        yield text(at, 56 - 17 * row, words, fill, 14, anchor, 600)


def _suggested(one: Drawing) -> dict[str, str]:
    """Other sites to outline: the table's first, the estimate's where it differs."""
    found: dict[str, str] = {}
    if one.site is not None and one.table_sites and one.site not in one.table_sites:
        found[one.table_sites[0]] = "table"
    if one.estimate_site and one.estimate_site != one.site:
        both = found.get(one.estimate_site)
        found[one.estimate_site] = "table and estimate" if both else "estimate"
    return found


def _figures(one: Drawing, colours: Colours) -> Iterator[str]:
    if one.fractions is None:
        return
    ink, faint = colours["ink"], colours["faint"]
    above = AIRWAY_Y - 96  # clear of the lung and of a generator at the airway
    yield text(1104, above, "past the tube", faint, 12, "end")
    yield text(1104, above + 18, one.said("delivered"), ink, 15, "end", 700)
    lung = _percent(one.frac("tracheobronchial", "alveolar"))
    yield text(1076, AIRWAY_Y - 2, "lung", faint, 12, "middle")
    yield text(1076, AIRWAY_Y + 16, f"{lung} %", ink, 15, "middle", 700)
    passed = one.frac("sensor_side", "room")
    fill = colours["fired"] if passed >= 0.005 else faint
    if one.circuit == "single_limb":
        words = f"to the room {_percent(passed)} %"
        yield text(900, AIRWAY_Y + 112, words, fill, 13, "start", 600)
        return
    yield text(87, EXPIRATORY_Y - 26, f"{_percent(passed)} %", fill, 14, "middle", 600)
    exhaled = max(one.frac("delivered") - one.frac("tracheobronchial", "alveolar"), 0)
    back = one.frac(
        "unused_past_wye", "expiratory_limb", "filter", "sensor_side", "room"
    )
    words = (
        f"swept past the Y {_percent(max(back - exhaled, 0))} %   ·   "
        f"exhaled {_percent(exhaled)} %"
    )
    paper = colours["panel"]
    yield text(520, EXPIRATORY_Y + 5, words, ink, 14, "middle", 600, paper)
    lost = one.frac("generator_residual")
    yield text(
        460,
        INSPIRATORY_Y + 62,
        f"stays in the generator {_percent(lost)} %, "
        f"in the limb {_percent(one.frac('limb'))} %",
        faint,
        12,
        "start",
    )


def _taper(
    x1: float,
    y1: float,
    x2: float,
    y2: float,
    first: float,
    last: float,
    fill: str,
    opacity: float,
    upright: bool = False,
) -> str:
    """A ribbon from one share of the dose to another, to scale."""
    a, b = first * SCALE / 2, last * SCALE / 2
    if upright:
        points = [(x1 - a, y1), (x1 + a, y1), (x2 + b, y2), (x2 - b, y2)]
    else:
        points = [(x1, y1 - a), (x2, y2 - b), (x2, y2 + b), (x1, y1 + a)]
    listed = " ".join(f"{x:.1f},{y:.1f}" for x, y in points)
    return f'<polygon points="{listed}" fill="{fill}" opacity="{opacity:g}"/>'


def _bend(
    limb_y: float, airway_y: float, share: float, fill: str, opacity: float
) -> str:
    """The ribbon between a limb and the airway, around the Y."""
    width = share * SCALE
    return (
        f'<path d="M{WYE_X} {limb_y} C858 {limb_y} 840 {airway_y} 884 {airway_y}" '
        f'stroke="{fill}" stroke-width="{width:.1f}" fill="none" '
        f'opacity="{opacity:g}"/>'
    )


def _bypass(share: float, fill: str) -> str:
    """What goes from the inspiratory straight into the expiratory limb."""
    return (
        f'<path d="M{WYE_X} {INSPIRATORY_Y + 6} C846 {INSPIRATORY_Y + 30} 846 '
        f'{EXPIRATORY_Y - 30} {WYE_X} {EXPIRATORY_Y}" stroke="{fill}" '
        f'stroke-width="{share * SCALE:.1f}" fill="none" opacity="0.5"/>'
    )


def _deposit(x1: float, x2: float, y: float, share: float, colours: Colours) -> str:
    """What stays on the wall, as grains along it: one for each percent."""
    count = round(share * 100)
    step = (x2 - x1) / max(count, 1)
    return "".join(
        circle(x1 + step * (i + 0.5), y - (i % 3) * 2.4, 1.5, colours["lost"])
        for i in range(count)
    )


def _stub(x: float, y: float, fill: str, stroke: str, dash: str) -> str:
    dashed = f' stroke-dasharray="{dash}"' if dash else ""
    return (
        f'<path d="M{x - 13:.1f} {y} l0 -26 l26 0 l0 26 Z" fill="{fill}" '
        f'stroke="{stroke}" stroke-width="2"{dashed}/>'
    )


def _x_of(site: str | None, distance_cm: float | None) -> float:
    if site == "inspiratory_limb" and distance_cm is not None:
        share = min(distance_cm, LONGEST_CM) / LONGEST_CM
        wye, outlet = STATIONS["wye"], STATIONS["humidifier_outlet"]
        return wye - share * (wye - outlet)
    return STATIONS.get(site or "", 460.0)


def _top_of(site: str) -> float:
    if site == "airway_side":
        return AIRWAY_Y - AIRWAY / 2
    if site == "expiratory_limb":
        return EXPIRATORY_Y - LIMB / 2
    return INSPIRATORY_Y - LIMB / 2


def _ends(row: Mapping[str, Any], name: str) -> tuple[float, float, float]:
    point = float(row[f"{name}_frac"])
    low, high = row.get(f"{name}_low_frac"), row.get(f"{name}_high_frac")
    return (
        point,
        float(low) if is_logged(low) else point,
        float(high) if is_logged(high) else point,
    )


def _word(row: Mapping[str, Any], name: str) -> str | None:
    value = row.get(name)
    return str(value) if is_logged(value) and str(value) != "unknown" else None


def _value(row: Mapping[str, Any], name: str) -> Any:
    value = row.get(name)
    if not is_logged(value):
        return None
    return bool(value) if isinstance(value, bool) else value


def _percent(share: float) -> str:
    """Whole percent; a decimal only where a whole one would read as nothing."""
    percent = 100 * share
    if 0 < percent < 0.95:
        return f"{percent:.1f}" if percent >= 0.05 else "<0.1"
    return f"{percent:.0f}"
