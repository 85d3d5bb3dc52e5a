"""Derived figures against the temperature, small-signal and detailed-balance figures known from print or recomputed."""

import math
from dataclasses import replace

import pytest

from core.constants import thermal_voltage
from core.derived import (
    derive,
    ideal_fill_factor,
    pseudo_fill_factor,
    recombination_resistance,
    slope_resistance_at_voc,
    voc_at_temperature,
    voc_temperature_coefficient,
)
from core.detailed_balance import limiting_diode
from core.diode import OneDiode
from core.two_diode import TwoDiode

CELL = OneDiode(0.035, 5e-12, 1.2, 1.5, math.inf)
SHUNTED = replace(CELL, shunt_resistance=2000.0)


# S. R. Wenham et al., Applied Photovoltaics, eq. (3.12): about −2 mV/K for silicon; PVEducation: −2.2 mV/K (from
# memory). The figures are the formula recomputed, γ = 3. Relative: eq. (3.13), about −0.003 per K.
@pytest.mark.parametrize(
    ("voc", "gap", "temperature", "millivolts", "relative"),
    [
        (0.60, 1.2, 300.0, -2.2585, -0.00376),
        (0.65, 1.206, 298.15, -2.1234, -0.00327),
        (0.70, 1.206, 298.15, -1.9557, -0.00279),
        (0.738, 1.206, 298.15, -1.8282, -0.00248),
    ],
)
def test_temperature_coefficient_of_silicon(voc, gap, temperature, millivolts, relative):
    found = voc_temperature_coefficient(voc, gap, temperature)
    assert 1e3 * found == pytest.approx(millivolts, abs=6e-5)
    assert found / voc == pytest.approx(relative, abs=6e-6)
    assert 1e3 * found == pytest.approx(-2.1, abs=0.3)


def test_voc_at_another_temperature_exactly_and_along_the_tangent():
    """I0 = B·T^γ·exp(−Eg0/kT), Applied Photovoltaics eq. (3.10): 0.575171 V at 333.15 K, 0.575683 V by the tangent
    (recomputed)."""
    assert voc_at_temperature(0.65, 1.206, 298.15, 333.15) == pytest.approx(0.575171, abs=6e-7)
    tangent = 0.65 + 35.0 * voc_temperature_coefficient(0.65, 1.206, 298.15)
    assert tangent == pytest.approx(0.575683, abs=6e-7)


def test_temperature_coefficient_is_the_derivative():
    step = 0.01
    above, below = (voc_at_temperature(0.65, 1.206, 298.15, 298.15 + sign * step) for sign in (1, -1))
    expected = voc_temperature_coefficient(0.65, 1.206, 298.15)
    assert (above - below) / (2 * step) == pytest.approx(expected, rel=1e-8)


def test_voc_at_temperature_agrees_with_the_saturation_current_law():
    photocurrent, voc = 0.035, 0.65
    saturation = photocurrent / math.exp(voc / thermal_voltage(298.15))
    ratio = 333.15 / 298.15
    gap_term = 1.206 / thermal_voltage(298.15) - 1.206 / thermal_voltage(333.15)
    warm = saturation * ratio**3 * math.exp(gap_term)
    expected = thermal_voltage(333.15) * math.log(photocurrent / warm)
    assert voc_at_temperature(0.65, 1.206, 298.15, 333.15) == pytest.approx(expected, rel=1e-12)


def test_fill_factor_of_an_ideal_silicon_cell_falls_with_temperature():
    """(1/FF) dFF/dT of an ideal diode with Voc 0.65 V at 298.15 K: −0.00094 /K, recomputed (print: about −0.0015, from memory)."""

    def fill_factor(temperature):
        voc = voc_at_temperature(0.65, 1.206, 298.15, temperature)
        saturation = 0.035 / math.expm1(voc / thermal_voltage(temperature))
        return OneDiode(0.035, saturation, 1.0, 0.0, math.inf, temperature=temperature).landmarks().fill_factor

    slope = (fill_factor(298.65) - fill_factor(297.65)) / fill_factor(298.15)
    assert slope == pytest.approx(-0.00094, abs=5e-6)


def test_cells_in_series_add_their_coefficients():
    module = voc_temperature_coefficient(36 * 0.65, 1.206, 298.15, series_cells=36)
    assert module == pytest.approx(36 * voc_temperature_coefficient(0.65, 1.206, 298.15), rel=1e-12)


# R_rec = n·kT/(q·Jph) at open circuit, 298.15 K: J. Bisquert, Phys. Chem. Chem. Phys. 5 (2003) 5360 (from memory),
# figures recomputed [Ω cm²].
@pytest.mark.parametrize(
    ("photocurrent", "ideality", "expected"),
    [(0.035, 1.0, 0.734074), (0.035, 1.5, 1.101111), (0.035, 2.0, 1.468147), (0.040, 1.0, 0.642314)],
)
def test_recombination_resistance(photocurrent, ideality, expected):
    found = recombination_resistance(OneDiode(photocurrent, 1e-15, ideality, 0.0, math.inf))
    assert found == pytest.approx(expected, abs=1e-6)


def test_slope_at_voc_is_series_and_recombination_resistance():
    """2.38089 = 1.5 + 0.88089 Ω cm² (recomputed); with a shunt of 2000 Ω cm² 2.38937, as a slope of the curve."""
    assert recombination_resistance(CELL) == pytest.approx(0.88089, abs=5e-6)
    assert slope_resistance_at_voc(CELL) == pytest.approx(2.38089, abs=5e-6)
    assert slope_resistance_at_voc(SHUNTED) == pytest.approx(2.38937, abs=5e-6)


@pytest.mark.parametrize("model", [SHUNTED, TwoDiode(0.035, 1e-13, 1e-9, 0.8, 2000.0)])
def test_slope_at_voc_is_the_derivative_of_the_curve(model):
    step = 1e-6 * model.photocurrent
    above, below = float(model.voltage(step)), float(model.voltage(-step))
    assert slope_resistance_at_voc(model) == pytest.approx((below - above) / (2 * step), rel=1e-6)


def test_pseudo_fill_factor_of_the_synthetic_cell():
    """pFF 0.824481 without, 0.817353 with a shunt of 2000 Ω cm² (recomputed)."""
    assert pseudo_fill_factor(CELL) == pytest.approx(0.824481, abs=1e-6)
    # With the shunt, Rs takes 0.075 % of Jsc; the figure is over the Jsc of either curve.
    assert pseudo_fill_factor(SHUNTED) == pytest.approx(0.817353, abs=1e-6)


def test_each_loss_lowers_the_fill_factor():
    assert SHUNTED.landmarks().fill_factor < pseudo_fill_factor(SHUNTED) < ideal_fill_factor(SHUNTED)


def test_the_limit_is_fully_radiative_and_a_decade_more_recombination_a_tenth():
    limit = limiting_diode(1.6)
    assert derive(limit, 1.6).radiative_efficiency == pytest.approx(1.0, rel=1e-9)
    worse = derive(replace(limit, saturation_current=10 * limit.saturation_current), 1.6)
    assert worse.radiative_efficiency == pytest.approx(0.1, rel=1e-9)


def test_what_is_missing_is_told():
    assert derive(replace(CELL, photocurrent=0.0), 1.1) is None
    without_gap = derive(CELL)
    assert (without_gap.radiative_efficiency, without_gap.voc_temperature_coefficient) == (None, None)
    assert "need the band gap" in without_gap.notes[0]
    assert any("needs the area" in note for note in derive(CELL, 1.12, per_area=False).notes)
    module = derive(replace(CELL, series_cells=4), 1.12)
    assert module.radiative_efficiency is None and any("one junction" in note for note in module.notes)
    assert any("cannot be" in note for note in derive(CELL, 0.7).notes)
    assert any("Check" in note or "check" in note for note in derive(replace(CELL, temperature=60.0), 3.9).notes)
