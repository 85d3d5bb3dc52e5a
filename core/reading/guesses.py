"""Columns told apart by their numbers alone, where no heading says what they are."""

from __future__ import annotations

import numpy as np

from .refusal import Refusal


def finite(values: np.ndarray) -> np.ndarray:
    return values[np.isfinite(values)]


def pairs_by_numbers(values: np.ndarray, usable: list[int], line: int) -> tuple[list[tuple[int, int]], tuple[str, ...]]:
    """Pairs of columns (voltage, current) and notes: the voltage is the column that runs most evenly.

    Raises
    ------
    Refusal
        If one of two columns never changes.
    """
    candidates = [c for c in usable if not (len(usable) > 2 and is_count(values[:, c]))]
    if len(candidates) < 2:
        candidates = usable
    likeness = {c: voltage_likeness(values[:, c]) for c in candidates}
    if len(candidates) == 2:
        first, second = candidates
        for index in candidates:
            column = finite(values[:, index])
            if np.ptp(column) == 0 and column[0] != 0:
                raise Refusal(
                    f"column {index + 1} has the same number, {column[0]:.6g}, in every row",
                    "A sweep needs a voltage that runs from one value to another and the current at each",
                    line=line,
                )
        # In doubt the first one: nearly everybody writes the voltage first.
        pair = (second, first) if likeness[second] > likeness[first] + 0.2 else (first, second)
        return [pair], ("No headings: the column that runs most evenly is read as the voltage.",)
    even, odd = candidates[::2], candidates[1::2]
    if len(even) == len(odd) and all(likeness[v] > likeness[c] for v, c in zip(even, odd, strict=True)):
        spans = [np.ptp(finite(values[:, v])) for v in even]
        if min(spans) > 0.3 * spans[0]:
            return list(zip(even, odd, strict=True)), ("No headings: the columns are read as pairs of voltage and current.",)
    voltage = max(candidates[:3], key=lambda c: likeness[c])
    current = next(c for c in candidates if c != voltage)
    note = (
        f"No headings: column {voltage + 1} is read as the voltage and column {current + 1} as the current; "
        "the others are not used."
    )
    return [(voltage, current)], (note,)


def is_count(values: np.ndarray) -> bool:
    """1, 2, 3, …"""
    values = finite(values)
    return values.size >= 3 and values[0] in (0.0, 1.0) and bool(np.all(np.diff(values) == 1.0))


def voltage_likeness(values: np.ndarray) -> float:
    """From 0 to 1: how evenly and steadily a column runs."""
    values = finite(values)
    steps = np.diff(values)
    steps = steps[steps != 0]
    span = np.ptp(values) if values.size else 0.0
    if steps.size < 2 or not np.isfinite(span) or span == 0:
        return 0.0
    sizes = np.abs(steps)
    even = 1.0 / (1.0 + float(np.mean(np.abs(sizes - np.median(sizes)))) / float(np.median(sizes)))
    turns = float(np.mean(np.sign(steps[1:]) != np.sign(steps[:-1])))
    return even * (1.0 - turns)


def level_at_zero(volts: np.ndarray, amps: np.ndarray) -> float:
    """Size of the current around V = 0, or at the lowest voltage."""
    good = np.isfinite(volts) & np.isfinite(amps)
    if not good.any():
        return 0.0
    order = np.argsort(np.abs(volts[good]))[:5]
    return float(np.median(np.abs(amps[good][order])))
