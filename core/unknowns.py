"""The unknowns that a fit moves, and the way between them and a one-diode model.

J0 and n are so strongly correlated that a fit in them creeps along a curved valley. The fit therefore moves
q = ln J0 + s and s = Vref/m: exp(q) is the diode's current at the reference voltage, which the points pin down
by themselves, and the exponent of the diode equation becomes bilinear. All unknowns are of order one.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import ClassVar, Literal

import numpy as np

from .constants import thermal_voltage
from .diode import PARAMETERS, OneDiode
from .errors import FitFailed
from .first_guess import Scales

# Physical bounds of n; wider where the sweep's voltage shows that the cells in series are not what they are said to be.
_IDEALITY = (0.3, 10.0)
Kind = Literal["plain", "log", "inverse"]
# Smallest ln J0: the exponent of the diode, ln(J/J0), stays below the largest that the solvers hold, and they do not yet
# take the diode for absent.
LEAST_LOG = -450.0
# No sweep tells an unknown of this size from infinity, and beyond it products of parameters leave the range of floats.
FARTHEST = 1e12


@dataclass(frozen=True, slots=True)
class Unknowns:
    """Scaled unknowns of a one-diode fit.

    Attributes
    ----------
    free : tuple of str
        Free parameters, in the order of ``PARAMETERS``.
    base : OneDiode
        Gives the held parameters, temperature and cells in series.
    scales : Scales
    coupled : bool
        J0 and n move as q and s.
    """

    free: tuple[str, ...]
    base: OneDiode
    scales: Scales
    coupled: bool

    parameters: ClassVar[tuple[str, ...]] = PARAMETERS

    @classmethod
    def of(
        cls,
        base: OneDiode,
        hold: frozenset[str],
        scales: Scales,
        bounds: Mapping[str, tuple[float, float]],
        *,
        coupled: bool = True,
    ) -> Unknowns:
        """Unknowns for all parameters but the held ones; J0 and n are coupled where that is allowed and both are free.

        Raises
        ------
        FitFailed
            For names that do not exist.
        """
        for name in (*hold, *bounds):
            if name not in PARAMETERS:
                raise FitFailed(f"The one-diode model has no parameter called “{name}”.")
        free = tuple(name for name in PARAMETERS if name not in hold)
        # Bounds on J0 are a box only where J0 itself is the unknown.
        both = {"saturation_current", "ideality"} <= set(free)
        return cls(free, base, scales, coupled and both and "saturation_current" not in bounds)

    def kind(self, name: str) -> Kind:
        """The scale on which the uncertainty of a parameter is nearly normal."""
        return {"saturation_current": "log", "shunt_resistance": "inverse"}.get(name, "plain")

    def near_bound(self, place: np.ndarray) -> np.ndarray:
        """How close to its bound an unknown counts as lying on it, shape (k,)."""
        return 1e-7 * np.maximum(np.abs(place), 1e-3)

    def final(self, place: np.ndarray, limits: Mapping[str, tuple[float, float]]) -> OneDiode:
        """The model at a place where a fit came to rest."""
        model = self.model(place)
        return replace(model, **kept_within(limits, {name: getattr(model, name) for name in self.free}))

    def scaled_chain(self, place: np.ndarray) -> np.ndarray:
        """∂(free parameters, each on the scale of its kind)/∂unknowns, shape (k, k)."""
        return self.chain(place)[[PARAMETERS.index(name) for name in self.free]]

    @property
    def cell_voltage(self) -> float:
        return self.base.series_cells * thermal_voltage(self.base.temperature)

    def place(self, model: OneDiode) -> np.ndarray:
        """Unknowns of a model, shape (k,)."""
        steepness = self.scales.voltage / (model.ideality * self.cell_voltage)
        log_saturation = math.log(max(model.saturation_current, 1e-300))
        values = {
            "photocurrent": model.photocurrent / self.scales.current,
            "saturation_current": log_saturation + (steepness if self.coupled else 0.0),
            "ideality": steepness,
            "series_resistance": model.series_resistance * self.scales.current / self.scales.voltage,
            "shunt_resistance": self.scales.voltage / (self.scales.current * model.shunt_resistance),
        }
        return np.array([values[name] for name in self.free])

    def model(self, place: np.ndarray) -> OneDiode:
        """The model at a place."""
        value = dict(zip(self.free, place.tolist(), strict=True))
        base, voltage, current = self.base, self.scales.voltage, self.scales.current
        ideality, saturation, shunt = base.ideality, base.saturation_current, base.shunt_resistance
        steepness, series = value.get("ideality"), base.series_resistance
        if "series_resistance" in value:
            series = value["series_resistance"] * voltage / current
        if steepness is not None:
            ideality = voltage / (steepness * self.cell_voltage)
        if "saturation_current" in value:
            log_saturation = value["saturation_current"] - (steepness if self.coupled else 0.0)
            saturation = math.exp(min(max(log_saturation, LEAST_LOG), 100.0))
        if "shunt_resistance" in value:
            conductance = value["shunt_resistance"] * current / voltage
            shunt = 1.0 / conductance if conductance > 0 else math.inf
        return OneDiode(
            photocurrent=value["photocurrent"] * current if "photocurrent" in value else base.photocurrent,
            saturation_current=saturation,
            ideality=ideality,
            series_resistance=series,
            shunt_resistance=shunt,
            series_cells=base.series_cells,
            temperature=base.temperature,
        )

    def chain(self, place: np.ndarray) -> np.ndarray:
        """∂(Jph, ln J0, n, Rs, 1/Rsh)/∂unknowns, shape (5, k)."""
        voltage, current = self.scales.voltage, self.scales.current
        matrix = np.zeros((5, len(self.free)))
        for column, name in enumerate(self.free):
            if name == "photocurrent":
                matrix[0, column] = current
            elif name == "saturation_current":
                matrix[1, column] = 1.0
            elif name == "ideality":
                matrix[2, column] = -voltage / (place[column] ** 2 * self.cell_voltage)
                matrix[1, column] = -1.0 if self.coupled else 0.0
            elif name == "series_resistance":
                matrix[3, column] = voltage / current
            else:
                matrix[4, column] = current / voltage
        return matrix

    def limits(self, bounds: Mapping[str, tuple[float, float]]) -> dict[str, tuple[float, float]]:
        """Bounds on the natural parameters: the given ones, physical ones for the rest."""
        widest = max(_IDEALITY[1], self.scales.voltage / (3.0 * self.cell_voltage))
        return {
            "photocurrent": (0.0, math.inf),
            "saturation_current": (0.0, math.inf),
            "ideality": (_IDEALITY[0], widest),
            "series_resistance": (0.0, math.inf),
            "shunt_resistance": (0.0, math.inf),
        } | {name: (max(low, 0.0), high) for name, (low, high) in bounds.items()}

    def box(self, limits: Mapping[str, tuple[float, float]]) -> tuple[np.ndarray, np.ndarray]:
        """Lower and upper ends of the unknowns, shapes (k,), for limits on the natural parameters."""
        voltage, current = self.scales.voltage, self.scales.current
        ends = []
        for name in self.free:
            low, high = limits[name]
            if name == "photocurrent":
                ends.append((low / current, high / current))
            elif name == "saturation_current":
                ends.append((-math.inf, math.inf) if self.coupled else (_log(low), _log(high)))
            elif name == "ideality":  # the unknowns of n and Rsh run the other way
                ends.append((voltage / (high * self.cell_voltage), voltage / (max(low, 1e-3) * self.cell_voltage)))
            elif name == "series_resistance":
                ends.append((low * current / voltage, high * current / voltage))
            else:
                ends.append((voltage / (current * high), voltage / (current * low) if low > 0 else math.inf))
        lower, upper = np.clip(np.array(ends, dtype=float).reshape(-1, 2).T, -FARTHEST, FARTHEST)
        return lower, upper


def kept_within(limits: Mapping[str, tuple[float, float]], values: Mapping[str, float]) -> dict[str, float]:
    """The parameters inside their limits to the last digit.

    An unknown on the end of its box can come back as a parameter that lies a rounding beyond the limit itself.
    """
    return {name: min(max(value, limits[name][0]), limits[name][1]) for name, value in values.items()}


def _log(value: float) -> float:
    """Logarithm with the ends that J0 may have."""
    return math.inf if math.isinf(value) else max(math.log(max(value, 1e-300)), LEAST_LOG)
