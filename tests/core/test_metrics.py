"""Metrics from points: unbiased on exact curves, honest about noise, silent about what is not there."""

import dataclasses

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays

from core.diode import OneDiode
from core.metrics import Metrics, Quantity, measure, noise_level
from core.sweep import Conditions, Sweep
from tests.core import published

DEVICES = {
    "good": OneDiode(0.022, 1e-13, 1.6, 3.0, 2000.0),
    "series": OneDiode(0.020, 1e-11, 1.9, 12.0, 3000.0),
    "shunted": OneDiode(0.021, 1e-12, 1.7, 2.0, 150.0),
    "silicon": OneDiode(0.038, 5e-12, 1.1, 0.7, 4000.0),
    "lossless": OneDiode(0.022, 1e-13, 1.5, 0.0, np.inf),
    "module": OneDiode(8.6, 1e-8, 1.2, 0.35, 300.0, series_cells=60),
}
NAMES = ("jsc", "voc", "jmp", "vmp", "pmp", "fill_factor")


def sweep_of(device, points=120, *, noise=0.0, uneven=False, reverse=False, seed=0, **fields):
    random, marks = np.random.default_rng(seed), device.landmarks()
    voltage = np.linspace(-0.1, 1.1, points) * marks.voc
    if uneven:
        voltage = np.sort(voltage + random.uniform(-0.3, 0.3, points) * (voltage[1] - voltage[0]))
    current = device.current(voltage) + noise * marks.jsc * random.standard_normal(points)
    order = slice(None, None, -1 if reverse else 1)
    fields = {"per_area": True, "conditions": Conditions(area=1.0, series_cells=device.series_cells)} | fields
    return Sweep(voltage[order], current[order], direction="reverse" if reverse else "forward", **fields)


# Worst over the devices: Pmp 5e-4 and Voc 1e-4 at 30 points, ten times less at 60.
@pytest.mark.parametrize(("points", "tolerance"), [(30, 1.5e-3), (60, 2e-4), (120, 2e-5), (500, 1e-6)])
@pytest.mark.parametrize("uneven", [False, True])
@pytest.mark.parametrize("name", DEVICES)
def test_exact_curves_are_measured_without_bias(name, points, tolerance, uneven):
    device = DEVICES[name]
    marks, found = device.landmarks(), measure(sweep_of(device, points, uneven=uneven))
    for quantity in ("jsc", "voc", "pmp", "fill_factor"):
        assert getattr(found, quantity).value == pytest.approx(getattr(marks, quantity), rel=tolerance), quantity
    for quantity in ("vmp", "jmp"):
        assert getattr(found, quantity).value == pytest.approx(getattr(marks, quantity), rel=5 * tolerance), quantity


@pytest.mark.parametrize(("points", "noise"), [(40, 1e-3), (100, 1e-2), (250, 1e-3)])
def test_uncertainties_are_the_scatter_of_repeated_measurements(points, noise):
    device = DEVICES["good"]
    marks = device.landmarks()
    pulls = []
    for seed in range(80):
        found = measure(sweep_of(device, points, noise=noise, seed=seed))
        quantities = [getattr(found, name) for name in NAMES]
        pulls.append([(q.value - getattr(marks, n)) / q.uncertainty for n, q in zip(NAMES, quantities, strict=True)])
    pulls = np.array(pulls)
    spread = np.sqrt(np.mean(np.clip(pulls, -5, 5) ** 2, axis=0))
    assert np.all(spread > 0.7), dict(zip(NAMES, spread, strict=True))
    assert np.all(spread < 1.6), dict(zip(NAMES, spread, strict=True))
    coverage = np.mean(np.abs(pulls[:, [0, 1, 4, 5]]) < 1.96, axis=0)  # Jsc, Voc, Pmp, FF
    assert np.all(coverage > 0.85), coverage


def test_slopes_at_the_axes_are_those_of_the_curve():
    device = DEVICES["series"]
    found, marks, step = measure(sweep_of(device, 200)), device.landmarks(), 1e-6
    for quantity, voltage in (("slope_resistance_jsc", 0.0), ("slope_resistance_voc", marks.voc)):
        below, above = device.current([voltage - step, voltage + step])
        assert getattr(found, quantity).value == pytest.approx(2 * step / (below - above), rel=2e-3)


def test_a_plateau_flat_within_noise_has_no_slope_resistance():
    found = measure(sweep_of(dataclasses.replace(DEVICES["good"], shunt_resistance=np.inf), noise=5e-3))
    assert found.slope_resistance_jsc.value is None
    assert "flat" in found.slope_resistance_jsc.reason


def test_both_directions_measure_the_same():
    forward = measure(sweep_of(DEVICES["good"], noise=1e-3, seed=3))
    reverse = measure(sweep_of(DEVICES["good"], noise=1e-3, seed=3, reverse=True))
    for name in NAMES:
        assert getattr(forward, name).value == pytest.approx(getattr(reverse, name).value, rel=1e-9)


def test_efficiency_is_power_over_irradiance():
    conditions = Conditions(area=0.5, irradiance=0.08)
    found = measure(sweep_of(DEVICES["good"], conditions=conditions))
    assert found.efficiency.value == pytest.approx(found.pmp.value / 0.08)
    assert found.efficiency.uncertainty == pytest.approx(found.pmp.uncertainty / 0.08)


def test_efficiency_needs_an_area_and_light():
    no_area = measure(sweep_of(DEVICES["good"], per_area=False, conditions=Conditions()))
    no_light = measure(sweep_of(DEVICES["good"], conditions=Conditions(area=1.0, irradiance=0.0)))
    assert no_area.efficiency == Quantity(reason="no area")
    assert no_light.efficiency == Quantity(reason="no irradiance")
    assert no_area.pmp.value is not None


def test_nothing_is_extrapolated():
    device = DEVICES["good"]
    marks = device.landmarks()

    def between(low, high):
        voltage = np.linspace(low, high, 80)
        return measure(Sweep(voltage, device.current(voltage), per_area=True))

    late = between(0.05, 1.1 * marks.voc)
    assert late.jsc.value is None and late.jsc.reason.startswith("not reached")
    assert late.fill_factor.value is None and late.slope_resistance_jsc.value is None
    assert late.voc.value == pytest.approx(marks.voc, rel=1e-4)
    early = between(-0.05, 0.97 * marks.voc)
    assert early.voc.value is None and early.voc.reason.startswith("not reached")
    assert early.slope_resistance_voc.value is None
    assert early.pmp.value == pytest.approx(marks.pmp, rel=1e-4)
    short = between(-0.05, 0.95 * marks.vmp)
    for name in ("pmp", "vmp", "jmp", "efficiency", "fill_factor"):
        assert getattr(short, name).value is None
        assert getattr(short, name).reason.startswith("not reached")


def test_a_readback_just_beside_zero_volt_counts_as_reached():
    device = DEVICES["good"]
    voltage = np.linspace(0.0002, 1.1, 100)
    assert measure(Sweep(voltage, device.current(voltage))).jsc.value == pytest.approx(device.landmarks().jsc, rel=1e-6)


def test_a_dark_sweep_has_no_power_but_a_slope():
    device = dataclasses.replace(DEVICES["shunted"], photocurrent=0.0)
    voltage = np.linspace(-0.5, 1.0, 151)
    found = measure(Sweep(voltage, device.current(voltage), conditions=Conditions(lit=False, irradiance=0.0)))
    for name in (*NAMES, "efficiency", "slope_resistance_voc"):
        assert getattr(found, name) == Quantity(reason="not defined for a dark sweep")
    assert found.slope_resistance_jsc.value == pytest.approx(152.0, rel=1e-3)


def test_three_points_give_the_axes_without_uncertainty_and_no_power():
    found = measure(Sweep([0.0, 0.6, 0.8], [0.020, 0.018, -0.010]))
    assert found.jsc.value == pytest.approx(0.020)
    assert found.jsc.uncertainty is None and "too few points" in found.jsc.reason
    assert 0.6 < found.voc.value < 0.8
    assert found.pmp.value is None and "too few points" in found.pmp.reason


def test_repeated_voltages_are_averaged():
    sweep = sweep_of(DEVICES["good"], 80)
    doubled = Sweep(np.repeat(sweep.voltage, 2), np.repeat(sweep.current, 2), per_area=True)
    assert measure(doubled).voc.value == pytest.approx(measure(sweep).voc.value, rel=1e-9)


def test_a_published_cell_lies_where_its_best_fit_says():
    """Landmarks of the least-squares curve, recomputed independently; the points scatter by 0.8 mA round it."""
    found = measure(published.cell())
    assert found.jsc.value == pytest.approx(0.760262, abs=1e-3)
    assert found.voc.value == pytest.approx(0.572780, abs=5e-4)
    assert found.pmp.value == pytest.approx(0.310695, abs=8e-4)
    assert found.efficiency.reason == "no area"


def test_a_published_module_does_not_reach_short_circuit():
    found = measure(published.module())  # its first point lies at 0.12 V, not at zero
    assert found.voc.value == pytest.approx(16.777065, abs=0.02)
    assert found.pmp.value == pytest.approx(11.550744, rel=3e-3)


@pytest.mark.parametrize("noise", [1e-4, 1e-3, 1e-2])
def test_noise_level_is_the_noise(noise):
    levels = [noise_level(sweep_of(DEVICES["good"], 150, noise=noise, seed=seed)) for seed in range(30)]
    assert np.median(levels) == pytest.approx(noise * DEVICES["good"].landmarks().jsc, rel=0.1)


def test_noise_level_does_not_heed_an_outlier():
    sweep = sweep_of(DEVICES["good"], 100, noise=1e-3)
    current = sweep.current.copy()
    current[40] *= 3
    assert noise_level(Sweep(sweep.voltage, current)) == pytest.approx(noise_level(sweep), rel=0.2)


def test_noise_level_sees_the_rounding_of_a_file():
    voltage = np.linspace(0.0, 1.0, 100)
    current = np.round(0.02 - 1e-4 * voltage, 5)
    assert noise_level(Sweep(voltage, current)) == pytest.approx(1e-5 / np.sqrt(12), rel=0.7)


def test_metrics_survive_the_way_through_json():
    found = measure(sweep_of(DEVICES["good"], noise=1e-3))
    assert Metrics.from_dict(found.to_dict()) == found


numbers = st.floats(-100, 100, allow_subnormal=False) | st.sampled_from([0.0, 0.1, 0.5, 1.0])


@settings(max_examples=80, deadline=None)
@given(st.integers(0, 12).flatmap(lambda n: st.tuples(*[arrays.arrays(float, n, elements=numbers)] * 2)), st.booleans())
def test_any_points_end_in_numbers_or_reasons(points, lit):
    voltage, current = points
    sweep = Sweep(np.sort(voltage), current, conditions=Conditions(lit=lit))
    assert noise_level(sweep) > 0
    found = measure(sweep)
    for field in dataclasses.fields(Metrics):
        quantity = getattr(found, field.name)
        assert quantity.value is not None or quantity.reason
        assert quantity.value is None or np.isfinite(quantity.value)
