"""Smooth local fits to the points of a sweep, over windows that grow until they would bend the answer.

A window starts with the fewest points that fix the local curve and grows as long as the estimates of all
windows so far agree within their noise; the last one that agrees is used. Dense or noisy points thus get
wide windows, sparse or clean ones narrow windows.

Reference: A. Goldenshluger, A. Nemirovski, Math. Methods Stat. 6 (1997) 135 (intersection of confidence
intervals; from memory).
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from scipy.linalg.lapack import dposv, dpotrs

from .noise import Points

# Half width of the intervals that must overlap, in standard errors. Small, so that bias stays below noise.
_AGREEMENT = 2.0
# The widest window that still agrees has a bias as large as its noise; this many steps back it is small.
_STEPS_BACK = 3
_BENT = 6.0  # mean squared miss, in variances of the noise, of a curve that is clearly bent
_FEW = 5  # fewer points tell nothing of their noise
# Weight of the sweep's noise level against the scatter inside one window, in points.
_PRIOR_POINTS = 5.0
_MOST_STEPS = 5  # Gauss–Newton steps of a fit
_NO_CHANGE = 1e-8  # in the logarithm of the drop
# Where the sums of the powers 0, 1, … 2k − 2 stand in the normal equations of k terms, and the identity of k terms.
_HANKEL = {size: np.add.outer(range(size), range(size)) for size in range(1, 6)}
_IDENTITIES = {size: np.eye(size) for size in range(1, 6)}


@dataclass(frozen=True, slots=True, eq=False)
class LocalCurve:
    """J(V) = ceiling − exp(p(V)), or J(V) = p(V) where ``ceiling`` is None, p a polynomial; fitted in a window.

    Attributes
    ----------
    window : slice
        Points that were used.
    centre, width : float
        p is a polynomial in (V − centre)/width [V].
    coefficients : list of k floats
        Of p, constant first.
    covariance : ndarray, shape (k, k)
        Of the coefficients, for points of unit noise.
    place, weight : ndarray, shape (points in the window,)
        (V − centre)/width of each point, and what a change of p there does to its (weighted) current.
    squares, freedom : float, int
        Squared residuals summed over the window, and its points beyond k.
    """

    window: slice
    centre: float
    width: float
    ceiling: float | None
    coefficients: list[float]
    covariance: np.ndarray
    place: np.ndarray
    weight: np.ndarray
    squares: float
    freedom: int

    def polynomial(self, voltage: float) -> tuple[float, float, float]:
        """p, dp/dV and d²p/dV² at a voltage; plain floats, for a root search asks for it many times."""
        place = (voltage - self.centre) / self.width
        value = slope = bend = 0.0
        for coefficient in reversed(self.coefficients):  # Horner's rule, with its derivatives
            bend = bend * place + 2.0 * slope
            slope = slope * place + value
            value = value * place + coefficient
        return value, slope / self.width, bend / self.width**2

    def current(self, voltage: float) -> tuple[float, float, float]:
        """J, dJ/dV and d²J/dV² at a voltage."""
        value, slope, bend = self.polynomial(voltage)
        if self.ceiling is None:
            return value, slope, bend
        drop = math.exp(min(value, 700.0))
        return self.ceiling - drop, -slope * drop, -(bend + slope * slope) * drop

    def currents(self, voltage: np.ndarray) -> np.ndarray:
        """J at several voltages."""
        place, value = (voltage - self.centre) / self.width, 0.0
        for coefficient in reversed(self.coefficients):
            value = value * place + coefficient
        return value if self.ceiling is None else self.ceiling - np.exp(np.minimum(value, 700.0))

    def sensitivity(self, voltage: float) -> tuple[np.ndarray, np.ndarray]:
        """Change of J and of dJ/dV at a fixed voltage per change of each coefficient, shapes (k,)."""
        place, size = (voltage - self.centre) / self.width, len(self.coefficients)
        powers = [1.0]
        for _ in range(size - 1):
            powers.append(powers[-1] * place)
        level = np.array(powers)
        slope = np.array([order * power / self.width for order, power in enumerate([0.0, *powers[:-1]])])
        if self.ceiling is None:
            return level, slope
        value, steepness, _ = self.polynomial(voltage)
        drop = math.exp(min(value, 700.0))
        return -drop * level, -drop * (slope + steepness * level)

    def response(self, sensitivity: np.ndarray) -> np.ndarray:
        """Change per (weighted) current of what changes so with the coefficients, shape (points in the window,)."""
        powers = np.vander(self.place, len(self.coefficients), increasing=True)
        return self.weight * (powers @ (self.covariance @ sensitivity))

    def spread(self, sensitivity: np.ndarray) -> float:
        """Standard deviation, for points of unit noise, of what changes so with the coefficients."""
        return math.sqrt(max(float(sensitivity @ self.covariance @ sensitivity), 0.0))


class Reading(NamedTuple):
    """A number read off one curve: its sensitivity to each coefficient, shape (k,), and where it was read [V]."""

    curve: LocalCurve
    value: float
    sensitivity: np.ndarray
    voltage: float


@dataclass(frozen=True, slots=True, eq=False)
class Estimate:
    """A number read off the points.

    Attributes
    ----------
    value : float
    response : ndarray, shape (n,)
        Change of the value per standard deviation of each (merged) point; errors of several estimates
        combine point by point, so that what they share is not counted twice.
    voltage : float
        Where it was read [V].
    known : bool
        False where the points are too few for an uncertainty.
    """

    value: float
    response: np.ndarray
    voltage: float
    known: bool = True

    @property
    def uncertainty(self) -> float | None:
        return float(np.linalg.norm(self.response)) if self.known else None


def fit_line(points: Points, window: slice) -> LocalCurve | None:
    """Straight line through the two or more points of a window; None if they do not fix it."""
    place, current, count, centre, width = _of(points, window)
    total, weighted = float(count.sum()), count * place
    first, second, mean = float(weighted.sum()), float(weighted @ place), float(count @ current) / total
    determinant = total * second - first * first
    if not determinant > 1e-14 * total * second:
        return None
    above = current - mean  # sums of small numbers keep more digits
    response = float(weighted @ above)
    level, slope = -first * response / determinant, total * response / determinant
    residual = above - (level + slope * place)
    return LocalCurve(
        window,
        centre,
        width,
        None,
        [mean + level, slope],
        np.array([[second / determinant, -first / determinant], [-first / determinant, total / determinant]]),
        place,
        np.sqrt(count),
        float(count @ (residual * residual)),
        current.size - 2,
    )


def fit_drop(points: Points, window: slice, order: int, ceiling: float) -> LocalCurve | None:
    """Fit of ceiling − exp(polynomial): near and beyond the knee the drop from the plateau is nearly exponential,
    so that few and far points suffice. Least squares in J, by a few Gauss–Newton steps from the logarithms."""
    place, current, count, centre, width = _of(points, window)
    terms = min(order, current.size - 1) + 1
    powers = _powers(place, 2 * terms - 1)
    design = powers[:terms]
    wanted = ceiling - current
    drop = np.maximum(wanted, 1e-3 * max(float(wanted.max()), -float(wanted.min())))
    weight = count * drop * drop
    coefficients, factor = _solve(powers @ weight, design @ (weight * np.log(drop)))
    if factor is None:
        return None
    last, converged = 1.0, False
    for attempt in range(_MOST_STEPS + 1):
        modelled = np.exp(np.minimum(coefficients @ design, 700.0))
        residual = wanted - modelled
        if converged or attempt == _MOST_STEPS:
            break
        weight = count * modelled
        step, factor = _solve(powers @ (weight * modelled), design @ (weight * residual))
        if factor is None:
            return None
        coefficients = coefficients + step
        change = max(map(abs, step.tolist()))
        # Steps shrink at least as fast as the last one did: the next one would be no more than this.
        converged = change * min(change / last, 1.0) < _NO_CHANGE
        last = change
    covariance, _ = dpotrs(factor, _IDENTITIES[terms], lower=1)
    return LocalCurve(
        window,
        centre,
        width,
        ceiling,
        coefficients.tolist(),
        covariance,
        place,
        -np.sqrt(count) * modelled,
        float(count @ (residual * residual)),
        current.size - terms,
    )


def windows(points: Points, voltage: float, smallest: int) -> Iterator[slice]:
    """Growing ranges of points around a voltage, ``smallest`` points on each side at first."""
    size, below = points.voltage.size, int(points.voltage.searchsorted(voltage))
    reach, last = smallest, None
    while True:
        window = max(below - reach, 0), min(below + reach, size)
        if window[1] - window[0] >= min(2 * smallest, size) and window != last:
            yield slice(*window)
        if window == (0, size):
            return
        last = window
        reach = max(reach + 1, round(reach * 1.5))


def until_it_bends(curves: Iterable[LocalCurve | None], noise: float) -> Iterator[LocalCurve | None]:
    """Curves up to the first that misses its points by far more than noise; wider windows can only be worse."""
    for curve in curves:
        yield curve
        if curve is not None and curve.freedom > 3 and curve.squares > _BENT * noise**2 * curve.freedom:
            return


def grow(
    readings: Iterable[Reading | None], points: Points, noise: float, agreement: float = _AGREEMENT
) -> Estimate | None:
    """The reading from the widest window that agrees with all narrower ones; None if nothing can be read.

    Parameters
    ----------
    readings : iterable of Reading or None
        Of fits over growing windows; None where a fit does not have it. Asked for one by one, so that
        windows beyond the last that agrees need not be fitted.
    noise : float
        Noise of one point [unit of current].
    agreement : float
        Half width of the intervals that must overlap, in standard errors.
    """
    low, high = -math.inf, math.inf
    agreeing: list[Reading] = []
    for reading in readings:
        if reading is None:
            if agreeing:
                break
            continue
        reach = agreement * noise * reading.curve.spread(reading.sensitivity)
        if not math.isfinite(reading.value + reach):
            continue
        low, high = max(low, reading.value - reach), min(high, reading.value + reach)
        if low > high:
            break
        agreeing.append(reading)
        if points.voltage.size < _FEW:
            break  # too few to tell noise from shape: the nearest points alone
    if not agreeing:
        return None
    last = agreeing[-1].curve.window
    # Where even all points agree, nothing says that the widest window is too wide.
    back = 1 if last.stop - last.start == points.voltage.size else 1 + _STEPS_BACK
    curve, value, sensitivity, voltage = agreeing[-min(back, len(agreeing))]
    # The scatter of a narrow window says little by itself; the noise of the whole sweep steadies it.
    variance = (curve.squares + _PRIOR_POINTS * noise**2) / (curve.freedom + _PRIOR_POINTS)
    response = np.zeros(points.voltage.size)
    response[curve.window] = math.sqrt(variance) * curve.response(sensitivity)
    return Estimate(float(value), response, float(voltage), known=points.voltage.size >= _FEW)


def _of(points: Points, window: slice) -> tuple[np.ndarray, np.ndarray, np.ndarray, float, float]:
    """Places from −1 to 1, currents and counts in a window, and its centre and half width [V]."""
    voltage = points.voltage[window]
    first, last = float(voltage[0]), float(voltage[-1])
    centre, width = 0.5 * (first + last), max(0.5 * (last - first), 1e-12)
    return (voltage - centre) / width, points.current[window], points.count[window], centre, width


def _powers(place: np.ndarray, count: int) -> np.ndarray:
    """Powers 0, 1, … of places, shape (count, n)."""
    powers = np.empty((count, place.size))
    powers[0], powers[1] = 1.0, place
    filled = 2
    while filled < count:
        more = min(filled - 1, count - filled)
        np.multiply(powers[1 : 1 + more], powers[filled - 1], out=powers[filled : filled + more])
        filled += more
    return powers


def _solve(moments: np.ndarray, right: np.ndarray) -> tuple[np.ndarray, np.ndarray | None]:
    """Normal equations of a polynomial from the weighted sums of its powers: solution and Cholesky factor, or None
    where the terms are not independent. The few terms are well scaled, so the normal equations lose nothing that
    matters here, and they are several times faster than a decomposition of the points."""
    size = right.size
    factor, solution, failed = dposv(moments[_HANKEL[size]], right, lower=1)
    return solution, None if failed else factor
