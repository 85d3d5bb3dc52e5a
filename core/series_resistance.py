"""Series resistance by the published methods: each a formula on a few read-off points.

All give Rs in Ω cm² from V and A cm⁻² (or Ω from A). Where a shunt is present each has its own small bias; none is
*the* series resistance, and how far they agree says more than any one.

References (all from memory)
----------
M. Wolf, H. Rauschenbach, Adv. Energy Conv. 3 (1963) 455 (light levels).
A. G. Aberle, S. R. Wenham, M. A. Green, Proc. IEEE PVSC 1993, 133 (dark against light).
R. A. Sinton, A. Cuevas, Proc. EU PVSEC 2000 (open-circuit voltage against intensity).
D. Pysch, A. Mette, S. W. Glunz, Sol. Energy Mater. Sol. Cells 91 (2007) 1698 (comparison of methods).
M. A. Green, Solid-State Electron. 24 (1981) 788 (fill factor expression).
"""

from __future__ import annotations

import math

WOLF = "M. Wolf, H. Rauschenbach, Adv. Energy Conv. 3 (1963) 455"
ABERLE = "A. G. Aberle, S. R. Wenham, M. A. Green, Proc. IEEE PVSC 1993, 133"
SINTON = "R. A. Sinton, A. Cuevas, Proc. EU PVSEC 2000"
PYSCH = "D. Pysch, A. Mette, S. W. Glunz, Sol. Energy Mater. Sol. Cells 91 (2007) 1698"


def from_light_levels(voltage_1: float, voltage_2: float, jsc_1: float, jsc_2: float) -> float:
    """(V₂ − V₁)/(Jsc₁ − Jsc₂), both voltages read the same ΔJ below their curve's Jsc (Wolf and Rauschenbach)."""
    return (voltage_2 - voltage_1) / (jsc_1 - jsc_2)


def from_pseudo_voltage(pseudo_voltage: float, voltage: float, current: float) -> float:
    """(Vpseudo − V)/J at one current J: the curve without Rs against the curve with it (Sinton and Cuevas)."""
    return (pseudo_voltage - voltage) / current


def from_fill_factors(fill_factor: float, pseudo_fill_factor: float, voc: float, jsc: float) -> float:
    """(1 − FF/pFF)·Voc/Jsc, first order: high by some per cent."""
    return (1.0 - fill_factor / pseudo_fill_factor) * voc / jsc


def from_fill_factors_at_maximum(
    fill_factor: float, pseudo_fill_factor: float, voc: float, jsc: float, jmp: float
) -> float:
    """(pFF − FF)·Voc·Jsc/Jmp² (Pysch, Mette and Glunz)."""
    return (pseudo_fill_factor - fill_factor) * voc * jsc / jmp**2


def from_fill_factor_expression(fill_factor: float, pseudo_fill_factor: float, voc: float, jsc: float) -> float:
    """The r_s of FF = pFF·(1 − 1.1·r_s) + r_s²/5.4, times Voc/Jsc (Green, for r_s < 0.4); NaN where no r_s gives FF."""
    slope = 1.1 * pseudo_fill_factor
    discriminant = slope**2 - 4.0 / 5.4 * (pseudo_fill_factor - fill_factor)
    if discriminant < 0:
        return math.nan
    # The smaller root, without the cancellation of its usual form.
    series = 2.0 * (pseudo_fill_factor - fill_factor) / (slope + math.sqrt(discriminant))
    return series * voc / jsc


def from_dark_shift(dark_voltage: float, voc: float, jsc: float) -> float:
    """[Vdark(Jsc) − Voc]/Jsc: the dark sweep carries through Rs what the light makes at no current."""
    return (dark_voltage - voc) / jsc


def from_dark_at_maximum(dark_voltage: float, vmp: float, jsc: float, jmp: float, dark_resistance: float) -> float:
    """[Vdark(Jsc − Jmp) − Vmp − (Jsc − Jmp)·Rs,dark]/Jmp (Aberle, Wenham and Green).

    ``dark_resistance`` is the series resistance of the dark sweep [Ω cm²], from its shift against Voc.
    """
    return (dark_voltage - vmp - (jsc - jmp) * dark_resistance) / jmp
