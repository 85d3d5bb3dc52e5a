"""The published fill factor expressions against the exact fill factor, over the ranges that they are good for.

Expressions: M. A. Green, Solid-State Electron. 24 (1981) 788 (from memory), as printed in S. R. Wenham, M. A. Green,
M. E. Watt, R. Corkish, Applied Photovoltaics, chapter 3, eqs (3.17) to (3.23). Exact values and errors: recomputed
independently with numpy and scipy.
"""

import math
from itertools import product

import numpy as np
import pytest

from core.diode import OneDiode
from core.fill_factor import (
    Normalised,
    exact,
    exact_without_losses,
    normalised,
    normalised_of,
    published,
    voltage_of_largest_power,
    with_both,
    with_series_resistance,
    with_shunt,
    without_losses,
)

INF = math.inf
# v, r_s, r_sh → exact, and the expression that fits; recomputed.
VECTORS = [
    (10, 0, INF, 0.69363341, 0.69344444),
    (15, 0, INF, 0.76526811, 0.76531664),
    (20, 0, INF, 0.80795554, 0.80804288),
    (25, 0, INF, 0.83655567, 0.83664350),
    (25.69, 0, INF, 0.83978783, 0.83987476),
    (27, 0, INF, 0.84555245, 0.84563735),
    (30, 0, INF, 0.85718142, 0.85726084),
    (40, 0, INF, 0.88514117, 0.88520197),
    (50, 0, INF, 0.90335891, 0.90340548),
    (5, 0, INF, 0.54749927, 0.54267187),
    (1, 0, INF, 0.31536121, 0.22883785),
    (25, 0.05, INF, 0.7910556, 0.7910911),
    (25, 0.10, INF, 0.7460636, 0.7464646),
    (25, 0.20, INF, 0.6581008, 0.6599893),
    (25, 0.40, INF, 0.4965505, 0.4981500),
    (25, 0, 100, 0.8292864, 0.8294478),
    (25, 0, 20, 0.8002325, 0.8006649),
    (25, 0, 10, 0.7639741, 0.7646863),
    (25, 0, 5, 0.6917117, 0.6927292),
    (25, 0, 2.5, 0.5490080, 0.5488149),
    (25, 0.05, 20, 0.7603249, 0.7589237),
    (25, 0.10, 10, 0.6946328, 0.6891834),
    (25, 0.20, 5, 0.5888140, 0.5704329),
    (15, 0.10, INF, 0.6811240, 0.6829837),
    (15, 0, 10, 0.7031999, 0.7040124),
    (40, 0.10, 10, 0.7338496, 0.7262306),
]


@pytest.mark.parametrize(("voltage", "series", "shunt", "exactly", "expression"), VECTORS)
def test_vectors(voltage, series, shunt, exactly, expression):
    values = Normalised(voltage, series, shunt)
    assert exact(values) == pytest.approx(exactly, abs=1.5 * 10 ** -(8 if series == 0 and shunt == INF else 7))
    assert published(values).value == pytest.approx(expression, abs=1e-7)


def largest_error(function, voltages, series=(0.0,), shunts=(INF,)):
    misses = []
    for values in product(voltages, series, shunts):
        misses.append(function(*values) - exact(Normalised(*values)))
    return max(misses, key=abs)


def ff0(voltage, series, shunt):
    return without_losses(voltage).value


def ffs(voltage, series, shunt):
    return with_series_resistance(voltage, series).value


def ffsh(voltage, series, shunt):
    return with_shunt(voltage, shunt).value


def simple_series(voltage, series, shunt):
    return without_losses(voltage).value * (1 - series)  # eq. (3.19)


def simple_shunt(voltage, series, shunt):
    return without_losses(voltage).value * (1 - 1 / shunt)  # eq. (3.22)


def both(voltage, series, shunt):
    return with_both(voltage, series, shunt).value


def grid(low, high, *also):
    return np.union1d(np.linspace(low, high, 9), also)


V50 = grid(10, 50, 13.6, 15.3)
V2030 = (20, 25, 30)
# Largest absolute errors over the ranges, recomputed.
RANGES = [
    (ff0, np.linspace(10, 60, 201), (0,), (INF,), 1.9e-4),
    (ff0, np.linspace(15, 60, 181), (0,), (INF,), 9.0e-5),
    (ff0, np.linspace(5, 10, 21), (0,), (INF,), 4.8e-3),
    (ff0, np.linspace(2, 5, 21), (0,), (INF,), 4.9e-2),
    (ffs, V50, grid(0, 0.1), (INF,), 2.2e-3),
    (ffs, V50, grid(0, 0.2), (INF,), 3.7e-3),
    (ffs, V50, grid(0, 0.4, 0.26), (INF,), 4.0e-3),
    (ffs, V50, grid(0, 0.5), (INF,), 1.4e-2),
    (simple_series, V50, grid(0, 0.4), (INF,), 1.2e-2),
    (ffsh, V50, (0,), (2.5, 3, 3.7, 4.6, 6, 10, 30, 100), 1.2e-3),
    (ffsh, V50, (0,), (2, 2.5, 4.6, 10, 100), 2.9e-3),
    (ffsh, V50, (0,), (1.5, 2, 2.5, 4.6, 10, 100), 2.3e-2),
    (ffsh, V50, (0,), (1.001, 1.5, 2, 10), 0.17),
    (simple_shunt, V50, (0,), (2.5, 3, 4, 10), 7.2e-2),
    (both, V2030, grid(0, 0.02), (50, 100, INF), 3.3e-4),
    (both, V2030, grid(0, 0.05), (20, 50, INF), 1.8e-3),
    (both, V2030, grid(0, 0.1), (10, 30, INF), 6.3e-3),
    (both, V2030, grid(0, 0.2), (5, 20, INF), 2.0e-2),
    (both, V2030, grid(0, 0.4), (2.5, 10, INF), 5.3e-2),
]


@pytest.mark.parametrize(("function", "voltages", "series", "shunts", "found"), RANGES)
def test_largest_error_over_a_range(function, voltages, series, shunts, found):
    """Two printed digits, and a coarser grid than the one behind them."""
    error = largest_error(function, voltages, series, shunts)
    assert abs(error) == pytest.approx(found, rel=0.06)


@pytest.mark.parametrize(("series", "shunt"), [(0.1, 10), (0.2, 5), (0.4, 2.5)])
def test_the_combination_is_too_low_where_its_error_is_large_and_the_other_order_is_worse(series, shunt):
    truth, value = exact(Normalised(25, series, shunt)), both(25, series, shunt)
    shunt_first = with_shunt(25, shunt).value * (1 - 1.1 * series) + series**2 / 5.4
    assert value < truth
    assert abs(shunt_first - truth) > 1.5 * (truth - value)


def test_warnings_name_what_is_out_of_range():
    assert published(Normalised(25, 0.05, 50)).warnings == ()
    assert "below 10" in published(Normalised(9, 0, INF)).warnings[0]
    assert "above 0.4" in published(Normalised(25, 0.5, INF)).warnings[0]
    assert "below 2.5" in published(Normalised(25, 0, 2.0)).warnings[0]
    assert "together" in published(Normalised(25, 0.3, 5)).warnings[0]


def test_a_voltage_of_28_gives_the_figure_of_about_085():
    """Silicon of ideality 1, v 25 to 30: 0.837 to 0.857 (recomputed); "about 0.85" belongs to v near 28."""
    assert exact_without_losses(25) == pytest.approx(0.837, abs=5e-4)
    assert exact_without_losses(28) == pytest.approx(0.85, abs=1e-3)
    assert exact_without_losses(30) == pytest.approx(0.857, abs=5e-4)


def test_a_straight_line_from_jsc_to_voc_has_a_quarter_and_no_diode_curve_less():
    assert exact_without_losses(1e-5) == pytest.approx(0.25, abs=1e-6)
    assert exact(Normalised(25, 0.999, INF)) == pytest.approx(0.25, abs=1e-3)
    assert exact(Normalised(25, 0.0, 1.0000001)) == pytest.approx(0.25, abs=1e-5)
    for values in product((1, 10, 40), (0.0, 0.3, 0.9), (1.01, 3, INF)):
        assert exact(Normalised(*values)) >= 0.25


def test_the_exact_voltage_of_largest_power_keeps_its_one():
    """W(e^(v+1)) − 1 at v = 25; the form W(e^v) on PVEducation's fill factor page is high by 0.0428 (recomputed)."""
    assert voltage_of_largest_power(25) == pytest.approx(21.8701667, abs=5e-8)
    in_circulation = voltage_of_largest_power(24) + 1
    assert in_circulation == pytest.approx(21.9129234, abs=5e-8)


def test_impossible_resistances_have_no_fill_factor():
    for values in ((25, 1.0, INF), (25, 0.0, 0.9), (0.0, 0.0, INF), (25, -0.1, INF)):
        assert math.isnan(exact(Normalised(*values)))


def test_a_models_normalised_values_give_its_own_fill_factor():
    for model in (
        OneDiode(0.022, 1e-12, 1.6, 3.0, 2000.0),
        OneDiode(1.03, 2.6e-6, 1.32, 1.24, 820.0, series_cells=36, temperature=318.15),
    ):
        assert exact(normalised_of(model)) == pytest.approx(model.landmarks().fill_factor, rel=1e-10)


# Textbook examples


def ideal_cell(photocurrent, saturation_current, temperature):
    return OneDiode(photocurrent, saturation_current, 1.0, 0.0, INF, temperature=temperature)


def test_masters_cell_of_100_square_centimetres():
    """G. M. Masters, Renewable and Efficient Electric Power Systems (2004): J0 1e-12 A cm⁻², Jsc 40 mA cm⁻², 25 °C;
    Voc 0.627 V, at half sun 0.610 V (from memory, recomputed)."""
    for photocurrent, voc in ((0.040, 0.627), (0.020, 0.610)):
        # The book rounds kT/q to 25.7 mV.
        found = ideal_cell(photocurrent, 1e-12, 298.15).landmarks().voc
        assert found == pytest.approx(voc, abs=6e-4)


def test_masters_module_of_36_cells():
    """G. M. Masters (2004): Isc 3.4 A, I0 6e-10 A, Rp 6.6 Ω and Rs 0.005 Ω per cell, q/kT 38.9 V⁻¹.

    Junction voltage of a cell, current, module voltage, power (from memory, recomputed; the book rounds to 0.01).
    """
    temperature = 298.15 / (38.9 * 0.025692579)
    module = OneDiode(3.4, 6e-10, 1.0, 36 * 0.005, 36 * 6.6, series_cells=36, temperature=temperature)
    for junction, current, voltage, power in (
        (0.49, 3.212, 17.062, 54.80),
        (0.50, 3.156, 17.432, 55.02),
        (0.51, 3.075, 17.807, 54.75),
        (0.52, 2.956, 18.188, 53.76),
        (0.53, 2.780, 18.580, 51.65),
        (0.54, 2.522, 18.986, 47.89),
        (0.55, 2.142, 19.414, 41.59),
    ):
        found = float(module.current(36 * junction - current * 36 * 0.005))
        assert found == pytest.approx(current, abs=2e-3)
        assert float(module.voltage(found)) == pytest.approx(voltage, abs=1e-3)
        assert found * float(module.voltage(found)) == pytest.approx(power, abs=0.03)


def test_problem_page_cell_at_25_degrees():
    """Problem page, question only: I0 4e-11 A, Isc 6.4 A, 25 °C, 0.017 m²; the answers are recomputed."""
    cell = ideal_cell(6.4, 4e-11, 298.15)
    assert cell.landmarks().voc == pytest.approx(0.6628, abs=5e-5)
    assert cell.current(0.55) == pytest.approx(6.321, abs=5e-4)
    power = 0.55 * float(cell.current(0.55))
    assert power == pytest.approx(3.476, abs=1e-3)
    assert power / (1000 * 0.017) == pytest.approx(0.2045, abs=5e-5)


def test_problem_page_cell_at_40_degrees():
    """Problem page, question only: I0 1.8e-7 A, Isc 5 A, 40 °C; the answers are recomputed."""
    marks = ideal_cell(5.0, 1.8e-7, 313.15).landmarks()
    assert marks.voc == pytest.approx(0.46252, abs=5e-6)
    assert marks.pmp == pytest.approx(1.8174, abs=5e-5)
    assert marks.fill_factor == pytest.approx(0.78589, abs=5e-6)


def test_exercise_with_strong_losses_lies_outside_the_expressions():
    """Exercise in the manner of Green and Wenham (statement from memory, answer recomputed): 300 K, 100 cm², 600 mV,
    3.3 A, n = 1: efficiency 16.38 %; with Rs 0.1 Ω and Rsh 3 Ω the exact fill factor is 0.39374, 7.80 %."""
    lossless = normalised(3.3, 0.6, 1.0, 0.0, INF, temperature=300.0)
    assert 3.3 * 0.6 * exact(lossless) / 10.0 == pytest.approx(0.1638, abs=1e-4)
    lossy = normalised(3.3, 0.6, 1.0, 0.1, 3.0, temperature=300.0)
    assert lossy.series == pytest.approx(0.55)
    assert exact(lossy) == pytest.approx(0.39374, abs=5e-6)
    assert 3.3 * 0.6 * exact(lossy) / 10.0 == pytest.approx(0.0780, abs=1e-4)
    assert any("above 0.4" in warning for warning in published(lossy).warnings)
