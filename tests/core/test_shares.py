"""Shares of the mechanisms, against a separate path: all 120 orders one by one, powers by golden section."""

import math
from dataclasses import replace
from itertools import permutations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import minimize_scalar

from core.comparing import compare, losses
from core.constants import thermal_voltage
from core.detailed_balance import limit, limiting_diode
from core.diode import PARAMETERS, OneDiode
from core.errors import ComparisonRefused, ConditionRefused
from core.metrics import measure
from core.mixtures import coordinates, diode_at, largest_power
from core.models import two_diodes_like
from core.quantity import Quantity
from core.refine import FitSettings, refine
from core.share_sampling import sample_shares
from core.shares import (
    difference_shares,
    ladder,
    loss_shares,
    mechanism_value,
    target,
    what_if,
)
from core.sweep import Conditions, Sweep

VT = thermal_voltage(298.15)


def device(photocurrent=0.022, voltage=1.10, ideality=1.6, series=3.0, shunt=2000.0, **conditions):
    """A diode that alone reaches a voltage at its own photocurrent."""
    slope = ideality * conditions.get("series_cells", 1) * thermal_voltage(conditions.get("temperature", 298.15))
    return OneDiode(photocurrent, photocurrent / math.expm1(voltage / slope), ideality, series, shunt, **conditions)


DEVICE = device()
OTHER = device(0.0235, 1.14, 1.4, 5.0, 700.0)
SILICON = device(0.0395, 0.690, 1.1, 0.9, 8000.0)


def brute_force(first, second):
    """Shares [W cm⁻²] as the mean over all orders; nothing of it comes from the code under test."""
    reference = math.sqrt(first.photocurrent * second.photocurrent)

    def described(model):
        slope = model.ideality * VT
        height = slope * math.log(1 + reference / model.saturation_current)
        return [model.photocurrent, height, model.ideality, model.series_resistance, 1 / model.shunt_resistance]

    ends = described(first), described(second)
    known = {}

    def power(choice):
        if choice not in known:
            photocurrent, height, ideality, resistance, conductance = (ends[bit][i] for i, bit in enumerate(choice))
            slope = ideality * VT
            saturation = reference / (math.exp(height / slope) - 1)

            def lost(junction):
                current = photocurrent - saturation * (math.exp(junction / slope) - 1) - junction * conductance
                return -current * (junction - current * resistance)

            top = slope * math.log(1 + photocurrent / saturation)
            # The power may have a second, lower hump where V < 0; bracket the true one on a grid first.
            grid = np.linspace(0, top, 400)
            best = int(np.argmin([lost(u) for u in grid]))
            window = grid[max(best - 1, 0)], grid[min(best + 1, 399)]
            known[choice] = -minimize_scalar(lost, bounds=window, method="bounded", options={"xatol": 1e-12}).fun
        return known[choice]

    shares = np.zeros(5)
    for order in permutations(range(5)):
        choice = (0,) * 5
        for mechanism in order:
            after = tuple(1 if i == mechanism else bit for i, bit in enumerate(choice))
            shares[mechanism] += (power(after) - power(choice)) / 120
            choice = after
    return shares, power((0,) * 5), power((1,) * 5)


def values(shares):
    return [shares.by_mechanism[name] for name in PARAMETERS]


lab_devices = st.builds(
    device,
    photocurrent=st.floats(1e-4, 0.05),
    voltage=st.floats(0.3, 1.4),
    ideality=st.floats(0.8, 3.0),
    series=st.floats(0.0, 30.0),
    shunt=st.floats(50.0, 1e6) | st.just(math.inf),
)


def test_the_worked_example_of_a_1_60_ev_cell():
    """Computed independently with numpy, scipy and the spectrum of colour-science, to 1e-3 mW cm⁻²."""
    shares = loss_shares(DEVICE, 1.60)
    assert 1e3 * shares.start == pytest.approx(30.594, abs=1e-3)
    assert 1e3 * shares.end == pytest.approx(18.696, abs=1e-3)
    assert 1e3 * np.array(values(shares)) == pytest.approx([-3.577, -4.978, -1.208, -1.561, -0.575], abs=1e-3)


@pytest.mark.parametrize(
    ("first", "second"),
    [
        (DEVICE, OTHER),
        (SILICON, device(0.031, 0.55, 1.9, 4.0, 300.0)),
        (limiting_diode(1.12), SILICON),
        (device(2e-4, 0.9, 2.0, 0.0, 1e5), device(5e-3, 1.0, 1.2, 40.0, math.inf)),
    ],
    ids=["two of one kind", "good and poor", "limit and device", "dim and bright"],
)
def test_shares_agree_with_brute_force_over_all_orders(first, second):
    expected, start, end = brute_force(first, second)
    shares = difference_shares(first, second)
    assert (shares.start, shares.end) == pytest.approx((start, end), rel=1e-10)
    assert values(shares) == pytest.approx(expected, abs=1e-9 * max(start, end))


@given(lab_devices, lab_devices)
@settings(max_examples=60, deadline=None)
def test_shares_add_up_to_the_difference_and_change_sign_when_swapped(first, second):
    shares = difference_shares(first, second)
    scale = max(shares.start, shares.end)
    assert sum(values(shares)) == pytest.approx(first_to_second(first, second), abs=1e-9 * scale)
    assert values(shares) == pytest.approx([-share for share in values(difference_shares(second, first))], abs=1e-11 * scale)


def first_to_second(first, second):
    return second.landmarks().pmp - first.landmarks().pmp


@given(lab_devices, st.floats(0.05, 20.0))
@settings(max_examples=40, deadline=None)
def test_dimming_alone_is_booked_on_the_photocurrent_alone(model, factor):
    dimmed = replace(model, photocurrent=model.photocurrent * factor)
    shares = difference_shares(model, dimmed)
    assert shares.by_mechanism["photocurrent"] == pytest.approx(shares.difference, rel=1e-9)
    for name in PARAMETERS[1:]:
        assert abs(shares.by_mechanism[name]) <= 1e-12 * max(shares.start, shares.end)


@given(lab_devices)
@settings(max_examples=40, deadline=None)
def test_the_power_of_many_states_is_that_of_each_curve(model):
    power = largest_power(coordinates(model, 0.02), 0.02, VT)
    assert power == pytest.approx(model.landmarks().pmp, rel=1e-9)


def test_coordinates_lead_back_to_the_state():
    back = diode_at(coordinates(DEVICE, 0.03), 0.03, DEVICE)
    for name in PARAMETERS:
        assert getattr(back, name) == pytest.approx(getattr(DEVICE, name), rel=1e-9)
    assert math.isinf(diode_at(coordinates(limiting_diode(1.6), 0.03), 0.03, DEVICE).shunt_resistance)


def test_a_ladder_adds_up_in_any_order_and_its_mean_over_all_orders_is_the_share():
    shares = difference_shares(DEVICE, OTHER)
    ladders = [ladder(DEVICE, OTHER, order) for order in permutations(PARAMETERS)]
    for contributions in ladders:
        assert sum(contributions.values()) == pytest.approx(shares.difference, rel=1e-12)
    for name in PARAMETERS:
        mean = sum(contributions[name] for contributions in ladders) / len(ladders)
        assert mean == pytest.approx(shares.by_mechanism[name], rel=1e-9)
    spread = [contributions["series_resistance"] for contributions in ladders]
    assert max(spread) - min(spread) > 1e-5  # the ladder, unlike the share, depends on the order
    assert list(ladders[7]) == list(list(permutations(PARAMETERS))[7])


def test_a_ladder_that_leaves_a_mechanism_out_is_refused():
    with pytest.raises(ComparisonRefused, match="each of the five"):
        ladder(DEVICE, OTHER, PARAMETERS[:4])


def test_measured_powers_leave_a_residual_that_completes_the_sum():
    shares = difference_shares(DEVICE, OTHER, measured_power_a=0.0185, measured_power_b=0.0195)
    assert shares.difference == pytest.approx(0.001)
    assert sum(values(shares)) + shares.residual == pytest.approx(shares.difference, abs=1e-15)
    assert difference_shares(DEVICE, OTHER).residual is None


# Resistances and fill factor: common practice, no source.
def test_a_moderate_series_resistance_costs_fill_factor_and_leaves_jsc_and_voc():
    before, after = DEVICE.landmarks(), replace(DEVICE, series_resistance=6.0).landmarks()
    assert after.jsc == pytest.approx(before.jsc, rel=2e-3)
    assert after.voc == before.voc
    assert after.fill_factor < before.fill_factor - 0.03


def test_a_moderate_shunt_costs_fill_factor_and_leaves_jsc_and_voc():
    before, after = DEVICE.landmarks(), replace(DEVICE, shunt_resistance=500.0).landmarks()
    assert after.jsc == pytest.approx(before.jsc, rel=5e-3)
    assert after.voc == pytest.approx(before.voc, rel=5e-3)
    assert after.fill_factor < before.fill_factor - 0.03


def test_jsc_suffers_when_the_series_resistance_is_very_large():
    poor = replace(DEVICE, series_resistance=80.0)
    assert poor.landmarks().jsc < 0.7 * DEVICE.landmarks().jsc
    shares = difference_shares(DEVICE, poor)
    assert shares.by_mechanism["series_resistance"] == pytest.approx(shares.difference, rel=1e-9)
    assert shares.by_mechanism["photocurrent"] == pytest.approx(0.0, abs=1e-12)  # Jsc falls, the photocurrent does not


# Fill factors: common practice; the first two figures recomputed.
def test_a_good_diode_has_a_fill_factor_of_about_0_85():
    for normalised, fill_factor in ((25, 0.83656), (28, None), (30, 0.85718)):
        found = device(voltage=normalised * VT, ideality=1.0, series=0.0, shunt=math.inf).landmarks().fill_factor
        assert found == pytest.approx(0.85, abs=0.015)
        assert fill_factor is None or found == pytest.approx(fill_factor, abs=1e-5)


def test_a_straight_line_has_a_fill_factor_of_a_quarter():
    shunted = replace(DEVICE, series_resistance=0.0, shunt_resistance=5.0)
    assert shunted.landmarks().fill_factor == pytest.approx(0.25, abs=1e-4)
    resistive = replace(DEVICE, series_resistance=2000.0)
    assert resistive.landmarks().fill_factor == pytest.approx(0.25, abs=0.005)


@pytest.mark.parametrize("name", PARAMETERS)
def test_a_mechanism_that_alone_differs_carries_the_whole_difference(name):
    # At one photocurrent, so that the reference photocurrent is the same for both comparisons.
    other = OTHER if name == "photocurrent" else replace(OTHER, photocurrent=DEVICE.photocurrent)
    shares = difference_shares(DEVICE, what_if(DEVICE, other, {name}))
    assert shares.by_mechanism[name] == pytest.approx(shares.difference, rel=1e-6)


def test_what_if_moves_from_one_model_to_the_other():
    assert what_if(DEVICE, OTHER, set()) == DEVICE
    whole = what_if(DEVICE, OTHER, PARAMETERS)
    for name in PARAMETERS:
        assert getattr(whole, name) == pytest.approx(getattr(OTHER, name), rel=1e-9)
    powers = [what_if(DEVICE, OTHER, {"series_resistance"}, part).landmarks().pmp for part in (0.0, 0.3, 0.6, 1.0)]
    assert powers[0] == pytest.approx(DEVICE.landmarks().pmp, rel=1e-9)
    assert powers == sorted(powers, reverse=True)
    assert what_if(DEVICE, OTHER, {"ideality"}, 7.0) == what_if(DEVICE, OTHER, {"ideality"}, 1.0)


def test_half_of_the_voltage_is_the_geometric_middle_of_the_saturation_currents():
    other = replace(DEVICE, saturation_current=DEVICE.saturation_current / 100)
    middle = what_if(DEVICE, other, {"saturation_current"}, 0.5)
    assert middle.saturation_current == pytest.approx(DEVICE.saturation_current / 10, rel=1e-9)


def test_what_if_follows_the_ladder():
    order = ("saturation_current", "series_resistance", "photocurrent", "shunt_resistance", "ideality")
    steps = ladder(DEVICE, OTHER, order)
    changed, power = set(), DEVICE.landmarks().pmp
    for name in order:
        changed.add(name)
        power += steps[name]
        assert what_if(DEVICE, OTHER, changed).landmarks().pmp == pytest.approx(power, rel=1e-9)


@pytest.mark.parametrize("name", PARAMETERS)
def test_a_target_at_its_present_value_changes_nothing(name):
    same = target(DEVICE, name, mechanism_value(DEVICE, name))
    for parameter in PARAMETERS:
        assert getattr(same, parameter) == pytest.approx(getattr(DEVICE, parameter), rel=1e-9)


def test_targets_move_their_mechanism_alone():
    assert mechanism_value(DEVICE, "saturation_current") == pytest.approx(1.10, abs=1e-12)
    higher = target(DEVICE, "saturation_current", 1.15)
    assert mechanism_value(higher, "saturation_current") == pytest.approx(1.15, abs=1e-9)
    steeper = target(DEVICE, "ideality", 1.0)
    assert mechanism_value(steeper, "saturation_current") == pytest.approx(1.10, abs=1e-9)
    assert math.isinf(target(DEVICE, "shunt_resistance", math.inf).shunt_resistance)
    assert target(DEVICE, "series_resistance", 0.0).landmarks().pmp > DEVICE.landmarks().pmp


@pytest.mark.parametrize(
    ("name", "value"),
    [("photocurrent", 0.0), ("ideality", -1.0), ("series_resistance", -1.0), ("shunt_resistance", 0.0), ("ideality", math.nan),
     ("photocurrent", math.inf), ("saturation_current", 0.0), ("colour", 1.0)],
)  # fmt: skip
def test_impossible_targets_are_refused(name, value):
    with pytest.raises(ComparisonRefused):
        target(DEVICE, name, value)


def test_unequal_models_are_refused_with_a_sentence():
    with pytest.raises(ComparisonRefused, match="25.0 and 35.0 °C"):
        difference_shares(DEVICE, device(temperature=308.15))
    with pytest.raises(ComparisonRefused, match="1 and the other 4 cells"):
        difference_shares(DEVICE, device(voltage=4.4, series_cells=4))
    with pytest.raises(ComparisonRefused, match="no photocurrent"):
        difference_shares(DEVICE, replace(DEVICE, photocurrent=0.0))


def test_temperatures_within_a_tenth_of_a_kelvin_count_as_equal():
    shares = difference_shares(DEVICE, DEVICE.at(temperature=298.2))
    assert values(shares) == pytest.approx([0.0] * 5, abs=1e-12)


def test_strings_of_one_length_are_compared_but_have_no_limit():
    first, second = device(voltage=4.4, series_cells=4), device(voltage=4.5, series_cells=4)
    shares = difference_shares(first, second)
    assert shares.by_mechanism["saturation_current"] == pytest.approx(first_to_second(first, second), rel=1e-9)
    with pytest.raises(ComparisonRefused, match="4 cells in series"):
        loss_shares(first, 1.6)


def test_losses_at_another_temperature_than_the_models_are_refused():
    with pytest.raises(ComparisonRefused, match="temperatures differ"):
        loss_shares(DEVICE, 1.6, temperature=320.0)
    with pytest.raises(ConditionRefused, match="outside the AM1.5G table"):
        loss_shares(DEVICE, 16.0)


def test_losses_follow_irradiance_and_emission():
    dim = replace(DEVICE, photocurrent=0.011)
    assert loss_shares(dim, 1.6, irradiance=0.05).start == pytest.approx(limit(1.6, irradiance=0.05).pmp, rel=1e-12)
    assert loss_shares(DEVICE, 1.6, emission="both").start == pytest.approx(0.030150, abs=1e-6)


def swept(model, seed, *, noise=2e-5, name="", **conditions):
    voltage = np.arange(-0.1, 1.2, 0.01)
    current = model.current(voltage) + np.random.default_rng(seed).normal(0, noise, voltage.size)
    return Sweep(voltage, current, per_area=True, read_as="density", name=name, conditions=Conditions(**conditions))


@pytest.fixture(scope="module")
def pair():
    sweeps = swept(DEVICE, 1, name="K1"), swept(OTHER, 2, name="K2")
    return sweeps, tuple(refine(sweep) for sweep in sweeps)


def test_two_refined_sweeps_explain_their_measured_difference(pair):
    (first, second), (fit_a, fit_b) = pair
    shares = compare(first, fit_a, second, fit_b)
    assert shares.start == measure(first).pmp.value
    assert sum(values(shares)) + shares.residual == pytest.approx(shares.difference, abs=1e-15)
    truth = difference_shares(DEVICE, OTHER)
    for name in PARAMETERS:
        low, high = shares.intervals[name]
        assert low <= shares.by_mechanism[name] <= high
        assert low - (high - low) < truth.by_mechanism[name] < high + (high - low)


def test_losses_of_a_refined_sweep_have_intervals(pair):
    (first, _), (fit, _) = pair
    shares = losses(first, fit, 1.6)
    assert shares.start == pytest.approx(limit(1.6).pmp, rel=1e-12)
    assert set(shares.intervals) == set(PARAMETERS)
    assert all(low < high < 0 for low, high in shares.intervals.values())


def test_models_placed_by_eye_have_no_intervals_and_say_so(pair):
    (first, second), (fit, _) = pair
    assert "no intervals" in compare(first, fit, second, OTHER).reason
    assert "no intervals" in losses(first, DEVICE, 1.6).reason
    assert "by eye" in sample_shares(DEVICE, OTHER).reason


def test_intervals_agree_with_fits_of_sweeps_measured_anew(pair):
    """Twenty pairs of sweeps with fresh noise, refined anew: their spread is what the intervals claim."""
    _, fits = pair
    claimed = sample_shares(*fits).intervals
    again = np.array(
        [
            values(difference_shares(refine(swept(DEVICE, 10 + k)).model, refine(swept(OTHER, 60 + k)).model))
            for k in range(20)
        ]
    )
    for index, name in enumerate(PARAMETERS):
        low, high = claimed[name]
        # Standard deviation of twenty: within a factor 1.6 of the truth in 99 of 100 cases.
        assert 0.6 < (high - low) / 3.92 / np.std(again[:, index], ddof=1) < 1.7


def test_intervals_are_the_same_for_the_same_seed(pair):
    _, fits = pair
    assert sample_shares(*fits, seed=3) == sample_shares(*fits, seed=3)
    assert sample_shares(*fits, seed=3) != sample_shares(*fits, seed=4)


def test_draws_keep_to_bounds_and_an_interval_holds_its_share(pair):
    """A fit whose shunt sits at infinity: the shunt's share can only be negative."""
    ideal = device(shunt=math.inf)
    fit = refine(swept(ideal, 5))
    fit = replace(fit, model=replace(fit.model, shunt_resistance=math.inf))
    low, high = sample_shares(limiting_diode(1.6), fit).intervals["shunt_resistance"]
    assert low < 0 and high == pytest.approx(0.0, abs=1e-15)


def test_held_parameters_are_not_drawn():
    settings_ = FitSettings(hold=frozenset({"series_resistance"}))
    sweep = swept(DEVICE, 8)
    fit = refine(sweep, start=DEVICE, settings=settings_)
    free = refine(sweep)
    width = {}
    for label, state in (("held", fit), ("free", free)):
        low, high = sample_shares(limiting_diode(1.6), state).intervals["series_resistance"]
        width[label] = high - low
    assert width["held"] < 0.5 * width["free"]


def test_an_open_parameter_leaves_no_intervals(pair):
    _, (fit, other) = pair
    covariance = np.array(fit.covariance)
    covariance[4, :] = covariance[:, 4] = 0.0
    covariance[4, 4] = math.inf
    sampled = sample_shares(replace(fit, covariance=covariance), other)
    assert sampled.intervals == {}
    assert "shunt resistance" in sampled.reason


@pytest.mark.parametrize(
    ("changes", "sentence"),
    [
        ({"temperature": 308.15}, "equal temperatures"),
        ({"irradiance": 0.08}, "under 800 W m⁻²"),
        ({"lit": False, "irradiance": 0.0}, "dark sweep"),
        ({"series_cells": 3}, "cells in series"),
    ],
)
def test_sweeps_of_unequal_conditions_are_refused_with_a_sentence(pair, changes, sentence):
    (first, second), (fit_a, fit_b) = pair
    changed = second.under(replace(second.conditions, **changes))
    with pytest.raises(ComparisonRefused, match=sentence):
        compare(first, fit_a, changed, fit_b)


def test_sweeps_without_an_area_are_refused_with_a_sentence(pair):
    (first, second), (fit_a, fit_b) = pair
    bare = replace(second, per_area=False, read_as="current")
    with pytest.raises(ComparisonRefused, match="area of “K2” is not known"):
        compare(first, fit_a, bare, fit_b)
    with pytest.raises(ComparisonRefused, match="Give the area"):
        losses(bare, fit_b, 1.6)


def test_two_diodes_are_compared_through_one_and_the_shares_say_so(pair):
    (first, second), (fit_a, fit_b) = pair
    shares = compare(first, two_diodes_like(fit_a.model), second, fit_b)
    assert values(shares) == pytest.approx(values(compare(first, fit_a, second, fit_b)), abs=1e-7)
    assert shares.notes == ("“K1” has a two-diode model and is compared through a one-diode fit made alongside.",)
    assert losses(first, fit_a, 1.6).notes == ()
    assert len(losses(first, two_diodes_like(fit_a.model), 1.6).notes) == 1


def test_a_corrected_temperature_moves_the_limit_and_rescales_ideality_alone(pair):
    (first, _), (fit, _) = pair
    warmer = first.under(replace(first.conditions, temperature=310.0))
    shares = losses(warmer, fit, 1.6)
    assert shares.start == pytest.approx(limit(1.6, 310.0).pmp, rel=1e-12)
    assert set(shares.intervals) == set(PARAMETERS)
    assert shares.residual == pytest.approx(losses(first, fit, 1.6).residual, abs=1e-9)


def test_without_a_measured_power_on_both_sides_the_models_are_explained(pair):
    (first, second), (fit_a, fit_b) = pair
    lost = replace(measure(second), pmp=Quantity(reason="too few points at the maximum"))
    shares = compare(first, fit_a, second, fit_b, metrics_b=lost)
    assert shares.residual is None
    assert shares.start == pytest.approx(fit_a.model.landmarks().pmp, rel=1e-9)


def test_swapped_shares_are_those_of_the_other_direction(pair):
    (first, second), (fit_a, fit_b) = pair
    there, back = compare(first, fit_a, second, fit_b), compare(second, fit_b, first, fit_a)
    assert values(there.swapped()) == pytest.approx(values(back), abs=1e-14)
    assert there.swapped().residual == pytest.approx(back.residual, abs=1e-14)
    assert there.swapped().swapped() == there
