"""The fill factor from normalised voltage and resistances: published expressions, and the exact value beside them.

Normalised quantities, all without unit: v = Voc/(n·Ns·kT/q), r_s = Rs·Jsc/Voc, r_sh = Rsh·Jsc/Voc.

References
----------
M. A. Green, Solid-State Electron. 24 (1981) 788 (the expressions; from memory).
S. R. Wenham, M. A. Green, M. E. Watt, R. Corkish, Applied Photovoltaics, chapter 3, eqs (3.17) to (3.23).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from scipy.special import wrightomega

from .constants import thermal_voltage
from .diode import OneDiode
from .moves import KeptCurve

GREEN = "M. A. Green, Solid-State Electron. 24 (1981) 788"
# Ranges in which the expressions keep the accuracy found by recomputation against the exact fill factor.
_SMALLEST_VOLTAGE = 10.0
_LARGEST_SERIES = 0.4
_SMALLEST_SHUNT = 2.5  # the printed "r_sh > 0.4" cannot be right: 1/r_sh < 0.4 is
_BOTH_SERIES, _BOTH_SHUNT = 0.1, 10.0  # beyond these the combination is off by more than 0.006


@dataclass(frozen=True, slots=True)
class FillFactor:
    """A fill factor from a published expression.

    Attributes
    ----------
    value : float
        [-]
    expression : str
        The formula, in words of the trade.
    warnings : tuple of str
        Sentences: where the expression is used outside the range in which it is good.
    """

    value: float
    expression: str
    warnings: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Normalised:
    """What the expressions take.

    Attributes
    ----------
    voltage, series, shunt : float
        v, r_s and r_sh [-]; no shunt is ``inf``.
    """

    voltage: float
    series: float = 0.0
    shunt: float = math.inf


def normalised(
    jsc: float,
    voc: float,
    ideality: float,
    series_resistance: float,
    shunt_resistance: float,
    *,
    series_cells: int = 1,
    temperature: float,
) -> Normalised:
    """v, r_s and r_sh of a cell or a string of cells.

    Parameters
    ----------
    jsc, voc : float
        [A cm⁻²], [V]
    ideality : float
        n of one cell [-].
    series_resistance, shunt_resistance : float
        [Ω cm²]
    temperature : float
        [K]
    """
    characteristic = voc / jsc
    slope = ideality * series_cells * thermal_voltage(temperature)
    return Normalised(voc / slope, series_resistance / characteristic, shunt_resistance / characteristic)


def normalised_of(model: OneDiode) -> Normalised:
    """v, r_s and r_sh of a model's curve; NaN in the dark."""
    marks = model.landmarks()
    return normalised(
        marks.jsc,
        marks.voc,
        model.ideality,
        model.series_resistance,
        model.shunt_resistance,
        series_cells=model.series_cells,
        temperature=model.temperature,
    )


def without_losses(voltage: float) -> FillFactor:
    """FF0 = (v − ln(v + 0.72))/(v + 1); within 2e-4 for v > 10, 5e-3 for v > 5."""
    value = (voltage - math.log(voltage + 0.72)) / (voltage + 1.0)
    return FillFactor(value, "(v − ln(v + 0.72))/(v + 1)", _about_voltage(voltage))


def with_series_resistance(voltage: float, series: float) -> FillFactor:
    """FF0·(1 − 1.1·r_s) + r_s²/5.4; within 4e-3 for v > 10 and r_s < 0.4."""
    value = _lowered_by_series(without_losses(voltage).value, series)
    return FillFactor(value, "FF0·(1 − 1.1·r_s) + r_s²/5.4", _about_voltage(voltage) + _about_series(series))


def with_shunt(voltage: float, shunt: float) -> FillFactor:
    """FF0·[1 − (v + 0.7)/v·FF0/r_sh]; within 1.2e-3 for v > 10 and r_sh > 2.5."""
    value = _lowered_by_shunt(without_losses(voltage).value, voltage, shunt)
    return FillFactor(value, "FF0·[1 − (v + 0.7)/v·FF0/r_sh]", _about_voltage(voltage) + _about_shunt(shunt))


def with_both(voltage: float, series: float, shunt: float) -> FillFactor:
    """The shunt's expression with FFs in place of FF0; good for small losses only, low by up to 0.05 for large ones."""
    value = _lowered_by_shunt(_lowered_by_series(without_losses(voltage).value, series), voltage, shunt)
    warnings = _about_voltage(voltage) + _about_series(series) + _about_shunt(shunt)
    if series > 0 and math.isfinite(shunt) and not (series <= _BOTH_SERIES and shunt >= _BOTH_SHUNT):
        warnings += (
            "Rs and Rsh together take too much for this combination of two expressions, which then comes out too low "
            "by up to 0.05; use the exact fill factor.",
        )
    return FillFactor(value, "FFs·[1 − (v + 0.7)/v·FFs/r_sh]", warnings)


def published(values: Normalised) -> FillFactor:
    """The expression that fits: without losses, with series resistance, with shunt, or both."""
    if values.series > 0 and math.isfinite(values.shunt):
        return with_both(values.voltage, values.series, values.shunt)
    if values.series > 0:
        return with_series_resistance(values.voltage, values.series)
    if math.isfinite(values.shunt):
        return with_shunt(values.voltage, values.shunt)
    return without_losses(values.voltage)


def exact(values: Normalised) -> float:
    """Fill factor of the one-diode curve with exactly these v, r_s and r_sh.

    NaN where no curve has them: r_s has to stay below 1, and 1/r_sh below 1/(1 − r_s).
    """
    if not (values.voltage > 0 and 0 <= values.series < 1 and values.shunt > 1.0 - values.series):
        return math.nan
    if values.series == 0 and math.isinf(values.shunt):
        return exact_without_losses(values.voltage)
    # In units of n·Ns·kT/q and Jsc: a curve through J = 1 at V = 0 and V = v at J = 0.
    kept = KeptCurve(1.0, values.voltage)
    of_one = 1.0 / OneDiode(1.0, 1.0, 1.0, 0.0, math.inf).slope_voltage
    frame = OneDiode(1.0, 1.0, of_one, 0.0, math.inf)
    model = kept.member(frame, of_one, values.series * values.voltage, values.shunt * values.voltage)
    return model.landmarks().fill_factor


def exact_without_losses(voltage: float) -> float:
    """Fill factor of the ideal diode law, in closed form."""
    at_maximum = voltage_of_largest_power(voltage)
    return at_maximum / voltage * math.expm1(at_maximum - voltage) / math.expm1(-voltage)


def voltage_of_largest_power(voltage: float) -> float:
    """Vmp/(n·Ns·kT/q) = W(exp(v + 1)) − 1 of the ideal diode law [-].

    From d(V·J)/dV = 0: (1 + x)·exp(x) = exp(v). The form W(exp(v)) in circulation drops a 1 and is high by about 0.04.
    """
    return float(wrightomega(voltage + 1.0)) - 1.0


def _lowered_by_series(before: float, series: float) -> float:
    return before * (1.0 - 1.1 * series) + series**2 / 5.4


def _lowered_by_shunt(before: float, voltage: float, shunt: float) -> float:
    return before * (1.0 - (voltage + 0.7) / voltage * before / shunt)


def _about_voltage(voltage: float) -> tuple[str, ...]:
    if voltage > _SMALLEST_VOLTAGE * (1 - 1e-12):
        return ()
    return (f"The normalised voltage {voltage:.3g} is below 10: the expression is off by 0.005 and, below 5, by more.",)


def _about_series(series: float) -> tuple[str, ...]:
    if series <= _LARGEST_SERIES:
        return ()
    return (f"The normalised series resistance {series:.3g} is above 0.4, beyond the range of the expression.",)


def _about_shunt(shunt: float) -> tuple[str, ...]:
    if shunt >= _SMALLEST_SHUNT:
        return ()
    return (f"The normalised shunt resistance {shunt:.3g} is below 2.5, beyond the range of the expression.",)
