"""The four handles of a dark curve, on the semi-logarithmic view of |J| over V.

Every handle solves for its parameter with the curve passing through the pointer's current at the handle's own voltage.
A point (V, |J|) has the junction voltage u = V − |J|·Rs, and |J| = J0·(exp(u/m) − 1) + u/Rsh.
"""

from __future__ import annotations

import math
from dataclasses import replace

from .diode import OneDiode
from .moves import LARGEST_EXPONENT, LIMITS, Move, no_further, root_or_end

FOLLOWERS = {
    "saturation_current": (),
    "ideality": ("saturation_current",),
    "series_resistance": (),
    "shunt_resistance": (),
}
NO_FORWARD = "The sweep has no forward voltages, where the dark handles sit."

_HIGHEST = 0.96  # of the forward range: the Rs handle
_GAP = 0.08  # of the sweep's range, between neighbours
_FACTOR = 1e6  # a pointer further above or below the handle is as good as there
_J0_FACTOR = 1e12  # J0 moves by no more than this in one drag
_SLACK = 1e-9
_VOLTAGES = 1e-6, 1e4  # [V]; no sweep ends outside
LARGEST_SIZE = 1e100  # [A cm⁻²]; a model that far off has no handles to speak of


def positions(model: OneDiode, span: tuple[float, float]) -> dict[str, tuple[float, float]]:
    """Voltage [V] and |J| [A cm⁻²] of each handle; empty if the span [V] has no forward part."""
    limits = span_of(span)
    if limits is None:
        return {}
    low, high = limits
    model = _dark(model)
    gap = min(_GAP * (high - min(low, 0.0)), 0.25 * high)
    top = _HIGHEST * high
    bend, knee = (min(voltage, high) for voltage in _diode_region(model, high))
    bottom = min(max(0.5 * bend, 0.06 * high), 0.25 * high, top - 3 * gap)
    start, end = max(bend, bottom), max(min(knee, top), bend, bottom)
    # A third of the way up the exponential part, and near its end; then apart from each other and from the rest.
    pivot = min(max(start + 0.35 * (end - start), bottom + gap), top - 2 * gap)
    upper = min(max(start + 0.85 * (end - start), pivot + gap), top - gap)
    voltages = {
        "saturation_current": pivot,
        "ideality": upper,
        "series_resistance": top,
        "shunt_resistance": bottom,
    }
    return {name: (voltage, _dark_current(model, voltage)) for name, voltage in voltages.items()}


def drag(model: OneDiode, parameter: str, y: float, span: tuple[float, float]) -> Move:
    """The model whose dark curve passes through |J| = y [A cm⁻²] at the handle's voltage."""
    places = positions(model, span)
    if not places:
        return Move(model, NO_FORWARD)
    voltage, before = places[parameter]
    if not 0 < before < LARGEST_SIZE:
        return Move(model, "There is no dark current to drag at this voltage.")
    y = min(max(y, before / _FACTOR), before * _FACTOR)
    if parameter == "saturation_current":
        return _drag_saturation_current(model, voltage, y)
    if parameter == "ideality":
        return _drag_ideality(model, places["saturation_current"], voltage, y)
    if parameter == "series_resistance":
        return _drag_series_resistance(model, voltage, y)
    return _drag_shunt_resistance(model, voltage, y)


def span_of(span: tuple[float, float]) -> tuple[float, float] | None:
    """Lower and upper end of a voltage range [V]; None if it has no forward part to place handles on."""
    low, high = min(span), max(span)
    return (low, high) if _VOLTAGES[0] < high < _VOLTAGES[1] and low > -_VOLTAGES[1] else None


def _dark(model: OneDiode) -> OneDiode:
    return replace(model, photocurrent=0.0)


def _dark_current(model: OneDiode, voltage: float) -> float:
    return abs(float(_dark(model).current(voltage)))


def _diode_region(model: OneDiode, high: float) -> tuple[float, float]:
    """Voltages between which the diode carries more than the shunt and Rs drops less than m [V]."""
    slope, saturation, resistance = model.slope_voltage, model.saturation_current, model.series_resistance
    junction = high
    for _ in range(30):  # J0·(exp(u/m) − 1) = u/Rsh by iteration from above; a handle's place needs no digits
        junction = slope * math.log1p(min(junction / (model.shunt_resistance * saturation), 1e300))
    bend = junction + resistance * 2.0 * junction / model.shunt_resistance
    if resistance * saturation <= 1e-290 * slope:
        return bend, high
    knee = slope * math.log(max(slope / (resistance * saturation), 1.0))
    return bend, knee + slope + resistance * knee / model.shunt_resistance


def _drag_saturation_current(model: OneDiode, voltage: float, current: float) -> Move:
    """J0 = (|J| − u/Rsh)/(exp(u/m) − 1)."""
    smallest, largest = LIMITS["saturation_current"]
    smallest = max(smallest, model.saturation_current / _J0_FACTOR)
    largest = min(largest, model.saturation_current * _J0_FACTOR)
    junction = voltage - current * model.series_resistance
    through_diode = current - junction / model.shunt_resistance
    saturation = math.inf
    if junction > 0:
        saturation = through_diode / math.expm1(min(junction / model.slope_voltage, 700.0))
    if saturation > largest:
        edge = no_further("saturation_current", "Rs alone sets the current at this voltage")
        return Move(replace(model, saturation_current=largest), edge)
    if saturation < smallest:
        edge = no_further("saturation_current", "the shunt alone carries the current at this voltage")
        return Move(replace(model, saturation_current=smallest), edge)
    return Move(replace(model, saturation_current=saturation))


def _drag_ideality(model: OneDiode, pivot: tuple[float, float], voltage: float, current: float) -> Move:
    """n from the slope between two points; J0 follows, so that the current at the pivot stays."""
    resistance, conductance = model.series_resistance, 1.0 / model.shunt_resistance
    of_one = model.slope_voltage / model.ideality  # m at n = 1
    at_pivot = pivot[0] - pivot[1] * resistance
    # The same as |J| − u/Rsh at the pivot, without its cancellation.
    through_diode = model.saturation_current * math.expm1(at_pivot / model.slope_voltage)
    if not (at_pivot > 0 and through_diode > 0):
        return Move(model, no_further("ideality", "Rs and the shunt set the curve alone, so that n does not show"))

    def moved(ideality: float) -> OneDiode:
        saturation = through_diode / math.expm1(at_pivot / (ideality * of_one))
        return replace(model, ideality=ideality, saturation_current=saturation)

    low = min(max(LIMITS["ideality"][0], voltage / (LARGEST_EXPONENT * of_one)), model.ideality)
    high = max(5.0 * voltage / of_one, model.ideality)
    steepest, flattest = moved(low), moved(high)
    most, least = _dark_current(steepest, voltage), _dark_current(flattest, voltage)
    if current >= most:
        beyond = current > most * (1 + _SLACK)
        return Move(steepest, no_further("ideality", "the slope is as steep as Rs allows") if beyond else "")
    if current <= least:
        beyond = current < least * (1 - _SLACK)
        return Move(flattest, no_further("ideality", "the curve is already as flat as a resistor's") if beyond else "")
    junction = voltage - current * resistance
    target = math.log(max(current - junction * conductance, 1e-300)) - math.log(through_diode)

    def miss(log_ideality: float) -> float:
        slope = math.exp(log_ideality) * of_one
        return _log_expm1(junction / slope) - _log_expm1(at_pivot / slope) - target

    return Move(moved(math.exp(root_or_end(miss, math.log(low), math.log(high), _SLACK)[0])))


def _drag_series_resistance(model: OneDiode, voltage: float, current: float) -> Move:
    """Rs = (V − u)/|J|, where u follows from |J| alone."""
    junction = float(replace(_dark(model), series_resistance=0.0).voltage(-current))
    resistance = (voltage - junction) / current
    if resistance >= 0:
        return Move(replace(model, series_resistance=min(resistance, LIMITS["series_resistance"][1])))
    beyond = junction > voltage * (1 + _SLACK)
    edge = no_further("series_resistance", "it is zero already, and the diode carries no more at this voltage")
    return Move(replace(model, series_resistance=0.0), edge if beyond else "")


def _drag_shunt_resistance(model: OneDiode, voltage: float, current: float) -> Move:
    """1/Rsh = (|J| − J0·(exp(u/m) − 1))/u."""
    # Close to u = 0 the shunt is a short circuit and Rs carries everything.
    junction = max(voltage - current * model.series_resistance, 1e-6 * voltage)
    edge = ""
    if junction == 1e-6 * voltage:
        current = (voltage - junction) / model.series_resistance
        edge = no_further("shunt_resistance", "Rs alone sets the current at this voltage")
    through_diode = model.saturation_current * math.expm1(min(junction / model.slope_voltage, 700.0))
    conductance = (current - through_diode) / junction
    if conductance > 0:
        return Move(replace(model, shunt_resistance=1.0 / conductance), edge)
    if through_diode > current * (1 + _SLACK):
        edge = no_further("shunt_resistance", "it is infinite already, and the diode carries the rest")
    return Move(replace(model, shunt_resistance=math.inf), edge)


def _log_expm1(value: float) -> float:
    """ln(exp(x) − 1) without overflow, x > 0."""
    return value + math.log(-math.expm1(-value))
