"""What several light levels of one device tell: light ideality, the pseudo curve without Rs, and Rs from shifts."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from .constants import thermal_voltage
from .drops import voltage_at_drop
from .metrics import measure
from .quantity import Metrics
from .series_resistance import from_pseudo_voltage
from .sweep import Sweep

_SAME_TEMPERATURE = 0.5  # [K]
_SAME_LEVEL = 0.02  # levels closer than this share are one level


@dataclass(frozen=True, slots=True)
class Reading:
    """A number with its standard uncertainty, or none with the reason why.

    Attributes
    ----------
    value, uncertainty : float or None
    note : str
        A sentence; "" if there is nothing to say.
    """

    value: float | None
    uncertainty: float | None = None
    note: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class PseudoCurve:
    """The current–voltage curve that a device would have without series resistance, from its Voc at each light level.

    Attributes
    ----------
    voltage, current : ndarray, shape (k,)
        Voc of each level [V], and Jsc of the brightest less Jsc of the level [A cm⁻²]; by falling voltage.
    jsc : float
        Of the brightest level [A cm⁻²].
    """

    voltage: np.ndarray
    current: np.ndarray
    jsc: float

    def voltage_at(self, current: float) -> float | None:
        """Voltage at a current, straight in the logarithm between two levels; None beyond the dimmest level."""
        generated = self.jsc - current  # what the light of the level would make
        levels = self.jsc - self.current
        if not levels[-1] * (1 - 1e-9) <= generated <= self.jsc * (1 + 1e-9):
            return None
        return float(np.interp(math.log(generated), np.log(levels[::-1]), self.voltage[::-1]))

    def fill_factor(self) -> Reading:
        """Pseudo fill factor: the largest power of the curve, over Jsc and the Voc of the brightest level."""
        currents = self.jsc - np.geomspace(self.jsc - self.current[-1], self.jsc, 4001)
        power = [current * self.voltage_at(current) for current in currents]
        best = int(np.argmax(power))
        if best == 0:
            share = 1.0 - self.current[-1] / self.jsc
            return Reading(None, note=f"The dimmest level, {share:.2g} of the brightest, is too bright to show it.")
        return Reading(power[best] / (self.jsc * float(self.voltage[0])))


@dataclass(frozen=True, slots=True)
class _Level:
    sweep: Sweep
    marks: Metrics


def light_ideality(levels: Sequence[Sweep]) -> Reading:
    """n = (dVoc/d ln G)/(Ns·kT/q) over light levels, by a straight line.

    Parameters
    ----------
    levels : sequence of Sweep
        Lit sweeps of one device at one temperature. Where their irradiances are all the same (the file did not say),
        Jsc stands for G.

    References
    ----------
    T. Kirchartz et al., J. Phys. Chem. Lett. 4 (2013) 2371 (volume from memory).
    """
    usable, problem = _levels(levels, 2)
    if problem:
        return Reading(None, note=problem)
    irradiance = np.array([level.sweep.irradiance for level in usable])
    by_irradiance = np.ptp(irradiance) > _SAME_LEVEL * irradiance.max()
    if by_irradiance and not np.all(irradiance > 0):
        return Reading(None, note="A lit sweep with an irradiance of zero has no place on a logarithmic scale.")
    brightness = irradiance if by_irradiance else np.array([level.marks.jsc.value for level in usable])
    voltage = np.array([level.marks.voc.value for level in usable])
    place = np.log(brightness)
    if np.ptp(place) < _SAME_LEVEL:
        return Reading(None, note="The sweeps were all measured at one light level.")
    of_one = usable[0].sweep.series_cells * thermal_voltage(usable[0].sweep.temperature)
    centred = place - place.mean()
    slope = float(centred @ voltage / (centred @ centred))
    notes = [] if by_irradiance else ["Jsc stands for the irradiance."]
    uncertainty = None
    if place.size > 2:
        residual = voltage - voltage.mean() - slope * centred
        uncertainty = math.sqrt(float(residual @ residual) / (place.size - 2) / float(centred @ centred)) / of_one
        order = np.argsort(place)
        steps = np.diff(voltage[order]) / np.maximum(np.diff(place[order]), 1e-12)
        if np.ptp(steps) > 0.15 * abs(slope):
            notes.append(
                f"Voc bends over ln G: n runs from {steps[0] / of_one:.2f} at the dim end to "
                f"{steps[-1] / of_one:.2f} at the bright end, so that one figure is only effective."
            )
    return Reading(slope / of_one, uncertainty, " ".join(notes))


def pseudo_curve(levels: Sequence[Sweep]) -> PseudoCurve | str:
    """The pseudo curve of at least three light levels, or the sentence why there is none.

    References
    ----------
    R. A. Sinton, A. Cuevas, Proc. EU PVSEC 2000 (from memory).
    """
    usable, problem = _levels(levels, 3)
    if problem:
        return problem
    ordered = sorted(usable, key=lambda level: -level.marks.jsc.value)
    jsc = np.array([level.marks.jsc.value for level in ordered])
    voltage = np.array([level.marks.voc.value for level in ordered])
    if np.any(np.diff(jsc) > -_SAME_LEVEL * jsc[1:]) or np.any(np.diff(voltage) >= 0):
        return "The light levels do not differ enough, or Voc does not rise with the light."
    return PseudoCurve(voltage, jsc[0] - jsc, float(jsc[0]))


def resistance_from_pseudo_curve(sweep: Sweep, curve: PseudoCurve) -> Reading:
    """Rs from the shift between the pseudo curve and the sweep, at Jmp where the dimmest level allows [Ω cm²].

    Parameters
    ----------
    sweep : Sweep
        The brightest level.
    curve : PseudoCurve
    """
    marks = measure(sweep)
    if marks.vmp.value is None or marks.jsc.value is None:
        return Reading(None, note="The sweep does not show its maximum power point.")
    pseudo = curve.voltage_at(marks.jmp.value)
    if pseudo is not None:
        spread = None if marks.vmp.uncertainty is None else marks.vmp.uncertainty / marks.jmp.value
        return Reading(from_pseudo_voltage(pseudo, marks.vmp.value, marks.jmp.value), spread)
    generated = curve.jsc - float(curve.current[-1])
    found = voltage_at_drop(sweep, marks.jsc.value, generated)
    if found is None:
        return Reading(None, note="The sweep does not reach the current of the dimmest level.")
    current = marks.jsc.value - generated
    note = f"Read at {current / marks.jsc.value:.2g} of Jsc, since the dimmest level does not reach Jmp."
    return Reading(from_pseudo_voltage(float(curve.voltage[-1]), found[0], current), found[1] / current, note)


def resistance_from_levels(sweep: Sweep, levels: Sequence[Sweep]) -> Reading:
    """Rs from how far the points at the same ΔJ below each level's Jsc shift, by a straight line [Ω cm²].

    ΔJ is Jsc − Jmp of ``sweep``; levels with less Jsc than that are left out.

    References
    ----------
    M. Wolf, H. Rauschenbach, Adv. Energy Conv. 3 (1963) 455 (from memory).
    """
    usable, problem = _levels([sweep, *(level for level in levels if level is not sweep)], 2)
    if problem:
        return Reading(None, note=problem)
    marks = measure(sweep)
    if marks.jmp.value is None or marks.jsc.value is None:
        return Reading(None, note="The sweep does not show its maximum power point.")
    drop = marks.jsc.value - marks.jmp.value
    usable = [level for level in usable if level.marks.jsc.value > drop > 0]
    if len(usable) < 2:
        return Reading(None, note="The other levels are too dim: their Jsc is below Jsc − Jmp of the sweep.")
    found = [(level.marks, voltage_at_drop(level.sweep, level.marks.jsc.value, drop)) for level in usable]
    if any(voltage is None for _, voltage in found):
        return Reading(None, note="A level does not reach the point to compare.")
    current = np.array([marks.jsc.value - drop for marks, _ in found])
    voltage = np.array([voltage[0] for _, voltage in found])
    noise = np.array([voltage[1] for _, voltage in found])
    centred = current - current.mean()
    if np.ptp(current) < _SAME_LEVEL * current.max():
        return Reading(None, note="The sweeps were all measured at one light level.")
    gain = centred / (centred @ centred)
    return Reading(-float(gain @ voltage), float(np.linalg.norm(gain * noise)))


def _levels(sweeps: Sequence[Sweep], fewest: int) -> tuple[list[_Level], str]:
    """The lit sweeps with Jsc and Voc, and a sentence why they cannot be compared ("" if they can)."""
    usable = []
    for sweep in sweeps:
        marks = measure(sweep)
        if sweep.lit and marks.voc.value is not None and marks.jsc.value is not None and marks.jsc.value > 0:
            usable.append(_Level(sweep, marks))
    if len(usable) < fewest:
        return [], f"At least {fewest} light levels with both Jsc and Voc are needed."
    first = usable[0].sweep
    for level in usable[1:]:
        if level.sweep.per_area != first.per_area or level.sweep.series_cells != first.series_cells:
            return [], "The light levels differ in area or number of cells, so that they cannot be compared."
        if abs(level.sweep.temperature - first.temperature) > _SAME_TEMPERATURE:
            return [], "The light levels were measured at different temperatures, which moves Voc as well."
    return usable, ""
