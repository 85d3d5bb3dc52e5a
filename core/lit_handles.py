"""The five handles of a curve under light, each with the inverse problem that it solves.

A point (V, J) of the curve gives its junction voltage u = V + J·Rs, in which the equation is explicit.
"""

from __future__ import annotations

import math
from dataclasses import replace

from scipy.optimize import brentq

from .diode import OneDiode
from .moves import (
    LARGEST_EXPONENT,
    LIMITS,
    SERIES_ALONE,
    SHUNT_ALONE,
    SMALLEST_DIODE_SHARE,
    STRAIGHT,
    KeptCurve,
    Move,
    no_further,
    root_or_end,
)

MOTIONS = {
    "photocurrent": "vertical",
    "saturation_current": "horizontal",
    "ideality": "ray",
    "series_resistance": "horizontal",
    "shunt_resistance": "vertical",
}
FOLLOWERS = {
    "photocurrent": (),
    "saturation_current": (),
    "ideality": ("saturation_current", "photocurrent"),
    "series_resistance": ("saturation_current", "photocurrent"),
    "shunt_resistance": ("saturation_current", "photocurrent"),
}
NO_VOC = "Without photocurrent the curve has no Voc; raise Jph first."

FALL = 0.5  # of Jsc, where the Rs handle sits
PLATEAU = 0.4  # of Voc, where the Rsh handle sits
LARGEST_FACTOR = 1e3  # Jph grows by no more than this in one drag, and shrinks by no more than its square
SLACK = 1e-9  # of Jsc; a pointer this close to an edge has not asked for more
WILD = 1e9  # [V, and A cm⁻² or A]; a pointer further out is as good as there


def positions(model: OneDiode) -> dict[str, tuple[float, float]]:
    """Voltage [V] and current [A cm⁻²] of each handle; the photocurrent's alone for a model without Voc."""
    kept = KeptCurve.of(model)
    if kept is None:
        return {"photocurrent": (0.0, float(model.current(0.0)))}
    jsc, voc = kept.jsc, kept.voc
    ray = _on_ray(model, kept)
    plateau = PLATEAU * voc
    return {
        "photocurrent": (0.0, jsc),
        "saturation_current": (voc, 0.0),
        "ideality": (ray * voc, ray * jsc),
        "series_resistance": (float(model.voltage(FALL * jsc)), FALL * jsc),
        "shunt_resistance": (plateau, float(model.current(plateau))),
    }


def drag(model: OneDiode, parameter: str, x: float, y: float) -> Move:
    """The model whose handle lies under the pointer (x [V], y [A cm⁻²])."""
    x, y = (min(max(value, -WILD), WILD) for value in (x, y))
    if parameter == "photocurrent":
        return _drag_photocurrent(model, y)
    kept = KeptCurve.of(model)
    if kept is None:
        return Move(model, NO_VOC)
    if parameter == "saturation_current":
        return _drag_saturation_current(model, kept, x)
    if parameter == "ideality":
        return _drag_ideality(model, kept, 0.5 * (x / kept.voc + y / kept.jsc))
    if parameter == "series_resistance":
        return _drag_series_resistance(model, kept, x)
    return _drag_shunt_resistance(model, kept, y)


def _on_ray(model: OneDiode, kept: KeptCurve) -> float:
    """t at which the curve crosses the ray (t·Voc, t·Jsc)."""
    slope, whole = model.slope_voltage, kept.voc + kept.jsc * model.series_resistance

    def above(share: float) -> float:
        growth = math.expm1(min(share * whole / slope, 700.0))
        shunt = share * whole / model.shunt_resistance
        return model.photocurrent - model.saturation_current * growth - shunt - share * kept.jsc

    return brentq(above, 0.0, 1.0, xtol=1e-15, rtol=1e-15)


def _drag_photocurrent(model: OneDiode, jsc: float) -> Move:
    """Jsc = y, with u = Jsc·Rs: Jph = Jsc + J0·(exp(u/m) − 1) + u/Rsh."""
    before = model.photocurrent
    smallest, largest = before / LARGEST_FACTOR**2, LIMITS["photocurrent"][1]
    why = "Jsc would need more photocurrent than any device gives"
    if 0 < LARGEST_FACTOR * before < largest:
        largest, why = LARGEST_FACTOR * before, f"Jsc would need more than {LARGEST_FACTOR:.0f} times the photocurrent"
    junction = jsc * model.series_resistance
    growth = math.expm1(min(junction / model.slope_voltage, 700.0))
    photocurrent = jsc + model.saturation_current * growth + junction / model.shunt_resistance
    if photocurrent < smallest:
        edge = no_further("photocurrent", "under light it stays above zero")
        return Move(replace(model, photocurrent=smallest), edge)
    if photocurrent > largest:
        return Move(replace(model, photocurrent=largest), no_further("photocurrent", why))
    return Move(replace(model, photocurrent=photocurrent))


def _drag_saturation_current(model: OneDiode, kept: KeptCurve, voc: float) -> Move:
    """Voc = x: J0 = (Jph − Voc/Rsh)/(exp(Voc/m) − 1)."""
    slope, photocurrent = model.slope_voltage, model.photocurrent
    high = LARGEST_EXPONENT * slope
    why = "Voc is as large as a number the program can carry for J0 allows"
    shunt_limit = photocurrent * model.shunt_resistance * (1.0 - SMALLEST_DIODE_SHARE)
    if shunt_limit < high:
        high, why = shunt_limit, "the shunt alone keeps Voc below Jph·Rsh"
    low, edge = min(0.01 * slope, kept.voc, high), ""
    if voc < low:
        voc, edge = low, no_further("saturation_current", "Voc has to stay above zero")
    elif voc > high:
        if kept.voc >= high:
            return Move(model, no_further("saturation_current", why) if voc > kept.voc * (1 + SLACK) else "")
        voc, edge = high, no_further("saturation_current", why)
    saturation = (photocurrent - voc / model.shunt_resistance) / math.expm1(voc / slope)
    return Move(replace(model, saturation_current=saturation), edge)


def _drag_ideality(model: OneDiode, kept: KeptCurve, share: float) -> Move:
    """The curve passes through (t·Voc, t·Jsc), whose u does not depend on n."""
    resistance, shunt = model.series_resistance, model.shunt_resistance
    conductance, of_one = 1.0 / shunt, model.slope_voltage / model.ideality
    if not kept.has_room(model, resistance):
        return Move(model, no_further("ideality", "the drop Jsc·Rs takes all of Voc, so that n does not show"))
    if kept.diode_current(resistance, conductance) <= SMALLEST_DIODE_SHARE * kept.jsc:
        return Move(model, no_further("ideality", "the shunt sets Voc alone, so that n does not show"))
    share = min(max(share, 0.0), 1.0)
    junction = share * (kept.voc + kept.jsc * resistance)

    def miss(log_ideality: float) -> float:
        slope = math.exp(log_ideality) * of_one
        return kept.current(junction, slope, resistance, conductance) - share * kept.jsc

    low, high = kept.ideality_range(model)
    log_ideality, side = root_or_end(miss, math.log(low), math.log(high), SLACK * kept.jsc)
    ideality = {-1: low, 1: high}.get(side, math.exp(log_ideality))
    because = {
        -1: "the knee is as sharp as Rs and Rsh allow",
        1: STRAIGHT,
    }
    edge = no_further("ideality", because[side]) if side else ""
    return Move(kept.member(model, ideality, resistance, shunt), edge)


def _drag_series_resistance(model: OneDiode, kept: KeptCurve, voltage: float) -> Move:
    """V = x at J = Jsc/2."""
    slope, conductance, target = model.slope_voltage, 1.0 / model.shunt_resistance, FALL * kept.jsc
    voltage = min(max(voltage, 0.0), kept.voc)

    def miss(resistance: float) -> float:
        return kept.current(voltage + target * resistance, slope, resistance, conductance) - target

    low, high = kept.resistance_range(model)
    if not kept.has_room(model, low):
        return Move(model, no_further("series_resistance", SHUNT_ALONE))
    resistance, side = root_or_end(miss, low, high, SLACK * kept.jsc)
    because = {
        -1: "it is zero already, and what is left of the fall comes from n" if low == 0 else SHUNT_ALONE,
        1: SERIES_ALONE,
    }
    edge = no_further("series_resistance", because[side]) if side else ""
    return Move(kept.member(model, model.ideality, resistance, model.shunt_resistance), edge)


def _drag_shunt_resistance(model: OneDiode, kept: KeptCurve, current: float) -> Move:
    """J = y at V = 0.4·Voc; u does not depend on Rsh, and the current there is linear in 1/Rsh."""
    slope, resistance = model.slope_voltage, model.series_resistance
    voltage, drop = PLATEAU * kept.voc, kept.jsc * resistance
    if not kept.has_room(model, resistance):
        return Move(model, no_further("shunt_resistance", "the drop Jsc·Rs takes all of Voc"))
    current = min(max(current, 0.0), 2.0 * kept.jsc)
    junction = voltage + current * resistance
    largest = kept.largest_conductance(model)
    if junction >= kept.voc:
        conductance = -math.inf  # more current than any curve through this Voc carries there
    else:
        # Share of the diode's current still to be taken between u and Voc, as against Jsc·Rs and Voc.
        share = math.expm1((junction - kept.voc) / slope) / math.expm1((drop - kept.voc) / slope)
        bend = (kept.voc - drop) * share - (kept.voc - junction)
        excess = kept.jsc * share - current
        conductance = excess / bend if bend > 0 else math.copysign(math.inf, excess)
    edge = ""
    if conductance <= 0:
        flattest = kept.current(junction, slope, resistance, 0.0)
        if current - flattest > SLACK * kept.jsc:
            edge = no_further("shunt_resistance", "it is infinite already, and the plateau gets no flatter")
        conductance = 0.0
    elif conductance > largest:
        conductance, edge = largest, no_further("shunt_resistance", SHUNT_ALONE)
    shunt = 1.0 / conductance if conductance > 1e-300 else math.inf
    return Move(kept.member(model, model.ideality, resistance, shunt), edge)
