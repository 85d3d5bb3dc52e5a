"""The one-diode equation of an illuminated cell, solved exactly.

J = Jph − J0·(exp((V + J·Rs)/m) − 1) − (V + J·Rs)/Rsh, with m = n·Ns·kT/q.

Everything runs through the junction voltage u = V + J·Rs, in which J is explicit.

Signs: a working cell has V > 0 and J > 0.
Units: V, A cm⁻², Ω cm², K; where no area is known the same equation runs on A and Ω.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import Any, ClassVar

import numpy as np
from numpy.typing import ArrayLike
from scipy.optimize import brentq
from scipy.special import wrightomega

from .constants import STANDARD_TEMPERATURE, thermal_voltage

PARAMETERS = ("photocurrent", "saturation_current", "ideality", "series_resistance", "shunt_resistance")

# exp() of little more is no float; the current stays at that huge value instead of overflowing.
LARGEST_EXPONENT = 680.0
# Below this a product of parameters is zero for every current that a float can carry.
_NEGLIGIBLE = 1e-200
# |u|/m below which exp(u/m) − 1 is its first term to half the digits; a Newton step gives the other half.
_LINEAR = 1e-8


@dataclass(frozen=True, slots=True)
class Landmarks:
    """The points of a curve that everybody quotes; NaN where they are not defined, as in the dark.

    Attributes
    ----------
    jsc, jmp : float
        Current at V = 0 and at the maximum power point [A cm⁻²].
    voc, vmp : float
        Voltage at J = 0 and at the maximum power point [V].
    pmp : float
        Largest power [W cm⁻²].
    fill_factor : float
        pmp/(jsc·voc) [-].
    """

    jsc: float
    voc: float
    jmp: float
    vmp: float
    pmp: float
    fill_factor: float


@dataclass(frozen=True, slots=True)
class OneDiode:
    """Five numbers, and a temperature, that fix a one-diode curve.

    Attributes
    ----------
    photocurrent, saturation_current : float
        Jph ≥ 0 and J0 > 0 [A cm⁻²].
    ideality : float
        n > 0 [-], of one cell.
    series_resistance, shunt_resistance : float
        Rs ≥ 0 and Rsh > 0 [Ω cm²] of the whole string; ``inf`` means no shunt.
    series_cells : int
        Ns, cells in series [-].
    temperature : float
        [K]; the parameters hold at this temperature only.
    """

    parameters: ClassVar[tuple[str, ...]] = PARAMETERS

    photocurrent: float
    saturation_current: float
    ideality: float
    series_resistance: float
    shunt_resistance: float
    series_cells: int = 1
    temperature: float = STANDARD_TEMPERATURE

    @property
    def slope_voltage(self) -> float:
        """m = n·Ns·kT/q [V]."""
        return self.ideality * self.series_cells * thermal_voltage(self.temperature)

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

        References
        ----------
        A. Jain, A. Kapoor, Sol. Energy Mater. Sol. Cells 81 (2004) 269 (Lambert's W for this equation; from memory).
        """
        return self.current_and_emission(np.asarray(voltage, dtype=float))[0]

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
        jacobian : ndarray, shape (n, 5)
            ∂J/∂(Jph, ln J0, n, Rs, 1/Rsh) at constant voltage, by the implicit function theorem.
        """
        voltage = np.asarray(voltage, dtype=float)
        current, emission = self.current_and_emission(voltage)
        junction = voltage + current * self.series_resistance
        diode_slope = emission / self.slope_voltage
        conductance = diode_slope + 1.0 / self.shunt_resistance
        damping = 1.0 / (1.0 + self.series_resistance * conductance)
        damped_junction = junction * damping
        jacobian = np.empty((5, *voltage.shape))  # one derivative after the other in memory, which is faster
        jacobian[0] = damping
        jacobian[1] = (self.saturation_current - emission) * damping
        jacobian[2] = diode_slope * damped_junction / self.ideality
        jacobian[3] = -conductance * current * damping
        jacobian[4] = -damped_junction
        return current, jacobian.T

    def jacobian(self, voltage: ArrayLike) -> np.ndarray:
        """∂J/∂(Jph, ln J0, n, Rs, 1/Rsh), shape (n, 5); see ``current_and_jacobian``."""
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
            [V]; NaN where no voltage gives that current (no shunt, and J ≥ Jph + J0).
        """
        current = np.asarray(current, dtype=float)
        slope, conductance = self.slope_voltage, 1.0 / self.shunt_resistance
        saturation = max(self.saturation_current, 1e-300)
        lost = self.photocurrent - current  # what diode and shunt take: J0·(exp(u/m) − 1) + u/Rsh
        if conductance * slope < _NEGLIGIBLE:
            reached = lost > -saturation
            junction = slope * np.log1p(np.where(reached, lost / saturation, np.nan))
            return junction - current * self.series_resistance
        all_shunt = (lost + saturation) / conductance  # u if the diode took nothing
        offset = math.log(saturation) - math.log(conductance * slope)
        omega = wrightomega(all_shunt / slope + offset)
        # ln ω(z) = z − ω(z): where ω is large the difference would cancel, and the logarithm does not.
        junction = np.where(omega > 1.0, slope * (np.log(np.maximum(omega, 1.0)) - offset), all_shunt - slope * omega)
        linear = lost / (conductance + saturation / slope)
        junction = np.where(np.abs(linear) < _LINEAR * slope, linear, junction)
        growth = self._growth(junction)
        excess = saturation * growth + junction * conductance - lost
        junction = junction - excess / (saturation * (growth + 1.0) / slope + conductance)
        return junction - current * self.series_resistance

    def landmarks(self) -> Landmarks:
        """Jsc, Voc, the maximum power point and the fill factor of the curve; all NaN without photocurrent."""
        if not self.photocurrent > 0:
            return Landmarks(*[math.nan] * 6)
        jsc, voc = float(self.current(0.0)), float(self.voltage(0.0))
        conductance, slope = 1.0 / self.shunt_resistance, self.slope_voltage
        saturation, photocurrent = self.saturation_current, self.photocurrent

        def current_and_steepness(junction: float) -> tuple[float, float]:
            growth = math.expm1(min(junction / slope, LARGEST_EXPONENT))
            current = photocurrent - saturation * growth - junction * conductance
            return current, saturation * (growth + 1.0) / slope + conductance

        return landmarks_between(jsc, voc, self.series_resistance, current_and_steepness)

    def scaled(self, factor: float) -> OneDiode:
        """The curve with its current multiplied by a factor, as when an area changes."""
        return replace(
            self,
            photocurrent=self.photocurrent * factor,
            saturation_current=self.saturation_current * factor,
            series_resistance=self.series_resistance / factor,
            shunt_resistance=self.shunt_resistance / factor,
        )

    def at(self, *, temperature: float | None = None, series_cells: int | None = None) -> OneDiode:
        """The same curve read under another temperature [K] or number of cells: n is rescaled.

        A sweep determines the product n·Ns·T alone, so a corrected condition moves n and nothing else.
        """
        temperature = self.temperature if temperature is None else temperature
        series_cells = self.series_cells if series_cells is None else series_cells
        ideality = self.ideality * (self.series_cells * self.temperature) / (series_cells * temperature)
        return replace(self, ideality=ideality, temperature=temperature, series_cells=series_cells)

    def to_dict(self) -> dict[str, Any]:
        """As JSON-ready values (no shunt is None); ``from_dict`` gives the same model back."""
        values: dict[str, Any] = {name: float(getattr(self, name)) for name in PARAMETERS}
        if math.isinf(values["shunt_resistance"]):
            values["shunt_resistance"] = None
        return {**values, "series_cells": int(self.series_cells), "temperature": float(self.temperature)}

    @classmethod
    def from_dict(cls, values: Mapping[str, Any]) -> OneDiode:
        shunt = values["shunt_resistance"]
        return cls(**{**values, "shunt_resistance": math.inf if shunt is None else shunt})

    def _growth(self, junction: np.ndarray) -> np.ndarray:
        """exp(u/m) − 1, without overflow."""
        return np.expm1(np.minimum(junction / self.slope_voltage, LARGEST_EXPONENT))

    def current_and_emission(self, voltage: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """J and J0·exp(u/m), both [A cm⁻²]; u solves d·u + Rs·J0·(exp(u/m) − 1) = V + Rs·Jph, d = 1 + Rs/Rsh."""
        resistance, saturation, slope = self.series_resistance, self.saturation_current, self.slope_voltage
        divider = 1.0 + resistance / self.shunt_resistance
        diode_drop = resistance * saturation  # across Rs
        if diode_drop < _NEGLIGIBLE * slope:
            junction = (voltage + resistance * self.photocurrent) / divider
        else:
            generated, scaled_slope = self.photocurrent + saturation, divider * slope
            offset = math.log(diode_drop) - math.log(scaled_slope) + resistance * generated / scaled_slope
            omega = wrightomega(voltage / scaled_slope + offset)
            if saturation <= self.photocurrent:
                emission = omega * (scaled_slope / resistance)
                return (generated - emission - voltage / self.shunt_resistance) / divider, emission
            # Without that much photocurrent J can be far smaller than J0, and the closed form loses its digits
            # against it; close to u = 0 the equation is linear, and a Newton step finishes both.
            source = voltage + resistance * self.photocurrent
            junction = (source + diode_drop) / divider - slope * omega
            linear = source / (divider + diode_drop / slope)
            junction = np.where(np.abs(linear) < _LINEAR * slope, linear, junction)
            growth = self._growth(junction)
            excess = divider * junction + diode_drop * growth - source
            junction = junction - excess / (divider + diode_drop * (growth + 1.0) / slope)
        growth = self._growth(junction)
        emission = saturation * (growth + 1.0)
        return self.photocurrent - saturation * growth - junction / self.shunt_resistance, emission


def landmarks_between(
    jsc: float, voc: float, resistance: float, current_and_steepness: Callable[[float], tuple[float, float]]
) -> Landmarks:
    """Landmarks of a curve J(u), V = u − J·Rs, that falls ever more steeply from Jsc to Voc.

    Parameters
    ----------
    jsc, voc, resistance : float
        [A cm⁻²], [V], Rs [Ω cm²]
    current_and_steepness : callable
        J and −dJ/du at a junction voltage u [V].
    """

    def power_slope(junction: float) -> float:  # dP/du; falls from above to below zero exactly once
        current, steepness = current_and_steepness(junction)
        return current - steepness * (junction - 2.0 * current * resistance)

    junction = _root(power_slope, jsc * resistance, voc)
    jmp = current_and_steepness(junction)[0]
    vmp = junction - jmp * resistance
    pmp = jmp * vmp
    area = jsc * voc
    return Landmarks(jsc, voc, jmp, vmp, pmp, pmp / area if area > 0 else math.nan)


def _root(function: Callable[[float], float], low: float, high: float) -> float:
    """The root of a function that changes sign between two positive numbers, to the last digits."""
    if not low < high:
        return high
    if function(low) * function(high) >= 0:  # rounding alone: an end is the root
        return low if abs(function(low)) < abs(function(high)) else high
    return brentq(function, low, high, xtol=max(1e-15 * high, 1e-300), rtol=1e-15)
