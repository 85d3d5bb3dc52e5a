"""Whether two columns without headings can be voltage and current at all, judged by their run alone.

What passes may still be something else; what is refused here cannot be a sweep: the current that a device
delivers falls with voltage throughout, up to noise and hysteresis.
"""

from __future__ import annotations

import numpy as np

from .passes import Pass
from .refusal import Refusal

_NAME_THEM = "If it is one, write headings such as “voltage (V)” and “current (mA)” above the columns"
# Fewer points than this tell no shape.
_FEW = 8
# Averages over this many stretches of a pass, so that noise does not count as a turn.
_STRETCHES = 24
# Climb against the run, as a share of the largest current; the bump of a fast sweep of a slow device is below.
_CLIMB = 0.5
_CLIMB_FAR_FROM_ZERO = 0.25
# Standard deviations of such an average that noise may climb.
_NOISE = 6.0
# A voltage closer to zero than this share of its largest, or this many steps, starts at zero.
_NEAR_ZERO, _NEAR_STEPS = 0.02, 1.5
# Where neither V = 0 nor a zero of the current is in reach, only a knee or a diode's rise is evidence:
# the fall of a lit sweep; the growth of a dark one, its logarithm per volt (kT/q of one junction gives 39), and the
# share of the growth that is made half-way; the spread of I/V of a resistor.
_FALL, _GROWTH, _STEEPEST, _HALF_WAY, _SPREAD = 0.1, 5.0, 48.0, 0.4, 0.1


def refuse_other_shapes(passes: list[Pass], voltage: np.ndarray, current: np.ndarray, line: int) -> None:
    """Ends the reading of columns that clearly hold no sweep.

    Raises
    ------
    Refusal
        If the longest pass cannot be a sweep.
    """
    longest = max(passes, key=lambda one: len(one.indices))
    volts, amps = voltage[longest.indices], current[longest.indices]
    with np.errstate(all="ignore"):  # wild numbers give nan and infinity, which no comparison takes for a reason
        problem = _not_a_sweep(volts, amps)
    if problem:
        raise Refusal(f"the columns have no headings and do not look like a sweep: {problem}", _NAME_THEM, line=line)


def _not_a_sweep(volts: np.ndarray, amps: np.ndarray) -> str:
    if len(volts) < _FEW:
        return ""
    order = np.argsort(volts, kind="stable")
    volts, amps = volts[order], amps[order]
    edges = np.linspace(0, len(volts), min(_STRETCHES, len(volts)) + 1).astype(int)
    v, i = (np.add.reduceat(x, edges[:-1]) / np.diff(edges) for x in (volts, amps))
    largest = float(np.max(np.abs(i)))
    rise = float(np.max(i - np.minimum.accumulate(i)))
    fall = float(np.max(np.maximum.accumulate(i) - i))
    if min(rise, fall) > max(_CLIMB * largest, _NOISE * _noise(amps) / np.sqrt(len(amps) / len(i))):
        return "what would be the current goes up and down again, and that of a device runs one way"
    nearest = float(np.min(np.abs(volts)))
    steps = np.diff(volts)
    step = float(np.median(steps[steps > 0]))
    reaches = volts[0] <= 0 <= volts[-1] or nearest <= max(_NEAR_ZERO * float(np.max(np.abs(volts))), _NEAR_STEPS * step)
    if reaches or np.any(i > 0) and np.any(i < 0):
        return ""
    away = np.abs(i) if volts[0] > 0 else np.abs(i[::-1])  # from V = 0 outwards
    outwards = np.abs(v) if volts[0] > 0 else np.abs(v[::-1])
    shapes = (_falls_to_open_circuit, _rises_like_a_diode, _is_resistor)
    if min(rise, fall) > _CLIMB_FAR_FROM_ZERO * largest or not any(shape(outwards, away) for shape in shapes):
        return "what would be the voltage comes nowhere near zero, and the current neither falls to zero nor rises as a diode's"
    return ""


def _falls_to_open_circuit(volts: np.ndarray, amps: np.ndarray) -> bool:
    """A plateau that bends down: the last third falls more steeply than the first."""
    first, second, third, last = np.interp(np.linspace(volts[0], volts[-1], 4), volts, amps)
    return third - last > max(0.0, first - second) and first - last > _FALL * np.max(amps)


def _rises_like_a_diode(volts: np.ndarray, amps: np.ndarray) -> bool:
    """Growth by a good factor, ever more of it, and not faster than a junction allows."""
    low, high = float(np.min(amps)), float(np.max(amps))
    if not 0 < low < high / _GROWTH or amps[-1] < 0.9 * high:
        return False
    if np.log(high / low) > _STEEPEST * float(volts[-1] - volts[0]):
        return False
    middle = float(np.interp((volts[0] + volts[-1]) / 2, volts, amps))
    return middle < low + _HALF_WAY * (high - low)


def _is_resistor(volts: np.ndarray, amps: np.ndarray) -> bool:
    ratio = amps / volts
    return float(np.ptp(ratio)) < _SPREAD * float(np.mean(ratio))


def _noise(amps: np.ndarray) -> float:
    """Standard deviation of a point, from second differences; the median does not see knees."""
    return float(np.median(np.abs(np.diff(amps, 2)))) / (0.6745 * np.sqrt(6.0))
