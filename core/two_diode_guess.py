"""Two-diode parameters read off a sweep before any fit.

As with one diode, the equation with the measured current put into the exponents is linear once n₁, n₂ and Rs are chosen:
J = Jph − J0₁·(exp(u/m₁) − 1) − J0₂·(exp(u/m₂) − 1) − u/Rsh. A grid in Rs, with non-negative least squares at each node,
therefore needs no start of its own.
"""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np
from scipy.optimize import nnls

from .constants import thermal_voltage
from .errors import FitFailed
from .first_guess import (
    Scales,
    condensed,
    damping_of,
    refuse_if_hopeless,
    scales,
    steepest_resistance,
)
from .sweep import Sweep
from .two_diode import TwoDiode

# Shares of the largest Rs that the steepest end of the sweep allows.
_RESISTANCES = (0.0, 0.05, 0.12, 0.2, 0.3, 0.4, 0.5, 0.62, 0.74, 0.86, 0.97)
USUAL = (1.0, 2.0)
# Pairs of n₁ and n₂ to start from where they are free.
_PAIRS = (USUAL, (1.4, 2.0), (1.2, 1.7), (1.4, 3.0), (1.0, 1.4), (1.5, 4.5))
# A diode whose n is free starts with at least this share of the current at the reference voltage, or its n would not matter.
_LEAST_SHARE = 0.01


def guess_two_diodes(sweep: Sweep, hold: Mapping[str, float] = {}) -> TwoDiode:
    """Two-diode parameters that lie close enough to the points to start a refinement; n₁ = 1 and n₂ = 2 unless given.

    Parameters and errors as for ``first_guess``.
    """
    return two_diode_starts(sweep, {"ideality_1": USUAL[0], "ideality_2": USUAL[1], **hold})[0]


def two_diode_starts(
    sweep: Sweep, hold: Mapping[str, float] = {}, limits: Mapping[str, tuple[float, float]] = {}
) -> list[TwoDiode]:
    """A start for each pair of n₁ and n₂ that holds and limits allow, the best first. Raises as ``first_guess`` does."""
    usable = np.isfinite(sweep.voltage) & np.isfinite(sweep.current)
    if not np.all(usable):
        sweep = sweep.only(usable)
    refuse_if_hopeless(sweep.voltage, sweep.current)
    if not sweep.lit:
        hold = {"photocurrent": 0.0, **hold}
    pairs = []
    for pair in _PAIRS:
        allowed = []
        for name, usual in zip(("ideality_1", "ideality_2"), pair, strict=True):
            low, high = limits.get(name, (0.0, math.inf))
            allowed.append(hold.get(name, min(max(usual, low), high)))
        if tuple(allowed) not in pairs:
            pairs.append(tuple(allowed))
    with np.errstate(all="ignore"):  # a node far from wild points may leave the range of floats; it is ranked last
        found = [_best_of_pair(sweep, pair, hold) for pair in pairs]
    ranked = sorted((start for start in found if start is not None), key=lambda pair: pair[0])
    if not ranked:
        raise FitFailed("No two-diode curve could be laid over these points; check units and signs of the sweep.")
    return [model for _, model in ranked]


def _best_of_pair(
    sweep: Sweep, pair: tuple[float, float], hold: Mapping[str, float]
) -> tuple[float, TwoDiode] | None:
    size = scales(sweep)
    voltage, current, weight = condensed(sweep)
    best: tuple[float, TwoDiode] | None = None
    if "series_resistance" in hold:
        resistances = np.array([hold["series_resistance"]])
    else:
        resistances = steepest_resistance(size, voltage, current) * np.array(_RESISTANCES)
    for resistance in resistances.tolist():
        model = _at(sweep, size, voltage, current, weight, pair, resistance, hold)
        miss = weight * (model.current(voltage) - current)
        cost = float(miss @ miss)
        if math.isfinite(cost) and (best is None or cost < best[0]):
            best = cost, model
    return best


def _at(
    sweep: Sweep,
    size: Scales,
    voltage: np.ndarray,
    current: np.ndarray,
    weight: np.ndarray,
    pair: tuple[float, float],
    resistance: float,
    hold: Mapping[str, float],
) -> TwoDiode:
    """The model of least squares in Jph, J0₁, J0₂ and 1/Rsh at one Rs."""
    of_one = sweep.series_cells * thermal_voltage(sweep.temperature)
    junction = voltage + resistance * current
    weight = weight * damping_of(resistance, voltage, current)
    rows = [np.ones_like(voltage)]
    tops = []
    for ideality in pair:
        exponent = junction / (ideality * of_one)
        # Divided by its largest value, so that nothing overflows; J0 is multiplied by it in turn.
        tops.append(min(max(float(np.max(exponent)), 0.0), 690.0))
        rows.append(-(np.exp(np.maximum(exponent - tops[-1], -700.0)) - math.exp(-tops[-1])))
    rows.append(-junction)
    growth = [1.0, math.exp(tops[0]), math.exp(tops[1]), 1.0]
    given = [hold.get(name) for name in ("photocurrent", "saturation_current_1", "saturation_current_2")]
    given.append(1.0 / hold["shunt_resistance"] if "shunt_resistance" in hold else None)
    target, free = current.copy(), []
    for index, value in enumerate(given):
        if value is None:
            free.append(index)
        else:
            target = target - rows[index] * value * growth[index]
    solution = [0.0 if value is None else value for value in given]
    if free:
        columns = np.column_stack([rows[index] for index in free]) * weight[:, None]
        norm = np.maximum(np.linalg.norm(columns, axis=0), 1e-300)
        scaled = columns / norm
        if np.all(np.isfinite(scaled)) and np.all(np.isfinite(target)):
            answer = nnls(scaled, target * weight, maxiter=200)[0] / norm
            for place, index in enumerate(free):
                solution[index] = float(answer[place]) / growth[index]
    saturations = []
    for diode, ideality in enumerate(pair):
        name = f"saturation_current_{diode + 1}"
        saturation = solution[1 + diode]
        if name not in hold:
            least = _LEAST_SHARE if f"ideality_{diode + 1}" not in hold else 1e-12
            saturation = max(saturation, least * size.current * math.exp(-min(size.voltage / (ideality * of_one), 600.0)))
        saturations.append(saturation)
    return TwoDiode(
        photocurrent=solution[0],
        saturation_current_1=saturations[0],
        saturation_current_2=saturations[1],
        series_resistance=resistance,
        shunt_resistance=1.0 / solution[3] if solution[3] > 0 else math.inf,
        ideality_1=pair[0],
        ideality_2=pair[1],
        series_cells=sweep.series_cells,
        temperature=sweep.temperature,
    )
