"""Smooth local fits to the points of a sweep, over windows that grow until they would bend the answer.

A window starts with the fewest points that fix the local curve and grows as long as the estimates of all
windows so far agree within their noise; the last one that agrees is used. Dense or noisy points thus get
wide windows, sparse or clean ones narrow windows.

Reference: A. Goldenshluger, A. Nemirovski, Math. Methods Stat. 6 (1997) 135 (intersection of confidence
intervals; from memory).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass

import numpy as np
from scipy.linalg.lapack import dposv

from .noise import Points

# Half width of the intervals that must overlap, in standard errors. Small, so that bias stays below noise.
_AGREEMENT = 2.0
# The widest window that still agrees has a bias as large as its noise; this many steps back it is small.
_STEPS_BACK = 3
_BENT = 6.0  # mean squared miss, in variances of the noise, of a curve that is clearly bent
_FEW = 5  # fewer points tell nothing of their noise
# Weight of the sweep's noise level against the scatter inside one window, in points.
_PRIOR_POINTS = 5.0


@dataclass(frozen=True, slots=True, eq=False)
class LocalCurve:
    """J(V) = ceiling − exp(p(V)), or J(V) = p(V) where ``ceiling`` is None, p a polynomial; fitted in a window.

    Attributes
    ----------
    window : slice
        Points that were used.
    centre, width : float
        p is a polynomial in (V − centre)/width [V].
    coefficients : ndarray, shape (k,)
        Of p, constant first.
    gain : ndarray, shape (k, points in the window)
        Change of the coefficients per change of each (weighted) current.
    squares, freedom : float, int
        Squared residuals summed over the window, and its points beyond k.
    """

    window: slice
    centre: float
    width: float
    ceiling: float | None
    coefficients: np.ndarray
    gain: np.ndarray
    squares: float
    freedom: int

    def polynomial(self, voltage: float) -> tuple[float, float, float]:
        """p, dp/dV and d²p/dV² at a voltage; plain floats, for a root search asks for it many times."""
        place = (voltage - self.centre) / self.width
        value = slope = bend = 0.0
        for coefficient in self.coefficients[::-1].tolist():  # Horner's rule, with its derivatives
            bend = bend * place + 2.0 * slope
            slope = slope * place + value
            value = value * place + coefficient
        return value, slope / self.width, bend / self.width**2

    def powers(self, voltage: float, derivative: int = 0) -> np.ndarray:
        """p, or dp/dV, per coefficient at a voltage, shape (k,)."""
        place, size = (voltage - self.centre) / self.width, self.coefficients.size
        if derivative == 0:
            return np.array([place**order for order in range(size)])
        return np.array([0.0] + [order * place ** (order - 1) / self.width for order in range(1, size)])

    def current(self, voltage: float) -> tuple[float, float, float]:
        """J, dJ/dV and d²J/dV² at a voltage."""
        value, slope, bend = self.polynomial(voltage)
        if self.ceiling is None:
            return value, slope, bend
        drop = math.exp(min(value, 700.0))
        return self.ceiling - drop, -slope * drop, -(bend + slope * slope) * drop

    def currents(self, voltage: np.ndarray) -> np.ndarray:
        """J at several voltages."""
        place = (voltage - self.centre) / self.width
        value = np.vander(place, self.coefficients.size, increasing=True) @ self.coefficients
        return value if self.ceiling is None else self.ceiling - np.exp(np.minimum(value, 700.0))

    def sensitivity(self, voltage: float, derivative: int = 0) -> np.ndarray:
        """Change of J, or of dJ/dV, at a fixed voltage per change of each (weighted) current."""
        if self.ceiling is None:
            return self.powers(voltage, derivative) @ self.gain
        value, slope, _ = self.polynomial(voltage)
        drop = math.exp(min(value, 700.0))
        if derivative == 0:
            return -drop * (self.powers(voltage) @ self.gain)
        return -drop * ((self.powers(voltage, 1) + slope * self.powers(voltage)) @ self.gain)


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


def fit_polynomial(points: Points, window: slice, order: int) -> LocalCurve | None:
    """Straight line or polynomial through the points of a window; None if they do not fix it."""
    voltage, current, weight = _of(points, window)
    order = min(order, voltage.size - 1)
    centre, width = _frame(voltage)
    design = np.vander((voltage - centre) / width, order + 1, increasing=True) * weight[:, None]
    gain = _least_squares(design)
    if gain is None:
        return None
    target = weight * current
    coefficients = gain @ target
    residual = target - design @ coefficients
    return LocalCurve(
        window, centre, width, None, coefficients, gain, float(residual @ residual), voltage.size - order - 1
    )


def fit_drop(points: Points, window: slice, order: int, ceiling: float) -> LocalCurve | None:
    """Fit of ceiling − exp(polynomial): near and beyond the knee the drop from the plateau is nearly exponential,
    so that few and far points suffice. Least squares in J, by a few Gauss–Newton steps from the logarithms."""
    voltage, current, weight = _of(points, window)
    order = min(order, voltage.size - 1)
    centre, width = _frame(voltage)
    design = np.vander((voltage - centre) / width, order + 1, increasing=True)
    drop = np.maximum(ceiling - current, 1e-3 * np.max(np.abs(ceiling - current)))
    gain = _least_squares(design * (drop * weight)[:, None])
    if gain is None:
        return None
    coefficients = gain @ (np.log(drop) * drop * weight)
    target = weight * current
    for _ in range(5):
        modelled = np.exp(np.clip(design @ coefficients, -700.0, 700.0))
        gain = _least_squares(-(modelled * weight)[:, None] * design)
        if gain is None:
            return None
        step = gain @ (target - weight * (ceiling - modelled))
        coefficients = coefficients + step
        if np.max(np.abs(step)) < 1e-6:
            break
    residual = target - weight * (ceiling - np.exp(np.clip(design @ coefficients, -700.0, 700.0)))
    return LocalCurve(
        window, centre, width, ceiling, coefficients, gain, float(residual @ residual), voltage.size - order - 1
    )


def windows(points: Points, voltage: float, smallest: int) -> Iterator[slice]:
    """Growing ranges of points around a voltage, ``smallest`` points on each side at first."""
    below = int(np.searchsorted(points.voltage, voltage))
    reach, last = smallest, None
    while True:
        window = slice(max(below - reach, 0), min(below + reach, points.voltage.size))
        if window.stop - window.start >= min(2 * smallest, points.voltage.size) and window != last:
            yield window
        if window == slice(0, points.voltage.size):
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
    curves: Iterable[LocalCurve | None],
    read: Callable[[LocalCurve], tuple[float, np.ndarray, float] | None],
    points: Points,
    noise: float,
    agreement: float = _AGREEMENT,
) -> Estimate | None:
    """The estimate from the widest window that agrees with all narrower ones; None if none can be read.

    Parameters
    ----------
    curves : iterable of LocalCurve
        Fits over growing windows.
    read : callable
        Value, its sensitivity to each point of the window, and the voltage it was read at; None where the
        curve does not have it.
    noise : float
        Noise of one point [unit of current].
    agreement : float
        Half width of the intervals that must overlap, in standard errors.
    """
    low, high = -np.inf, np.inf
    agreeing: list[tuple[LocalCurve, tuple[float, np.ndarray, float]]] = []
    for curve in curves:
        answer = None if curve is None else read(curve)
        if answer is None:
            if agreeing:
                break
            continue
        value, sensitivity, _ = answer
        reach = agreement * noise * float(np.linalg.norm(sensitivity))
        if not np.isfinite(value + reach):
            continue
        low, high = max(low, value - reach), min(high, value + reach)
        if low > high:
            break
        agreeing.append((curve, answer))
        if points.voltage.size < _FEW:
            break  # too few to tell noise from shape: the nearest points alone
    if not agreeing:
        return None
    last = agreeing[-1][0].window
    # Where even all points agree, nothing says that the widest window is too wide.
    back = 1 if last.stop - last.start == points.voltage.size else 1 + _STEPS_BACK
    curve, (value, sensitivity, voltage) = agreeing[-min(back, len(agreeing))]
    # The scatter of a narrow window says little by itself; the noise of the whole sweep steadies it.
    variance = (curve.squares + _PRIOR_POINTS * noise**2) / (curve.freedom + _PRIOR_POINTS)
    response = np.zeros(points.voltage.size)
    response[curve.window] = np.sqrt(variance) * sensitivity
    return Estimate(float(value), response, float(voltage), known=points.voltage.size >= _FEW)


def _of(points: Points, window: slice) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    return points.voltage[window], points.current[window], np.sqrt(points.count[window])


def _frame(voltage: np.ndarray) -> tuple[float, float]:
    return 0.5 * float(voltage[0] + voltage[-1]), max(0.5 * float(voltage[-1] - voltage[0]), 1e-12)


def _least_squares(design: np.ndarray) -> np.ndarray | None:
    """(DᵀD)⁻¹Dᵀ, or None where the columns are not independent. The few columns are well scaled polynomials, so
    the normal equations lose nothing that matters here, and they are several times faster than a decomposition."""
    scale = np.sqrt(np.einsum("ij,ij->j", design, design))
    if not (np.isfinite(scale).all() and scale.all()):
        return None
    scaled = design / scale
    _, gain, failed = dposv(scaled.T @ scaled, scaled.T)
    return None if failed else gain / scale[:, None]
