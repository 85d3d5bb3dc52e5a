"""Parameters read off a sweep before any fit.

With the measured current put into the exponent, J = Jph − J0·(exp(u/m) − 1) − u/Rsh with u = V + J·Rs is linear
in Jph, J0 and 1/Rsh once n and Rs are chosen. A small grid in (n, Rs) with a non-negative linear solve at each
node therefore needs no start of its own.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from .constants import thermal_voltage
from .diode import OneDiode
from .errors import FitFailed
from .sweep import Sweep
from .weighting import point_weights

# More points than this are averaged to so many before the grid is searched; it makes the guess fast and calm.
_ENOUGH_POINTS = 40
_SLOPES, _RESISTANCES = 13, (0.0, 0.08, 0.2, 0.36, 0.52, 0.68, 0.83, 0.97)
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
    largest = max(float(np.max(np.abs(current), initial=0.0)), 1e-30)
    highest = float(np.max(voltage, initial=0.0)) or float(np.max(np.abs(voltage), initial=0.0)) or 1.0
    if not sweep.lit:
        return Scales(highest, largest)
    delivering = (current > 0) & (voltage > 0)
    reach = float(np.max(voltage[delivering], initial=0.0))
    # At V ≥ 0 only: a shunted or breaking-down device carries far more current in reverse.
    forward = current[delivering]
    return Scales(max(reach, 0.05 * highest), float(np.max(forward, initial=0.0)) or largest)


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
    if not np.all(usable):
        sweep = replace(sweep, voltage=sweep.voltage[usable], current=sweep.current[usable])
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
    for node in np.argsort(cost):
        # Neighbours on the grid lead to the same valley.
        if any(abs(node // resistances.size - other // resistances.size) < 2 for other in taken):
            continue
        photocurrent, saturation, conductance = (float(value) for value in solution[node])
        model = OneDiode(
            photocurrent=photocurrent,
            saturation_current=hold.get("saturation_current", max(saturation, _FAINT * size.current)),
            ideality=hold.get("ideality", float(slopes[node // resistances.size]) / cell_voltage),
            series_resistance=hold.get("series_resistance", float(resistances[node % resistances.size])),
            shunt_resistance=hold.get("shunt_resistance", 1.0 / conductance if conductance > 0 else math.inf),
            series_cells=sweep.series_cells,
            temperature=sweep.temperature,
        )
        miss = weight * (model.current(voltage) - current)
        chosen.append((float(np.nan_to_num(miss @ miss, nan=np.inf)), model))
        taken.append(int(node))
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
        slopes = np.geomspace(low, high, _SLOPES)
    if "series_resistance" in hold:
        return slopes, np.array([hold["series_resistance"]])
    return slopes, steepest_resistance(size, voltage, current) * np.array(_RESISTANCES)


def steepest_resistance(size: Scales, voltage: np.ndarray, current: np.ndarray) -> float:
    """The largest Rs to try: the curve is nowhere steeper than Rs alone would make it, so its steepest end bounds Rs."""
    tail = max(3, voltage.size // 12)
    spread = voltage[-tail:] - np.mean(voltage[-tail:])
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
    """Cost and (Jph, J0, 1/Rsh) at each node, slopes outermost: shapes (nodes,) and (nodes, 3)."""
    junction = voltage + resistances[:, None] * current  # (r, n)
    exponent = junction[None, :, :] / slopes[:, None, None]  # (m, r, n)
    top = np.maximum(np.max(exponent, axis=2, keepdims=True), 0.0)
    # Divided by its largest value, so that nothing overflows; J0 is multiplied by it in turn.
    diode = np.exp(np.maximum(exponent - top, -700.0))
    growth = (diode - np.exp(-top)).reshape(-1, voltage.size)
    scale = np.exp(np.minimum(top, 690.0)).reshape(-1)
    rows = np.empty((growth.shape[0], 4, voltage.size))  # the three columns of the equation, and what they shall give
    rows[:, 0] = 1.0
    rows[:, 1] = -growth
    rows[:, 2] = -np.tile(junction, (slopes.size, 1))
    rows[:, 3] = current
    given = {
        0: hold.get("photocurrent"),
        1: None if "saturation_current" not in hold else hold["saturation_current"] * scale,
        2: None if "shunt_resistance" not in hold else 1.0 / hold["shunt_resistance"],
    }
    solution = np.zeros((growth.shape[0], 3))
    for index, value in given.items():
        if value is not None:
            solution[:, index] = value
            rows[:, 3] -= rows[:, index] * solution[:, index : index + 1]
    damping = damping_of(resistances[:, None], voltage, current)
    rows *= (weight * np.tile(damping, (slopes.size, 1)))[:, None, :]
    free = [index for index, value in given.items() if value is None]
    cost = _non_negative(rows, free, solution)
    solution[:, 1] /= scale
    return np.where(np.isfinite(cost), cost, np.inf), solution


def _non_negative(rows: np.ndarray, free: list[int], solution: np.ndarray) -> np.ndarray:
    """Non-negative least squares at every node at once, by trying the sets of zeros where they are needed.

    Parameters
    ----------
    rows : ndarray, shape (nodes, 4, n)
        Columns of the three unknowns, then the target.
    free : list of int
        Unknowns to solve for.
    solution : ndarray, shape (nodes, 3)
        The free unknowns are written here.

    Returns
    -------
    ndarray, shape (nodes,)
        Sums of squared residuals.
    """
    gram, norm = _normal(rows)
    best = np.ones(gram.shape[0])  # share of the target's own squares
    solution[:, free] = 0.0
    patterns = [[i for bit, i in enumerate(free) if mask >> bit & 1] for mask in range(1, 2 ** len(free))]
    open_nodes = np.arange(gram.shape[0])
    for pattern in sorted(patterns, key=len, reverse=True):
        if 1 in free and 1 not in pattern:
            continue  # a curve without a diode is no start
        part = gram[open_nodes]
        answer = _solved(part, pattern)
        cost = 1.0 - np.einsum("ki,ki->k", answer, part[:, pattern, 3])
        better = (cost < best[open_nodes]) & (answer >= 0).all(axis=1)
        nodes = open_nodes[better]
        best[nodes] = cost[better]
        for column in free:
            solution[nodes, column] = 0.0
        for place, column in enumerate(pattern):
            solution[nodes, column] = answer[better, place] * norm[nodes, 3] / norm[nodes, column]
        if len(pattern) == len(free):  # nothing beats a solution with nothing at zero
            open_nodes = open_nodes[~better]
        if open_nodes.size == 0:
            break
    return best * norm[:, 3] ** 2


def damping_of(resistance: np.ndarray | float, voltage: np.ndarray, current: np.ndarray) -> np.ndarray:
    """What the curve misses at each voltage over what the linear equation misses there [-].

    The equation misses 1 + Rs·(dJ/du) times what the curve misses at that voltage, and the slope of the measured curve
    tells that factor: 1/(1 + Rs·(dJ/du)) = 1 + Rs·(dJ/dV).
    """
    return np.clip(1.0 + resistance * _steepness(voltage, current), _LEAST_DAMPING, 1.0)


def _steepness(voltage: np.ndarray, current: np.ndarray) -> np.ndarray:
    """dJ/dV between the neighbours of each point; zero where they lie at one voltage."""
    ahead = np.minimum(np.arange(voltage.size) + 1, voltage.size - 1)
    behind = np.maximum(np.arange(voltage.size) - 1, 0)
    span = voltage[ahead] - voltage[behind]
    return np.where(span > 0, (current[ahead] - current[behind]) / np.where(span > 0, span, 1.0), 0.0)


def _normal(rows: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Normal matrix of scaled rows at every node, and the scales."""
    gram = rows @ rows.transpose(0, 2, 1)
    norm = np.sqrt(np.maximum(np.einsum("kii->ki", gram), 1e-300))
    return gram / (norm[:, :, None] * norm[:, None, :]), norm


def _solved(gram: np.ndarray, pattern: list[int]) -> np.ndarray:
    matrix = gram[:, pattern][:, :, pattern] + 1e-12 * np.eye(len(pattern))
    return np.linalg.solve(matrix, gram[:, pattern, 3, None])[:, :, 0]
