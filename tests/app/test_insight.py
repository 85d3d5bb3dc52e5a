"""What stands beside the fit: settings, correlation, intervals, estimates and derived figures, as text."""

import math
import pickle
from dataclasses import replace

import numpy as np
import pytest

from app import insight, scene
from app.units import ABSOLUTE, DENSITY
from core import steps
from core.derived import derive
from core.estimates import estimates
from core.fit_settings import FitSettings
from core.profile import Interval, profile_intervals
from core.refine import refine
from core.store import History
from core.sweep import Conditions
from tests.app.benches import (
    AMPERES,
    CELL,
    IN_THE_DARK,
    LIT,
    REVERSE,
    WITH_ERRORS,
    bench,
    intervals,
    sweep_of,
)


def settled(sweep, settings=FitSettings()):
    workspace, (entry,) = bench(sweep)
    return steps.apply(workspace, steps.record_refinement(workspace, entry, refine(sweep, settings=settings))), entry


@pytest.fixture(scope="module")
def refined():
    return settled(LIT)


# Settings

def test_the_settings_are_shown_as_they_are_typed():
    workspace, (entry,) = bench(LIT)
    shown = insight.settings_rows(workspace, entry)
    assert shown["left_out"] == "all points used"
    assert (shown["window_low"], shown["window_high"], shown["confidence"], shown["voltage_noise"]) == ("", "", "95", "")
    settings = FitSettings(
        weights="effective", loss="robust", window=(0.2, 0.9), excluded=(30,), confidence=0.9545, voltage_noise=5e-4
    )
    workspace = steps.apply(workspace, steps.set_fit_settings(workspace, entry, settings))
    shown = insight.settings_rows(workspace, entry)
    assert (shown["weights"], shown["loss"], shown["model"]) == ("effective", "robust", "one diode")
    assert (shown["window_low"], shown["window_high"], shown["confidence"], shown["voltage_noise"]) == ("0.2", "0.9", "95.45", "0.5")
    inside = (LIT.voltage >= 0.2) & (LIT.voltage <= 0.9)
    inside[30] = False
    assert shown["left_out"] == f"{np.sum(~inside)} of 56 points left out"


def test_weights_from_the_file_are_offered_where_it_has_them():
    workspace, (bare, stated) = bench(LIT, WITH_ERRORS)
    assert insight.settings_rows(workspace, bare)["weights_without"] == ["from the file"]
    assert insight.settings_rows(workspace, stated)["weights_without"] == []


# Correlation

def test_the_correlation_is_that_of_the_refinement(refined):
    workspace, entry = refined
    shown = insight.correlation_rows(workspace.refined(entry))
    assert shown["names"] == ["Jph", "J0", "n", "Rs", "Rsh"]
    values = np.array(shown["values"])
    np.testing.assert_allclose(values, workspace.refined(entry).correlation, atol=6e-4)
    np.testing.assert_allclose(np.diag(values), 1.0)
    # J0 and n can hardly be told apart by one sweep: a larger n comes with a larger J0.
    assert values[1, 2] > 0.9


def test_a_held_parameter_has_no_place_in_the_correlation():
    workspace, entry = settled(LIT, FitSettings(hold=frozenset({"ideality"})))
    assert insight.correlation_rows(workspace.refined(entry))["names"] == ["Jph", "J0", "Rs", "Rsh"]


def test_nothing_is_correlated_before_refining():
    assert insight.correlation_rows(None) == {"names": [], "values": []}


def test_what_is_not_determined_is_null_and_not_a_number(refined):
    workspace, entry = refined
    found = workspace.refined(entry)
    covariance = found.covariance.copy()
    covariance[4, 4] = math.inf
    values = insight.correlation_rows(replace(found, covariance=covariance))["values"]
    assert values[0][1] is not None and all(value is None or math.isfinite(value) for row in values for value in row)


# Intervals

def test_intervals_hold_the_fitted_value_and_are_core_s(refined):
    workspace, entry = refined
    shown = intervals(workspace, entry)
    assert [row["name"] for row in shown["rows"]] == [
        "photocurrent", "saturation current", "ideality factor", "series resistance", "shunt resistance",
    ]  # fmt: skip
    assert shown["sentence"].startswith("95 % intervals") and "fit noise only" in shown["sentence"]
    found = profile_intervals(LIT, workspace.refined(entry))
    low, high = (float(word) for word in shown["rows"][2]["words"].split(" to "))
    assert (low, high) == pytest.approx((found["ideality"].low, found["ideality"].high), abs=2e-4)
    assert low < workspace.refined(entry).model.ideality < high


def test_a_higher_level_gives_wider_intervals_without_a_new_fit(refined):
    widths = []
    workspace, entry = refined
    for level in (0.68, 0.95, 0.99):
        workspace = steps.apply(workspace, steps.set_fit_settings(workspace, entry, FitSettings(confidence=level)))
        rows = intervals(workspace, entry)
        assert rows["sentence"].startswith(f"{100 * level:.0f} %")
        low, high = (float(word) for word in rows["rows"][2]["words"].split(" to "))
        widths.append(high - low)
    # A normal distribution: 0.99446, 1.95996 and 2.57583 standard errors.
    assert widths[1] / widths[0] == pytest.approx(1.97, rel=0.1)
    assert widths[2] / widths[1] == pytest.approx(1.31, rel=0.1)


def test_what_takes_long_is_told_before_it_is_done_and_travels_to_another_process(refined):
    workspace, entry = refined
    question = insight.interval_question(workspace, entry)
    assert insight.is_quick(question)
    there = pickle.loads(pickle.dumps(question))
    assert insight.interval_rows(*there)["rows"] == intervals(workspace, entry)["rows"]
    free = FitSettings(model="two diodes", hold=frozenset())
    workspace, entry = settled(LIT, free)
    assert not insight.is_quick(insight.interval_question(workspace, entry))
    many = sweep_of(CELL, "many", points=4000)
    workspace, entry = settled(many)
    assert not insight.is_quick(insight.interval_question(workspace, entry))


def test_before_refining_the_panel_says_what_to_do():
    workspace, (entry,) = bench(LIT, models=(CELL,))
    assert intervals(workspace, entry) | {"choice": ""} == {
        "rows": [], "sentence": "Refine to see how well each parameter is known.", "choice": "",
    }  # fmt: skip


@pytest.mark.parametrize(
    ("interval", "bounded", "words"),
    [
        ((4.123, 4.234), (True, True), "4.123 to 4.234 Ω cm²"),
        ((4100.0, math.inf), (True, False), "> 4100 Ω cm²"),
        ((0.0, 0.21), (False, True), "< 0.210 Ω cm²"),
        ((0.0, math.inf), (False, False), "not determined"),
    ],
    ids=["both ends", "at least", "at most", "neither"],
)
def test_an_interval_is_one_sided_where_the_data_only_bound(interval, bounded, words):
    assert insight.interval_words(Interval(*interval, *bounded), DENSITY, "series_resistance") == words


def test_currents_are_in_the_units_of_the_screen():
    density = insight.interval_words(Interval(0.0219, 0.0221, True, True), DENSITY, "photocurrent")
    amperes = insight.interval_words(Interval(0.0219, 0.0221, True, True), ABSOLUTE, "photocurrent")
    assert density == "21.90 to 22.10 mA cm⁻²" and amperes.endswith(" A") and amperes.startswith("0.0219")


# Estimates

def rows_of(workspace, entry):
    return {row["name"]: row for row in insight.estimate_rows(workspace, entry)["rows"]}


def test_each_estimate_names_its_method_and_source_as_core_gives_them():
    workspace, (entry, dark) = bench(LIT, sweep_of(replace(CELL, photocurrent=0.0), "dark", conditions=IN_THE_DARK.conditions), models=(CELL,))
    rows = rows_of(workspace, entry)
    expected = estimates(workspace.sweep(entry), dark=workspace.sweep(dark), levels=(workspace.sweep(entry),), model=CELL)
    assert list(rows) == [e.name for e in expected]
    for estimate in expected:
        row = rows[estimate.name]
        assert estimate.source[1:] in row["method"] and row["method"].endswith(".")
        if estimate.value is None:
            assert row["value"] == "–" and row["note"]
        elif estimate.parameter in ("ideality", "series_resistance"):
            assert float(row["value"].split()[0]) == pytest.approx(estimate.value, rel=5e-3)
            assert float(row["fit"]) == getattr(CELL, estimate.parameter)
    assert {"ideality", "series_resistance"} <= {e.parameter for e in expected if e.value is not None}


def test_the_dark_sweep_of_another_device_does_not_speak_for_this_one():
    workspace, (entry, dark) = bench(LIT, replace(IN_THE_DARK, device="Z"), models=(CELL,))
    assert insight.dark_of(workspace, entry) is None
    assert insight.dark_of(workspace, dark) is None
    assert "a dark sweep of the device would tell which" in insight.estimate_rows(workspace, entry)["plateau"]
    assert not insight.is_shunt(workspace, entry)


def test_a_dark_sweep_of_the_same_slope_makes_it_a_shunt_and_is_said_once():
    voltage = np.linspace(-0.2, 1.1, 66)
    dark = replace(IN_THE_DARK, voltage=voltage, current=replace(CELL, photocurrent=0.0).current(voltage))
    workspace, (entry, _) = bench(LIT, dark, models=(CELL,))
    found = insight.estimate_rows(workspace, entry)
    assert "is a shunt" in found["plateau"] and insight.is_shunt(workspace, entry)
    assert all(row["note"] != found["plateau"] for row in found["rows"])


def test_levels_are_lit_sweeps_of_the_device_in_one_direction():
    half = sweep_of(replace(CELL, photocurrent=0.011), "half", conditions=Conditions(area=0.1, irradiance=0.05))
    workspace, (lit, reverse, dark, low) = bench(LIT, REVERSE, IN_THE_DARK, half)
    assert insight.levels_of(workspace, lit) == (workspace.sweep(lit), workspace.sweep(low))
    assert insight.levels_of(workspace, reverse) == (workspace.sweep(reverse),)


def test_without_area_estimates_are_in_ohms():
    workspace, (entry,) = bench(AMPERES, models=(CELL.scaled(0.1),))
    slope = rows_of(workspace, entry)["slope at Voc"]["value"]
    assert slope.endswith(" Ω")


# Derived figures

def derived_of(workspace, entry):
    return {row["name"]: row["value"] for row in insight.estimate_rows(workspace, entry)["derived"]}


def test_derived_figures_come_from_the_model_and_radiative_efficiency_needs_a_gap():
    workspace, (entry,) = bench(LIT, models=(CELL,))
    shown = derived_of(workspace, entry)
    assert shown["pseudo fill factor"] == f"{100 * derive(CELL).pseudo_fill_factor:.2f} %"
    assert "external radiative efficiency" not in shown
    workspace = steps.apply(workspace, steps.set_band_gap(workspace, entry, 1.6))
    shown = derived_of(workspace, entry)
    expected = 100 * derive(CELL, 1.6).radiative_efficiency
    base, _, power = shown["external radiative efficiency"].removesuffix(" %").partition("·10")
    power = int(power.translate(str.maketrans("⁻⁰¹²³⁴⁵⁶⁷⁸⁹", "-0123456789")) or 0)
    assert float(base) * 10.0**power == pytest.approx(expected, rel=0.05)


@pytest.mark.parametrize("gap", [0.3, 5.0])
def test_a_gap_beyond_the_spectrum_is_told_and_does_not_break_the_panel(gap):
    workspace, (entry,) = bench(LIT, models=(CELL,))
    workspace = steps.apply(workspace, steps.set_band_gap(workspace, entry, gap))
    rows = insight.estimate_rows(workspace, entry)["derived"]
    assert rows and all(row["value"] for row in rows)


def test_nothing_is_derived_without_a_curve_or_in_the_dark():
    workspace, (entry,) = bench(LIT)
    assert insight.estimate_rows(workspace, entry)["derived"] == []
    workspace, (entry,) = bench(IN_THE_DARK, models=(replace(CELL, photocurrent=0.0),))
    found = insight.estimate_rows(workspace, entry)
    assert (found["derived"], found["plateau"]) == ([], "") and found["rows"]


def test_a_closed_panel_costs_nothing(refined):
    workspace, entry = refined

    def parts(**view):
        return scene.scene(workspace, {"active": entry, **view}, History(None, None)).keys()

    assert {"settings", "correlation", "estimates"}.isdisjoint(parts())
    assert {"settings", "correlation"} <= parts(panel="fit") and "estimates" not in parts(panel="fit")
    assert "estimates" in parts(panel="estimates") and "settings" not in parts(panel="estimates")
    assert parts(panel="unknown") == parts()
