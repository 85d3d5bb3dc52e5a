"""Figures that follow from a model and the band gap: fill factors without losses, external radiative efficiency,
temperature coefficient of Voc, and the small-signal resistances at open circuit."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

from .constants import BOLTZMANN_OVER_CHARGE, thermal_voltage
from .detailed_balance import Emission, radiative_efficiency
from .errors import ConditionRefused
from .models import Model
from .two_diode import TwoDiode

DEFAULT_GAMMA = 3.0  # of a material that is not known better: parabolic bands


@dataclass(frozen=True, slots=True)
class Derived:
    """Derived figures of one device.

    Attributes
    ----------
    ideal_fill_factor, pseudo_fill_factor : float
        Without Rs and shunt; without Rs alone [-].
    recombination_resistance, slope_resistance_voc : float
        At open circuit [Ω cm²].
    radiative_efficiency : float or None
        External radiative efficiency [-].
    voc_temperature_coefficient : float or None
        Expected dVoc/dT [V K⁻¹].
    notes : tuple of str
        Sentences: why a figure is missing, or what it rests on.
    """

    ideal_fill_factor: float
    pseudo_fill_factor: float
    recombination_resistance: float
    slope_resistance_voc: float
    radiative_efficiency: float | None
    voc_temperature_coefficient: float | None
    notes: tuple[str, ...]


def derive(
    model: Model, band_gap: float | None = None, *, per_area: bool = True, emission: Emission = "front"
) -> Derived | None:
    """Everything that this module has on a model's curve; None in the dark.

    Parameters
    ----------
    model : OneDiode or TwoDiode
    band_gap : float or None
        [eV]; None where it is not known.
    per_area : bool
        The model's currents are densities; radiative efficiency needs that.
    emission : "front" or "both"
        Convention of the detailed balance.
    """
    marks = model.landmarks()
    if not marks.voc > 0:
        return None
    efficiency = coefficient = None
    if band_gap is None:
        notes = ["Radiative efficiency and dVoc/dT need the band gap."]
    else:
        coefficient = voc_temperature_coefficient(
            marks.voc, band_gap, model.temperature, series_cells=model.series_cells
        )
        notes = [
            "dVoc/dT takes the band gap for its value extrapolated to 0 K; "
            "in silicon, where that is 0.08 eV more, it comes out 0.3 mV/K too small."
        ]
        if model.series_cells > 1:
            notes.append("The radiative efficiency is that of one junction; this device has several cells in series.")
        elif not per_area:
            notes.append("The radiative efficiency needs the area.")
        else:
            try:
                efficiency = radiative_efficiency(marks.jsc, marks.voc, band_gap, model.temperature, emission)
            except ConditionRefused as refusal:
                notes.append(str(refusal))
        if efficiency is not None and efficiency > 1:
            notes.append("A radiative efficiency above 1 cannot be: check band gap, temperature and Voc.")
    return Derived(
        ideal_fill_factor(model),
        pseudo_fill_factor(model),
        recombination_resistance(model),
        slope_resistance_at_voc(model),
        efficiency,
        coefficient,
        tuple(notes),
    )


def pseudo_fill_factor(model: Model) -> float:
    """Fill factor of the curve without its series resistance, as Voc over Jsc at many light levels shows it [-].

    NaN in the dark.

    References
    ----------
    R. A. Sinton, A. Cuevas, Proc. EU PVSEC 2000 (from memory).
    """
    return replace(model, series_resistance=0.0).landmarks().fill_factor


def ideal_fill_factor(model: Model) -> float:
    """Fill factor of the diodes alone at the model's photocurrent, without Rs and shunt [-]; NaN in the dark."""
    return replace(model, series_resistance=0.0, shunt_resistance=math.inf).landmarks().fill_factor


def voc_temperature_coefficient(
    voc: float, band_gap: float, temperature: float, *, gamma: float = DEFAULT_GAMMA, series_cells: int = 1
) -> float:
    """dVoc/dT = −[Eg0/q − Voc + γ·kT/q]/T of a cell, times the cells in series [V K⁻¹].

    Parameters
    ----------
    voc : float
        Of the whole string [V].
    band_gap : float
        Extrapolated linearly to 0 K, Eg0 [eV]; for silicon 1.206.
    temperature : float
        [K]
    gamma : float
        γ of I0 = B·T^γ·exp(−Eg0/kT) [-].

    References
    ----------
    S. R. Wenham, M. A. Green, M. E. Watt, R. Corkish, Applied Photovoltaics, eqs (3.10) and (3.12).
    """
    of_cell = voc / series_cells
    return -series_cells * (band_gap - of_cell + gamma * thermal_voltage(temperature)) / temperature


def voc_at_temperature(
    voc: float, band_gap: float, temperature: float, other: float, *, gamma: float = DEFAULT_GAMMA
) -> float:
    """Voc of a cell at another temperature under the same photocurrent, exactly for I0 = B·T^γ·exp(−Eg0/kT) [V].

    ``voc_temperature_coefficient`` is its derivative. Ideality 1; the reverse current itself is neglected beside Jph.
    """
    drift = gamma * BOLTZMANN_OVER_CHARGE * other * math.log(other / temperature)
    return band_gap - (band_gap - voc) * other / temperature - drift


def recombination_resistance(model: Model) -> float:
    """R_rec = (dJ_rec/du)⁻¹ of the diodes at open circuit [Ω cm²]; NaN in the dark.

    With one diode n·Ns·kT/(q·Jph), since all of Jph recombines there but for the shunt's part.

    References
    ----------
    J. Bisquert, Phys. Chem. Chem. Phys. 5 (2003) 5360 (from memory).
    """
    voc = model.landmarks().voc
    if not voc > 0:
        return math.nan
    if isinstance(model, TwoDiode):
        pairs = zip((model.saturation_current_1, model.saturation_current_2), model.slope_voltages, strict=True)
    else:
        pairs = [(model.saturation_current, model.slope_voltage)]
    return 1.0 / sum(saturation * math.exp(voc / slope) / slope for saturation, slope in pairs if saturation > 0)


def slope_resistance_at_voc(model: Model) -> float:
    """−dV/dJ at J = 0: Rs + 1/(1/R_rec + 1/Rsh) [Ω cm²]; NaN in the dark."""
    return model.series_resistance + 1.0 / (1.0 / recombination_resistance(model) + 1.0 / model.shunt_resistance)
