"""The noise of current and of voltage, told apart by repeated sweeps of one device.

One sweep cannot do it: on the plateau the voltage noise does not show, and on the steep part both do. The variance between
repeats at one voltage is σ_J² + (dJ/dV)²·σ_V², a straight line over the squared slope.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from scipy.optimize import nnls

from .errors import FitFailed
from .noise import merged_points
from .sweep import Sweep

_PASSES = 20
_FEWEST = 6  # voltages
_WINDOW = 5  # neighbours on which the slope is judged


def noise_from_repeats(sweeps: Sequence[Sweep]) -> tuple[float, float]:
    """Standard deviations of a current and of a voltage reading.

    Parameters
    ----------
    sweeps : sequence of Sweep
        Two or more sweeps of one device under the same conditions, over a common range of voltage. A shift of the whole
        current from one to the next (a drifting lamp) is taken out in proportion to the current.

    Returns
    -------
    tuple of float
        σ_J [unit of current], σ_V [V]; for ``FitSettings(weights="effective", voltage_noise=…, current_noise=…)``.

    Raises
    ------
    FitFailed
        If there are fewer than two sweeps, they differ in conditions or direction, or hardly overlap.
    """
    if len(sweeps) < 2:
        raise FitFailed("Noise can be judged only from at least two sweeps of one device under the same conditions.")
    first = sweeps[0]
    for other in sweeps[1:]:
        if (other.per_area, other.lit, other.direction) != (first.per_area, first.lit, first.direction):
            raise FitFailed("Repeats must be alike: all lit or all dark, of one direction and one unit of current.")
    points = [merged_points(sweep) for sweep in sweeps]
    low = max(float(p.voltage[0]) for p in points if p.voltage.size)
    high = min(float(p.voltage[-1]) for p in points if p.voltage.size)
    grid = points[0].voltage[(points[0].voltage >= low) & (points[0].voltage <= high)]
    if grid.size < _FEWEST:
        raise FitFailed("The repeats hardly overlap in voltage, so their noise cannot be judged.")
    currents, shares = zip(*(_at(p.voltage, p.current, grid) for p in points), strict=True)
    current = np.array(currents)
    mean = current.mean(axis=0)
    # A drift of the lamp is common to all points of a sweep: one factor each, from all points together.
    factor = (current @ mean) / max(float(mean @ mean), 1e-300)
    current = current / np.where(np.abs(factor) > 0.5, factor, 1.0)[:, None]
    count = len(sweeps)
    # Interpolation between two readings averages their noise.
    variance = current.var(axis=0, ddof=1) / np.mean(shares, axis=0)
    steepness = _slope(grid, current.mean(axis=0)) ** 2
    columns = np.column_stack([np.ones(grid.size), steepness])
    modelled = np.full(grid.size, max(float(np.mean(variance)), 1e-300))
    answer = np.zeros(2)
    for _ in range(_PASSES):
        # A variance scatters in proportion to itself.
        floor = 1e-6 * float(np.max(modelled))
        weight = 1.0 / np.maximum(modelled, max(floor, 1e-300))
        scale = np.maximum(np.max(np.abs(columns * weight[:, None]), axis=0), 1e-300)
        before, answer = answer, nnls(columns * weight[:, None] / scale, variance * weight)[0] / scale
        modelled = columns @ answer
        if np.allclose(answer, before, rtol=1e-6, atol=0.0):
            break
    # One degree of freedom a point went with each factor.
    lost = grid.size * (count - 1) / max(grid.size * (count - 1) - count, 1)
    return float(np.sqrt(answer[0] * lost)), float(np.sqrt(answer[1] * lost))


def _at(voltage: np.ndarray, current: np.ndarray, grid: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Current on a grid by linear interpolation, and the share of a reading's variance that it has, shapes (n,)."""
    upper = np.clip(np.searchsorted(voltage, grid), 1, voltage.size - 1)
    width = voltage[upper] - voltage[upper - 1]
    part = (grid - voltage[upper - 1]) / width
    return (1.0 - part) * current[upper - 1] + part * current[upper], (1.0 - part) ** 2 + part**2


def _slope(voltage: np.ndarray, current: np.ndarray) -> np.ndarray:
    """dJ/dV by parabolas through neighbours, shape (n,)."""
    slope = np.empty(voltage.size)
    half = _WINDOW // 2
    for index in range(voltage.size):
        start = min(max(index - half, 0), max(voltage.size - _WINDOW, 0))
        part = slice(start, start + _WINDOW)
        place = voltage[part] - voltage[index]
        width = max(float(np.max(np.abs(place))), 1e-300)
        slope[index] = np.polynomial.polynomial.polyfit(place / width, current[part], 2)[1] / width
    return slope
