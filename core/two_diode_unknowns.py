"""The unknowns that a fit of two diodes moves, and the way between them and the model.

A diode is moved by the current that it carries at the reference voltage, J0·exp(Vref/m), in units of the sweep's
current: the points pin it down by themselves, the equation is linear in it, and zero, where the diode is absent, is a
plain bound.  Only where J0 itself is bounded by the user while n is free does ln J0 take its place.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import ClassVar

import numpy as np

from .constants import thermal_voltage
from .errors import FitFailed
from .first_guess import Scales
from .two_diode import TWO_DIODE_PARAMETERS, TwoDiode
from .unknowns import FARTHEST, LEAST_LOG, Kind, kept_within

# Physical bounds of n₁ and n₂.
_IDEALITY = (0.5, 5.0)
# A diode that carries this share of the current at the reference voltage is absent; zero itself has no logarithm.
FAINT = 1e-20
_LARGEST_LOG = 690.0
_DIODES = ("1", "2")


@dataclass(frozen=True, slots=True)
class TwoDiodeUnknowns:
    """Scaled unknowns of a two-diode fit; used as ``Unknowns`` is.

    Attributes
    ----------
    free : tuple of str
        Free parameters, in the order of ``TWO_DIODE_PARAMETERS``.
    base : TwoDiode
        Gives the held parameters, temperature and cells in series.
    scales : Scales
    logarithmic : frozenset of str
        Saturation currents that are moved as ln J0.
    """

    free: tuple[str, ...]
    base: TwoDiode
    scales: Scales
    logarithmic: frozenset[str]

    parameters: ClassVar[tuple[str, ...]] = TWO_DIODE_PARAMETERS

    @classmethod
    def of(
        cls,
        base: TwoDiode,
        hold: frozenset[str],
        scales: Scales,
        bounds: Mapping[str, tuple[float, float]],
        *,
        coupled: bool = True,
    ) -> TwoDiodeUnknowns:
        """Unknowns for all parameters but the held ones. Raises FitFailed for names that do not exist."""
        for name in (*hold, *bounds):
            if name not in TWO_DIODE_PARAMETERS:
                raise FitFailed(f"The two-diode model has no parameter called “{name}”.")
        free = tuple(name for name in TWO_DIODE_PARAMETERS if name not in hold)
        logarithmic = frozenset(
            f"saturation_current_{diode}"
            for diode in _DIODES
            if f"ideality_{diode}" in free and (not coupled or f"saturation_current_{diode}" in bounds)
        )
        return cls(free, base, scales, logarithmic)

    @property
    def cell_voltage(self) -> float:
        return self.base.series_cells * thermal_voltage(self.base.temperature)

    def kind(self, name: str) -> Kind:
        """The scale on which the uncertainty of a parameter is nearly normal."""
        if name.startswith("saturation_current"):
            return "log" if f"ideality_{name[-1]}" in self.free else "plain"
        return "inverse" if name == "shunt_resistance" else "plain"

    def near_bound(self, place: np.ndarray) -> np.ndarray:
        """How close to its bound an unknown counts as lying on it, shape (k,)."""
        near = 1e-7 * np.maximum(np.abs(place), 1e-3)
        for column, name in enumerate(self.free):
            if name.startswith("saturation_current"):
                near[column] = 1e-7 * abs(place[column])
        return near

    def place(self, model: TwoDiode) -> np.ndarray:
        """Unknowns of a model, shape (k,)."""
        ratio = self.scales.voltage / self.scales.current
        values = {
            "photocurrent": model.photocurrent / self.scales.current,
            "series_resistance": model.series_resistance / ratio,
            "shunt_resistance": ratio / model.shunt_resistance,
        }
        for diode in _DIODES:
            ideality, saturation = getattr(model, f"ideality_{diode}"), getattr(model, f"saturation_current_{diode}")
            steepness = self.scales.voltage / (ideality * self.cell_voltage)
            log_saturation = math.log(max(saturation, 1e-300))
            values[f"ideality_{diode}"] = steepness
            if f"saturation_current_{diode}" not in self.logarithmic:
                share = log_saturation + steepness - math.log(self.scales.current)
                log_saturation = max(math.exp(min(share, _LARGEST_LOG)), FAINT) if saturation > 0 else FAINT
            values[f"saturation_current_{diode}"] = log_saturation
        return np.array([values[name] for name in self.free])

    def model(self, place: np.ndarray) -> TwoDiode:
        """The model at a place."""
        value = dict(zip(self.free, place.tolist(), strict=True))
        base, ratio = self.base, self.scales.voltage / self.scales.current
        natural = {name: getattr(base, name) for name in TWO_DIODE_PARAMETERS}
        if "photocurrent" in value:
            natural["photocurrent"] = value["photocurrent"] * self.scales.current
        if "series_resistance" in value:
            natural["series_resistance"] = value["series_resistance"] * ratio
        if "shunt_resistance" in value:
            conductance = value["shunt_resistance"] / ratio
            natural["shunt_resistance"] = 1.0 / conductance if conductance > 0 else math.inf
        for diode in _DIODES:
            n, name = f"ideality_{diode}", f"saturation_current_{diode}"
            if n in value:
                natural[n] = self.scales.voltage / (value[n] * self.cell_voltage)
            if name in value:
                log_saturation = value[name]
                if name not in self.logarithmic:
                    steepness = self.scales.voltage / (natural[n] * self.cell_voltage)
                    log_saturation = math.log(max(value[name], FAINT) * self.scales.current) - steepness
                natural[name] = math.exp(min(max(log_saturation, LEAST_LOG), 100.0))
        return TwoDiode(**natural, series_cells=base.series_cells, temperature=base.temperature)

    def final(self, place: np.ndarray, limits: Mapping[str, tuple[float, float]]) -> TwoDiode:
        """The model at a place where a fit came to rest; a diode that carries nothing there is absent."""
        model = self.model(place)
        natural = {name: getattr(model, name) for name in self.free}
        absent = [
            name
            for name, value in zip(self.free, place.tolist(), strict=True)
            if name.startswith("saturation_current") and name not in self.logarithmic and value <= 2.0 * FAINT
        ]
        for name in absent[: 1 if len(absent) > 1 else None]:
            natural[name] = 0.0
        return replace(model, **kept_within(limits, natural))

    def chain(self, place: np.ndarray) -> np.ndarray:
        """∂(Jph, ln J0₁, ln J0₂, n₁, n₂, Rs, 1/Rsh)/∂unknowns, shape (7, k)."""
        ratio = self.scales.voltage / self.scales.current
        factor = {"photocurrent": self.scales.current, "series_resistance": ratio, "shunt_resistance": 1.0 / ratio}
        matrix = np.zeros((len(TWO_DIODE_PARAMETERS), len(self.free)))
        for column, name in enumerate(self.free):
            row = TWO_DIODE_PARAMETERS.index(name)
            if name.startswith("ideality"):
                matrix[row, column] = -self.scales.voltage / (place[column] ** 2 * self.cell_voltage)
                saturation = f"saturation_current_{name[-1]}"
                if saturation in self.free and saturation not in self.logarithmic:
                    matrix[TWO_DIODE_PARAMETERS.index(saturation), column] = -1.0
            elif name.startswith("saturation_current"):
                matrix[row, column] = 1.0 if name in self.logarithmic else 1.0 / max(place[column], FAINT)
            else:
                matrix[row, column] = factor[name]
        return matrix

    def scaled_chain(self, place: np.ndarray) -> np.ndarray:
        """∂(free parameters, each on the scale of its kind)/∂unknowns, shape (k, k)."""
        matrix = self.chain(place)[[TWO_DIODE_PARAMETERS.index(name) for name in self.free]]
        model = self.model(place)
        for row, name in enumerate(self.free):
            if name.startswith("saturation_current") and self.kind(name) == "plain":
                matrix[row] *= getattr(model, name)
        return matrix

    def limits(self, bounds: Mapping[str, tuple[float, float]]) -> dict[str, tuple[float, float]]:
        """Bounds on the natural parameters: the given ones, physical ones for the rest."""
        limits = dict.fromkeys(TWO_DIODE_PARAMETERS, (0.0, math.inf))
        limits |= {"ideality_1": _IDEALITY, "ideality_2": _IDEALITY}
        return limits | {name: (max(low, 0.0), high) for name, (low, high) in bounds.items()}

    def box(self, limits: Mapping[str, tuple[float, float]]) -> tuple[np.ndarray, np.ndarray]:
        """Lower and upper ends of the unknowns, shapes (k,), for limits on the natural parameters."""
        voltage, current = self.scales.voltage, self.scales.current
        ends = []
        for name in self.free:
            low, high = limits[name]
            if name == "photocurrent":
                ends.append((low / current, high / current))
            elif name in self.logarithmic:
                ends.append((max(math.log(max(low, 1e-300)), LEAST_LOG), math.log(high) if math.isfinite(high) else math.inf))
            elif name.startswith("saturation_current"):
                # With n free the limits are the physical ones, which hold for every n.
                steepness = voltage / (getattr(self.base, f"ideality_{name[-1]}") * self.cell_voltage)
                growth = math.exp(min(steepness, _LARGEST_LOG)) / current
                ends.append((max(low * growth, FAINT), high * growth))
            elif name.startswith("ideality"):  # the unknowns of n and Rsh run the other way
                ends.append((voltage / (high * self.cell_voltage), voltage / (max(low, 1e-3) * self.cell_voltage)))
            elif name == "series_resistance":
                ends.append((low * current / voltage, high * current / voltage))
            else:
                ends.append((voltage / (current * high), voltage / (current * low) if low > 0 else math.inf))
        lower, upper = np.clip(np.array(ends, dtype=float).reshape(-1, 2).T, -FARTHEST, FARTHEST)
        return lower, upper
