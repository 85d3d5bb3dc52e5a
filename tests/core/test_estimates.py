"""Series resistance and ideality by the published methods, on the synthetic cell and on measured-like sweeps.

Synthetic cell per cm²: Jph 35 mA, J0 5e-12 A, n 1.2, Rs 1.5 Ω cm², 298.15 K; the figures of each method are
recomputed independently. Sources of the methods (from memory) stand in core/series_resistance.py.
"""

import math
from dataclasses import replace

import numpy as np
import pytest

from core import series_resistance as methods
from core.constants import thermal_voltage
from core.dark_slope import dark_slope
from core.derived import pseudo_fill_factor, slope_resistance_at_voc
from core.diode import OneDiode
from core.drops import voltage_at_drop
from core.estimates import estimates, plateau_reading
from core.intensity import (
    light_ideality,
    pseudo_curve,
    resistance_from_levels,
    resistance_from_pseudo_curve,
)
from core.sweep import Conditions, Sweep

NO_SHUNT = OneDiode(0.035, 5e-12, 1.2, 1.5, math.inf)
SHUNTED = replace(NO_SHUNT, shunt_resistance=2000.0)
BOTH = pytest.mark.parametrize("column", [0, 1], ids=["no shunt", "shunt"])
MODELS = NO_SHUNT, SHUNTED
DIGIT = 1.5e-5  # the last printed digit of a resistance


def dark_voltage(model, current):
    return float(replace(model, photocurrent=0.0).voltage(-current))


def pseudo(model):
    return replace(model, series_resistance=0.0)


def fill_factors(model):
    marks = model.landmarks()
    return marks.fill_factor, pseudo_fill_factor(model), marks.voc, marks.jsc


# The synthetic cell, each method on the exact curve


@BOTH
def test_synthetic_cell_is_the_one_of_the_table(column):
    marks = MODELS[column].landmarks()
    expected = [(0.035, 0.698916, 0.560998, 0.033010, 0.757036), (0.034974, 0.698606, 0.560890, 0.032738, 0.751550)]
    found = marks.jsc, marks.voc, marks.vmp, marks.jmp, marks.fill_factor
    assert found == pytest.approx(expected[column], abs=1e-6)


@BOTH
@pytest.mark.parametrize(("suns", "expected"), [(0.5, (1.5, 1.48824)), (0.8, (1.5, 1.48826))])
def test_two_light_levels(column, suns, expected):
    model = MODELS[column]
    dimmed = replace(model, photocurrent=suns * model.photocurrent)
    marks, dim_jsc = model.landmarks(), float(dimmed.current(0.0))
    drop = marks.jsc - marks.jmp
    found = methods.from_light_levels(
        float(model.voltage(marks.jsc - drop)), float(dimmed.voltage(dim_jsc - drop)), marks.jsc, dim_jsc
    )
    assert found == pytest.approx(expected[column], abs=DIGIT)


@BOTH
def test_shift_against_the_pseudo_curve_is_exact(column):
    marks = MODELS[column].landmarks()
    found = methods.from_pseudo_voltage(float(pseudo(MODELS[column]).voltage(marks.jmp)), marks.vmp, marks.jmp)
    assert found == pytest.approx(1.5, abs=1e-9)


@BOTH
def test_fill_factor_methods(column):
    model = MODELS[column]
    jmp = model.landmarks().jmp
    found = [
        methods.from_fill_factors(*fill_factors(model)),
        methods.from_fill_factors_at_maximum(*fill_factors(model), jmp),
        methods.from_fill_factor_expression(*fill_factors(model)),
    ]
    expected = [(1.63352, 1.60815), (1.51406, 1.50007), (1.50828, 1.48469)]
    assert found == pytest.approx([row[column] for row in expected], abs=DIGIT)


def test_fill_factor_expression_without_a_solution_is_no_number():
    assert math.isnan(methods.from_fill_factor_expression(0.05, 0.5, 0.7, 0.035))


@BOTH
def test_dark_shift(column):
    marks = MODELS[column].landmarks()
    found = methods.from_dark_shift(dark_voltage(MODELS[column], marks.jsc), marks.voc, marks.jsc)
    assert found == pytest.approx((1.5, 1.49933)[column], abs=DIGIT)


@BOTH
def test_dark_against_light_at_the_maximum(column):
    model = MODELS[column]
    marks = model.landmarks()
    shift = methods.from_dark_shift(dark_voltage(model, marks.jsc), marks.voc, marks.jsc)
    found = methods.from_dark_at_maximum(
        dark_voltage(model, marks.jsc - marks.jmp), marks.vmp, marks.jsc, marks.jmp, shift
    )
    assert found == pytest.approx((1.5, 1.48744)[column], abs=DIGIT)


@BOTH
def test_slope_at_voc(column):
    assert slope_resistance_at_voc(MODELS[column]) == pytest.approx((2.38089, 2.38937)[column], abs=DIGIT)


def test_slope_at_jsc_is_shunt_and_series_resistance():
    step = 1e-4
    slope = -2 * step / (float(SHUNTED.current(step)) - float(SHUNTED.current(-step)))
    assert slope == pytest.approx(2001.50, abs=0.01)


# Light ideality


@pytest.mark.parametrize(("ideality", "millivolts"), [(1.0, 59.159), (2.0, 118.319)])
def test_voc_per_decade_of_light(ideality, millivolts):
    """dVoc/d log₁₀G at 298.15 K: 59.159 and 118.319 mV for n = 1 and 2 (recomputed)."""
    assert 1e3 * ideality * thermal_voltage(298.15) * math.log(10) == pytest.approx(millivolts, abs=6e-4)
    model = OneDiode(0.035, 1e-14 if ideality == 1 else 1e-8, ideality, 0.5, math.inf)
    found = light_ideality([lit(model, suns) for suns in (0.1, 1.0)])
    assert found.value == pytest.approx(ideality, rel=1e-3)


# On sweeps of points


def lit(model, suns=1.0, noise=0.0, seed=0, irradiance=None, **conditions):
    model = replace(model, photocurrent=suns * model.photocurrent)
    voltage = np.linspace(-0.1, model.landmarks().voc + 0.03, 161)
    current = model.current(voltage) + noise * np.random.default_rng(seed).standard_normal(voltage.size)
    given = Conditions(area=1.0, irradiance=0.1 * suns if irradiance is None else irradiance, **conditions)
    return Sweep(voltage, current, per_area=True, conditions=given)


def dark(model, noise=0.0, seed=1, high=0.8):
    model = replace(model, photocurrent=0.0)
    voltage = np.linspace(-0.2, high, 161)
    current = model.current(voltage) + noise * np.random.default_rng(seed).standard_normal(voltage.size)
    return Sweep(voltage, current, per_area=True, conditions=Conditions(area=1.0, irradiance=0.0, lit=False))


LEVELS = (1.0, 0.5, 0.2, 0.1, 0.05, 0.02, 0.01)


def by_name(found):
    return {estimate.name: estimate for estimate in found}


@pytest.mark.parametrize("drop", [1e-4, 2e-3, 0.01, 0.03])
def test_the_voltage_of_a_drop_is_read_to_a_tenth_of_a_millivolt(drop):
    sweep = lit(SHUNTED)
    jsc = float(SHUNTED.current(0.0))
    voltage, _ = voltage_at_drop(sweep, jsc, drop)
    assert voltage == pytest.approx(float(SHUNTED.voltage(jsc - drop)), abs=1e-4 if drop > 1e-3 else 2e-3)


def test_the_uncertainty_of_a_drop_is_what_repeats_scatter():
    expected = float(NO_SHUNT.voltage(0.025))
    found = [voltage_at_drop(lit(NO_SHUNT, noise=1e-5, seed=seed), 0.035, 0.01) for seed in range(60)]
    misses = [voltage - expected for voltage, _ in found]
    told = np.mean([spread for _, spread in found])
    assert np.std(misses) == pytest.approx(told, rel=0.35)


def test_drops_beyond_the_sweep_are_not_extrapolated():
    assert voltage_at_drop(dark(NO_SHUNT, high=0.6), 0.0, 0.035) is None
    assert voltage_at_drop(lit(NO_SHUNT), 0.035, 0.5) is None


def test_every_method_finds_the_series_resistance_on_sweeps():
    sweep, levels = lit(NO_SHUNT), [lit(NO_SHUNT, suns) for suns in LEVELS[1:]]
    found = by_name(estimates(sweep, dark=dark(NO_SHUNT), levels=levels, model=NO_SHUNT))
    for name in (
        "Rs from the dark shift at Voc",
        "Rs from the dark shift at Vmp",
        "Rs from light levels",
        "Rs from Voc at each level",
        "Rs from the pseudo fill factor",
    ):
        assert found[name].value == pytest.approx(1.5, abs=0.03), name
        assert found[name].source and found[name].method
    assert found["slope at Voc"].value == pytest.approx(2.381, abs=0.02)
    assert found["pseudo fill factor"].value == pytest.approx(0.824481, abs=2e-3)
    assert found["light ideality"].value == pytest.approx(1.2, abs=2e-3)
    assert found["n from the dark sweep"].value == pytest.approx(1.2, abs=0.01)
    assert found["J0 from the dark sweep"].value == pytest.approx(5e-12, rel=0.1)
    assert found["smallest local ideality in the dark"].value == pytest.approx(1.2, abs=0.02)
    assert found["fill factor from v, r_s and r_sh"].value == pytest.approx(0.757036, abs=4e-3)


def test_uncertainties_cover_the_noise():
    """Median over seeds of |miss| stays within the told uncertainty, and the told one is no excuse for anything."""
    misses, told = [], []
    for seed in range(20):
        sweep, unlit = lit(NO_SHUNT, noise=1e-5, seed=seed), dark(NO_SHUNT, noise=1e-5, seed=seed + 100)
        found = by_name(estimates(sweep, dark=unlit))["Rs from the dark shift at Voc"]
        misses.append(abs(found.value - 1.5))
        told.append(found.uncertainty)
    assert np.median(misses) < 1.5 * np.median(told)
    assert 0 < np.median(told) < 0.05


def test_the_fill_factor_without_a_fit_uses_the_other_estimates():
    found = by_name(estimates(lit(SHUNTED), dark=dark(SHUNTED)))["fill factor from v, r_s and r_sh"]
    assert found.value == pytest.approx(SHUNTED.landmarks().fill_factor, abs=6e-3)
    assert "estimates above" in found.note
    alone = by_name(estimates(lit(SHUNTED)))["fill factor from v, r_s and r_sh"]
    assert alone.value is None and "needs a fit" in alone.note


def test_a_dim_series_says_that_it_does_not_reach():
    sweep, levels = lit(NO_SHUNT), [lit(NO_SHUNT, suns) for suns in (0.8, 0.6)]
    curve = pseudo_curve([sweep, *levels])
    assert curve.fill_factor().value is None and "too bright" in curve.fill_factor().note
    shifted = resistance_from_pseudo_curve(sweep, curve)
    assert shifted.value == pytest.approx(1.5, abs=0.01)
    assert "does not reach Jmp" in shifted.note


def test_levels_that_cannot_be_compared_are_told():
    sweep = lit(NO_SHUNT)
    warm = lit(NO_SHUNT, 0.5, temperature=310.0)
    assert "temperatures" in light_ideality([sweep, warm]).note
    assert "At least 2" in light_ideality([sweep]).note
    assert "one light level" in light_ideality([sweep, lit(NO_SHUNT)]).note
    assert "At least 3" in pseudo_curve([sweep, lit(NO_SHUNT, 0.5)])
    assert "do not differ enough" in pseudo_curve([sweep, lit(NO_SHUNT), lit(NO_SHUNT)])
    assert "too dim" in resistance_from_levels(sweep, [lit(NO_SHUNT, 0.01)]).note


def test_jsc_stands_for_an_irradiance_that_the_files_do_not_give():
    found = light_ideality([lit(NO_SHUNT, suns, irradiance=0.1) for suns in (1.0, 0.3, 0.1)])
    assert found.value == pytest.approx(1.2, abs=2e-3)
    assert "Jsc stands for the irradiance" in found.note


def test_a_bend_of_voc_over_light_is_told():
    """Bends mean mixed mechanisms (Thongprong et al., Energy Technol. 8 (2020)); here a shunt in dim light."""
    shunted = replace(NO_SHUNT, shunt_resistance=300.0)
    found = light_ideality([lit(shunted, suns) for suns in (1.0, 0.1, 0.03, 0.01)])
    assert "bends over ln G" in found.note


def test_the_dark_slope_finds_the_diode_between_shunt_and_series_resistance():
    found = dark_slope(dark(SHUNTED))
    assert found.ideality == pytest.approx(1.2, abs=0.03)
    assert found.shunt_resistance == pytest.approx(2001.5, rel=1e-3)
    assert 0.4 < found.low < found.high < 0.72


def test_a_resistor_has_no_dark_slope():
    assert dark_slope(dark(replace(SHUNTED, shunt_resistance=1.0))) is None


def test_a_dark_sweep_by_itself_has_its_own_estimates():
    found = by_name(estimates(dark(SHUNTED)))
    assert set(found) == {
        "n from the dark sweep",
        "J0 from the dark sweep",
        "smallest local ideality in the dark",
        "slope of the dark sweep at V = 0",
    }
    assert found["slope of the dark sweep at V = 0"].value == pytest.approx(2001.5, rel=1e-3)


def test_three_points_end_in_reasons_not_in_numbers():
    sweep = Sweep([0.0, 0.3, 0.7], [0.035, 0.034, -0.001])
    unlit = Sweep([0.0, 0.3, 0.7], [0.0, -1e-6, -0.03], conditions=Conditions(lit=False))
    for estimate in estimates(sweep, dark=unlit):
        assert estimate.value is not None or estimate.note


# The plateau


def test_a_plateau_is_shunt_or_collection_without_a_dark_sweep():
    said = plateau_reading(lit(SHUNTED))
    assert "is shunt or voltage-dependent collection; a dark sweep of the device would tell which." in said


def test_a_plateau_is_a_shunt_where_the_dark_sweep_has_the_same_slope():
    assert "is a shunt: the dark sweep has the same slope" in plateau_reading(lit(SHUNTED), dark(SHUNTED))


def test_a_plateau_steeper_than_in_the_dark_is_not_called_a_shunt():
    said = plateau_reading(lit(SHUNTED), dark(replace(SHUNTED, shunt_resistance=20000.0)))
    assert "is shunt or voltage-dependent collection: the dark sweep" in said
    assert "accounts for 10 % of it as a shunt." in said


def test_a_dark_sweep_that_conducts_more_is_questioned():
    said = plateau_reading(lit(SHUNTED), dark(replace(SHUNTED, shunt_resistance=500.0)))
    assert "check that both are of the same device" in said


def test_a_flat_plateau_tells_nothing():
    flat = lit(NO_SHUNT, noise=1e-6)
    assert "tells nothing of a shunt" in plateau_reading(flat, dark(NO_SHUNT))
    noisy_dark = dark(NO_SHUNT, noise=1e-6)
    assert "speaks for collection" in plateau_reading(lit(SHUNTED), noisy_dark)
