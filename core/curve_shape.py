"""What the shape of a sweep shows: crossings of the axes, limits of the source-meter, jumps, bends, offsets."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .noise import merged_points, noise_level
from .sweep import Sweep

# Figures without a source are common practice.
# Equal values at one end that make a source-meter's limit likely.
_LIMIT_POINTS = 3
# Spread of a current held at the limit, as a share of it.
_LIMIT_SPREAD = 2e-3
# A current that is held exactly, over so many points, and then drops by this share at once: cut off at a limit.
_CUT_POINTS, _CUT_DROP = 6, 5e-3
# How far beyond the noise a bend or a jump must be, and beyond which share of Jsc.
BEYOND_NOISE = 5.0
_BEND_SHARE, _JUMP_SHARE = 0.01, 0.005


@dataclass(frozen=True, slots=True, eq=False)
class Shape:
    """A sweep by rising voltage.

    Attributes
    ----------
    voltage, current : ndarray, shape (n,)
        [V] and [unit of the sweep's current]; points at one voltage merged.
    noise : float
        Scatter of one point [unit of current].
    jsc, voc : float or None
        By straight lines between neighbours; None where not reached.
    """

    sweep: Sweep
    voltage: np.ndarray
    current: np.ndarray
    noise: float
    jsc: float | None
    voc: float | None


@dataclass(frozen=True, slots=True)
class Held:
    """A current that stands still: at which value, from or up to which voltage [V]."""

    current: float
    voltage: float
    to_the_end: bool


def shape_of(sweep: Sweep) -> Shape:
    """The sweep in the form that the checks need."""
    points = merged_points(sweep)
    jsc, voc = _crossings(points.voltage, points.current)
    # numpy's scalars, for which overflow and division by zero give inf and nan instead of raising.
    return Shape(sweep, points.voltage, points.current, np.float64(noise_level(sweep)), jsc, voc)


def _crossings(voltage: np.ndarray, current: np.ndarray) -> tuple[float | None, float | None]:
    """Jsc and Voc by straight lines between neighbours."""
    if voltage.size == 0:
        return None, None
    jsc = np.float64(np.interp(0.0, voltage, current)) if voltage[0] <= 0 <= voltage[-1] else None
    falls = np.flatnonzero((current[:-1] > 0) & (current[1:] <= 0) & (voltage[1:] > 0))
    if not falls.size:
        return jsc, None
    i = int(falls[falls.size // 2])
    share = current[i] / (current[i] - current[i + 1])
    return jsc, voltage[i] + share * (voltage[i + 1] - voltage[i])


def held_current(shape: Shape) -> Held | None:
    """The current that a source-meter's limit holds, if any."""
    voltage, current = shape.voltage, shape.current
    last = current[-1]
    held = np.abs(current - last) <= _LIMIT_SPREAD * abs(last)
    flat = 0 if held.all() else int(np.argmin(held[::-1]))
    # Forward current keeps growing; where it stands still at the end, something holds it.
    if last < 0 and flat >= _LIMIT_POINTS and abs(current[-flat - 1] - last) > 2 * _LIMIT_SPREAD * abs(last):
        return Held(float(last), float(voltage[-flat]), to_the_end=True)
    cut = _cut_plateau(shape) if shape.sweep.lit else 0
    return Held(float(current[0]), float(voltage[cut - 1]), to_the_end=False) if cut else None


def _cut_plateau(shape: Shape) -> int:
    """Number of points of a plateau that is exactly flat and ends in a step; 0 if there is none."""
    current = shape.current
    equal = current == current[0]
    flat = int(np.argmin(equal)) if not equal.all() else 0
    if flat < _CUT_POINTS or current[0] <= 0:
        return 0
    # A diode's own knee begins with small drops.
    return flat if current[0] - current[flat] > _CUT_DROP * current[0] else 0


def held_voltage(sweep: Sweep) -> float | None:
    """The extreme voltage [V] at which several points at one end of the sweep stand, if any."""
    volts = sweep.voltage[np.isfinite(sweep.voltage)]
    for end in (volts, volts[::-1]):
        if end.size > _LIMIT_POINTS and np.all(end[-_LIMIT_POINTS:] == end[-1]) and abs(end[-1]) == np.max(np.abs(end)):
            return float(end[-1])
    return None


def jumps(shape: Shape) -> np.ndarray:
    """Points far off the line between their neighbours while these agree with theirs."""
    voltage, current = shape.voltage, shape.current
    if voltage.size < 7:
        return np.empty(0, dtype=int)
    share = (voltage[1:-1] - voltage[:-2]) / (voltage[2:] - voltage[:-2])
    off = current[1:-1] - (current[:-2] * (1 - share) + current[2:] * share)
    size = np.abs(off)
    inner = np.zeros(off.size, dtype=bool)
    # A spike bends the curve one way and its neighbours the other way by half as much.
    opposite = (off[1:-1] * off[:-2] < 0) & (off[1:-1] * off[2:] < 0)
    inner[1:-1] = opposite & (size[1:-1] > 1.3 * np.maximum(size[:-2], size[2:]))
    scale = abs(shape.jsc) if shape.sweep.lit and shape.jsc else np.abs(current[1:-1]) + shape.noise
    return np.flatnonzero(inner & (size > 2 * BEYOND_NOISE * shape.noise) & (size > _JUMP_SHARE * scale)) + 1


def bends_up(shape: Shape) -> bool:
    """Whether d²J/dV² is above zero somewhere between 0 and Voc, beyond the noise.

    J(V) of a diode with Rs and Rsh lies above each of its chords; an S-shape dips below.
    """
    inside = (shape.voltage >= 0) & (shape.voltage <= shape.voc)
    voltage, current = shape.voltage[inside], shape.current[inside]
    if voltage.size < 9:
        return False
    middle_of_three = np.median(np.stack([current[:-2], current[1:-1], current[2:]]), axis=0)  # no lone outliers
    current = np.concatenate([current[:1], middle_of_three, current[-1:]])
    threshold = max(BEYOND_NOISE * shape.noise, _BEND_SHARE * shape.jsc)
    for divisor in (3, 5, 8):
        reach = max(2, voltage.size // (2 * divisor))
        left, middle, right = (slice(0, -2 * reach), slice(reach, -reach), slice(2 * reach, None))
        if voltage[middle].size < 3:
            continue
        share = (voltage[middle] - voltage[left]) / (voltage[right] - voltage[left])
        below = current[left] * (1 - share) + current[right] * share - current[middle]
        dips = below > threshold
        if np.any(dips[:-2] & dips[1:-1] & dips[2:]):  # three in a row: no single stray point
            return True
    return False


def dark_offset(shape: Shape) -> tuple[float, bool]:
    """How far from V = 0 a dark current changes sign [V], and whether its value at V = 0 stands out from the scatter."""
    voltage, current = shape.voltage, shape.current
    signs = np.flatnonzero(np.diff(np.sign(current)) != 0)
    offset = np.inf
    if signs.size:
        i = signs[np.argmin(np.abs(voltage[signs]))]
        step = current[i] - current[i + 1]
        offset = float(abs(voltage[i] + (current[i] / step if step else 0.0) * (voltage[i + 1] - voltage[i])))
    near = np.argsort(np.abs(voltage))[:5]
    scatter = max(_scatter_about_line(voltage[near], current[near]), 1e-12 * float(np.max(np.abs(current))))
    return offset, shape.jsc is not None and abs(shape.jsc) > BEYOND_NOISE * scatter


def _scatter_about_line(voltage: np.ndarray, current: np.ndarray) -> float:
    x, y = voltage - voltage.mean(), current - current.mean()
    return float(np.std(y - x * (x @ y) / (x @ x))) if voltage.size >= 4 else 0.0
