"""The four handles of a dark two-diode curve, on the semi-logarithmic view of |J| over V.

From low to high voltage Rsh, J0₂, J0₁ and Rs, each where it shows most. A point (V, |J|) has the junction voltage
u = V − |J|·Rs, and |J| = J0₁·(exp(u/m₁) − 1) + J0₂·(exp(u/m₂) − 1) + u/Rsh gives every parameter directly.
"""

from __future__ import annotations

import math
from dataclasses import replace

from .dark_handles import LARGEST_SIZE, NO_FORWARD, span_of
from .moves import LIMITS, Move, no_further
from .two_diode import TwoDiode

FOLLOWERS = {
    "shunt_resistance": (),
    "saturation_current_2": (),
    "saturation_current_1": (),
    "series_resistance": (),
}

_HIGHEST = 0.96  # of the forward range: the Rs handle
_GAP = 0.08  # of the sweep's range, between neighbours
_FACTOR = 1e6  # a pointer further above or below the handle is as good as there
_J0_FACTOR = 1e12  # a J0 moves by no more than this in one drag
_SLACK = 1e-9


def positions(model: TwoDiode, span: tuple[float, float]) -> dict[str, tuple[float, float]]:
    """Voltage [V] and |J| [A cm⁻²] of each handle; empty if the span [V] has no forward part."""
    limits = span_of(span)
    if limits is None:
        return {}
    low, high = limits
    gap = min(_GAP * (high - min(low, 0.0)), 0.2 * high)
    top = _HIGHEST * high
    meeting = _meeting_voltage(model, top)
    bottom = min(0.12 * high, top - 3 * gap)
    second = min(max(0.5 * (bottom + meeting), bottom + gap), top - 2 * gap)
    first = min(max(0.5 * (meeting + top), second + gap), top - gap)
    voltages = {
        "shunt_resistance": bottom,
        "saturation_current_2": second,
        "saturation_current_1": first,
        "series_resistance": top,
    }
    return {name: (voltage, _dark_current(model, voltage)) for name, voltage in voltages.items()}


def drag(model: TwoDiode, parameter: str, y: float, span: tuple[float, float]) -> Move:
    """The model whose dark curve passes through |J| = y [A cm⁻²] at the handle's voltage."""
    places = positions(model, span)
    if not places:
        return Move(model, NO_FORWARD)
    voltage, before = places[parameter]
    if not 0 < before < LARGEST_SIZE:
        return Move(model, "There is no dark current to drag at this voltage.")
    y = min(max(y, before / _FACTOR), before * _FACTOR)
    if parameter == "series_resistance":
        return _drag_series_resistance(model, voltage, y)
    if parameter == "shunt_resistance":
        return _drag_shunt_resistance(model, voltage, y)
    return _drag_saturation_current(model, parameter, voltage, y)


def _dark_current(model: TwoDiode, voltage: float) -> float:
    return abs(float(replace(model, photocurrent=0.0).current(voltage)))


def _meeting_voltage(model: TwoDiode, top: float) -> float:
    """Where both diodes carry the same, within the forward range [V]."""
    first, second = model.slope_voltages
    if not (model.saturation_current_2 > 0 and first < second):
        return 0.5 * top
    ratio = math.log(model.saturation_current_2) - math.log(max(model.saturation_current_1, 1e-300))
    return min(max(ratio / (1.0 / first - 1.0 / second), 0.3 * top), 0.8 * top)


def _drag_saturation_current(model: TwoDiode, parameter: str, voltage: float, current: float) -> Move:
    """J0ᵢ = (|J| − what the other diode and the shunt carry)/(exp(u/mᵢ) − 1)."""
    before, (smallest, largest) = getattr(model, parameter), LIMITS[parameter]
    if before > 0:
        smallest, largest = max(smallest, before / _J0_FACTOR), min(largest, before * _J0_FACTOR)
    junction = voltage - current * model.series_resistance
    slope = model.slope_voltages[0 if parameter == "saturation_current_1" else 1]
    saturation = math.inf
    if junction > 0:
        rest = _carried(replace(model, **{parameter: 0.0}), junction)
        saturation = (current - rest) / math.expm1(min(junction / slope, 700.0))
    if saturation > largest:
        return Move(
            replace(model, **{parameter: largest}), no_further(parameter, "Rs alone sets the current at this voltage")
        )
    if saturation < smallest:
        edge = no_further(parameter, "the other diode and the shunt alone carry the current at this voltage")
        return Move(replace(model, **{parameter: smallest}), edge)
    return Move(replace(model, **{parameter: saturation}))


def _drag_series_resistance(model: TwoDiode, voltage: float, current: float) -> Move:
    """Rs = (V − u)/|J|, where u follows from |J| alone."""
    junction = float(replace(model, photocurrent=0.0, series_resistance=0.0).voltage(-current))
    resistance = (voltage - junction) / current
    if resistance >= 0:
        return Move(replace(model, series_resistance=min(resistance, LIMITS["series_resistance"][1])))
    edge = no_further("series_resistance", "it is zero already, and the diodes carry no more at this voltage")
    return Move(replace(model, series_resistance=0.0), edge if junction > voltage * (1 + _SLACK) else "")


def _drag_shunt_resistance(model: TwoDiode, voltage: float, current: float) -> Move:
    """1/Rsh = (|J| − what the diodes carry)/u."""
    # Close to u = 0 the shunt is a short circuit and Rs carries everything.
    junction, edge = max(voltage - current * model.series_resistance, 1e-6 * voltage), ""
    if junction == 1e-6 * voltage:
        current = (voltage - junction) / model.series_resistance
        edge = no_further("shunt_resistance", "Rs alone sets the current at this voltage")
    diodes = _carried(replace(model, shunt_resistance=math.inf), junction)
    conductance = (current - diodes) / junction
    if conductance > 0:
        return Move(replace(model, shunt_resistance=1.0 / conductance), edge)
    if diodes > current * (1 + _SLACK):
        edge = no_further("shunt_resistance", "it is infinite already, and the diodes carry the rest")
    return Move(replace(model, shunt_resistance=math.inf), edge)


def _carried(model: TwoDiode, junction: float) -> float:
    """|J| in the dark at a junction voltage [A cm⁻²]."""
    first, second = model.slope_voltages
    carried = model.saturation_current_1 * math.expm1(min(junction / first, 700.0))
    carried += model.saturation_current_2 * math.expm1(min(junction / second, 700.0))
    return carried + junction / model.shunt_resistance
