"""Bounded least squares with an analytic Jacobian, for a handful of unknowns.

Levenberg–Marquardt on scaled normal equations; where a step would leave the bounds, it is the damped problem's exact
solution within them. For five unknowns this is several times faster than a general library
routine, whose overhead would exceed the work.

References
----------
D. W. Marquardt, J. Soc. Ind. Appl. Math. 11 (1963) 431; damping after H. B. Nielsen, report IMM-REP-1999-05,
Technical University of Denmark (both from memory).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.linalg.lapack import dposv

# Sums of squares differ by this share from rounding alone.
_ROUNDING = 1e-11
Evaluate = Callable[[np.ndarray], tuple[np.ndarray, np.ndarray]]


@dataclass(frozen=True, slots=True, eq=False)
class Minimum:
    """Where the sum of squares came to rest.

    Attributes
    ----------
    place : ndarray, shape (k,)
    residual : ndarray, shape (n,)
    jacobian : ndarray, shape (n, k)
    cost : float
        Sum of squared residuals.
    settled : bool
        False if the iterations ran out.
    evaluations : int
    """

    place: np.ndarray
    residual: np.ndarray
    jacobian: np.ndarray
    cost: float
    settled: bool
    evaluations: int


def minimise(
    evaluate: Evaluate,
    start: np.ndarray,
    lower: np.ndarray,
    upper: np.ndarray,
    *,
    cost_tolerance: float = 1e-14,
    limit: int = 100,
) -> Minimum:
    """Least squares within bounds.

    Parameters
    ----------
    evaluate : callable
        place → residual (n,) and its Jacobian (n, k).
    start, lower, upper : ndarray, shape (k,)
        The unknowns should be of order one.
    cost_tolerance : float
        Settled when a nearly undamped step promises to lower the cost by less than this share.
    limit : int
        Largest number of evaluations.
    """
    with np.errstate(all="ignore"):  # a trial may leave the range of floats; its cost then rejects it
        place = np.clip(np.asarray(start, dtype=float), lower, upper)
        return _minimise(evaluate, place, lower, upper, cost_tolerance, limit)


def _minimise(
    evaluate: Evaluate, place: np.ndarray, lower: np.ndarray, upper: np.ndarray, cost_tolerance: float, limit: int
) -> Minimum:
    residual, jacobian = evaluate(place)
    cost = float(residual @ residual)
    evaluations, damping, growth, settled = 1, 1e-3, 2.0, place.size == 0
    if not (math.isfinite(cost) and np.isfinite(jacobian).all()):
        return Minimum(place, residual, jacobian, np.inf, False, evaluations)
    identity, fresh = np.eye(place.size), True
    while not settled and evaluations < limit:
        if fresh:
            gram = jacobian.T @ jacobian
            gradient = jacobian.T @ residual
            scale = np.sqrt(gram.diagonal())
            scale = np.where(scale > 0, scale, 1.0)
            normal, pull = gram / (scale[:, None] * scale), -gradient / scale
            fresh = False
        damped = normal + damping * identity
        step = _solved(damped, pull)  # in units of 1/scale
        trial = place + step / scale
        if ((trial < lower) | (trial > upper)).any():
            step = _bounded_step(damped, pull, (lower - place) * scale, (upper - place) * scale)
            trial = np.clip(place + step / scale, lower, upper)
        promised = float(step @ (2.0 * pull - normal @ step))
        if damping <= 0.1 and promised <= cost_tolerance * cost:
            settled = True  # nearly a full Newton step, and it would gain nothing
            break
        trial_residual, trial_jacobian = evaluate(trial)
        evaluations += 1
        trial_cost = float(trial_residual @ trial_residual)
        if not trial_cost < cost or not np.isfinite(trial_jacobian).all():
            if damping <= 0.1 and promised <= _ROUNDING * cost:
                settled = True  # the loss is rounding, and rounding is all that is left
            damping, growth = damping * growth, growth * 2.0
            if damping > 1e15:
                settled = True
            continue
        gain = (cost - trial_cost) / promised if promised > 0 else 1.0
        damping = max(damping * (0.1 if gain > 0.75 else 0.4 if gain > 0.4 else 1.5), 1e-12)
        growth = 2.0
        place, residual, jacobian, cost, fresh = trial, trial_residual, trial_jacobian, trial_cost, True
    return Minimum(place, residual, jacobian, cost, settled, evaluations)


def _bounded_step(normal: np.ndarray, pull: np.ndarray, least: np.ndarray, most: np.ndarray) -> np.ndarray:
    """The step between two ends that makes ½·step·normal·step − pull·step least, by the primal active-set method."""
    size = pull.size
    step = np.zeros(size)
    pinned = ((least >= 0) & (pull < 0)) | ((most <= 0) & (pull > 0))
    for _ in range(4 * size):
        chosen = np.flatnonzero(~pinned)
        target = step.copy()
        if chosen.size:
            force = pull[chosen] - normal[np.ix_(chosen, pinned)] @ step[pinned]
            target[chosen] = _solved(normal[np.ix_(chosen, chosen)], force)
        move = target - step
        # The first bound in the way stops the move and is pinned.
        room = np.where(move > 0, most - step, np.where(move < 0, least - step, np.inf))
        shares = np.where(move != 0, room / np.where(move != 0, np.abs(move) * np.sign(move), 1.0), np.inf)
        blocking = int(np.argmin(shares))
        if shares[blocking] < 1.0:
            step = step + max(shares[blocking], 0.0) * move
            step[blocking] = most[blocking] if move[blocking] > 0 else least[blocking]
            pinned[blocking] = True
            continue
        step = target
        # A bound that holds the step back from where it would gain is let go.
        slope = normal @ step - pull
        held_back = np.where(pinned, np.where(step <= least, -slope, slope), 0.0)
        worst = int(np.argmax(held_back))
        if held_back[worst] <= 1e-12 * np.max(np.abs(pull)):
            break
        pinned[worst] = False
    return step


def _solved(matrix: np.ndarray, target: np.ndarray) -> np.ndarray:
    """Cholesky straight from LAPACK: for a few unknowns the checks around it would take longer than the work."""
    _, answer, failed = dposv(matrix, target)
    if not failed:
        return answer
    return np.linalg.lstsq(matrix, target, rcond=None)[0] if np.all(np.isfinite(matrix)) else np.zeros_like(target)
