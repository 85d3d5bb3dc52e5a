"""The ideality factor read off the slope of ln J at each voltage."""

from __future__ import annotations

import numpy as np

from .constants import thermal_voltage
from .diode import OneDiode
from .metrics import measure
from .noise import merged_points, noise_level
from .sweep import Sweep
from .weighting import noise_in_proportion, noise_near_zero

# A diode current below this many noise widths has no logarithm worth a slope.
_CLEAR = 4.0
# Windows grow until the slope is known to this share …
_GOAL = 0.03
# … and slopes known worse than this, in the widest window allowed, are left out.
_WORST = 0.15
_WIDEST = 8.0  # widest window, in thermal voltages of the string
_LARGEST = 30.0  # a larger "ideality" is a plateau or a resistor


def local_ideality(sweep: Sweep) -> tuple[np.ndarray, np.ndarray]:
    """n(V) = (dV/d ln J)/(Ns·kT/q), from the dark current, or from Jsc − J under light.

    Series resistance raises it at high voltage, a shunt at low voltage; what it shows in between is the diode.
    Each slope is a weighted straight line through neighbouring points, over the narrowest window in which noise
    leaves it known to 3 %.

    Parameters
    ----------
    sweep : Sweep

    Returns
    -------
    voltage : ndarray, shape (k,)
        Rising [V]; only where the slope means something, so k may be zero.
    ideality : ndarray, shape (k,)
        [-]

    References
    ----------
    Slope of the semi-logarithmic characteristic: C.-T. Sah, R. N. Noyce, W. Shockley, Proc. IRE 45 (1957) 1228
    (from memory).
    """
    nothing = np.empty(0), np.empty(0)
    points = merged_points(sweep)
    if sweep.lit:
        jsc = measure(sweep).jsc
        if jsc.value is None:
            return nothing
        diode, floor = jsc.value - points.current, np.hypot(noise_level(sweep), jsc.uncertainty or 0.0)
    else:
        diode, floor = -points.current, noise_near_zero(sweep)
    clear = (points.voltage > 0) & (diode > _CLEAR * floor)
    voltage, diode, count = points.voltage[clear], diode[clear], points.count[clear]
    if voltage.size < 3:
        return nothing
    log_current = np.log(diode)
    # Noise in proportion to the current, as at high dark currents, adds to the floor.
    proportional = 0.0 if sweep.lit else noise_in_proportion(sweep, floor)
    weight = count / ((floor / diode) ** 2 + proportional**2)
    string_voltage = sweep.series_cells * thermal_voltage(sweep.temperature)
    centre, slope, spread, width = _slopes(voltage, log_current, weight, _WIDEST * string_voltage)
    with np.errstate(divide="ignore", invalid="ignore"):
        ideality = 1.0 / (slope * string_voltage)
        trusted = (slope > 0) & (spread <= _WORST * slope) & (ideality < _LARGEST) & (width > 0)
    return centre[trusted], ideality[trusted]


def model_local_ideality(model: OneDiode, voltage: np.ndarray, *, lit: bool) -> np.ndarray:
    """The same n(V) of a model curve, to lay beside the points.

    Parameters
    ----------
    voltage : ndarray, shape (n,)
        [V]
    lit : bool
        From Jsc − J if true, else from −J.

    Returns
    -------
    ndarray, shape (n,)
        [-]; NaN where the current has no logarithm.
    """
    unit = model.series_cells * thermal_voltage(model.temperature)
    # Differences of ln J over a thousandth of kT/q: exact to 1e-7, and the same for every model.
    step = 1e-3 * unit
    reference = model.current(0.0) if lit else 0.0
    below, above = (reference - model.current(voltage + s) for s in (-step, step))
    slopes = np.full(np.shape(voltage), np.nan)
    clear = (below > 0) & (above > below)
    slopes[clear] = 2 * step / (unit * np.log(above[clear] / below[clear]))
    return slopes


def _slopes(
    voltage: np.ndarray, height: np.ndarray, weight: np.ndarray, widest: float
) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Centre, slope, its standard error and the width of the chosen window round each point, shapes (n,)."""
    size = voltage.size
    middle, top = np.mean(voltage), np.mean(height)
    place, height = voltage - middle, height - top
    totals = [
        np.concatenate([[0.0], np.cumsum(term)])
        for term in (weight, weight * place, weight * place**2, weight * height, weight * place * height)
    ]
    index = np.arange(size)
    centre, slope = voltage.copy(), np.zeros(size)
    spread, width = np.full(size, np.inf), np.zeros(size)
    settled = np.zeros(size, dtype=bool)
    reach = 1
    while not np.all(settled):
        first, last = np.maximum(index - reach, 0), np.minimum(index + reach + 1, size)
        span = voltage[last - 1] - voltage[first]
        # The first window is taken whatever its width: sparse points have no narrower one.
        use = ~settled & ((span <= widest) | (reach == 1))
        if not np.any(use):
            break
        total, x, xx, y, xy = (t[last] - t[first] for t in totals)
        determinant = np.maximum(total * xx - x**2, 1e-300)
        slope[use] = ((total * xy - x * y) / determinant)[use]
        spread[use] = np.sqrt(total / determinant)[use]
        centre[use] = (middle + x / total)[use]
        width[use] = span[use]
        settled |= ~use | (use & (spread <= _GOAL * np.abs(slope)))
        if reach >= size:
            break
        reach = max(reach + 1, round(reach * 1.3))
    return centre, slope, spread, width
