"""Findings: each defect is named, a sound sweep has none, and no sweep makes the checks fail."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from core.checks import Finding, check, check_pair
from core.diode import OneDiode
from core.hysteresis import hysteresis_index
from core.sweep import Conditions, Sweep

CELL = OneDiode(22e-3, 1e-12, 1.6, 3.0, 2000.0)
VOLTAGE = np.linspace(-0.1, 1.05, 116)
KNOWN = frozenset()


def sweep(voltage=VOLTAGE, current=None, model=CELL, *, lit=True, per_area=True, assumed=KNOWN, **conditions):
    current = model.current(voltage) if current is None else current
    light = Conditions(lit=lit, irradiance=0.1 if lit else 0.0, area=0.16 if per_area else None)
    return Sweep(voltage, current, per_area, replace(light, **conditions), assumed=assumed)


def names(findings):
    return {finding.name for finding in findings}


def finding(findings, name) -> Finding:
    [found] = [f for f in findings if f.name == name]
    return found


def noisy(share, seed=1):
    current = CELL.current(VOLTAGE)
    return current + share * 22e-3 * np.random.default_rng(seed).standard_normal(current.size)


@pytest.mark.parametrize("share", [0.0, 1e-4, 1e-3, 5e-3])
@pytest.mark.parametrize("seed", range(5))
def test_a_sound_sweep_has_no_findings(share, seed):
    assert check(sweep(current=noisy(share, seed))) == ()
    backwards = sweep(VOLTAGE[::-1], noisy(share, seed)[::-1])
    assert check(replace(backwards, direction="reverse")) == ()


def test_a_sound_dark_sweep_has_no_findings():
    assert check(sweep(model=replace(CELL, photocurrent=0.0), lit=False)) == ()


@pytest.mark.parametrize("rounded", [2, 3, 4])
def test_rounding_of_a_flat_plateau_is_no_limit(rounded):
    ideal = replace(CELL, shunt_resistance=np.inf, series_resistance=0.0)
    assert "compliance" not in names(check(sweep(current=np.round(1e3 * ideal.current(VOLTAGE), rounded) / 1e3)))


def test_not_reaching_the_axes():
    assert "short circuit" in names(check(sweep(VOLTAGE[VOLTAGE > 0.1])))
    assert "open circuit" in names(check(sweep(VOLTAGE[VOLTAGE < 0.8])))


def test_few_points_and_a_coarse_knee():
    found = check(sweep(np.linspace(-0.1, 1.1, 8)))
    assert {"points", "knee"} <= names(found)
    assert "mV" in finding(found, "knee").what


def test_a_current_limit_in_forward_direction():
    found = check(sweep(current=np.maximum(CELL.current(VOLTAGE), -20e-3), voltage=VOLTAGE))
    assert "compliance" not in names(found)  # it was not reached
    wide = np.linspace(-0.1, 1.3, 141)
    limited = np.maximum(CELL.current(wide), -20e-3)
    assert "-20 mA" in finding(check(sweep(wide, limited)), "compliance").what
    assert "compliance" in names(check(sweep(wide, limited - 1e-6 * np.arange(141) / 141)))


def test_a_current_limit_below_the_photocurrent():
    found = check(sweep(current=np.minimum(CELL.current(VOLTAGE), 15e-3)))
    assert "15 mA" in finding(found, "compliance").what


def test_a_voltage_that_is_held_at_the_end():
    voltage = np.r_[VOLTAGE, [VOLTAGE[-1]] * 3]
    assert "voltage stands still" in finding(check(sweep(voltage)), "compliance").what


def test_noise():
    assert "noise" in names(check(sweep(current=noisy(0.02))))
    assert "noise" not in names(check(sweep(current=noisy(0.005))))


@pytest.mark.parametrize("points", range(3, 24))
def test_the_bend_of_few_points_without_noise_is_not_called_noise(points):
    told = [f for f in check(sweep(np.linspace(-0.1, 1.05, points))) if f.name == "noise"]
    assert [f.severity for f in told] == (["note"] if points < 12 else [])
    assert all("cannot be told" in f.what and "%" not in f.what for f in told)


def test_a_single_jump_is_an_outlier():
    current = CELL.current(VOLTAGE).copy()
    current[40] *= 1.03
    assert "0.3 V" in finding(check(sweep(current=current)), "outliers").what


# d²J/dV² changes sign between 0 and Voc; a lumped diode with Rs and Rsh has no such change (algebra).
@pytest.mark.parametrize("share", [0.0, 2e-3])
def test_s_shape_by_its_bend(share):
    barrier = 22e-3 * (1 - 0.55 / (1 + np.exp(-(VOLTAGE - 0.55) / 0.05))) * (VOLTAGE < 2) - 1e-12 * np.exp(VOLTAGE / 0.0425)
    current = barrier + share * 22e-3 * np.random.default_rng(2).standard_normal(VOLTAGE.size)
    assert "s-shape" in names(check(sweep(current=current)))


@pytest.mark.parametrize("series", [0.0, 3.0, 15.0, 40.0])
@pytest.mark.parametrize("shunt", [60.0, 400.0, 1e5])
def test_resistance_alone_is_no_s_shape(series, shunt):
    assert "s-shape" not in names(check(sweep(np.linspace(-0.1, 1.2, 131), model=replace(CELL, series_resistance=series, shunt_resistance=shunt))))


# A straight line from Jsc to Voc has FF = 1/4 (algebra); below it only an S-shape can go.
def test_s_shape_by_its_fill_factor():
    voltage = np.linspace(0, 1, 12)
    assert "s-shape" in names(check(sweep(voltage, 20e-3 * (1 - voltage) ** 2)))
    assert "s-shape" not in names(check(sweep(voltage, 20e-3 * (1 - voltage))))


@pytest.mark.parametrize(("leak", "word"), [(2e-6, "Stray light"), (-2e-6, "offset")])
def test_current_at_zero_volt_in_the_dark(leak, word):
    dark = replace(CELL, photocurrent=0.0, shunt_resistance=1e5)
    found = check(sweep(current=dark.current(VOLTAGE) + leak, lit=False))
    assert word in finding(found, "dark current at V = 0").meaning


def test_more_current_than_the_sun_gives():
    assert "density" in names(check(sweep(model=replace(CELL, photocurrent=80e-3, series_resistance=0.5))))
    assert "density" not in names(check(sweep(model=replace(CELL, photocurrent=80e-3, series_resistance=0.5), irradiance=0.2)))


def test_more_voltage_than_one_cell_gives():
    module = replace(CELL, series_cells=4, series_resistance=10.0)
    voltage = np.linspace(-0.2, 4.5, 200)
    assert "cells in series" in names(check(sweep(voltage, model=module)))
    assert "cells in series" not in names(check(sweep(voltage, model=module, series_cells=4)))


def test_light_without_photocurrent():
    found = check(sweep(model=replace(CELL, photocurrent=0.0)))
    assert found[0].severity == "stop" and found[0].name == "no photocurrent"


def test_assumed_conditions_and_units():
    found = check(sweep(assumed=frozenset({"temperature", "units"})))
    assert "temperature" in finding(found, "assumed").what
    assert finding(found, "units").severity == "caution"


# Worked example: PCE 13.2 and 11.8 % give 0.10606 (definition from memory).
def test_hysteresis_index_of_a_pair():
    reverse = sweep()
    forward = sweep(current=CELL.current(VOLTAGE) * 11.8 / 13.2)
    assert hysteresis_index(forward, reverse) == pytest.approx(0.10606, abs=1e-5)
    [found] = check_pair(forward, reverse)
    assert found.severity == "caution" and "10.6 %" in found.what and "lower" in found.what
    assert "higher" in check_pair(reverse, forward)[0].what
    assert check_pair(reverse, reverse) == ()


def test_sweeps_under_different_light_are_no_pair():
    assert "different conditions" in check_pair(sweep(), sweep(irradiance=0.05))[0].what


def test_every_finding_is_three_sentences():
    found = [*check(sweep(np.linspace(0.1, 0.5, 5), assumed=frozenset({"units"}))), *check(sweep(current=noisy(0.05)))]
    assert len(found) >= 4
    for one in found:
        assert all(text.endswith(".") and text[0].isupper() for text in (one.what, one.meaning, one.remedy))


@settings(max_examples=200, deadline=None)
@given(
    st.lists(st.tuples(st.floats(), st.floats()), max_size=30) | st.lists(st.tuples(st.floats(-2, 2), st.floats(-1, 1)), max_size=30),
    st.booleans(),
    st.booleans(),
)
@example(points=[(1.7976931348623157e308, 0.0), (-9.9792015476736e291, 0.0)], lit=True, per_area=True)
def test_no_sweep_makes_the_checks_fail(points, lit, per_area):
    wild = sweep(np.array([p[0] for p in points]), np.array([p[1] for p in points]), lit=lit, per_area=per_area)
    assert all(isinstance(f, Finding) for f in check(wild))
    assert all(isinstance(f, Finding) for f in check_pair(wild, sweep()))
