"""Which sweeps and fits say anything of mechanisms; the others are refused in a sentence and keep what was measured."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from core.breakdown import one_sided, why_no_breakdown
from core.comparing import compare, losses
from core.diode import OneDiode
from core.errors import BreakdownRefused
from core.fit_findings import UNSETTLED
from core.fit_settings import FitSettings
from core.metrics import measure
from core.models import two_diodes_like
from core.reading import read_sweeps
from core.refine import refine
from core.sweep import Conditions, Sweep

SAMPLES = Path(__file__).parents[2] / "sample_sweeps"
DEVICE = OneDiode(0.022, 5e-13, 1.6, 3.0, 2000.0)


def swept(model=DEVICE, low=-0.1, high=1.1, points=121, *, noise=5e-6, name="K1"):
    voltage = np.linspace(low, high, points)
    current = model.current(voltage) + np.random.default_rng(points).normal(0, noise, points)
    return Sweep(voltage, current, per_area=True, read_as="density", name=name, conditions=Conditions(area=0.1))


def sample(name):
    return read_sweeps((SAMPLES / name).read_bytes(), name)


def reason(sweep, state=None):
    return why_no_breakdown(sweep, state or refine(sweep), measure(sweep))


GOOD = swept(name="good")


def test_a_sound_sweep_may_be_broken_down_refined_or_laid_by_hand():
    assert reason(GOOD) == reason(GOOD, DEVICE) == ""


@pytest.mark.parametrize("name", ["K07_fwd.csv", "K07_rev.csv", "K11.csv", "K15.txt", "K33_levels.tsv", "S02.xlsx"])
def test_the_sound_samples_may_be_broken_down(name):
    for sweep in sample(name):
        if sweep.lit:
            assert reason(sweep) == ""


@pytest.mark.parametrize("direction", [0, 1])
def test_the_s_shaped_sample_may_not_whatever_is_laid_over_it(direction):
    sweep = sample("K21.csv")[direction]
    refined = refine(sweep)
    for state in (refined, refined.model, DEVICE):
        assert "S-shaped" in reason(sweep, state)
    dense = replace(sweep, conditions=replace(sweep.conditions, area=0.16))
    for state in (refined, two_diodes_like(refined.model)):
        with pytest.raises(BreakdownRefused, match="S-shaped"):
            losses(dense if dense.per_area else replace(dense, per_area=True), state, 1.6)


REFUSED = {
    "ends before Voc": (swept(high=0.9), "no Voc"),
    "ends far before Voc": (swept(high=0.5), "no Voc"),
    "begins beyond V = 0": (swept(low=0.1), "no Jsc"),
    "as many points as parameters": (swept(points=5, noise=0.0), "5 points are no more than the 5 parameters"),
    "no light": (swept(replace(DEVICE, photocurrent=0.0)), "no current at V = 0"),
}


@pytest.mark.parametrize("case", REFUSED)
def test_what_says_nothing_of_mechanisms_is_refused_in_a_sentence_that_says_what_to_do(case):
    sweep, words = REFUSED[case]
    told = reason(sweep)
    assert words in told and told.startswith("“K1” is not broken down: ") and told.endswith(".")
    assert any(verb in told for verb in ("Measure", "hold", "Correct"))
    fit, good = refine(sweep), refine(GOOD)
    for first, second in (((sweep, fit), (GOOD, good)), ((GOOD, good), (sweep, fit))):
        with pytest.raises(BreakdownRefused, match="K1"):
            compare(*first, *second)


def test_a_plateau_that_the_source_meter_cut_off_is_refused_until_it_is_left_out():
    (sweep,) = sample("K26.csv")
    assert "source-meter's limit" in reason(sweep)
    left_out = FitSettings(window=(0.88, 1.2), hold=frozenset({"photocurrent", "shunt_resistance"}))
    model = OneDiode(0.0053, 1.2e-13, 1.7, 16.8, 6000.0)  # of 0.25 cm²: in A and Ω
    assert "source-meter's limit" not in reason(sweep, refine(sweep, model, left_out))
    assert reason(sweep, model) == ""


def test_a_fit_that_did_not_come_to_rest_is_refused():
    fit = refine(GOOD)
    assert "come to rest" in reason(GOOD, replace(fit, findings=(UNSETTLED, *fit.findings)))


@pytest.mark.parametrize("name", ["photocurrent", "saturation_current", "ideality", "series_resistance"])
def test_a_fit_that_leaves_one_of_the_diode_s_parameters_open_is_refused(name):
    fit = refine(GOOD)
    covariance = np.array(fit.covariance)
    covariance[fit.free.index(name), fit.free.index(name)] = np.inf
    assert name.replace("_", " ") in reason(GOOD, replace(fit, covariance=covariance))


def test_few_points_suffice_where_parameters_are_held():
    few = swept(points=7, noise=0.0)
    held = refine(few, DEVICE, FitSettings(hold=frozenset({"ideality", "shunt_resistance"})))
    assert reason(few, held) == ""


def test_a_shunt_that_is_only_bounded_keeps_the_numbers_and_says_so():
    sweep = swept(replace(DEVICE, shunt_resistance=1e8), noise=5e-5)
    fit = refine(sweep)
    assert np.isinf(fit.intervals["shunt_resistance"][1])
    (said,) = one_sided(sweep, fit)
    assert "Rsh only from below" in said
    shares = losses(sweep, fit, 1.6)
    assert shares.intervals and said in shares.notes
    assert one_sided(GOOD, refine(GOOD)) == one_sided(GOOD, DEVICE) == ()


def test_sweeps_of_unlike_directions_say_that_hysteresis_is_part_of_the_difference():
    back = replace(swept(replace(DEVICE, ideality=1.55), name="back"), direction="reverse")
    (said,) = compare(GOOD, refine(GOOD), back, refine(back)).notes
    assert all(word in said for word in ("good", "forward", "back", "reverse", "hysteresis"))
    assert compare(GOOD, refine(GOOD), GOOD, refine(GOOD)).notes == ()
