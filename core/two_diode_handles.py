"""The five handles of a two-diode curve under light, and its dials where Jsc and Voc are kept.

| handle | dragged | solves for | keeps |
| --- | --- | --- | --- |
| at V = 0 | up, down | Jph | the rest |
| at J = 0 | left, right | J0₁ | the rest |
| at the knee, on the ray V/Voc = J/Jsc | along the ray | J0₂ | Jsc, Voc, n₁, n₂, Rs, Rsh |
| on the fall, at J = Jsc/2 | left, right | Rs | Jsc, Voc, n₁, n₂, J0₂, Rsh |
| on the plateau, at V = 0.4·Voc | up, down | Rsh | Jsc, Voc, n₁, n₂, J0₂, Rs |

The curve is linear in Jph, J0₁, J0₂ and 1/Rsh at a given junction voltage, so all but Rs have a closed form.
"""

from __future__ import annotations

import math
from dataclasses import replace

from scipy.optimize import brentq

from .kept_pair import SECOND_ALONE, KeptPair
from .lit_handles import FALL, LARGEST_FACTOR, NO_VOC, PLATEAU, SLACK, WILD
from .moves import (
    LARGEST_EXPONENT,
    LIMITS,
    SERIES_ALONE,
    SMALLEST_DIODE_SHARE,
    SMALLEST_ROOM,
    Move,
    moves_alone,
    no_further,
    root_or_end,
    set_alone,
    why_locked,
    within_limits,
)
from .two_diode import TwoDiode

MOTIONS = {
    "photocurrent": "vertical",
    "saturation_current_1": "horizontal",
    "saturation_current_2": "ray",
    "series_resistance": "horizontal",
    "shunt_resistance": "vertical",
}
_BOTH = ("saturation_current_1", "photocurrent")
FOLLOWERS = {
    "photocurrent": (),
    "saturation_current_1": (),
    "saturation_current_2": _BOTH,
    "series_resistance": _BOTH,
    "shunt_resistance": _BOTH,
}

_ONE_DIODE = "with n₁ = n₂ the two diodes are one, so that J0₂ does not show"
_ALIKE = 1e-9  # difference of the two diodes' shapes below which rounding decides
_HALVINGS = 100


def positions(model: TwoDiode) -> dict[str, tuple[float, float]]:
    """Voltage [V] and current [A cm⁻²] of each handle; the photocurrent's alone for a model without Voc."""
    kept = KeptPair.of(model)
    if kept is None:
        return {"photocurrent": (0.0, float(model.current(0.0)))}
    jsc, voc = kept.jsc, kept.voc
    ray = _on_ray(model, kept)
    plateau = PLATEAU * voc
    return {
        "photocurrent": (0.0, jsc),
        "saturation_current_1": (voc, 0.0),
        "saturation_current_2": (ray * voc, ray * jsc),
        "series_resistance": (float(model.voltage(FALL * jsc)), FALL * jsc),
        "shunt_resistance": (plateau, float(model.current(plateau))),
    }


def drag(model: TwoDiode, parameter: str, x: float, y: float) -> Move:
    """The model whose handle lies under the pointer (x [V], y [A cm⁻²])."""
    x, y = (min(max(value, -WILD), WILD) for value in (x, y))
    if parameter == "photocurrent":
        return _drag_photocurrent(model, y)
    kept = KeptPair.of(model)
    if kept is None:
        return Move(model, NO_VOC)
    if parameter == "saturation_current_1":
        return _drag_first(model, kept, x)
    obstacle = kept.obstacle(model)
    if obstacle:
        return Move(model, no_further(parameter, obstacle))
    if parameter == "saturation_current_2":
        return _drag_second(model, kept, 0.5 * (x / kept.voc + y / kept.jsc))
    if parameter == "series_resistance":
        return _drag_series_resistance(model, kept, x)
    return _drag_shunt_resistance(model, kept, y)


def set_parameter(
    model: TwoDiode,
    parameter: str,
    value: float,
    *,
    hold: frozenset[str] = frozenset(),
    keep_jsc_voc: bool = False,
) -> Move:
    """Set one parameter, as a dial does; with ``keep_jsc_voc`` J0₁ and Jph follow, where they can."""
    if not keep_jsc_voc:
        return set_alone(model, parameter, value, hold=hold)
    if parameter in _BOTH:
        alone = set_alone(model, parameter, value, hold=hold)
        return Move(alone.model, alone.message or moves_alone(parameter))
    value, message = within_limits(parameter, float(value), getattr(model, parameter))
    if value is None:
        return Move(model, message)
    locked = why_locked(parameter, _BOTH, hold)
    if locked:
        return Move(model, locked)
    kept = KeptPair.of(model)
    moved = replace(model, **{parameter: value})
    if kept is None:
        return Move(moved, message or moves_alone(parameter, lit=False))
    obstacle = kept.obstacle(moved)
    if not obstacle:
        return Move(kept.member(moved), message)
    if kept.obstacle(model):
        return Move(model, no_further(parameter, obstacle))
    near, far = getattr(model, parameter), value
    for _ in range(_HALVINGS):
        middle = 0.5 * (near + far) if math.isfinite(near) else 2.0 * far
        if kept.obstacle(replace(model, **{parameter: middle})):
            far = middle
        else:
            near = middle
    return Move(kept.member(replace(model, **{parameter: near})), no_further(parameter, obstacle))


def _on_ray(model: TwoDiode, kept: KeptPair) -> float:
    """t at which the curve crosses the ray (t·Voc, t·Jsc)."""
    whole = kept.voc + kept.jsc * model.series_resistance
    first, second = model.slope_voltages

    def above(share: float) -> float:
        junction = share * whole
        diodes = model.saturation_current_1 * math.expm1(min(junction / first, 700.0))
        diodes += model.saturation_current_2 * math.expm1(min(junction / second, 700.0))
        return model.photocurrent - diodes - junction / model.shunt_resistance - share * kept.jsc

    return brentq(above, 0.0, 1.0, xtol=1e-15, rtol=1e-15)


def _drag_photocurrent(model: TwoDiode, jsc: float) -> Move:
    """Jsc = y, with u = Jsc·Rs: Jph is what the diodes and the shunt take at u, and Jsc."""
    before = model.photocurrent
    smallest, largest = before / LARGEST_FACTOR**2, LIMITS["photocurrent"][1]
    why = "Jsc would need more photocurrent than any device gives"
    if 0 < LARGEST_FACTOR * before < largest:
        largest, why = LARGEST_FACTOR * before, f"Jsc would need more than {LARGEST_FACTOR:.0f} times the photocurrent"
    junction = jsc * model.series_resistance
    photocurrent = jsc + _taken(model, junction)
    if photocurrent < smallest:
        edge = no_further("photocurrent", "under light it stays above zero")
        return Move(replace(model, photocurrent=smallest), edge)
    if photocurrent > largest:
        return Move(replace(model, photocurrent=largest), no_further("photocurrent", why))
    return Move(replace(model, photocurrent=photocurrent))


def _drag_first(model: TwoDiode, kept: KeptPair, voc: float) -> Move:
    """Voc = x: J0₁ = (Jph − J0₂·(exp(Voc/m₂) − 1) − Voc/Rsh)/(exp(Voc/m₁) − 1)."""
    slope = model.slope_voltages[0]
    high, why = LARGEST_EXPONENT * slope, "Voc is as large as a number the program can carry for J0₁ allows"
    rest = replace(model, saturation_current_1=0.0, photocurrent=model.photocurrent * (1.0 - SMALLEST_DIODE_SHARE))
    limit = float(rest.voltage(0.0)) if model.saturation_current_2 > 0 else rest.photocurrent * model.shunt_resistance
    if limit < high:
        high, why = limit, "J0₂ and the shunt alone keep Voc below this"
    low, edge = min(0.01 * slope, kept.voc, high), ""
    if voc < low:
        voc, edge = low, no_further("saturation_current_1", "Voc has to stay above zero")
    elif voc > high:
        if kept.voc >= high:
            return Move(model, no_further("saturation_current_1", why) if voc > kept.voc * (1 + SLACK) else "")
        voc, edge = high, no_further("saturation_current_1", why)
    left = model.photocurrent - _taken(replace(model, saturation_current_1=0.0), voc)
    saturation = max(left, SMALLEST_DIODE_SHARE**2 * model.photocurrent) / math.expm1(voc / slope)
    return Move(replace(model, saturation_current_1=saturation), edge)


def _drag_second(model: TwoDiode, kept: KeptPair, share: float) -> Move:
    """The curve passes through (t·Voc, t·Jsc), where it is linear in J0₂."""
    share = min(max(share, 0.0), 1.0)
    start, conductance = kept.jsc * model.series_resistance, 1.0 / model.shunt_resistance
    # Beyond these no member of the family comes; close to them the edge has long been reached.
    junction = min(max(share * (kept.voc + start), start), kept.voc)
    (first, second), (first_at_start, second_at_start) = kept.shapes(model, junction), kept.shapes(model, start)
    middle = 0.5 * (start + kept.voc)
    bend_there = _bend(kept, model, middle)
    if abs(bend_there) < _ALIKE:
        return Move(model, no_further("saturation_current_2", _ONE_DIODE))
    ratio = first / first_at_start
    through_diodes = kept.without_diodes(model, conductance)
    largest = (through_diodes - 2.0 * SMALLEST_DIODE_SHARE * kept.jsc) / second_at_start
    bend = second - second_at_start * ratio
    missing = share * kept.jsc - through_diodes * ratio - (kept.voc - junction) * conductance
    # The sign of the bend is the same all the way from V = 0 to Voc.
    wanted = missing / bend if bend * bend_there > 0 else math.copysign(math.inf, missing * bend_there)
    edge = ""
    if wanted < 0:
        wanted = 0.0
        if abs(missing) > SLACK * kept.jsc:
            knee = "sharp" if bend_there < 0 else "round"
            edge = no_further(
                "saturation_current_2", f"it is zero already, and the knee is as {knee} as n₁, Rs and Rsh make it"
            )
    elif wanted > largest:
        if not abs(missing - largest * bend) <= SLACK * kept.jsc:
            edge = no_further("saturation_current_2", SECOND_ALONE)
        wanted = largest
    saturation = wanted * math.exp(-kept.voc / model.slope_voltages[1])
    return Move(kept.member(replace(model, saturation_current_2=saturation)), edge)


def _bend(kept: KeptPair, model: TwoDiode, junction: float) -> float:
    """∂J(u)/∂B₂ along the family: how much J0₂ moves the curve there."""
    start = kept.jsc * model.series_resistance
    (first, second), (first_at_start, second_at_start) = kept.shapes(model, junction), kept.shapes(model, start)
    return second - second_at_start * first / first_at_start


def _drag_series_resistance(model: TwoDiode, kept: KeptPair, voltage: float) -> Move:
    """V = x at J = Jsc/2."""
    target = FALL * kept.jsc
    voltage = min(max(voltage, 0.0), kept.voc)

    def with_resistance(resistance: float) -> TwoDiode:
        return replace(model, series_resistance=resistance)

    def miss(resistance: float) -> float:
        return kept.current(with_resistance(resistance), voltage + target * resistance) - target

    def spare(resistance: float) -> float:
        return kept.first_share(with_resistance(resistance)) - SMALLEST_DIODE_SHARE * kept.jsc

    room = SMALLEST_ROOM * model.slope_voltages[0]
    high = max((kept.voc - room) / kept.jsc, model.series_resistance)
    low = 0.0
    if spare(0.0) < 0:  # less Rs leaves less for the first diode
        low = brentq(spare, 0.0, model.series_resistance, xtol=1e-300, rtol=1e-12)
        low += 1e-9 * (model.series_resistance - low)
    resistance, side = root_or_end(miss, low, high, SLACK * kept.jsc)
    because = {
        -1: "it is zero already, and what is left of the fall comes from the diodes" if low == 0 else SECOND_ALONE,
        1: SERIES_ALONE,
    }
    edge = no_further("series_resistance", because[side]) if side else ""
    return Move(kept.member(with_resistance(resistance)), edge)


def _drag_shunt_resistance(model: TwoDiode, kept: KeptPair, current: float) -> Move:
    """J = y at V = 0.4·Voc; u does not depend on Rsh, and the current there is linear in 1/Rsh."""
    start = kept.jsc * model.series_resistance
    current = min(max(current, 0.0), 2.0 * kept.jsc)
    junction = PLATEAU * kept.voc + current * model.series_resistance
    (first, second), (first_at_start, second_at_start) = kept.shapes(model, junction), kept.shapes(model, start)
    second_at_voc = kept.second_at_voc(model)
    left = kept.jsc - second_at_voc * second_at_start
    largest = max((left - 2.0 * SMALLEST_DIODE_SHARE * kept.jsc) / (kept.voc - start), 0.0)
    ratio = first / first_at_start
    flattest = left * ratio + second_at_voc * second
    bend = (kept.voc - start) * ratio - (kept.voc - junction)
    if junction >= kept.voc:
        conductance = -math.inf  # more current than any curve through this Voc carries there
    else:
        excess = flattest - current
        conductance = excess / bend if bend > 0 else math.copysign(math.inf, excess)
    edge = ""
    if conductance <= 0:
        if current - flattest > SLACK * kept.jsc:
            edge = no_further("shunt_resistance", "it is infinite already, and the plateau gets no flatter")
        conductance = 0.0
    elif conductance > largest:
        conductance, edge = largest, no_further("shunt_resistance", "J0₂ and a shunt this strong would set Voc alone")
    shunt = 1.0 / conductance if conductance > 1e-300 else math.inf
    return Move(kept.member(replace(model, shunt_resistance=shunt)), edge)


def _taken(model: TwoDiode, junction: float) -> float:
    """What the diodes and the shunt take at a junction voltage [A cm⁻²]."""
    first, second = model.slope_voltages
    taken = model.saturation_current_1 * math.expm1(min(junction / first, 700.0))
    taken += model.saturation_current_2 * math.expm1(min(junction / second, 700.0))
    return taken + junction / model.shunt_resistance
