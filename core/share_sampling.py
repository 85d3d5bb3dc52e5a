"""Intervals of shares: the fits are drawn anew within their covariances, and the shares computed for each draw.

They hold fit noise only; area, lamp and spread of devices are no part of them.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np

from .constants import thermal_voltage
from .diode import PARAMETERS, OneDiode
from .errors import ComparisonRefused
from .mixtures import largest_power, mixtures, shapley
from .refinement import Refinement
from .shares import comparable

State = OneDiode | Refinement

_TRIES = 8  # rounds of drawing; a fit at two bounds keeps about a quarter of each
_FEWEST = 50  # draws within bounds below which intervals would be rough


@dataclass(frozen=True, slots=True)
class ShareIntervals:
    """Intervals of the shares [W cm⁻²] by mechanism, or the sentence why there are none."""

    intervals: dict[str, tuple[float, float]] = field(default_factory=dict)
    confidence: float = 0.95
    reason: str = ""


def model_of(state: State) -> OneDiode:
    """The model of a refinement, or the model itself."""
    return state.model if isinstance(state, Refinement) else state


def sample_shares(
    state_a: State, state_b: State, count: int = 400, seed: int = 0, confidence: float = 0.95
) -> ShareIntervals:
    """Intervals of the shares in the step from one state to another.

    Parameters
    ----------
    state_a, state_b : Refinement or OneDiode
        A refinement is drawn within its covariance; a plain model is taken as exact, as the detailed-balance limit is.
    count : int
        Draws.
    seed : int
        The same seed gives the same intervals, so that figures do not flicker.
    confidence : float
        Level of the intervals, between percentiles of the draws.

    Notes
    -----
    J0 and n of a fit lie along a curved valley. The draws are normal in ln J0 + V/m and V/m, in which the valley is
    straight, and those that leave the bounds are drawn anew. An interval always holds the share of the models
    themselves, also where a parameter sits on its bound.

    Raises
    ------
    ComparisonRefused
        As for ``difference_shares``.
    """
    model_a, model_b = model_of(state_a), model_of(state_b)
    comparable(model_a, model_b)
    if not (model_a.photocurrent > 0 and model_b.photocurrent > 0):
        raise ComparisonRefused("One of the two models has no photocurrent, so it delivers no power to be explained.")
    if not isinstance(state_a, Refinement) and not isinstance(state_b, Refinement):
        return ShareIntervals(reason="The models were placed by eye and not refined, so their shares have no intervals.")
    generator = np.random.default_rng(seed)
    drawn = []
    for state in (state_a, state_b):
        parameters, reason = _draw(state, count, generator)
        if reason:
            return ShareIntervals(reason=reason)
        # The models themselves stand first.
        drawn.append(np.vstack([_scaled(model_of(state)), parameters]))
    size = min(len(part) for part in drawn)
    a, b = (part[:size] for part in drawn)
    b[:, 2] *= model_b.temperature / model_a.temperature  # equal within tolerance: the curve stays
    reference = np.sqrt(a[:, 0] * b[:, 0])
    cell_voltage = model_a.series_cells * thermal_voltage(model_a.temperature)
    states = mixtures(_coordinates(a, reference, cell_voltage), _coordinates(b, reference, cell_voltage))
    shares = shapley(largest_power(states, reference[:, None], cell_voltage))
    tail = 0.5 * (1.0 - confidence)
    low, high = np.quantile(shares[1:], [tail, 1.0 - tail], axis=0)
    low, high = np.minimum(low, shares[0]), np.maximum(high, shares[0])
    ends = zip(PARAMETERS, low.tolist(), high.tolist(), strict=True)
    return ShareIntervals({name: (start, end) for name, start, end in ends}, confidence)


def _scaled(model: OneDiode) -> np.ndarray:
    """Jph, ln J0, n, Rs, 1/Rsh, shape (5,)."""
    return np.array(
        [
            model.photocurrent,
            math.log(model.saturation_current),
            model.ideality,
            model.series_resistance,
            1.0 / model.shunt_resistance,
        ]
    )


def _coordinates(scaled: np.ndarray, reference: np.ndarray, cell_voltage: float) -> np.ndarray:
    """Coordinates of many states, shape (k, 5), from Jph, ln J0, n, Rs, 1/Rsh."""
    place = scaled.copy()
    place[:, 1] = scaled[:, 2] * cell_voltage * np.logaddexp(0.0, np.log(reference) - scaled[:, 1])
    return place


def _draw(state: State, count: int, generator: np.random.Generator) -> tuple[np.ndarray, str]:
    """Draws of Jph, ln J0, n, Rs, 1/Rsh, shape (k, 5) with k up to count; or the sentence why there are none."""
    model = model_of(state)
    centre = _scaled(model)
    if not isinstance(state, Refinement) or not state.free:
        return np.repeat(centre[None], count, axis=0), ""
    columns = [PARAMETERS.index(name) for name in state.free]
    covariance = state.covariance
    open_ones = [
        name.replace("_", " ") for name, known in zip(state.free, np.isfinite(np.diag(covariance)), strict=True) if not known
    ]
    if open_ones or not np.all(np.isfinite(covariance)):
        return np.empty((0, 5)), f"The data leave the {' and the '.join(open_ones)} open, so the shares have no intervals."
    # To coordinates in which the valley is straight: q = ln J0 + s and s = V/m in place of ln J0 and n.
    voltage = model.slope_voltage * math.log1p(model.photocurrent / model.saturation_current)
    steepness = voltage / model.slope_voltage
    turn = np.eye(len(columns))
    coupled = {"saturation_current", "ideality"} <= set(state.free)
    if "ideality" in state.free:
        n = state.free.index("ideality")
        turn[n, n] = -steepness / model.ideality
        if coupled:
            turn[state.free.index("saturation_current"), n] = -steepness / model.ideality
    straight = turn @ covariance @ turn.T
    spread = np.sqrt(np.maximum(np.diag(straight), 0.0))
    scale = np.where(spread > 0, spread, 1.0)
    values, vectors = np.linalg.eigh(straight / np.outer(scale, scale))
    factor = scale[:, None] * vectors * np.sqrt(np.maximum(values, 0.0))
    middle = centre.copy()
    middle[2] = steepness
    if coupled:
        middle[1] += steepness
    limits = _limits(state)
    kept: list[np.ndarray] = []
    for _ in range(_TRIES):
        place = np.repeat(middle[None], count, axis=0)
        place[:, columns] += generator.standard_normal((count, len(columns))) @ factor.T
        place = place[place[:, 2] > 0]
        if coupled:
            place[:, 1] -= place[:, 2]
        place[:, 2] = steepness * model.ideality / place[:, 2]
        inside = np.all((place >= limits[0]) & (place <= limits[1]), axis=1) & (place[:, 0] > 0)
        kept.append(place[inside])
        if sum(map(len, kept)) >= count:
            break
    draws = np.vstack(kept)[:count]
    if len(draws) < _FEWEST:
        return np.empty((0, 5)), "The fit sits too close to its bounds for intervals of the shares."
    return draws, ""


def _limits(refinement: Refinement) -> tuple[np.ndarray, np.ndarray]:
    """Lowest and highest Jph, ln J0, n, Rs, 1/Rsh: physical, and those of the settings for free parameters."""
    low = np.array([0.0, -math.inf, 0.0, 0.0, 0.0])
    high = np.full(5, math.inf)
    for name, (least, most) in refinement.settings.bounds.items():
        if name not in refinement.free:
            continue
        index = PARAMETERS.index(name)
        if name == "saturation_current":
            least, most = (math.log(end) if end > 0 else -math.inf for end in (least, most))
        elif name == "shunt_resistance":
            least, most = (1.0 / end if end > 0 else math.inf for end in (most, least))
        # The fit itself lies inside, but for rounding.
        margin = 1e-9 * max(abs(_scaled(refinement.model)[index]), 1e-12)
        low[index], high[index] = max(low[index], least - margin), most + margin
    return low, high
