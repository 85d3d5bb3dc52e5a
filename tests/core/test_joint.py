"""Joint fits: what sweeps share is known better, and a disagreement is said."""

import dataclasses
import json
import math

import lmfit
import numpy as np
import pytest
from scipy.optimize import brentq, least_squares, minimize_scalar
from scipy.stats import t as student

from core.diode import OneDiode
from core.errors import FitFailed
from core.fit_settings import FitSettings
from core.joint import refine_together, usually_shared
from core.profile import profile_curve, profile_intervals
from core.refine import Refinement, refine
from core.sweep import Conditions, Sweep
from core.two_diode import TwoDiode

CELL = OneDiode(0.022, 1e-12, 1.6, 3.0, 2000.0)
DIODE = ("saturation_current", "ideality", "series_resistance")


def lit(device=CELL, level=1.0, noise=1e-3, seed=0, points=80, **conditions):
    device = dataclasses.replace(device, photocurrent=device.photocurrent * level)
    marks = device.landmarks()
    voltage = np.linspace(-0.05, 1.06, points) * marks.voc
    current = device.current(voltage) + noise * marks.jsc * np.random.default_rng(seed).standard_normal(points)
    return Sweep(voltage, current, per_area=True, conditions=Conditions(area=1.0, irradiance=0.1 * level, **conditions))


def dark(device=CELL, seed=9):
    device = dataclasses.replace(device, photocurrent=0.0)
    voltage, random = np.linspace(-0.3, 1.15, 120), np.random.default_rng(seed)
    current = device.current(voltage) * (1 + 0.01 * random.standard_normal(120)) + 1e-9 * random.standard_normal(120)
    return Sweep(voltage, current, per_area=True, conditions=Conditions(area=1.0, lit=False, irradiance=0.0))


def test_dark_with_light_gives_one_diode_and_one_shunt():
    sweeps = [lit(), dark()]
    joint = refine_together(sweeps)
    light, darkness = (fit.model for fit in joint.refinements)
    assert joint.shared == dict.fromkeys(CELL.parameters, True) | {"photocurrent": False}
    for name in (*DIODE, "shunt_resistance"):
        assert getattr(light, name) == pytest.approx(getattr(darkness, name), rel=1e-12)
        assert getattr(light, name) == pytest.approx(getattr(CELL, name), rel=0.2)
    assert darkness.photocurrent == 0 and "photocurrent" not in joint.refinements[1].free
    assert light.photocurrent == pytest.approx(0.022, rel=1e-3)
    assert joint.findings == ("The sweeps agree on J0, n, Rs and Rsh within noise.",)
    assert joint.refinements[0].findings[0] == "Refined together with one other sweep, sharing J0, n, Rs and Rsh."


def test_the_dark_sweep_narrows_what_the_lit_one_leaves_open():
    sweep = lit(noise=5e-3)
    alone, joint = refine(sweep), refine_together([sweep, dark()]).refinements[0]
    for name in DIODE:
        assert joint.standard_errors[name] < 0.5 * alone.standard_errors[name]


def test_an_intensity_series_shares_the_diode_and_rs_and_leaves_the_shunt_to_each():
    shunts = {0.1: 5000.0, 0.3: 3000.0, 1.0: 2000.0}
    sweeps = [
        lit(dataclasses.replace(CELL, shunt_resistance=shunt), level, seed=index, noise=5e-4)
        for index, (level, shunt) in enumerate(shunts.items())
    ]
    joint = refine_together(sweeps)
    assert not joint.shared["shunt_resistance"]
    models = [fit.model for fit in joint.refinements]
    for name in DIODE:
        assert len({getattr(model, name) for model in models}) == 1
        assert getattr(models[0], name) == pytest.approx(getattr(CELL, name), rel=0.15)
    for model, (level, shunt) in zip(models, shunts.items(), strict=True):
        assert model.photocurrent == pytest.approx(0.022 * level, rel=2e-3)
        assert model.shunt_resistance == pytest.approx(shunt, rel=0.1)
    assert "agree on J0, n and Rs within noise" in joint.findings[0]


def test_sharing_what_differs_is_said_and_the_culprit_named():
    sweeps = [lit(dataclasses.replace(CELL, shunt_resistance=shunt), level) for shunt, level in ((5000.0, 0.3), (900.0, 1.0))]
    joint = refine_together(sweeps, shared={"shunt_resistance": True})
    assert joint.refinements[0].model.shunt_resistance == joint.refinements[1].model.shunt_resistance
    assert "do not agree" in joint.findings[0] and "Rsh disagrees most" in joint.findings[0]
    assert "agree on" in refine_together(sweeps).findings[0]


def test_switches_take_each_parameter_apart():
    sweeps = [lit(seed=1), lit(level=0.5, seed=2)]
    joint = refine_together(sweeps, shared=dict.fromkeys(CELL.parameters, False))
    for fit, sweep in zip(joint.refinements, sweeps, strict=True):
        alone = refine(sweep)
        assert fit.rmse == pytest.approx(alone.rmse, rel=1e-8)
    for name in ("saturation_current", "ideality"):  # one of the two that fits move as one
        joint = refine_together(sweeps, shared={name: False})
        first, second = (fit.model for fit in joint.refinements)
        assert getattr(first, name) != getattr(second, name)
        other = "ideality" if name == "saturation_current" else "saturation_current"
        assert getattr(first, other) == pytest.approx(getattr(second, other), rel=1e-12)
    twins = [lit(seed=1), lit(seed=2)]
    both = refine_together(twins, shared={"photocurrent": True, "shunt_resistance": True})
    assert both.refinements[0].model == both.refinements[1].model


def test_errors_of_repeats_shrink_with_their_number():
    sweeps = [lit(seed=seed) for seed in range(4)]
    joint = refine_together(sweeps, shared={"photocurrent": True, "shunt_resistance": True}).refinements[0]
    alone = refine(sweeps[0])
    for name in CELL.parameters:
        assert joint.standard_errors[name] == pytest.approx(0.5 * alone.standard_errors[name], rel=0.3)


def test_intervals_hold_the_truth_as_often_as_they_say():
    inside, count = np.zeros(3), 40
    for seed in range(count):
        fit = refine_together([lit(seed=seed, points=40), lit(level=0.3, seed=1000 + seed, points=40)]).refinements[0]
        inside += [fit.intervals[name][0] <= getattr(CELL, name) <= fit.intervals[name][1] for name in DIODE]
    assert np.all(inside >= 33)  # 38 ± 1.4 expected


def test_holds_and_starts_are_kept():
    hold = frozenset({"ideality"})
    joint = refine_together([lit(), dark()], [CELL, None], FitSettings(hold=hold))
    assert all(fit.model.ideality == CELL.ideality and "ideality" not in fit.free for fit in joint.refinements)


def test_two_diodes_are_refined_together():
    cell = TwoDiode(0.035, 3e-13, 4e-9, 0.8, 2500.0)
    sweeps = [lit(cell, seed=1), lit(cell, 0.2, seed=2)]
    joint = refine_together(sweeps, settings=FitSettings(model="two diodes"))
    first, second = (fit.model for fit in joint.refinements)
    for name in ("saturation_current_1", "saturation_current_2", "series_resistance"):
        assert getattr(first, name) == getattr(second, name) == pytest.approx(getattr(cell, name), rel=0.2)
    assert first.ideality_2 == 2.0


@pytest.mark.parametrize(
    ("sweeps", "shared", "words"),
    [
        ([lit()], None, "at least two"),
        ([lit(), lit(temperature=320.0)], None, "cannot share J0"),
        ([lit(), lit(series_cells=3)], None, "cells in series"),
        ([lit(), dataclasses.replace(lit(), per_area=False)], None, "per area"),
        ([lit(), lit()], {"colour": True}, "no parameter"),
    ],
)
def test_sweeps_that_cannot_share_are_refused_with_a_sentence(sweeps, shared, words):
    with pytest.raises(FitFailed, match=words):
        refine_together(sweeps, shared=shared)


def test_settings_must_be_of_one_model_but_points_may_differ():
    sweeps = [lit(), lit(level=0.5)]
    with pytest.raises(FitFailed, match="same model"):
        refine_together(sweeps, settings=[FitSettings(), FitSettings(model="two diodes")])
    joint = refine_together(sweeps, settings=[FitSettings(excluded=(1, 2)), FitSettings()])
    assert [fit.points for fit in joint.refinements] == [78, 80]


def test_a_sweep_that_cannot_stand_alone_is_carried_by_the_others():
    few = dataclasses.replace(lit(level=0.5), voltage=lit(level=0.5).voltage[[2, 40, 70]], current=lit(level=0.5).current[[2, 40, 70]])
    joint = refine_together([lit(), few])
    assert joint.refinements[1].points == 3
    assert joint.refinements[1].model.ideality == joint.refinements[0].model.ideality
    assert joint.refinements[1].model.photocurrent == pytest.approx(0.011, rel=0.02)
    assert "not weighed" in joint.findings[0]


def read_back(fit):
    return Refinement.from_dict(json.loads(json.dumps(fit.to_dict(), allow_nan=False)))


def profiles(sweeps, joint, index=0, **asked):
    """Profile intervals of one sweep of a joint fit."""
    pairs = list(zip(sweeps, joint.refinements, strict=True))
    sweep, fit = pairs.pop(index)
    return profile_intervals(sweep, fit, beside=pairs, **asked)


def of_values(values, index):
    """The model of one sweep from parameters whose own ones end in its number."""

    def own(name):
        return values[f"{name}_{index}"] if f"{name}_{index}" in values else values[name]

    return OneDiode(
        1e-2 * own("photocurrent"), math.exp(own("log_saturation")), own("ideality"), own("series"), 1e4 / own("conductance")
    )


def test_profile_intervals_agree_with_lmfit():
    """The same joint problem stated anew for lmfit, the noise of each sweep from lmfit's fits of it alone."""
    sweeps = [lit(seed=1, noise=3e-3, points=50), lit(level=0.4, seed=2, noise=3e-3, points=40)]
    joint = refine_together(sweeps)

    def parameters(indices):
        values = lmfit.Parameters()
        model = joint.refinements[0].model
        values.add("log_saturation", math.log(model.saturation_current))
        values.add("ideality", model.ideality)
        values.add("series", model.series_resistance)
        for index in indices:
            model = joint.refinements[index].model
            values.add(f"photocurrent_{index}", 1e2 * model.photocurrent)
            values.add(f"conductance_{index}", 1e4 / model.shunt_resistance)
        return values

    def misses(values, indices, noise):
        plain = values.valuesdict()
        return np.concatenate(
            [(of_values(plain, i).current(sweeps[i].voltage) - sweeps[i].current) / noise[i] for i in indices]
        )

    alone = [lmfit.minimize(misses, parameters([i]), args=([i], [1e-5, 1e-5]), xtol=1e-12, ftol=1e-12) for i in (0, 1)]
    noise = [1e-5 * math.sqrt(fit.redchi) for fit in alone]
    minimiser = lmfit.Minimizer(misses, parameters([0, 1]), fcn_args=([0, 1], noise))
    found = minimiser.minimize(xtol=1e-12, ftol=1e-12)
    names = ["log_saturation", "ideality", "series", "photocurrent_1", "conductance_1"]
    ends = {name: (rows[0][1], rows[2][1]) for name, rows in lmfit.conf_interval(minimiser, found, p_names=names, sigmas=[0.95]).items()}
    ours = profiles(sweeps, joint, index=1)
    for name, theirs, turn in (
        ("saturation_current", ends["log_saturation"], math.log),
        ("ideality", ends["ideality"], float),
        ("series_resistance", ends["series"], float),
        ("photocurrent", ends["photocurrent_1"], lambda value: 1e2 * value),
        ("shunt_resistance", ends["conductance_1"], lambda value: 1e4 / value),
    ):
        interval = ours[name]
        assert interval.low_bounded and interval.high_bounded
        mine = sorted((turn(interval.low), turn(interval.high)))
        assert mine == pytest.approx(theirs, abs=0.01 * (theirs[1] - theirs[0])), name
        if not name.startswith(("photocurrent", "shunt")):
            assert profiles(sweeps, joint, index=0)[name] == interval  # a shared parameter has one interval


def test_a_shunt_that_may_be_absent_is_bounded_from_below_only_as_a_scan_finds_it():
    """Lit and dark share all but Jph; the other parameters are refitted by scipy at every shunt that is tried."""
    bare = dataclasses.replace(CELL, shunt_resistance=math.inf)
    sweeps = [lit(bare, noise=3e-3, seed=4), lit(bare, level=0.5, noise=3e-3, seed=5)]
    joint = refine_together(sweeps, shared={"shunt_resistance": True})
    noise = [math.sqrt(80 / 75) * refine(sweep).rmse for sweep in sweeps]

    def cost(conductance):
        def misses(place):
            values = dict(zip(("log_saturation", "ideality", "series", "photocurrent_0", "photocurrent_1"), place, strict=True))
            values["conductance"] = conductance
            models = [of_values(values, index) for index in (0, 1)]
            return np.concatenate([(m.current(s.voltage) - s.current) / n for m, s, n in zip(models, sweeps, noise, strict=True)])

        start = [math.log(CELL.saturation_current), 1.6, 3.0, 2.2, 1.1]
        return 2 * least_squares(misses, start, x_scale=[1, 0.1, 1, 1, 1], xtol=1e-14, ftol=1e-14, gtol=1e-14).cost

    freedom = 160 - 6
    lowest = minimize_scalar(cost, bounds=(1e-6, 20.0), method="bounded", options={"xatol": 1e-4})
    mark = lowest.fun * (1 + student.ppf(0.975, freedom) ** 2 / freedom)
    end = brentq(lambda conductance: cost(conductance) - mark, lowest.x, 50.0)
    interval = profiles(sweeps, joint)["shunt_resistance"]
    assert interval.low == pytest.approx(1e4 / end, rel=0.01)
    assert interval.low_bounded and interval.high == math.inf and not interval.high_bounded
    # Linear ends: close by, for the minimum is no more than a bound away.
    assert joint.refinements[1].intervals["shunt_resistance"][0] == pytest.approx(interval.low, rel=0.2)


def test_sweeps_that_share_nothing_have_nearly_the_intervals_of_their_own():
    sweeps = [lit(seed=1), dark()]
    joint = refine_together(sweeps, shared=dict.fromkeys(CELL.parameters, False))
    for index, sweep in enumerate(sweeps):
        alone = profile_intervals(sweep, refine(sweep))
        for name, interval in profiles(sweeps, joint, index).items():
            width = alone[name].high - alone[name].low
            # Student's t is of more degrees of freedom.
            assert interval.low == pytest.approx(alone[name].low, abs=0.02 * width), name
            assert interval.high == pytest.approx(alone[name].high, abs=0.02 * width), name


@pytest.mark.parametrize("asked", [FitSettings(loss="robust"), FitSettings(weights="effective", voltage_noise=1e-3)])
def test_weights_of_a_joint_fit_are_those_that_it_was_made_with(asked):
    sweeps = [lit(seed=1), lit(level=0.5, seed=2)]
    joint = refine_together(sweeps, settings=asked)
    for name, interval in profiles(sweeps, joint).items():
        low, high = joint.refinements[0].intervals[name]
        assert interval.low == pytest.approx(low, abs=0.03 * (high - low))
        assert interval.high == pytest.approx(high, abs=0.03 * (high - low))


def test_the_profile_curve_of_a_joint_fit_crosses_its_mark_at_the_ends_of_the_interval():
    sweeps = [lit(seed=1), dark()]
    first, second = refine_together(sweeps).refinements
    beside = [(sweeps[1], second)]
    interval = profile_intervals(sweeps[0], first, beside=beside)["series_resistance"]
    curve = profile_curve(sweeps[0], first, "series_resistance", beside=beside)
    beyond = (curve.values < interval.low) | (curve.values > interval.high)
    assert np.any(beyond) and np.all(curve.growth[beyond] > 0.99 * curve.mark)
    assert np.all(curve.growth[~beyond] < 1.01 * curve.mark)


def test_two_diodes_refined_together_have_intervals_too():
    cell = TwoDiode(0.035, 3e-13, 4e-9, 0.8, 2500.0)
    sweeps = [lit(cell, seed=1), lit(cell, 0.2, seed=2)]
    for hold in (None, frozenset()):
        joint = refine_together(sweeps, settings=FitSettings(model="two diodes", hold=hold))
        for name, interval in profiles(sweeps, joint).items():
            assert interval.low <= getattr(joint.refinements[0].model, name) <= interval.high
            assert interval.low < getattr(cell, name) < interval.high, name


def test_a_joint_refinement_says_so_and_its_profile_needs_the_others():
    sweeps = [lit(seed=seed, level=level) for seed, level in enumerate((1.0, 0.5, 0.2))]
    joint = refine_together(sweeps)
    again = [read_back(fit) for fit in joint.refinements]
    assert [fit.others for fit in again] == [2, 2, 2] and refine(lit()).others == 0
    assert [fit.bond for fit in again] == [fit.bond for fit in joint.refinements]
    beside = [(sweeps[0], again[0]), (sweeps[2], again[2])]
    assert profile_intervals(sweeps[1], again[1], beside=beside) == profiles(sweeps, joint, index=1)
    strangers = [(sweeps[0], refine(sweeps[0])), beside[1]]
    pair = refine_together(sweeps[1:])
    for wrong in ([], beside[:1], beside[::-1], strangers, [(sweeps[0], pair.refinements[0]), beside[1]]):
        with pytest.raises(FitFailed, match="gone or were refined anew"):
            profile_intervals(sweeps[1], again[1], beside=wrong)


def test_a_joint_refinement_kept_without_its_bond_still_loads_and_says_what_to_do():
    values = refine_together([lit(), dark()]).refinements[0].to_dict()
    del values["bond"]
    old = Refinement.from_dict(json.loads(json.dumps(values)))
    assert old.others == 1 and old.bond is None
    with pytest.raises(FitFailed, match="refine them together again"):
        profile_intervals(lit(), old)


def test_wild_points_end_in_curves_or_a_sentence():
    """Found by searching: of sweeps that differ by 300 decades one leaves the range of floats on the other's scale."""
    flat = Sweep(np.full(12, 0.5), np.zeros(12), conditions=Conditions(lit=False))
    three = Sweep([0.5, 1.0, 29.61151793], [1.0, -7.6e-17, 2.41609223])
    voltage = np.array([0.0, 1.1e-41, 0.5, 0.5, 0.5, 1, 1, 1, 1, 1, 1, 1])
    current = np.array([-7.6, -40.8, 0.5, -19.9, 1, -19.9, -19.9, -19.9, -19.9, 1, 0, -19.9])
    dim = Sweep([-42.67, *10 * [0.0]], [0.5, 0, 1, 0.99999, 0.4, 0, 0.5, 50, 1, 0, -6.7e-202])
    bright = Sweep(
        [0, 0, 0, 1.16e-42, 0.5, 1, 1, 4.80236719, 34.6912916],
        [-39.2436501, 1, 36.652764, -1.6e-177, 1.2, 0.5, 30.8672904, 1, 1],
        conditions=Conditions(lit=False),
    )
    wild = Sweep(voltage, current, conditions=Conditions(lit=False))
    apart = dict.fromkeys(CELL.parameters, False)
    for sweeps, shared in (([flat, three, wild], {"saturation_current": True, "photocurrent": True}), ([bright, dim], {"shunt_resistance": True})):
        try:
            joint = refine_together(sweeps, settings=FitSettings(loss="robust"), shared=apart | shared)
        except FitFailed as failure:
            assert str(failure)
            continue
        for index, fit in enumerate(joint.refinements):
            assert math.isfinite(fit.rmse)
            for name, interval in profiles(sweeps, joint, index).items():
                assert interval.low <= getattr(fit.model, name) <= interval.high


def test_what_is_usually_shared():
    assert usually_shared([lit(), dark()])["shunt_resistance"]
    assert not usually_shared([lit(), lit(), dark()])["shunt_resistance"]
    two = usually_shared([lit(), lit()], "two diodes")
    assert two["saturation_current_2"] and not two["photocurrent"] and math.isclose(sum(two.values()), 5)
