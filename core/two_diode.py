"""The two-diode equation of an illuminated cell, solved exactly.

J = Jph − J0₁·(exp(u/m₁) − 1) − J0₂·(exp(u/m₂) − 1) − u/Rsh with the junction voltage u = V + J·Rs and mᵢ = nᵢ·Ns·kT/q.

No closed form exists, but J is explicit in u, and both J(V) and V(J) ask for the one root of a rising, convex function
of u. Bounds close above the root are known in closed form, and Halley's method settles from there in a few steps.

Signs and units as in ``diode``.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any, ClassVar

import numpy as np
from numpy.typing import ArrayLike

from .constants import STANDARD_TEMPERATURE, thermal_voltage
from .diode import LARGEST_EXPONENT, Landmarks, OneDiode, landmarks_between

# The order of the Jacobian's columns.
TWO_DIODE_PARAMETERS = (
    "photocurrent",
    "saturation_current_1",
    "saturation_current_2",
    "ideality_1",
    "ideality_2",
    "series_resistance",
    "shunt_resistance",
)

# Below this a product of parameters is zero for every current that a float can carry.
_NEGLIGIBLE = 1e-200
# A step s of Halley's method leaves an error of about s³/m²; this share of u is beyond what the current shows.
_SETTLED = 1e-14
_MOST_STEPS = 30  # six are the most ever seen; beyond, rounding of Jph − J alone moves a nearly infinite resistance


@dataclass(frozen=True, slots=True)
class TwoDiode:
    """Seven numbers, and a temperature, that fix a two-diode curve.

    Attributes
    ----------
    photocurrent : float
        Jph ≥ 0 [A cm⁻²].
    saturation_current_1, saturation_current_2 : float
        J0₁, J0₂ ≥ 0, one of them above zero [A cm⁻²]; where one is zero the model is the one-diode model.
    series_resistance, shunt_resistance : float
        Rs ≥ 0 and Rsh > 0 [Ω cm²] of the whole string; ``inf`` means no shunt.
    ideality_1, ideality_2 : float
        n₁, n₂ > 0 [-], of one cell. 1 and 2: recombination outside and inside the space-charge region.
    series_cells : int
        Ns, cells in series [-].
    temperature : float
        [K]; the parameters hold at this temperature only.

    References
    ----------
    C.-T. Sah, R. N. Noyce, W. Shockley, Proc. IRE 45 (1957) 1228 (the second exponential; from memory).
    """

    parameters: ClassVar[tuple[str, ...]] = TWO_DIODE_PARAMETERS

    photocurrent: float
    saturation_current_1: float
    saturation_current_2: float
    series_resistance: float
    shunt_resistance: float
    ideality_1: float = 1.0
    ideality_2: float = 2.0
    series_cells: int = 1
    temperature: float = STANDARD_TEMPERATURE

    @property
    def slope_voltages(self) -> tuple[float, float]:
        """m₁ and m₂ [V], mᵢ = nᵢ·Ns·kT/q."""
        of_one = self.series_cells * thermal_voltage(self.temperature)
        return self.ideality_1 * of_one, self.ideality_2 * of_one

    def current(self, voltage: ArrayLike) -> np.ndarray:
        """Current at each voltage.

        Parameters
        ----------
        voltage : array_like
            Terminal voltage [V], of any shape.

        Returns
        -------
        ndarray, shape of ``voltage``
            [A cm⁻²], with an error below 1e-10 of max(\\|J\\|, Jph).
        """
        return self._current_and_emissions(np.asarray(voltage, dtype=float))[0]

    def current_and_jacobian(self, voltage: ArrayLike) -> tuple[np.ndarray, np.ndarray]:
        """Current and its derivatives, from one solution of the equation.

        Parameters
        ----------
        voltage : array_like, shape (n,)
            [V]

        Returns
        -------
        current : ndarray, shape (n,)
            [A cm⁻²]
        jacobian : ndarray, shape (n, 7)
            ∂J/∂(Jph, ln J0₁, ln J0₂, n₁, n₂, Rs, 1/Rsh) at constant voltage, by the implicit function theorem.
        """
        voltage = np.asarray(voltage, dtype=float)
        current, emission_1, emission_2 = self._current_and_emissions(voltage)
        junction = voltage + current * self.series_resistance
        first, second = self.slope_voltages
        slope_1, slope_2 = emission_1 / first, emission_2 / second
        conductance = slope_1 + slope_2 + 1.0 / self.shunt_resistance
        damping = 1.0 / (1.0 + self.series_resistance * conductance)
        damped_junction = junction * damping
        jacobian = np.empty((*voltage.shape, 7))
        jacobian[..., 0] = damping
        jacobian[..., 1] = (self.saturation_current_1 - emission_1) * damping
        jacobian[..., 2] = (self.saturation_current_2 - emission_2) * damping
        jacobian[..., 3] = slope_1 * damped_junction / self.ideality_1
        jacobian[..., 4] = slope_2 * damped_junction / self.ideality_2
        jacobian[..., 5] = -conductance * current * damping
        jacobian[..., 6] = -damped_junction
        return current, jacobian

    def jacobian(self, voltage: ArrayLike) -> np.ndarray:
        """∂J/∂(Jph, ln J0₁, ln J0₂, n₁, n₂, Rs, 1/Rsh), shape (n, 7); see ``current_and_jacobian``."""
        return self.current_and_jacobian(voltage)[1]

    def voltage(self, current: ArrayLike) -> np.ndarray:
        """Voltage at each current.

        Parameters
        ----------
        current : array_like
            [A cm⁻²], of any shape.

        Returns
        -------
        ndarray, shape of ``current``
            [V]; NaN where no voltage gives that current (no shunt, and J ≥ Jph + J0₁ + J0₂).
        """
        alone = self.lone_diode()
        if alone is not None:
            return alone.voltage(current)
        current = np.asarray(current, dtype=float)
        lost = self.photocurrent - current
        saturations = self.saturation_current_1, self.saturation_current_2
        junction = _junction(1.0 / self.shunt_resistance, saturations, self.slope_voltages, lost)
        return junction - current * self.series_resistance

    def landmarks(self) -> Landmarks:
        """Jsc, Voc, the maximum power point and the fill factor of the curve; all NaN without photocurrent."""
        if not self.photocurrent > 0:
            return Landmarks(*[math.nan] * 6)
        jsc, voc = float(self.current(0.0)), float(self.voltage(0.0))
        conductance, photocurrent = 1.0 / self.shunt_resistance, self.photocurrent
        first, second = self.slope_voltages
        saturation_1, saturation_2 = self.saturation_current_1, self.saturation_current_2

        def current_and_steepness(junction: float) -> tuple[float, float]:
            growth_1, growth_2 = (math.expm1(min(junction / slope, LARGEST_EXPONENT)) for slope in (first, second))
            current = photocurrent - saturation_1 * growth_1 - saturation_2 * growth_2 - junction * conductance
            diodes = saturation_1 * (growth_1 + 1.0) / first + saturation_2 * (growth_2 + 1.0) / second
            return current, diodes + conductance

        return landmarks_between(jsc, voc, self.series_resistance, current_and_steepness)

    def scaled(self, factor: float) -> TwoDiode:
        """The curve with its current multiplied by a factor, as when an area changes."""
        return replace(
            self,
            photocurrent=self.photocurrent * factor,
            saturation_current_1=self.saturation_current_1 * factor,
            saturation_current_2=self.saturation_current_2 * factor,
            series_resistance=self.series_resistance / factor,
            shunt_resistance=self.shunt_resistance / factor,
        )

    def at(self, *, temperature: float | None = None, series_cells: int | None = None) -> TwoDiode:
        """The same curve read under another temperature [K] or number of cells: n₁ and n₂ are rescaled."""
        temperature = self.temperature if temperature is None else temperature
        series_cells = self.series_cells if series_cells is None else series_cells
        ratio = (self.series_cells * self.temperature) / (series_cells * temperature)
        return replace(
            self,
            ideality_1=self.ideality_1 * ratio,
            ideality_2=self.ideality_2 * ratio,
            temperature=temperature,
            series_cells=series_cells,
        )

    def lone_diode(self) -> OneDiode | None:
        """The one-diode model of the same curve where one saturation current is zero, else None."""
        if self.saturation_current_2 == 0:
            saturation, ideality = self.saturation_current_1, self.ideality_1
        elif self.saturation_current_1 == 0:
            saturation, ideality = self.saturation_current_2, self.ideality_2
        else:
            return None
        return OneDiode(
            self.photocurrent,
            saturation,
            ideality,
            self.series_resistance,
            self.shunt_resistance,
            series_cells=self.series_cells,
            temperature=self.temperature,
        )

    def to_dict(self) -> dict[str, Any]:
        """As JSON-ready values (no shunt is None); ``from_dict`` gives the same model back."""
        values: dict[str, Any] = {name: float(getattr(self, name)) for name in TWO_DIODE_PARAMETERS}
        if math.isinf(values["shunt_resistance"]):
            values["shunt_resistance"] = None
        return {**values, "series_cells": int(self.series_cells), "temperature": float(self.temperature)}

    @classmethod
    def from_dict(cls, values: Mapping[str, Any]) -> TwoDiode:
        shunt = values["shunt_resistance"]
        return cls(**{**values, "shunt_resistance": math.inf if shunt is None else shunt})

    def _current_and_emissions(self, voltage: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """J, J0₁·exp(u/m₁) and J0₂·exp(u/m₂), all [A cm⁻²]."""
        alone = self.lone_diode()
        if alone is not None:
            current, emission = alone.current_and_emission(voltage)
            nothing = np.zeros_like(emission)
            return (current, emission, nothing) if self.saturation_current_2 == 0 else (current, nothing, emission)
        resistance = self.series_resistance
        first, second = self.slope_voltages
        saturation_1, saturation_2 = self.saturation_current_1, self.saturation_current_2
        source = voltage + resistance * self.photocurrent
        drops = resistance * saturation_1, resistance * saturation_2
        junction = _junction(1.0 + resistance / self.shunt_resistance, drops, (first, second), source)
        growth_1 = np.expm1(np.minimum(junction / first, LARGEST_EXPONENT))
        growth_2 = np.expm1(np.minimum(junction / second, LARGEST_EXPONENT))
        diodes = saturation_1 * growth_1 + saturation_2 * growth_2
        current = self.photocurrent - diodes - junction / self.shunt_resistance
        return current, saturation_1 * (growth_1 + 1.0), saturation_2 * (growth_2 + 1.0)


def _junction(
    linear: float, factors: tuple[float, float], slopes: tuple[float, float], source: np.ndarray
) -> np.ndarray:
    """The u of linear·u + Σ factorᵢ·(exp(u/mᵢ) − 1) = source; NaN where there is none (linear = 0)."""
    (factor_1, factor_2), (first, second) = factors, slopes
    if factor_1 < _NEGLIGIBLE * first and factor_2 < _NEGLIGIBLE * second:
        with np.errstate(divide="ignore", invalid="ignore"):
            return source / linear
    # A diode that never counts must not overflow either: it takes the other's slope.
    if factor_1 < _NEGLIGIBLE * first:
        factor_1, first = 0.0, second
    if factor_2 < _NEGLIGIBLE * second:
        factor_2, second = 0.0, first
    total, narrowest = factor_1 + factor_2, min(first, second)
    if linear == 0:
        source = np.where(source > -total, source, np.nan)
    # The search starts from the lowest of bounds that all lie above the root: the function lies above its
    # tangent at 0 and above its asymptote, and no term alone can exceed the source.
    above = source / (linear + factor_1 / first + factor_2 / second)
    forward = np.maximum(source, 0.0)
    for factor, slope in ((factor_1, first), (factor_2, second)):
        if factor > 0:
            above = np.minimum(above, slope * np.log1p(forward / factor))
    if linear > 0:
        above = np.minimum(above, (source + total) / linear)
    else:
        share = np.minimum((source + total) / total, 1.0)
        above = np.minimum(above, np.where(source < 0, narrowest * np.log(share), above))
    junction = above
    rate_1, rate_2 = factor_1 / first, factor_2 / second
    bend_1, bend_2 = 0.5 / first, 0.5 / second
    settled = _SETTLED * narrowest**2
    for _ in range(_MOST_STEPS):
        growth_1, growth_2 = np.expm1(junction / first), np.expm1(junction / second)
        slope_1, slope_2 = rate_1 * (growth_1 + 1.0), rate_2 * (growth_2 + 1.0)
        steepness = slope_1 + slope_2 + linear
        step = (linear * junction + factor_1 * growth_1 + factor_2 * growth_2 - source) / steepness
        step /= np.maximum(1.0 - step * (bend_1 * slope_1 + bend_2 * slope_2) / steepness, 0.5)
        junction = junction - step
        size = np.abs(step)
        if not (size * size * size > settled * np.abs(junction)).any():
            break
    return junction
