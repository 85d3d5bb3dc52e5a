"""How well a fit knows its parameters: covariance, standard errors, intervals.

All of it is linear around the minimum, and of fit noise only.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

import numpy as np
from scipy.special import log_ndtr, ndtri_exp, stdtrit

from .least_squares import Minimum
from .models import Model
from .two_diode_unknowns import TwoDiodeUnknowns
from .unknowns import Kind, Unknowns

AnyUnknowns = Unknowns | TwoDiodeUnknowns

# A combination of scaled unknowns whose curvature is this much below the largest is not determined at all.
_FLAT = 1e-13


@dataclass(frozen=True, slots=True, eq=False)
class Knowledge:
    """What a minimum says on each parameter.

    Attributes
    ----------
    covariance : ndarray, shape (k, k)
        Of the free unknowns, each on the scale of its kind; infinite variance where not determined.
    standard_errors : dict of str to (float or None)
        Of natural parameters; None where held, at a bound or not determined.
    intervals : dict of str to (low, high)
    at_bound : frozenset of str
    undetermined : frozenset of str
        Free parameters that the data leave entirely open.
    """

    covariance: np.ndarray
    standard_errors: dict[str, float | None]
    intervals: dict[str, tuple[float, float]]
    at_bound: frozenset[str]
    undetermined: frozenset[str]


@dataclass(frozen=True, slots=True, eq=False)
class Curvature:
    """The sum of squares around a minimum, to second order.

    Attributes
    ----------
    place : ndarray, shape (k,)
    inverse : ndarray, shape (k, k)
        Pseudo-inverse of JᵀJ.
    blind : ndarray, shape (k, b)
        Directions that the points do not see.
    drift : ndarray, shape (k,)
        How far the minimum would move if no bound stood in its way, to first order.
    variance : float
        Of one weighted residual.
    freedom : int
        Points less free unknowns.
    """

    place: np.ndarray
    inverse: np.ndarray
    blind: np.ndarray
    drift: np.ndarray
    variance: float
    freedom: int

    @classmethod
    def of(cls, minimum: Minimum) -> Curvature:
        size = minimum.place.size
        freedom = minimum.residual.size - size
        if freedom < 1 or not size:
            empty = np.zeros((size, size))
            return cls(minimum.place, empty, empty, np.zeros(size), math.inf, freedom)
        with np.errstate(all="ignore"):  # what leaves the range of floats is not determined
            inverse, blind = _inverse(minimum.jacobian)
            drift = inverse @ (-minimum.jacobian.T @ minimum.residual)
        return cls(minimum.place, inverse, blind, drift, minimum.cost / freedom, freedom)

    def of_these(self, columns: np.ndarray) -> Curvature:
        """The same for some of the unknowns, with all others left free."""
        return Curvature(
            self.place[columns],
            self.inverse[np.ix_(columns, columns)],
            self.blind[columns],
            self.drift[columns],
            self.variance,
            self.freedom,
        )


def knowledge(
    minimum: Minimum | Curvature,
    unknowns: AnyUnknowns,
    limits: Mapping[str, tuple[float, float]],
    confidence: float,
) -> Knowledge:
    """Read covariance, errors and intervals off a minimum.

    Standard errors follow from the curvature in all free unknowns, those at a bound included, so that a bound does
    not make the others look better known than they are.
    """
    with np.errstate(all="ignore"):
        curvature = minimum if isinstance(minimum, Curvature) else Curvature.of(minimum)
        return _knowledge(curvature, unknowns, limits, confidence)


def opened(
    known: Knowledge, names: Iterable[str], unknowns: AnyUnknowns, limits: Mapping[str, tuple[float, float]]
) -> Knowledge:
    """The same knowledge with nothing claimed of some free parameters: no errors, and intervals from bound to bound."""
    names = [name for name in unknowns.free if name in set(names)]
    covariance = known.covariance.copy()
    for index in (unknowns.free.index(name) for name in names):
        covariance[index, :] = covariance[:, index] = 0.0
        covariance[index, index] = math.inf
    return Knowledge(
        covariance,
        known.standard_errors | dict.fromkeys(names),
        known.intervals | {name: limits[name] for name in names},
        known.at_bound - set(names),
        known.undetermined | set(names),
    )


def _knowledge(
    curvature: Curvature, unknowns: AnyUnknowns, limits: Mapping[str, tuple[float, float]], confidence: float
) -> Knowledge:
    place, free = curvature.place, unknowns.free
    model = unknowns.final(place, limits)
    lower, upper = unknowns.box(limits)
    near = unknowns.near_bound(place)
    bound = (place <= lower + near) | (place >= upper - near)
    at_bound = frozenset(name for name, flag in zip(free, bound, strict=True) if flag)
    nothing: dict[str, float | None] = dict.fromkeys(unknowns.parameters)
    if curvature.freedom < 1 or not free:
        infinite = np.full((len(free), len(free)), math.inf)
        open_ends = {name: natural_ends(unknowns.kind(name), -math.inf, math.inf) for name in free}
        return Knowledge(infinite, nothing, open_ends, at_bound, frozenset(free) - at_bound)

    chain, blind = unknowns.scaled_chain(place), curvature.blind
    covariance = chain @ curvature.inverse @ chain.T * curvature.variance
    # A parameter is open if it moves along a combination that the data do not see.
    blind_moves = np.linalg.norm(chain @ blind, axis=1) if blind.shape[1] else np.zeros(len(free))
    lengths = np.linalg.norm(chain, axis=1)
    open_ones = blind_moves > 1e-6 * np.where(lengths > 0, lengths, 1.0)
    open_ones |= ~np.isfinite(np.diag(covariance))
    covariance[open_ones, :] = covariance[:, open_ones] = 0.0
    covariance[open_ones, open_ones] = math.inf

    drift = chain @ curvature.drift if np.any(bound) else np.zeros(len(free))
    quantile = float(stdtrit(curvature.freedom, 0.5 + confidence / 2))
    errors, intervals = nothing, {}
    for index, name in enumerate(free):
        kind = unknowns.kind(name)
        spread = math.sqrt(max(float(covariance[index, index]), 0.0))
        value, reach = scaled(kind, getattr(model, name)), quantile * spread
        if bound[index]:
            low, high = _one_sided(value, float(drift[index]), spread, confidence)
        else:
            low, high = value - reach, value + reach
        low, high = natural_ends(kind, low, high)
        # Rounding on the way to the scale and back leaves the refined value inside.
        here = float(getattr(model, name))
        intervals[name] = min(float(max(low, limits[name][0])), here), max(float(min(high, limits[name][1])), here)
        if not bound[index] and math.isfinite(spread):
            errors[name] = _natural_error(kind, name, model, spread)
    return Knowledge(covariance, errors, intervals, at_bound, frozenset(np.array(free)[open_ones].tolist()))


def _one_sided(value: float, drift: float, spread: float, confidence: float) -> tuple[float, float]:
    """Interval of an unknown that lies at a bound and would drift beyond it: what of the normal distribution round
    the drifted place lies within the bound is taken for the whole."""
    if not math.isfinite(spread) or spread == 0:
        return (value, value) if spread == 0 else (-math.inf, math.inf)
    beyond = log_ndtr(-abs(drift) / spread) + math.log1p(-confidence)
    reach = max(-spread * float(ndtri_exp(beyond)) - abs(drift), 0.0)
    return (value, value + reach) if drift <= 0 else (value - reach, value)


def _inverse(jacobian: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Pseudo-inverse of JᵀJ, and the directions it cannot see, shape (k, blind)."""
    scale = np.linalg.norm(jacobian, axis=0)
    unseen = scale <= 1e-14 * np.max(scale, initial=0.0)
    scale = np.where(unseen, 1.0, scale)
    _, singular, directions = np.linalg.svd(jacobian / scale, full_matrices=False)
    seen = singular**2 > _FLAT * singular[0] ** 2
    directions = directions / scale
    sighted = directions[seen] / singular[seen, None]
    blind = directions[~seen]
    return sighted.T @ sighted, (blind / np.linalg.norm(blind, axis=1, keepdims=True)).T


def scaled(kind: Kind, value: float) -> float:
    """A natural value on the scale of its kind."""
    if kind == "log":
        return math.log(max(value, 1e-300))
    if kind == "inverse":
        return 1.0 / value if value > 0 else math.inf
    return value


def natural_ends(kind: Kind, low: float, high: float) -> tuple[float, float]:
    """Natural ends of an interval on the scale of a kind; none of the parameters can be negative."""
    if kind == "log":
        return (0.0 if low < -690 else math.exp(low), math.inf if high > 690 else math.exp(high))
    low = max(low, 0.0)
    if kind == "inverse":
        return (1.0 / high if high > 0 else math.inf, 1.0 / low if low > 0 else math.inf)
    return low, max(high, 0.0)


def _natural_error(kind: Kind, name: str, model: Model, spread: float) -> float | None:
    if kind == "log":
        return getattr(model, name) * spread
    if kind == "inverse":
        error = spread * getattr(model, name) ** 2
        return error if math.isfinite(error) else None
    return spread
