"""How well a fit knows its parameters: covariance, standard errors, intervals.

All of it is linear around the minimum, and of fit noise only.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from scipy.special import log_ndtr, ndtri_exp, stdtrit

from .diode import PARAMETERS, OneDiode
from .least_squares import Minimum
from .unknowns import Unknowns

# A combination of scaled unknowns whose curvature is this much below the largest is not determined at all.
_FLAT = 1e-13


@dataclass(frozen=True, slots=True, eq=False)
class Knowledge:
    """What a minimum says on each parameter.

    Attributes
    ----------
    covariance : ndarray, shape (k, k)
        Of the free unknowns, scaled as Jph, ln J0, n, Rs, 1/Rsh; infinite variance where not determined.
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


def knowledge(
    minimum: Minimum, unknowns: Unknowns, limits: Mapping[str, tuple[float, float]], confidence: float
) -> Knowledge:
    """Read covariance, errors and intervals off a minimum.

    Standard errors follow from the curvature in all free unknowns, those at a bound included, so that a bound does
    not make the others look better known than they are.
    """
    with np.errstate(all="ignore"):  # what leaves the range of floats is not determined
        return _knowledge(minimum, unknowns, limits, confidence)


def _knowledge(
    minimum: Minimum, unknowns: Unknowns, limits: Mapping[str, tuple[float, float]], confidence: float
) -> Knowledge:
    model = unknowns.model(minimum.place)
    lower, upper = unknowns.box(limits)
    count, free = minimum.residual.size, unknowns.free
    freedom = count - len(free)
    near = 1e-7 * np.maximum(np.abs(minimum.place), 1e-3)
    bound = (minimum.place <= lower + near) | (minimum.place >= upper - near)
    at_bound = frozenset(name for name, flag in zip(free, bound, strict=True) if flag)
    nothing: dict[str, float | None] = dict.fromkeys(PARAMETERS)
    if freedom < 1 or not free:
        infinite = np.full((len(free), len(free)), math.inf)
        open_ends = {name: _ends(name, -math.inf, math.inf) for name in free}
        return Knowledge(infinite, nothing, open_ends, at_bound, frozenset(free) - at_bound)

    rows = [PARAMETERS.index(name) for name in free]
    inverse, blind = _inverse(minimum.jacobian)
    chain = unknowns.chain(minimum.place)[rows]
    covariance = chain @ inverse @ chain.T * (minimum.cost / freedom)
    # A parameter is open if it moves along a combination that the data do not see.
    blind_moves = np.linalg.norm(chain @ blind, axis=1) if blind.shape[1] else np.zeros(len(free))
    lengths = np.linalg.norm(chain, axis=1)
    open_ones = blind_moves > 1e-6 * np.where(lengths > 0, lengths, 1.0)
    open_ones |= ~np.isfinite(np.diag(covariance))
    covariance[open_ones, :] = covariance[:, open_ones] = 0.0
    covariance[open_ones, open_ones] = math.inf

    # How far the minimum would lie beyond the bounds, to first order.
    drift = chain @ (inverse @ (-minimum.jacobian.T @ minimum.residual)) if np.any(bound) else np.zeros(len(free))
    quantile = float(stdtrit(freedom, 0.5 + confidence / 2))
    natural = _scaled(model)[rows]
    errors, intervals = nothing, {}
    for index, name in enumerate(free):
        spread = math.sqrt(max(float(covariance[index, index]), 0.0))
        value, reach = float(natural[index]), quantile * spread
        if bound[index]:
            low, high = _one_sided(value, float(drift[index]), spread, confidence)
        else:
            low, high = value - reach, value + reach
        low, high = _ends(name, low, high)
        low = float(max(low, limits[name][0]))
        intervals[name] = low, max(float(min(high, limits[name][1])), low)
        if not bound[index] and math.isfinite(spread):
            errors[name] = _natural_error(name, model, spread)
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


def _scaled(model: OneDiode) -> np.ndarray:
    return np.array(
        [
            model.photocurrent,
            math.log(max(model.saturation_current, 1e-300)),
            model.ideality,
            model.series_resistance,
            1.0 / model.shunt_resistance,
        ]
    )


def _natural_error(name: str, model: OneDiode, spread: float) -> float | None:
    if name == "saturation_current":
        return model.saturation_current * spread
    if name == "shunt_resistance":
        error = spread * model.shunt_resistance**2
        return error if math.isfinite(error) else None
    return spread


def _ends(name: str, low: float, high: float) -> tuple[float, float]:
    """Natural ends of an interval of a scaled unknown; none of the parameters can be negative."""
    if name == "saturation_current":
        return (0.0 if low < -690 else math.exp(low), math.inf if high > 690 else math.exp(high))
    low = max(low, 0.0)
    if name == "shunt_resistance":
        return (1.0 / high if high > 0 else math.inf, 1.0 / low if low > 0 else math.inf)
    return low, max(high, 0.0)
