"""The one-diode curve against the same equation solved with 100 decimal digits."""

import json
import math

import mpmath
import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from core.diode import PARAMETERS, OneDiode
from core.two_diode import TwoDiode

CELL = OneDiode(0.022, 1e-12, 1.6, 3.0, 2000.0)
EPSILON = np.finfo(float).eps
REFERENCE_NOISE = 1e-35  # the reference's own rounding near J = 0, V = 0


@pytest.fixture(autouse=True)
def many_digits():
    with mpmath.workdps(100):
        yield


def reference_junction(model, voltage):
    """u of d·u + Rs·J0·(exp(u/m) − 1) = V + Rs·Jph by Lambert's W, whose argument cannot overflow here."""
    photocurrent, saturation, _, resistance, shunt = (mpmath.mpf(getattr(model, name)) for name in PARAMETERS)
    slope = mpmath.mpf(model.slope_voltage)
    divider = 1 + resistance / shunt
    undrawn = (mpmath.mpf(float(voltage)) + resistance * (photocurrent + saturation)) / divider
    if resistance == 0:
        return undrawn
    drop = resistance * saturation / (divider * slope)
    return undrawn - slope * mpmath.lambertw(drop * mpmath.exp(undrawn / slope)).real


def reference_current(model, voltage):
    junction = reference_junction(model, voltage)
    diode = mpmath.mpf(model.saturation_current) * mpmath.expm1(junction / mpmath.mpf(model.slope_voltage))
    return mpmath.mpf(model.photocurrent) - diode - junction / mpmath.mpf(model.shunt_resistance)


def reference_voltage(model, current):
    current, slope = mpmath.mpf(float(current)), mpmath.mpf(model.slope_voltage)
    saturation = mpmath.mpf(model.saturation_current)
    lost = mpmath.mpf(model.photocurrent) - current
    if math.isinf(model.shunt_resistance):
        junction = slope * mpmath.log1p(lost / saturation)
    else:
        shunt = mpmath.mpf(model.shunt_resistance)
        undrawn = (lost + saturation) * shunt
        junction = undrawn - slope * mpmath.lambertw(saturation * shunt / slope * mpmath.exp(undrawn / slope)).real
    return junction - current * mpmath.mpf(model.series_resistance)


def decades(low, high):
    return st.floats(low, high).map(lambda exponent: 10.0**exponent)


models = st.builds(
    OneDiode,
    photocurrent=st.just(0.0) | decades(-12, 2),
    saturation_current=decades(-30, -2),
    ideality=st.floats(0.5, 5.0),
    series_resistance=st.just(0.0) | decades(-12, -6) | decades(-3, 4),
    shunt_resistance=st.just(math.inf) | decades(-2, 12),
    series_cells=st.sampled_from([1, 3, 72]),
    temperature=st.floats(240.0, 400.0),
)
# In units of the slope voltage: from far in reverse to far beyond Voc, and close to zero.
reduced_voltages = st.floats(-600.0, 600.0) | decades(-15, 0) | decades(-15, 0).map(lambda value: -value)


@settings(max_examples=400, deadline=None)
@given(models, reduced_voltages)
@example(CELL, 0.0)
@example(OneDiode(0.0, 1e-2, 1.0, 1e4, 1e2), 1e-15)
@example(OneDiode(1e-12, 1e-2, 1.0, 1e4, 1e2), 0.0)
@example(OneDiode(0.022, 1e-30, 1.0, 1e-9, math.inf, temperature=240.0), 600.0)
def test_current_is_exact(model, reduced_voltage):
    voltage = reduced_voltage * model.slope_voltage
    expected = reference_current(model, voltage)
    error = abs(mpmath.mpf(float(model.current(voltage))) - expected)
    assert error <= 1e-10 * max(abs(expected), model.photocurrent) + REFERENCE_NOISE


@settings(max_examples=400, deadline=None)
@given(models, st.floats(-5.0, 5.0) | decades(-15, 0) | decades(0, 6).map(lambda value: -value))
@example(OneDiode(0.022, 1e-12, 1.6, 3.0, 1e15), 0.5)
@example(OneDiode(0.0, 1e-6, 1.6, 3.0, 1e3), -1e-12)
def test_voltage_is_exact(model, reduced_current):
    current = reduced_current * (model.photocurrent or model.saturation_current)
    voltage = float(model.voltage(current))
    if math.isnan(voltage):
        assert math.isinf(model.shunt_resistance)
        assert current >= (model.photocurrent + model.saturation_current) * (1 - 4 * EPSILON)
        return
    expected = reference_voltage(model, current)
    # Where the curve is flat, the last digit of Jph − J alone moves the voltage.
    junction = float(expected) + current * model.series_resistance
    growth = math.exp(min(junction / model.slope_voltage, 700.0))
    conductance = model.saturation_current * growth / model.slope_voltage + 1 / model.shunt_resistance
    last_digit = 4 * EPSILON * max(abs(current), model.photocurrent) / conductance if conductance else math.inf
    rounding = 4 * EPSILON * abs(current * model.series_resistance)
    assert abs(mpmath.mpf(voltage) - expected) <= 1e-10 * abs(expected) + last_digit + rounding + REFERENCE_NOISE


def test_no_voltage_gives_more_than_photocurrent_and_saturation_current_without_shunt():
    model = OneDiode(0.02, 1e-3, 1.0, 1.0, math.inf)
    assert np.isnan(model.voltage([0.0209, 0.021, 0.022])).tolist() == [False, True, True]


@pytest.mark.parametrize(
    "model",
    [
        OneDiode(0.022, 1e-12, 1.6, 0.0, math.inf),
        OneDiode(0.0, 1e-12, 1.6, 0.0, 1e3),
        OneDiode(0.022, 1e-12, 1.6, 1e-9, 1e3),
        OneDiode(0.0, 1e-30, 1.6, 1e-9, math.inf, temperature=240.0),
    ],
)
def test_absurd_voltages_give_a_number_without_a_warning(model):
    assert np.isfinite(model.current([-1e6, -30.0, 0.0, 30.0, 1e6])).all()


def test_dark_current_is_zero_at_zero_voltage():
    for resistance in (0.0, 1e-9, 10.0):
        assert OneDiode(0.0, 1e-3, 1.5, resistance, 50.0).current(0.0) == 0.0


def test_scalars_and_any_shape_are_taken():
    assert np.ndim(CELL.current(0.5)) == 0
    assert CELL.current([[0.1, 0.2], [0.3, 0.4]]).shape == (2, 2)
    assert CELL.current([]).shape == (0,)
    assert CELL.voltage([0.01, 0.02]).shape == (2,)
    assert CELL.jacobian([0.1, 0.2, 0.3]).shape == (3, 5)


@settings(max_examples=40, deadline=None)
@given(models, st.floats(-30.0, 60.0))
@example(CELL, 37.0)
@example(OneDiode(0.0, 1e-9, 1.5, 0.0, math.inf), 20.0)
def test_jacobian_agrees_with_differences_at_a_hundred_digits(model, reduced_voltage):
    voltage = reduced_voltage * model.slope_voltage
    current, jacobian = model.current_and_jacobian([voltage])
    assert current[0] == model.current([voltage])[0]
    values = [
        mpmath.mpf(model.photocurrent),
        mpmath.log(model.saturation_current),
        mpmath.mpf(model.ideality),
        mpmath.mpf(model.series_resistance),
        1 / mpmath.mpf(model.shunt_resistance),
    ]
    slope_of_one = mpmath.mpf(model.slope_voltage) / values[2]

    def solve(photocurrent, log_saturation, ideality, resistance, conductance):
        slope, saturation = ideality * slope_of_one, mpmath.exp(log_saturation)
        divider = 1 + resistance * conductance
        undrawn = (voltage + resistance * (photocurrent + saturation)) / divider
        drop = resistance * saturation / (divider * slope)
        lambert = mpmath.lambertw(drop * mpmath.exp(undrawn / slope)).real if resistance else mpmath.mpf(0)
        junction = undrawn - slope * lambert
        return photocurrent - saturation * mpmath.expm1(junction / slope) - junction * conductance

    # Beside its own size each column may be off by 1e-10 of what saturation alone makes it.
    largest = model.photocurrent + model.saturation_current
    floors = [0.0, largest, largest, abs(current[0]) * model.saturation_current / model.slope_voltage, 0.0]
    for column in range(5):
        # A central difference is wrong by the step squared and by the reference's rounding over the step: both tiny.
        step = mpmath.mpf(10) ** -50 * (abs(values[column]) or 1)
        up, down = list(values), list(values)
        up[column] += step
        down[column] -= step
        expected = (solve(*up) - solve(*down)) / (2 * step)
        floor = floors[column]
        error = abs(jacobian[0, column] - expected)
        assert error <= 1e-10 * (abs(expected) + floor) + REFERENCE_NOISE, PARAMETERS[column]


@settings(max_examples=30, deadline=None)
@given(models.filter(lambda model: model.photocurrent > 0))
@example(CELL)
def test_landmarks_are_exact(model):
    found = model.landmarks()
    slope, shunt = mpmath.mpf(model.slope_voltage), mpmath.mpf(model.shunt_resistance)
    resistance, saturation = mpmath.mpf(model.series_resistance), mpmath.mpf(model.saturation_current)

    def power_slope(junction):
        current = model.photocurrent - saturation * mpmath.expm1(junction / slope) - junction / shunt
        steepness = saturation * mpmath.exp(junction / slope) / slope + 1 / shunt
        return current - steepness * (junction - 2 * current * resistance)

    jsc, voc = reference_current(model, 0.0), reference_voltage(model, 0.0)
    assert found.jsc == pytest.approx(float(jsc), rel=1e-12, abs=1e-14 * model.photocurrent)
    assert found.voc == pytest.approx(float(voc), rel=1e-12)
    low, high = jsc * resistance, voc
    for _ in range(100):
        middle = (low + high) / 2
        low, high = (middle, high) if power_slope(middle) > 0 else (low, middle)
    junction = low
    current = model.photocurrent - saturation * mpmath.expm1(junction / slope) - junction / shunt
    power = current * (junction - current * resistance)
    assert found.pmp == pytest.approx(float(power), rel=1e-11)
    assert found.vmp == pytest.approx(float(junction - current * resistance), rel=1e-11)
    assert found.jmp * found.vmp == found.pmp
    assert found.fill_factor == pytest.approx(found.pmp / (found.jsc * found.voc), rel=1e-12)


# M. A. Green, Solid-State Electron. 24 (1981) 788, cited from memory: the empirical fill factor of a cell
# without losses, v_oc in units of n·k·T/q. The expression itself is approximate; the largest gap is at v_oc = 10.
@pytest.mark.parametrize("v_oc", [10, 15, 20, 30, 40])
def test_fill_factor_agrees_with_green_1981(v_oc):
    lossless = OneDiode(0.03 * math.expm1(v_oc) / math.exp(v_oc), 0.03 * math.exp(-v_oc), 1.0, 0.0, math.inf)
    published = (v_oc - math.log(v_oc + 0.72)) / (v_oc + 1)
    assert lossless.landmarks().fill_factor == pytest.approx(published, abs=2e-4)


def test_dark_has_no_landmarks():
    found = OneDiode(0.0, 1e-12, 1.6, 3.0, 2000.0).landmarks()
    assert all(math.isnan(getattr(found, name)) for name in ("jsc", "voc", "jmp", "vmp", "pmp", "fill_factor"))


def test_scaling_multiplies_the_current():
    voltage = np.linspace(-0.5, 1.2, 40)
    np.testing.assert_allclose(CELL.scaled(0.25).current(voltage), 0.25 * CELL.current(voltage), rtol=1e-11)
    assert OneDiode(1e-2, 1e-9, 1.0, 0.0, math.inf).scaled(2.0).shunt_resistance == math.inf


def test_a_corrected_temperature_or_number_of_cells_leaves_the_curve():
    voltage = np.linspace(-0.5, 1.2, 40)
    corrected = CELL.at(temperature=330.0, series_cells=4)
    assert (corrected.temperature, corrected.series_cells) == (330.0, 4)
    assert corrected.ideality == pytest.approx(1.6 * 298.15 / (4 * 330.0), rel=1e-14)
    np.testing.assert_allclose(corrected.current(voltage), CELL.current(voltage), rtol=1e-11, atol=1e-14)


@pytest.mark.parametrize("shunt", [2000.0, math.inf])
def test_json_gives_the_same_model_back(shunt):
    model = OneDiode(0.022, np.float64(1e-12), 1.6, 3.0, shunt, series_cells=3, temperature=310.0)
    text = json.dumps(model.to_dict(), allow_nan=False)
    assert OneDiode.from_dict(json.loads(text)) == model


@settings(max_examples=300, deadline=None)
@given(
    photocurrent=st.floats(-15, 6),
    saturation=st.floats(-200, 6),
    ideality=st.floats(-1, 3),
    series=st.none() | st.floats(-9, 9),
    shunt=st.none() | st.floats(-6, 15),
    second=st.none() | st.floats(-200, 6),
)
@example(photocurrent=6.0, saturation=-200.0, ideality=-1.0, series=9.0, shunt=None, second=-200.0)
def test_landmarks_of_whatever_the_dials_take_are_told_and_never_raise(photocurrent, saturation, ideality, series, shunt, second):
    common = {"series_resistance": 0.0 if series is None else 10**series, "shunt_resistance": math.inf if shunt is None else 10**shunt}
    model = OneDiode(10**photocurrent, 10**saturation, 10**ideality, **common)
    assert model.landmarks().jsc <= model.photocurrent * (1 + 1e-9)
    two = TwoDiode(10**photocurrent, 10**saturation, 0.0 if second is None else 10**second, **common)
    assert two.landmarks().jsc <= two.photocurrent * (1 + 1e-9)
