"""Parameters read off a sweep before any fit.

With the measured current put into the exponent, J = Jph − J0·(exp(u/m) − 1) − u/Rsh with u = V + J·Rs is linear
in Jph, J0 and 1/Rsh once n and Rs are chosen. A small grid in (n, Rs) with a non-negative linear solve at each
node therefore needs no start of its own.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from itertools import chain, combinations

import numpy as np

from .constants import thermal_voltage
from .diode import OneDiode
from .errors import FitFailed
from .sweep import Sweep
from .weighting import point_weights

# More points than this are averaged to so many before the grid is searched; it makes the guess fast and calm.
_ENOUGH_POINTS = 40
# Values of m at even ratios, and Rs as shares of the largest that the curve allows.
_EVENLY = np.linspace(0.0, 1.0, 13)
_RESISTANCES = np.array([0.0, 0.08, 0.2, 0.36, 0.52, 0.68, 0.83, 0.97])
# Saturation current given to a sweep that shows no diode, as a share of the characteristic current.
_FAINT = 1e-30
_LEAST_DAMPING = 0.02  # no point counts less, whatever noise does to its slope
_NO_SPAN = 1e-6  # [V]
_NO_CURRENT = 1e-20  # [A cm⁻²], less than an electron a second


@dataclass(frozen=True, slots=True)
class Scales:
    """Characteristic voltage [V] and current [unit of current] of a sweep; everything else is measured by them."""

    voltage: float
    current: float


def scales(sweep: Sweep) -> Scales:
    """Voc and Jsc, roughly; the ends of the sweep where it does not reach them."""
    voltage, current = sweep.voltage, sweep.current
    largest = max(float(np.abs(current).max(initial=0.0)), 1e-30)
    highest = float(voltage.max(initial=0.0)) or float(np.abs(voltage).max(initial=0.0)) or 1.0
    if not sweep.lit:
        return Scales(highest, largest)
    delivering = (current > 0) & (voltage > 0)
    reach = float(voltage[delivering].max(initial=0.0))
    # At V ≥ 0 only: a shunted or breaking-down device carries far more current in reverse.
    forward = current[delivering]
    return Scales(max(reach, 0.05 * highest), float(forward.max(initial=0.0)) or largest)


def first_guess(sweep: Sweep, hold: Mapping[str, float] = {}) -> OneDiode:
    """One-diode parameters that lie close enough to the points to start a refinement.

    Parameters
    ----------
    sweep : Sweep
        Lit or dark, of any size and unit of current.
    hold : mapping of str to float
        Natural parameters that are given.

    Returns
    -------
    OneDiode
        With the temperature and the cells in series of the sweep.

    Raises
    ------
    FitFailed
        If there are fewer than three points, or they show no voltage or no current at all.
    """
    return starts(sweep, hold)[0]


def starts(sweep: Sweep, hold: Mapping[str, float] = {}, count: int = 1) -> list[OneDiode]:
    """The best ``count`` nodes of the grid that differ clearly, best first. Raises as ``first_guess`` does."""
    usable = np.isfinite(sweep.voltage) & np.isfinite(sweep.current)
    if not usable.all():
        sweep = sweep.only(usable)
    refuse_if_hopeless(sweep.voltage, sweep.current)
    if not sweep.lit:
        hold = {"photocurrent": 0.0, **hold}
    with np.errstate(all="ignore"):  # a node far from wild points may leave the range of floats; it is ranked last
        return _ranked(sweep, hold, count)


def _ranked(sweep: Sweep, hold: Mapping[str, float], count: int) -> list[OneDiode]:
    size = scales(sweep)
    voltage, current, weight = condensed(sweep)
    slopes, resistances = _grid(sweep, hold, size, voltage, current)
    cost, solution = _solve_grid(voltage, current, weight, slopes, resistances, hold)
    cell_voltage = sweep.series_cells * thermal_voltage(sweep.temperature)
    chosen: list[tuple[float, OneDiode]] = []
    taken: list[int] = []
    for node in np.argsort(cost).tolist():
        resistance, slope = divmod(node, slopes.size)
        # Neighbours on the grid lead to the same valley.
        if any(abs(slope - other) < 2 for other in taken):
            continue
        photocurrent, saturation, conductance = solution[:, node].tolist()
        model = OneDiode(
            photocurrent=photocurrent,
            saturation_current=hold.get("saturation_current", max(saturation, _FAINT * size.current)),
            ideality=hold.get("ideality", float(slopes[slope]) / cell_voltage),
            series_resistance=hold.get("series_resistance", float(resistances[resistance])),
            shunt_resistance=hold.get("shunt_resistance", 1.0 / conductance if conductance > 0 else math.inf),
            series_cells=sweep.series_cells,
            temperature=sweep.temperature,
        )
        miss = weight * (model.current(voltage) - current)
        squares = float(miss @ miss)
        chosen.append((squares if math.isfinite(squares) else math.inf, model))
        taken.append(slope)
        if len(chosen) >= max(count, 3):
            break
    chosen.sort(key=lambda pair: pair[0])
    return [model for _, model in chosen[:count]]


def refuse_if_hopeless(voltage: np.ndarray, current: np.ndarray) -> None:
    if voltage.size < 3:
        raise FitFailed("This sweep has fewer than three points, so no diode curve can be laid over them.")
    if np.ptp(voltage) < _NO_SPAN:
        raise FitFailed("All points of this sweep lie at one voltage, so no diode curve can be laid over them.")
    if np.max(np.abs(current)) < _NO_CURRENT:
        raise FitFailed("No current flows in this sweep, so no diode curve can be laid over it; check the contacts.")


def condensed(sweep: Sweep) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Voltage, current and weight of the points by rising voltage, neighbours averaged if there are many."""
    voltage, current, weight = sweep.voltage, sweep.current, point_weights(sweep)
    order = np.argsort(voltage, kind="stable")
    voltage, current, weight = voltage[order], current[order], weight[order]
    group = -(-voltage.size // _ENOUGH_POINTS)
    if group > 1:
        edges = np.arange(0, voltage.size, group)
        size = np.diff(np.append(edges, voltage.size))
        voltage, current, weight = (np.add.reduceat(a, edges) / size for a in (voltage, current, weight))
        weight = weight * np.sqrt(size)
    return voltage, current, weight


def _grid(
    sweep: Sweep, hold: Mapping[str, float], size: Scales, voltage: np.ndarray, current: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Values of m = n·Ns·kT/q [V] and of Rs to try."""
    cell_voltage = sweep.series_cells * thermal_voltage(sweep.temperature)
    if "ideality" in hold:
        slopes = np.array([hold["ideality"] * cell_voltage])
    elif 0 < hold.get("saturation_current", 0.0) < 0.1 * size.current:
        # With J0 given, the diode must take about the characteristic current at the characteristic voltage.
        slopes = size.voltage / math.log(size.current / hold["saturation_current"]) * np.linspace(0.7, 1.06, 25)
    else:
        high = max(size.voltage / 4, 2.2 * cell_voltage)
        low = min(max(size.voltage / 60, 0.6 * cell_voltage), high / 6)
        slopes = low * (high / low) ** _EVENLY
    if "series_resistance" in hold:
        return slopes, np.array([hold["series_resistance"]])
    return slopes, steepest_resistance(size, voltage, current) * _RESISTANCES


def steepest_resistance(size: Scales, voltage: np.ndarray, current: np.ndarray) -> float:
    """The largest Rs to try: the curve is nowhere steeper than Rs alone would make it, so its steepest end bounds Rs."""
    tail = max(3, voltage.size // 12)
    spread = voltage[-tail:] - voltage[-tail:].mean()
    steepness = -float(spread @ current[-tail:]) / max(float(spread @ spread), 1e-300)
    natural = size.voltage / size.current
    return min(1.1 / steepness, natural) if steepness * natural > 1 else natural


def _solve_grid(
    voltage: np.ndarray,
    current: np.ndarray,
    weight: np.ndarray,
    slopes: np.ndarray,
    resistances: np.ndarray,
    hold: Mapping[str, float],
) -> tuple[np.ndarray, np.ndarray]:
    """Cost and (Jph, J0, 1/Rsh) at each node, resistances outermost: shapes (nodes,) and (3, nodes)."""
    junction = voltage + resistances[:, None] * current  # (r, n)
    # Divided by its largest value, so that nothing overflows; J0 is multiplied by it in turn.
    top = np.maximum(junction.max(axis=1)[:, None] / slopes, 0.0)  # (r, m)
    growth = np.exp(junction[:, None, :] / slopes[:, None] - top[:, :, None]) - np.exp(-top)[:, :, None]  # (r, m, n)
    counted = weight * damping_of(resistances[:, None], voltage, current)
    gram = _normal(-counted[:, None, :] * growth, np.stack([counted, -counted * junction, counted * current], axis=1))
    scale = np.exp(np.minimum(top, 690.0)).ravel()
    solution = np.zeros((3, scale.size))
    given = {
        0: hold.get("photocurrent"),
        1: None if "saturation_current" not in hold else hold["saturation_current"] * scale,
        2: None if "shunt_resistance" not in hold else 1.0 / hold["shunt_resistance"],
    }
    for index, value in given.items():
        if value is not None:  # what it carries is taken off the target, in its row and in its column
            solution[index] = value
            gram[3] -= solution[index] * gram[index]
            gram[:, 3] -= solution[index] * gram[:, index]
    cost = _non_negative(gram, [index for index, value in given.items() if value is None], solution)
    solution[1] /= scale
    return np.where(np.isfinite(cost), cost, np.inf), solution


def _normal(diode: np.ndarray, others: np.ndarray) -> np.ndarray:
    """Products of the columns of Jph, J0, 1/Rsh and the target, summed over the points: shape (4, 4, nodes).

    ``diode``, shape (r, m, n), is the column of J0, the only one that m changes; ``others``, shape (r, 3, n), the rest.
    """
    gram = np.empty((4, 4, *diode.shape[:2]))
    fixed, mixed = others @ others.transpose(0, 2, 1), diode @ others.transpose(0, 2, 1)
    for i, row in enumerate((0, 2, 3)):
        gram[row, 1] = gram[1, row] = mixed[:, :, i]
        for j, column in enumerate((0, 2, 3)):
            gram[row, column] = fixed[:, i, j, None]
    gram[1, 1] = np.einsum("rmn,rmn->rm", diode, diode)
    return gram.reshape(4, 4, -1)


def _non_negative(gram: np.ndarray, free: list[int], solution: np.ndarray) -> np.ndarray:
    """Non-negative least squares at every node at once, by trying the sets of zeros where they are needed.

    Parameters
    ----------
    gram : ndarray, shape (4, 4, nodes)
        Products of the columns of the three unknowns and of the target.
    free : list of int
        Unknowns to solve for.
    solution : ndarray, shape (3, nodes)
        The free unknowns are written here.

    Returns
    -------
    ndarray, shape (nodes,)
        Sums of squared residuals.
    """
    norm = np.sqrt(np.maximum(np.einsum("iik->ik", gram), 1e-300))
    gram = gram / (norm[:, None] * norm)
    best = np.ones(norm.shape[1])  # share of the target's own squares
    solution[free] = 0.0
    # The diode comes first: where J0 is free, a curve without it is no start.
    order = sorted(free, key=lambda unknown: unknown != 1)
    patterns = [
        [pattern for pattern in combinations(order, size) if pattern[0] == 1 or 1 not in free]
        for size in range(1, len(free) + 1)
    ]
    eliminated = {(): gram}
    for pattern in chain.from_iterable(patterns):
        eliminated[pattern] = _eliminated(eliminated[pattern[:-1]], pattern[-1])
    for of_one_size in reversed(patterns):
        still_open = best >= 1.0  # nothing beats a solution with fewer zeros
        for pattern in of_one_size:
            rows = eliminated[pattern]
            answer, cost = rows[[*pattern], 3], rows[3, 3]
            better = still_open & (cost < best) & (answer >= 0).all(axis=0)
            if better.any():
                best = np.where(better, cost, best)
                solution[free] = np.where(better, 0.0, solution[free])
                solution[[*pattern]] = np.where(better, answer, solution[[*pattern]])
    solution[free] *= norm[3] / norm[free]
    return best * norm[3] ** 2


def damping_of(resistance: np.ndarray | float, voltage: np.ndarray, current: np.ndarray) -> np.ndarray:
    """What the curve misses at each voltage over what the linear equation misses there [-].

    The equation misses 1 + Rs·(dJ/du) times what the curve misses at that voltage, and the slope of the measured curve
    tells that factor: 1/(1 + Rs·(dJ/du)) = 1 + Rs·(dJ/dV).
    """
    return np.minimum(np.maximum(1.0 + resistance * _steepness(voltage, current), _LEAST_DAMPING), 1.0)


def _steepness(voltage: np.ndarray, current: np.ndarray) -> np.ndarray:
    """dJ/dV between the neighbours of each point; zero where they lie at one voltage."""
    span, rise = _across(voltage), _across(current)
    return np.where(span > 0, rise / np.where(span > 0, span, 1.0), 0.0)


def _across(values: np.ndarray) -> np.ndarray:
    """Difference of the neighbours of each point; at either end, of the point and its one neighbour."""
    across = values.copy()
    across[1:-1] = values[2:] - values[:-2]
    across[0], across[-1] = values[1] - values[0], values[-1] - values[-2]
    return across


def _eliminated(rows: np.ndarray, unknown: int) -> np.ndarray:
    """Gauss–Jordan elimination of one more unknown at every node, shape (4, 4, nodes).

    In the last column stand then the solution for the unknowns eliminated so far and, below, the share of the target's
    squares that is left. A positive matrix needs no other pivots.
    """
    row = rows[unknown] / (rows[unknown, unknown] + 1e-12)
    rest = rows - rows[:, unknown, None] * row
    rest[unknown] = row
    return rest
