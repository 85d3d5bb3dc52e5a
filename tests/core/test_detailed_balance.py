"""The detailed-balance limit against recomputed tables and the spectrum's own source."""

import ast
import importlib.util
import math
from pathlib import Path

import numpy as np
import pytest
from scipy import constants, integrate

from core.detailed_balance import (
    gap_from_photocurrent,
    gap_range,
    limit,
    limiting_diode,
    limiting_photocurrent,
    radiative_efficiency,
    radiative_saturation_current,
    radiative_voltage,
    spectrum,
)
from core.diode import OneDiode
from core.errors import ConditionRefused
from core.limit_check import check_against_limit
from core.quantity import Quantity

# Gap [eV], Jsc [mA cm⁻²], Voc [V], Vmp [V], FF [%], efficiency [%] with emission from the front; Voc, FF, efficiency with
# emission from both faces. 298.15 K. Recomputed independently with numpy and scipy; not the rows of a published table.
TABLE = [
    (0.500, 66.745, 0.3091, 0.2483, 72.79, 15.016, 0.2913, 71.72, 13.942),
    (0.670, 61.083, 0.4624, 0.3908, 79.31, 22.401, 0.4446, 78.73, 21.382),
    (0.800, 54.460, 0.5807, 0.5030, 82.41, 26.061, 0.5629, 82.01, 25.139),
    (0.900, 52.061, 0.6736, 0.5920, 84.22, 29.536, 0.6558, 83.90, 28.648),
    (1.000, 48.220, 0.7664, 0.6812, 85.66, 31.656, 0.7486, 85.40, 30.829),
    (1.100, 44.230, 0.8594, 0.7712, 86.84, 33.009, 0.8416, 86.63, 32.247),
    (1.120, 43.811, 0.8783, 0.7894, 87.05, 33.496, 0.8605, 86.85, 32.741),
    (1.150, 42.438, 0.9061, 0.8165, 87.36, 33.592, 0.8883, 87.16, 32.860),
    (1.200, 39.985, 0.9524, 0.8615, 87.83, 33.448, 0.9346, 87.65, 32.756),
    (1.250, 37.575, 0.9988, 0.9065, 88.26, 33.124, 0.9810, 88.10, 32.473),
    (1.300, 35.817, 1.0456, 0.9521, 88.67, 33.205, 1.0278, 88.51, 32.584),
    (1.340, 35.032, 1.0835, 0.9890, 88.97, 33.771, 1.0657, 88.83, 33.163),
    (1.350, 34.660, 1.0928, 0.9982, 89.04, 33.728, 1.0750, 88.90, 33.126),
    (1.400, 32.881, 1.1397, 1.0439, 89.39, 33.499, 1.1219, 89.26, 32.927),
    (1.424, 31.886, 1.1620, 1.0657, 89.55, 33.181, 1.1442, 89.43, 32.626),
    (1.450, 30.837, 1.1862, 1.0894, 89.72, 32.819, 1.1684, 89.60, 32.283),
    (1.500, 28.973, 1.2329, 1.1350, 90.02, 32.157, 1.2151, 89.91, 31.652),
    (1.550, 27.264, 1.2797, 1.1808, 90.31, 31.507, 1.2619, 90.20, 31.032),
    (1.600, 25.467, 1.3264, 1.2265, 90.57, 30.594, 1.3085, 90.47, 30.150),
    (1.650, 24.052, 1.3733, 1.2725, 90.83, 30.002, 1.3555, 90.73, 29.582),
    (1.700, 22.455, 1.4201, 1.3184, 91.07, 29.039, 1.4022, 90.98, 28.647),
    (1.750, 21.060, 1.4669, 1.3644, 91.29, 28.204, 1.4491, 91.21, 27.835),
    (1.800, 19.646, 1.5137, 1.4104, 91.50, 27.212, 1.4959, 91.42, 26.868),
    (2.000, 14.586, 1.7007, 1.5943, 92.25, 22.885, 1.6829, 92.19, 22.629),
    (2.500, 6.201, 2.1674, 2.0545, 93.62, 12.583, 2.1496, 93.58, 12.474),
    (3.000, 1.859, 2.6272, 2.5092, 94.54, 4.617, 2.6094, 94.51, 4.584),
]


def efficiency(gap, **conditions):
    """Per cent at one sun of 100 mW cm⁻²."""
    return 1e3 * limit(gap, **conditions).pmp


@pytest.mark.parametrize("row", TABLE, ids=lambda row: f"{row[0]} eV")
def test_the_limit_agrees_with_the_recomputed_table(row):
    """To the digits printed, well inside the tolerances of 0.05 mA cm⁻², 1 mV, 0.1 % and 0.1 %."""
    gap, jsc, voc, vmp, fill_factor, power, voc_both, fill_factor_both, power_both = row
    front, both = limit(gap), limit(gap, emission="both")
    assert 1e3 * front.jsc == pytest.approx(jsc, abs=6e-4)
    assert (front.voc, front.vmp) == pytest.approx((voc, vmp), abs=6e-5)
    assert 100 * front.fill_factor == pytest.approx(fill_factor, abs=6e-3)
    assert 1e3 * front.pmp == pytest.approx(power, abs=6e-4)
    assert both.jsc == front.jsc
    assert both.voc == pytest.approx(voc_both, abs=6e-5)
    assert 100 * both.fill_factor == pytest.approx(fill_factor_both, abs=6e-3)
    assert 1e3 * both.pmp == pytest.approx(power_both, abs=6e-4)


@pytest.mark.parametrize(("gap", "expected"), [(1.12, 6.2497e-14), (1.34, 1.69664e-17), (1.424, 7.26985e-19), (1.6, 9.68293e-22)])
def test_the_radiative_saturation_current_agrees_with_recomputed_values(gap, expected):
    assert 1e3 * radiative_saturation_current(gap) == pytest.approx(expected, rel=1e-5)


@pytest.mark.parametrize(("gap", "temperature"), [(0.35, 1000.0), (1.6, 298.15), (3.0, 400.0), (1.1, 77.0)])
def test_black_body_emission_agrees_with_quadrature(gap, temperature):
    energy = constants.k * temperature
    edge = gap * constants.e / energy
    # x²/(eˣ − 1) = x²e⁻ˣ/(1 − e⁻ˣ); the factor e^(−edge) is taken out, so that nothing underflows.
    integral, _ = integrate.quad(lambda x: x**2 * math.exp(edge - x) / -math.expm1(-x), edge, edge + 60, epsabs=0, epsrel=1e-12)
    rate = 2 * math.pi * constants.e / (constants.h**3 * constants.c**2) * energy**3 * integral * math.exp(-edge)
    assert radiative_saturation_current(gap, temperature) == pytest.approx(1e-4 * rate, rel=1e-10)


@pytest.mark.parametrize(
    ("emission", "window", "power", "gap"),
    [
        ("front", (1.30, 1.37), 33.786, 1.3364),
        ("front", (1.12, 1.18), 33.594, 1.1476),
        ("both", (1.30, 1.37), 33.176, 1.3366),
        ("both", (1.12, 1.18), 32.860, 1.1488),
    ],
)
def test_the_two_best_gaps_are_where_recomputation_finds_them(emission, window, power, gap):
    gaps = np.arange(*window, 2e-4)
    powers = [efficiency(g, emission=emission) for g in gaps]
    assert max(powers) == pytest.approx(power, abs=1.1e-3)
    assert gaps[int(np.argmax(powers))] == pytest.approx(gap, abs=4e-4)


@pytest.mark.parametrize(("gap", "power", "voc"), [(1.12, 33.402, None), (1.34, 33.691, 1.0817), (1.6, 30.533, 1.3245)])
def test_the_limit_at_300_kelvin(gap, power, voc):
    assert efficiency(gap, temperature=300.0) == pytest.approx(power, abs=6e-4)
    if voc is not None:
        assert limit(gap, 300.0).voc == pytest.approx(voc, abs=6e-5)


def test_33_16_per_cent_in_print_is_the_limit_with_both_faces_emitting():
    """33.16 % at 1.34 eV: in print, read in an encyclopaedia article on the limit."""
    assert efficiency(1.34, emission="both") == pytest.approx(33.16, abs=0.01)


def test_emission_from_both_faces_costs_kt_ln_2():
    assert 1e3 * (limit(1.34).voc - limit(1.34, emission="both").voc) == pytest.approx(17.81, abs=0.01)


def test_the_spectrum_carries_its_known_power():
    wavelength, irradiance = spectrum()
    inside = (wavelength >= 300) & (wavelength <= 1200)
    assert wavelength.size == 2002
    assert np.trapezoid(irradiance, wavelength) == pytest.approx(1000.3707, abs=5e-5)
    assert np.trapezoid(irradiance[inside], wavelength[inside]) == pytest.approx(836.0903, abs=5e-5)


def test_the_spectrum_is_that_of_colour_science():
    """Read off the package's source: importing all of it would take seconds."""
    package = importlib.util.find_spec("colour").submodule_search_locations[0]
    source = ast.parse((Path(package) / "plotting/datasets/astm_g_173.py").read_text(encoding="utf-8"))
    table = next(
        ast.literal_eval(node.value)
        for node in source.body
        if isinstance(node, ast.AnnAssign) and node.target.id == "DATA_ASTMG173_GLOBAL_TILT"
    )
    wavelength, irradiance = spectrum()
    assert dict(zip(wavelength.tolist(), irradiance.tolist(), strict=True)) == table


def test_the_photocurrent_is_continuous_across_the_rows_of_the_table():
    wavelength, _ = spectrum()
    at_row = constants.h * constants.c / constants.e * 1e9 / wavelength[1200]
    around = [limiting_photocurrent(at_row * factor) for factor in (1 - 1e-9, 1.0, 1 + 1e-9)]
    assert around[0] > around[1] > around[2]
    assert around[0] == pytest.approx(around[2], rel=1e-7)


def test_irradiance_scales_the_photocurrent_alone():
    half, full = limiting_diode(1.5, irradiance=0.05), limiting_diode(1.5)
    assert half.photocurrent == pytest.approx(0.5 * full.photocurrent, rel=1e-15)
    assert half.saturation_current == full.saturation_current
    assert (full.ideality, full.series_resistance, full.shunt_resistance) == (1.0, 0.0, math.inf)


def test_a_cell_at_its_limit_is_fully_radiative():
    best = limit(1.6)
    assert radiative_efficiency(best.jsc, best.voc, 1.6) == pytest.approx(1.0, rel=1e-9)
    assert radiative_voltage(best.jsc, 1.6) == pytest.approx(best.voc, abs=1e-12)


def test_59_millivolt_below_the_radiative_voltage_is_a_tenth():
    """Vt·ln 10 = 59.1593 mV at 298.15 K (recomputed)."""
    best = limit(1.6)
    assert radiative_efficiency(best.jsc, best.voc - 0.0591593, 1.6) == pytest.approx(0.1, rel=1e-5)


@pytest.mark.parametrize("gap", [0.35, 0.67, 1.12, 1.6, 2.5, 3.5])
def test_the_gap_from_the_photocurrent_inverts_the_limit(gap):
    for irradiance in (0.1, 0.03):
        assert gap_from_photocurrent(limiting_photocurrent(gap, irradiance), irradiance) == pytest.approx(gap, abs=1e-6)


def test_a_photocurrent_that_no_gap_gives_is_refused():
    with pytest.raises(ConditionRefused, match="at most 68.98 mA cm⁻²"):
        gap_from_photocurrent(0.070)
    with pytest.raises(ConditionRefused):
        gap_from_photocurrent(0.0)


@pytest.mark.parametrize("gap", [0.0, -1.0, 0.3, 4.2, 1600.0, math.nan])
def test_a_gap_outside_the_table_is_refused_with_the_range(gap):
    with pytest.raises(ConditionRefused, match="from 0.31 to 4.13 eV"):
        limit(gap)


def test_the_ends_of_the_table_have_a_limit():
    for gap in gap_range():
        assert limit(gap).pmp > 0


@pytest.mark.parametrize(
    "conditions",
    [{"irradiance": 0.0}, {"irradiance": math.nan}, {"temperature": 25.0}, {"temperature": math.nan}, {"emission": "back"}],
)
def test_conditions_without_a_limit_are_refused(conditions):
    with pytest.raises(ConditionRefused):
        limit(1.5, **conditions)


def test_a_gap_too_wide_for_a_cold_cell_is_refused():
    with pytest.raises(ConditionRefused, match="emits too little"):
        limit(4.1, temperature=50.0)


def test_a_photocurrent_above_the_limit_is_a_finding():
    (finding,) = check_against_limit(Quantity(0.027, 1e-5), 1.6)
    assert finding.severity == "stop"
    assert "27 mA" in finding.what and "25.47 mA" in finding.what


@pytest.mark.parametrize("jsc", [Quantity(0.025, 1e-5), Quantity(0.02548, 1e-5), Quantity(None, None, "not reached")])
def test_a_photocurrent_at_or_below_the_limit_is_none(jsc):
    assert check_against_limit(jsc, 1.6) == ()


@pytest.mark.parametrize(("emission", "efficiency", "best"), [("both", 29.35, 30.40), ("front", 30.04, 30.97)])
def test_a_black_body_sun_as_in_the_paper_of_1961(emission, efficiency, best):
    """Shockley and Queisser, J. Appl. Phys. 32 (1961) 510 (from memory): a 6000 K sun, a 300 K cell, about 30 % at 1.1 eV.

    Recomputed with a dilution of 2.18e-5; the light is worked out here, the cell's emission and its curve in core.
    """
    energy = np.linspace(1e-3, 12.0, 200_001) * constants.e
    photons = 2 * np.pi / (constants.h**3 * constants.c**2) * energy**2 / np.expm1(energy / (constants.k * 6000))
    sun = 2.18e-5 * np.trapezoid(photons * energy, energy)  # W m⁻²

    def percent(gap):
        above = energy >= gap * constants.e
        photocurrent = 1e-4 * constants.e * 2.18e-5 * np.trapezoid(photons[above], energy[above])
        emitted = radiative_saturation_current(gap, 300.0, emission)
        return 100 * OneDiode(photocurrent, emitted, 1.0, 0.0, math.inf, temperature=300.0).landmarks().pmp / (1e-4 * sun)

    assert percent(1.1) == pytest.approx(efficiency, abs=0.02)
    assert max(percent(gap) for gap in np.arange(1.25, 1.40, 0.005)) == pytest.approx(best, abs=0.02)
