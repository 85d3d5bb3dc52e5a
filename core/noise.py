"""How much the points of a sweep scatter, judged from neighbours alone."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .sweep import Sweep

# Median of |x| for a standard normal x.
_MEDIAN_DEVIATION = 0.6744897501960817


@dataclass(frozen=True, slots=True, eq=False)
class Points:
    """Points of a sweep by rising voltage, those at one voltage merged to their mean.

    Attributes
    ----------
    voltage, current : ndarray, shape (n,)
        [V] and [A cm⁻²] or [A].
    count : ndarray, shape (n,)
        How many measured points each stands for.
    scatter : ndarray
        Deviations of merged points from their mean, scaled to the scatter of one point.
    """

    voltage: np.ndarray
    current: np.ndarray
    count: np.ndarray
    scatter: np.ndarray


def merged_points(sweep: Sweep) -> Points:
    """The points of a sweep with finite numbers, sorted and merged."""
    usable = np.isfinite(sweep.voltage) & np.isfinite(sweep.current)
    voltage, current = sweep.voltage[usable], sweep.current[usable]
    order = np.argsort(voltage, kind="stable")
    voltage, current = voltage[order], current[order]
    # Closer than this, a difference of voltages is rounding; one beyond all floats is none either.
    with np.errstate(over="ignore"):
        steps = voltage[1:] - voltage[:-1] > 1e-9 * (voltage[-1] - voltage[0] if voltage.size else 0.0)
    if steps.all():
        return Points(voltage, current, np.ones(voltage.size), np.empty(0))
    member = np.concatenate([[0], np.cumsum(steps)])
    count = np.bincount(member)
    mean = np.bincount(member, weights=current) / count
    shared = count[member] > 1
    freedom = (count[member][shared] - 1) / count[member][shared]
    scatter = (current - mean[member])[shared] / np.sqrt(freedom)
    return Points(np.bincount(member, weights=voltage) / count, mean, count.astype(float), scatter)


def noise_level(sweep: Sweep) -> float:
    """Standard deviation of the noise of one point, robust against steps, kinks and outliers.

    Each point is predicted from its neighbours (a cubic through two on either side, a straight line in short
    sweeps); the median of the misses, scaled as for normal noise, is the level. In the dark, where the
    current spans decades, it is dominated by neither the low nor the high end.

    Returns
    -------
    float
        [unit of current]; always above zero, at least the rounding of a float.

    References
    ----------
    Median absolute deviation as a robust scale: F. R. Hampel, J. Am. Stat. Assoc. 69 (1974) 383 (from memory).
    """
    return noise_of_points(merged_points(sweep))


def noise_of_points(points: Points) -> float:
    """``noise_level`` of points that are merged already."""
    largest = float(np.abs(points.current).max(initial=0.0))
    floor = max(1e-15 * largest, 1e-300)
    misses = _misses(points)
    if points.scatter.size:
        misses = np.concatenate([misses, points.scatter])
    if misses.size == 0:
        return floor
    level = _median(np.abs(misses)) / _MEDIAN_DEVIATION
    if level <= floor:
        # Most neighbours agree exactly: the noise hides in the rounding of the file.
        steps = np.diff(np.unique(points.current))
        if points.voltage.size > 3 and 0 < steps.size < points.voltage.size // 2:
            level = float(np.min(steps)) / np.sqrt(12.0)
    return max(level, floor)


def _misses(points: Points) -> np.ndarray:
    """Difference of each inner point from its neighbours' prediction, in widths of one point's noise."""
    voltage, current, count = points.voltage, points.current, points.count
    reach = 2 if voltage.size >= 8 else 1
    inner = voltage.size - 2 * reach
    if inner < 1:
        return np.empty(0)
    middle, *nodes = (slice(shift, shift + inner) for shift in (reach, *range(reach), *range(reach + 1, 2 * reach + 1)))
    places = [voltage[node] for node in nodes]
    ahead = [voltage[middle] - place for place in places]
    predicted, variance = np.zeros(inner), 1.0 / count[middle]
    for i, node in enumerate(nodes):
        above, below = 1.0, 1.0
        for j in range(len(nodes)):
            if j != i:
                above, below = above * ahead[j], below * (places[i] - places[j])
        share = above / below  # Lagrange's weight
        predicted += share * current[node]
        variance += share * share / count[node]
    return (current[middle] - predicted) / np.sqrt(variance)


def _median(values: np.ndarray) -> float:
    """As numpy's, without what that does for arrays of many axes; this runs once for every sweep of a batch."""
    ordered, middle = np.sort(values), values.size // 2
    return float(ordered[middle] if values.size % 2 else 0.5 * (ordered[middle - 1] + ordered[middle]))
