"""Where the voltage turns round: one column of voltages as monotonic passes."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .limits import MIN_POINTS
from .refusal import Refusal

# A retreat of the voltage smaller than this share of its whole range is jitter, not a turn.
_JITTER_SHARE = 0.02
# A single step of more than this many usual steps carries the source back to the start; it is no pass.
_FLYBACK_STEPS = 4
# Points by which nearly every sweep shows that it has more voltages than two; sorting all of them takes longer.
_FEW_VALUES = 20


@dataclass(frozen=True, slots=True)
class Pass:
    """Indices into the column, in an order in which the voltage never turns."""

    indices: np.ndarray
    rising: bool
    jitter: bool


def split_passes(voltage: np.ndarray) -> tuple[list[Pass], int]:
    """Passes of a voltage column, and how many points belong to none of at least three.

    Parameters
    ----------
    voltage : ndarray, shape (n,)
        [V], finite, in the order of measurement.

    Raises
    ------
    Refusal
        If the voltage never changes, or jumps about without sweeping.
    """
    span = float(np.ptp(voltage)) if voltage.size else 0.0
    if span <= 1e-9 * max(1.0, float(np.max(np.abs(voltage), initial=0.0))):
        raise Refusal(
            f"the voltage never changes, it stays at {voltage[0] if voltage.size else 0:.6g}",
            "This may be a record over time; a sweep needs a voltage that runs from one value to another",
        )
    if len(set(voltage[:_FEW_VALUES].tolist())) < 3 and np.unique(voltage).size < 3:
        raise Refusal(
            "the voltage has only two different values",
            "A sweep needs at least three; check the decimal marks and which character divides the cells",
        )
    turns = _turns(voltage, _JITTER_SHARE * span)
    steps = np.abs(np.diff(voltage))
    usual = float(np.median(steps[steps > 0]))
    bounds = list(zip(turns[:-1], turns[1:], strict=True))
    if len(voltage) > 20 and len(bounds) > 0.3 * len(voltage):
        raise Refusal(
            "the voltage jumps up and down without sweeping",
            "Check that the columns are in the right order and the rows in the order of measurement",
        )
    passes: list[Pass] = []
    lost = 0
    taken = -1
    for start, end in bounds:
        if end - start == 1 and len(bounds) > 1 and abs(voltage[end] - voltage[start]) > _FLYBACK_STEPS * usual:
            continue  # fly-back; both of its points belong to the passes around it
        first, last = _dealt(voltage, start, end)
        if last - first + 1 < MIN_POINTS:
            lost += max(0, last - max(first, taken + 1) + 1)
            continue
        indices = np.arange(first, last + 1)
        values = voltage[indices]
        rising = bool(voltage[end] > voltage[start])
        order = np.argsort(values if rising else -values, kind="stable")
        jitter = bool(np.any(np.diff(order) != 1))
        passes.append(Pass(indices[order], rising, jitter))
        taken = last
    if not passes:
        raise Refusal(
            "no part of the table sweeps the voltage over at least three points", "Check that the export is complete"
        )
    return passes, lost


def _turns(voltage: np.ndarray, threshold: float) -> list[int]:
    """Indices of the first point, each turn, and the last point."""
    # Only points where the direction of the step changes can be turns.
    steps = np.sign(np.diff(voltage))
    moving = np.flatnonzero(steps)
    changes = np.flatnonzero(steps[moving[1:]] != steps[moving[:-1]])
    candidates = [0, *(moving[changes] + 1).tolist(), len(voltage) - 1]
    values = voltage[candidates].tolist()
    turns = [0]
    low = high = 0  # positions, among the candidates, of the extremes since the last turn
    heading = 0
    for k in range(1, len(candidates)):
        value = values[k]
        if heading >= 0 and value > values[high]:
            high = k
        if heading <= 0 and value < values[low]:
            low = k
        if heading >= 0 and values[high] - value > threshold:
            if heading > 0:
                turns.append(candidates[high])
            heading, low = -1, k
        elif heading <= 0 and value - values[low] > threshold:
            if heading < 0:
                turns.append(candidates[low])
            heading, high = 1, k
    if turns[-1] != len(voltage) - 1:
        turns.append(len(voltage) - 1)
    return turns


def _dealt(voltage: np.ndarray, start: int, end: int) -> tuple[int, int]:
    """First and last index of a pass; samples repeated at a turn are dealt out to both sides.

    A turning sample that stands there once belongs to both passes. Where it is repeated, the last one
    begins the pass after and the others end the pass before.
    """
    first, last = start, end
    while start > 0 and first + 1 < end and voltage[first + 1] == voltage[start]:
        first += 1
    while last + 2 < len(voltage) and voltage[last + 2] == voltage[last + 1] == voltage[end]:
        last += 1
    return first, last
