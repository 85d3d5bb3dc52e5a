"""Dials: the range of values that a parameter's slider runs over, to suit the size of one sweep."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from .diode import PARAMETERS
from .sweep import Sweep

_STOP = 0.02  # share of a slider's way between its end stop (Rs = 0, Rsh = ∞) and the rest
_SMALLEST_SIZE = 1e-15  # [A cm⁻², A or V]; a sweep of nothing but zeros still gets a slider


@dataclass(frozen=True, slots=True)
class DialRange:
    """Maps the way along a slider, from 0 to 1, to a parameter's value and back.

    Attributes
    ----------
    low, high : float
        Ends of the range, in the parameter's unit.
    scale : "linear" or "log"
    stop : "none", "zero" or "infinity"
        A value beyond the range, at the slider's very end: 0 below it, or infinity above it.
    """

    low: float
    high: float
    scale: Literal["linear", "log"]
    stop: Literal["none", "zero", "infinity"] = "none"

    def value(self, fraction: float) -> float:
        """The value at a fraction of the way; fractions outside 0 to 1 count as the ends."""
        fraction = min(max(fraction, 0.0), 1.0)
        start, end = self._way()
        if self.stop == "zero" and fraction < 0.5 * start:
            return 0.0
        if self.stop == "infinity" and fraction > 0.5 * (end + 1.0):
            return math.inf
        share = min(max((fraction - start) / (end - start), 0.0), 1.0)
        if share in (0.0, 1.0):
            return self.high if share else self.low
        if self.scale == "linear":
            return self.low + share * (self.high - self.low)
        return self.low * (self.high / self.low) ** share

    def fraction(self, value: float) -> float:
        """The fraction of the way at which a value lies; values outside the range count as its ends."""
        start, end = self._way()
        if self.stop == "zero" and value <= 0:
            return 0.0
        if self.stop == "infinity" and math.isinf(value):
            return 1.0
        value = min(max(value, self.low), self.high)
        if self.scale == "linear":
            share = (value - self.low) / (self.high - self.low)
        else:
            share = math.log(value / self.low) / math.log(self.high / self.low)
        return start + share * (end - start)

    def containing(self, value: float) -> DialRange:
        """The range, widened where a finite value lies outside it."""
        if not math.isfinite(value) or (value <= 0 and self.scale == "log"):
            return self
        return replace(self, low=min(self.low, value), high=max(self.high, value))

    def _way(self) -> tuple[float, float]:
        """Where on the slider the range itself begins and ends."""
        return (_STOP if self.stop == "zero" else 0.0), (1.0 - _STOP if self.stop == "infinity" else 1.0)


def dial_ranges(sweep: Sweep, parameters: Sequence[str] = PARAMETERS) -> dict[str, DialRange]:
    """Ranges of a model's parameters for a sweep.

    Parameters
    ----------
    sweep : Sweep
        Its largest currents and voltages set the scale, so that a cell in A cm⁻², a module in A and a dark sweep
        each get sliders of a useful feel.
    parameters : sequence of str
        Those of the model, as in ``OneDiode.parameters`` and ``TwoDiode.parameters``.

    Returns
    -------
    dict of str to DialRange
        By name of parameter. Widen one with ``containing`` where the model's value lies outside.
    """
    current, voltage = _current_scale(sweep), _voltage_scale(sweep)
    resistance = voltage / current  # the slope from Jsc to Voc: as Rs, or as Rsh, it leaves a fill factor of 1/4
    # A cell of ideality 1 to 2 has ln(Jph/J0) = Voc/m of 5 to 70, a wide gap of 3 V more than a hundred.
    per_cell = voltage / max(sweep.series_cells, 1)
    decades = min(max(20.0, 25.0 * per_cell), 60.0)
    saturation = DialRange(current * 10.0**-decades, current * 1e-1, "log")
    ranges = {
        "photocurrent": DialRange(0.0, 1.5 * current, "linear"),
        "saturation_current": saturation,
        "saturation_current_1": saturation,
        "saturation_current_2": replace(saturation, stop="zero"),
        "ideality": DialRange(0.5, 5.0, "linear"),
        "ideality_1": DialRange(0.5, 5.0, "linear"),
        "ideality_2": DialRange(0.5, 5.0, "linear"),
        "series_resistance": DialRange(1e-4 * resistance, resistance, "log", stop="zero"),
        "shunt_resistance": DialRange(0.1 * resistance, 1e6 * resistance, "log", stop="infinity"),
    }
    return {name: ranges[name] for name in parameters}


def _current_scale(sweep: Sweep) -> float:
    """About Jsc under light, the largest current in the dark [A cm⁻² or A]."""
    current = sweep.current[np.isfinite(sweep.current)]
    if sweep.lit and (current > 0).any():
        return max(float(current.max()), _SMALLEST_SIZE)
    return max(float(np.abs(current).max(initial=0.0)), _SMALLEST_SIZE)


def _voltage_scale(sweep: Sweep) -> float:
    """About Voc under light, the largest voltage in the dark [V]."""
    forward = (sweep.voltage > 0) & (sweep.current > 0) if sweep.lit else sweep.voltage > 0
    voltage = sweep.voltage[forward if forward.any() else np.isfinite(sweep.voltage)]
    return max(float(np.abs(voltage).max(initial=0.0)), 1e-3)
