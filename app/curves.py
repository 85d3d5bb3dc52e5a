"""The model's lines as lists for the screen: one function serves the figure, the live route and the settled state.

Each curve names the trace it stands for and the axis it hangs on; the figure has three y axes:
``y`` (current), ``y2`` (power) and ``y3`` (the strip below the plot).
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from functools import lru_cache
from typing import Literal

import numpy as np

from core.diode import Landmarks, OneDiode
from core.fit_settings import Weights
from core.local_ideality import local_ideality, model_local_ideality
from core.sweep import Sweep
from core.weighting import point_noise

from .units import Units

Strip = Literal["residuals", "log", "ideality"]
STRIPS: tuple[Strip, ...] = ("residuals", "log", "ideality")

SQUEEZED_END = 3.2  # of the residuals' scale: beyond a thousand noise widths all are alike

LINE_POINTS = 200
STRIP_POINTS = 300  # more would not be seen, and the answer to a moving hand stays small


# A sweep never changes, so its noise is judged once and a moving hand need not wait for it.
noise_of_points = lru_cache(maxsize=4096)(point_noise)


def strip_noise(sweep: Sweep, weights: Weights) -> np.ndarray:
    """The unit of each point's residual in the strip: the file's standard deviation where it sets the weights, else the noise."""
    return noise_of_points(sweep, weights) if weights == "from the file" else noise_of_points(sweep)


@lru_cache(maxsize=64)
def landmarks_of(model: OneDiode) -> Landmarks:
    """Landmarks of a model: lines, grips and numbers of one answer all ask for the same."""
    return model.landmarks()


@dataclass(frozen=True)
class Curve:
    """One line: the trace's uid, its axis, and its points in screen units."""

    uid: str
    axis: str
    x: np.ndarray
    y: np.ndarray

    def to_dict(self) -> dict:
        return {"uid": self.uid, "axis": self.axis, "x": _short(self.x), "y": _short(self.y)}


def model_curves(sweep: Sweep, model: OneDiode, strip: Strip, weights: Weights = "automatic") -> list[Curve]:
    """All lines of the model over this sweep; in the dark without its photocurrent. Weights set the unit of residuals."""
    if not sweep.lit:
        model = replace(model, photocurrent=0.0)
    units = Units.of(sweep.per_area)
    lines = _lit_lines(sweep, model, units) if sweep.lit else _dark_lines(sweep, model, units)
    return [*lines, strip_model(sweep, model, strip, units, weights)]


def _lit_lines(sweep: Sweep, model: OneDiode, units: Units) -> list[Curve]:
    voltage = voltage_grid(sweep, model)
    current = model.current(voltage)
    marks = landmarks_of(model)
    corner = np.array([[0, marks.jmp], [marks.vmp, marks.jmp], [marks.vmp, 0]])
    return [
        Curve("model", "y", voltage, current * units.current_factor),
        Curve("power", "y2", voltage, voltage * current * units.power_factor),
        Curve("corner", "y", corner[:, 0], corner[:, 1] * units.current_factor),
    ]


def _dark_lines(sweep: Sweep, model: OneDiode, units: Units) -> list[Curve]:
    voltage = voltage_grid(sweep, model)
    return [Curve("model", "y", voltage, _positive(np.abs(model.current(voltage))) * units.current_factor)]


def voltage_grid(sweep: Sweep, model: OneDiode) -> np.ndarray:
    """Voltages of the model line: evenly over the sweep, to Voc, and somewhat beyond."""
    low, high = float(sweep.voltage.min()), float(sweep.voltage.max())
    if sweep.lit:
        voc = landmarks_of(model).voc
        low = min(low, 0.0)
        if np.isfinite(voc):
            high = max(high, 1.02 * voc)
    margin = 0.02 * (high - low)
    return np.linspace(low - margin, high + margin, LINE_POINTS)


def strip_points(sweep: Sweep, model: OneDiode | None, strip: Strip, units: Units) -> Curve:
    """What the strip shows of the measured points; residuals need a model and are drawn by ``strip_model``."""
    empty = np.array([])
    if strip == "log":
        voltage, current = _log_points(sweep)
        return Curve("strip-points", "y3", voltage, current * units.current_factor)
    if strip == "ideality":
        voltage, ideality = local_ideality(sweep)
        return Curve("strip-points", "y3", voltage, ideality)
    return Curve("strip-points", "y3", empty, empty)


def strip_model(sweep: Sweep, model: OneDiode, strip: Strip, units: Units, weights: Weights = "automatic") -> Curve:
    """The model's part of the strip."""
    if strip == "residuals":
        voltage, current = thinned(sweep, STRIP_POINTS)
        noise = strip_noise(sweep, weights)[chosen_points(sweep, STRIP_POINTS)]
        residual = (current - model.current(voltage)) / noise
        return Curve("strip-model", "y3", voltage, squeezed(residual))
    voltage = voltage_grid(sweep, model)
    if strip == "log":
        current = model.current(voltage)
        shown = _positive(model.current(0.0) - current if sweep.lit else np.abs(current))
        return Curve("strip-model", "y3", voltage, shown * units.current_factor)
    ideality = model_local_ideality(model, voltage, lit=sweep.lit)
    return Curve("strip-model", "y3", voltage, ideality)


def squeezed(residual: np.ndarray) -> np.ndarray:
    """Residuals on a scale that is even near zero and logarithmic beyond, so that it need not follow the hand."""
    return np.sign(residual) * np.minimum(np.log10(1 + np.abs(residual)), SQUEEZED_END)


def thinned(sweep: Sweep, most: int) -> tuple[np.ndarray, np.ndarray]:
    """Voltage and current of at most ``most`` points, ends included."""
    if len(sweep.voltage) <= most:
        return sweep.voltage, sweep.current
    chosen = chosen_points(sweep, most)
    return sweep.voltage[chosen], sweep.current[chosen]


def chosen_points(sweep: Sweep, most: int) -> np.ndarray:
    """Indices of at most ``most`` points, ends included."""
    count = len(sweep.voltage)
    return np.linspace(0, count - 1, min(count, most)).round().astype(int)


def _log_points(sweep: Sweep) -> tuple[np.ndarray, np.ndarray]:
    """The recombination current: Jsc − J of a lit sweep; |J| of a dark one."""
    voltage, current = thinned(sweep, 1000)
    if not sweep.lit:
        return voltage, _positive(np.abs(current))
    order = np.argsort(sweep.voltage)
    at_zero = float(np.interp(0.0, sweep.voltage[order], sweep.current[order]))
    return voltage, _positive(at_zero - current)


def _positive(values: np.ndarray) -> np.ndarray:
    """A logarithmic axis has no place for the rest; a gap in the line says so."""
    return np.where(values > 0, values, np.nan)


def _short(values: np.ndarray) -> list[float | None]:
    """Six significant digits of the largest value: finer than a screen, and short to send."""
    finite = np.isfinite(values)
    whole = bool(finite.all())
    known = values if whole else values[finite]
    if not known.size:
        return [None] * len(values)
    low, high = float(known.min()), float(known.max())
    if low > 0 and high > 1e3 * low:
        rounded = [float(f"{value:.6g}") for value in values.tolist()]
    else:
        largest = max(-low, high)
        decimals = 6 - math.floor(math.log10(largest)) if largest > 0 else 6
        rounded = np.round(values, decimals).tolist()
    return rounded if whole else [value if ok else None for value, ok in zip(rounded, finite.tolist(), strict=True)]
