"""The two device models side by side: telling them apart, and the way from one to the other."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from .diode import OneDiode
from .two_diode import TwoDiode

Model = OneDiode | TwoDiode


def model_from_dict(values: Mapping[str, Any]) -> Model:
    """The model whose ``to_dict`` gave these values; its keys tell which."""
    return TwoDiode.from_dict(values) if "saturation_current_2" in values else OneDiode.from_dict(values)


def two_diodes_like(model: OneDiode) -> TwoDiode:
    """A two-diode model (n₁ = 1, n₂ = 2) of nearly the same curve.

    The two diodes carry what the one carries at Voc and, with n between 1 and 2, at the maximum power point as well;
    in the dark the pair of voltages lies where the diode carries 1 µA to 10 mA (cm⁻²).
    """
    upper, lower = _two_junction_voltages(model)
    of_one = model.slope_voltage / model.ideality
    at_upper, at_lower = (model.saturation_current * math.expm1(u / model.slope_voltage) for u in (upper, lower))
    growth = [[_growth(u / (n * of_one)) for n in (1.0, 2.0)] for u in (upper, lower)]
    # Two equations for J0₁ and J0₂; the share of the second diode at the upper voltage stays between 0 and 1.
    ratio_1, ratio_2 = growth[1][0] / growth[0][0], growth[1][1] / growth[0][1]
    share = (at_lower / at_upper - ratio_1) / (ratio_2 - ratio_1) if ratio_2 > ratio_1 else 0.0
    share = min(max(share, 1e-6), 1.0 - 1e-6)
    return TwoDiode(
        photocurrent=model.photocurrent,
        saturation_current_1=(1.0 - share) * at_upper / growth[0][0],
        saturation_current_2=share * at_upper / growth[0][1],
        series_resistance=model.series_resistance,
        shunt_resistance=model.shunt_resistance,
        series_cells=model.series_cells,
        temperature=model.temperature,
    )


def one_diode_like(model: TwoDiode) -> OneDiode:
    """A one-diode model that carries the current of both diodes at Voc and at the maximum power point."""
    upper, lower = _two_junction_voltages(model)

    def carried(junction: float) -> float:
        pair = zip((model.saturation_current_1, model.saturation_current_2), model.slope_voltages, strict=True)
        return sum(saturation * _growth(junction / slope) for saturation, slope in pair)

    slope = (upper - lower) / math.log(carried(upper) / carried(lower))
    for _ in range(20):  # ln(exp(u/m) − 1) is u/m but for the lowest voltages
        ratio = math.log(carried(upper) / carried(lower)) + math.log1p(-math.exp(-lower / slope))
        slope = (upper - lower) / (ratio - math.log1p(-math.exp(-upper / slope)))
    return OneDiode(
        photocurrent=model.photocurrent,
        saturation_current=carried(upper) / _growth(upper / slope),
        ideality=slope / (model.slope_voltages[0] / model.ideality_1),
        series_resistance=model.series_resistance,
        shunt_resistance=model.shunt_resistance,
        series_cells=model.series_cells,
        temperature=model.temperature,
    )


def _two_junction_voltages(model: Model) -> tuple[float, float]:
    """Junction voltages at Voc and at the maximum power point; without light two of the exponential part [V]."""
    marks = model.landmarks()
    if math.isfinite(marks.voc) and 0 < marks.vmp < marks.voc:
        return marks.voc, min(marks.vmp + marks.jmp * model.series_resistance, 0.999 * marks.voc)
    lone = model if isinstance(model, OneDiode) else None
    if lone is not None:
        return tuple(lone.slope_voltage * math.log1p(j / lone.saturation_current) for j in (1e-2, 1e-6))
    low, high = (float(model.voltage(-j)) - j * model.series_resistance for j in (1e-6, 1e-2))
    return high, low


def _growth(exponent: float) -> float:
    return math.expm1(min(exponent, 690.0))
