"""Ideality factor and saturation current from the straightest part of a dark sweep on its semi-logarithmic view."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from .constants import thermal_voltage
from .metrics import measure
from .noise import merged_points
from .sweep import Sweep
from .weighting import noise_near_zero

_CLEAR = 30.0  # currents below this many noise widths are left out
# A slope counts at its value less this many standard errors: noise makes some windows steep by luck.
_CAUTION = 3.0
_SPAN = math.log(10.0)  # one decade of current
_FEWEST = 4  # points in the window
_LARGEST_SHUNT_SHARE = 0.8  # of the current; what the diode then carries is a difference of large numbers
# Below this many kT/q per cell a resistor is steep on a logarithmic scale too, and the −1 of the diode law counts.
LOWEST_VOLTAGE = 6.0


@dataclass(frozen=True, slots=True)
class DarkSlope:
    """The straight line ln J = ln J0 + V/(n·Ns·kT/q).

    Attributes
    ----------
    ideality, ideality_uncertainty : float
        n [-]
    saturation_current, log_uncertainty : float
        J0 [A cm⁻²], and the uncertainty of ln J0.
    low, high : float
        Voltages between which it was drawn [V].
    shunt_resistance : float
        Of the shunt whose current was taken off before; ``inf`` where none shows [Ω cm²].
    """

    ideality: float
    ideality_uncertainty: float
    saturation_current: float
    log_uncertainty: float
    low: float
    high: float
    shunt_resistance: float


def dark_slope(sweep: Sweep) -> DarkSlope | None:
    """The straight line through the steepest decade of a dark sweep; None if no decade of current stands clear.

    The shunt's current V/R, R from the slope at V = 0, is taken off first. What remains of shunt and series resistance
    makes the slope flatter, so the steepest decade is the one they disturb least and n errs on the high side.

    References
    ----------
    C.-T. Sah, R. N. Noyce, W. Shockley, Proc. IRE 45 (1957) 1228 (n from the slope of ln J; from memory).
    """
    points = merged_points(sweep)
    of_one = sweep.series_cells * thermal_voltage(sweep.temperature)
    shunt = measure(sweep).slope_resistance_jsc.value or math.inf
    diode = -points.current - points.voltage / shunt
    clear = (points.voltage > LOWEST_VOLTAGE * of_one) & (diode > _CLEAR * noise_near_zero(sweep))
    clear &= diode > (1.0 - _LARGEST_SHUNT_SHARE) * -points.current
    voltage, count = points.voltage[clear], points.count[clear]
    if voltage.size < _FEWEST:
        return None
    height = np.log(diode[clear])
    best = None
    for first in range(voltage.size - _FEWEST + 1):
        above = np.flatnonzero(height[first:] >= height[first] + _SPAN)
        if above.size == 0:
            break
        window = slice(first, max(first + int(above[0]) + 1, first + _FEWEST))
        line = _line(voltage[window], height[window], count[window])
        sure = line[0] - _CAUTION * line[1]
        if best is None or sure > best[0]:
            best = sure, line, window
    if best is None or not best[0] > 0:
        return None
    _, (slope, spread, intercept, log_spread), window = best
    ideality = 1.0 / (slope * of_one)
    return DarkSlope(
        ideality=ideality,
        ideality_uncertainty=ideality * spread / slope,
        saturation_current=math.exp(intercept),
        log_uncertainty=log_spread,
        low=float(voltage[window][0]),
        high=float(voltage[window][-1]),
        shunt_resistance=shunt,
    )


def _line(voltage: np.ndarray, height: np.ndarray, count: np.ndarray) -> tuple[float, float, float, float]:
    """Slope and intercept of a weighted straight line, each followed by its standard error from the scatter."""
    total = count.sum()
    centre, level = count @ voltage / total, count @ height / total
    place = voltage - centre
    square = count @ place**2
    slope = (count * place) @ height / square
    residual = height - level - slope * place
    scatter = math.sqrt(count @ residual**2 / max(voltage.size - 2, 1))
    spread = scatter / math.sqrt(square)
    log_spread = math.hypot(scatter / math.sqrt(total), spread * centre)
    return float(slope), float(spread), float(level - slope * centre), log_spread
