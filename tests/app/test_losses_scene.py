"""The losses screen: from the limit to the device, targets, and what is assumed or refused."""

from dataclasses import replace

import pytest

from app import live
from app.figures.ladder import FOOT
from app.losses_scene import losses_of, losses_screen, target_text, with_targets
from app.mechanisms import loss_names
from core import steps
from core.detailed_balance import gap_from_photocurrent, limit, limiting_diode
from core.diode import PARAMETERS
from core.errors import ComparisonRefused, StepRefused
from core.metrics import measure
from core.models import two_diodes_like
from core.refine import refine
from core.shares import ladder, loss_shares, mechanism_value, target
from core.sweep import Conditions
from tests.app.benches import (
    AMPERES,
    CELL,
    IN_THE_DARK,
    LIT,
    OTHER,
    S_SHAPED,
    bench,
    sweep_of,
)

GAP = 1.6


def with_gap(workspace, entry, gap=GAP):
    return steps.apply(workspace, steps.set_band_gap(workspace, entry, gap))


@pytest.fixture(scope="module")
def lit():
    workspace, (entry,) = bench(LIT, models=(CELL,))
    return with_gap(workspace, entry), entry


def rungs_of(figure):
    (rungs,) = (trace for trace in figure.data if trace.uid == "rungs")
    return list(rungs.y), list(rungs.base), list(rungs.x)


def losses_in(data):
    return {row["parameter"]: float(row["loss"].replace("−", "-")) for row in data["rows"]}


# What adds up

def test_the_screen_shows_core_s_shares_and_they_add_up(lit):
    workspace, entry = lit
    figure, data = losses_screen(workspace, {"active": entry})
    power = measure(LIT).pmp.value
    expected = loss_shares(CELL, GAP, measured_power=power)
    shown = losses_in(data)
    for name in PARAMETERS:
        assert shown[name] == pytest.approx(1e3 * expected.by_mechanism[name], abs=0.005)
    assert shown["rest"] == pytest.approx(1e3 * expected.residual, abs=0.005)
    assert shown["total"] == pytest.approx(1e3 * (power - limit(GAP).pmp), abs=0.005)
    _, bases, widths = rungs_of(figure)
    (ends,) = (trace for trace in figure.data if trace.uid == "ends")
    assert tuple(ends.x) == pytest.approx((1e3 * limit(GAP).pmp, 1e3 * power))
    assert sum(losses_in(data)[name] for name in (*PARAMETERS, "rest")) == pytest.approx(shown["total"], abs=0.03)
    assert min(abs(ends.x[1] - bases[-1]), abs(ends.x[1] - bases[-1] - widths[-1])) < 0.005  # what rounds to nothing has no rung


def test_each_share_is_also_given_of_the_limit(lit):
    workspace, entry = lit
    rows = {row["parameter"]: row for row in losses_screen(workspace, {"active": entry})[1]["rows"]}
    lost = loss_shares(CELL, GAP, measured_power=measure(LIT).pmp.value).by_mechanism["saturation_current"]
    assert rows["saturation_current"]["share"] == f"−{100 * abs(lost) / limit(GAP).pmp:.1f} %"
    shown = [float(row["share"].replace("−", "-").removesuffix(" %")) for row in rows.values()]
    assert sum(shown[:-1]) == pytest.approx(shown[-1], abs=0.31)
    assert 100 + shown[-1] == pytest.approx(100 * measure(LIT).pmp.value / limit(GAP).pmp, abs=0.06)


def test_a_gain_and_a_loss_have_signs_of_their_own():
    workspace, (entry,) = bench(LIT, models=(CELL,))
    rows = {row["parameter"]: row for row in losses_screen(with_gap(workspace, entry, 1.9), {"active": entry})[1]["rows"]}
    assert rows["photocurrent"]["loss"].startswith("+") and not rows["photocurrent"]["share"].startswith("−")
    assert rows["ideality"]["loss"].startswith("−") and rows["ideality"]["share"].startswith("−")


@pytest.mark.parametrize("order", [PARAMETERS, PARAMETERS[::-1]])
def test_one_after_another_follows_the_order_and_ends_at_the_same_total(lit, order):
    workspace, entry = lit
    figure, data = losses_screen(workspace, {"active": entry, "ladder": "steps", "order": list(order)})
    expected = ladder(limiting_diode(GAP), CELL, order)
    assert [row["parameter"] for row in data["rows"]] == [*order, "rest", "total"]
    assert [row["movable"] for row in data["rows"]] == [True] * 5 + [False] * 2
    for name in order:
        assert losses_in(data)[name] == pytest.approx(1e3 * expected[name], abs=0.005)
    assert losses_in(data)["total"] == losses_in(losses_screen(workspace, {"active": entry})[1])["total"]
    assert rungs_of(figure)[0][0] == ("photocurrent" if order is PARAMETERS else "shunt or collection")
    told = data["story"][1]
    assert told.startswith(f"One after another: {', '.join(loss_names(False)[name] for name in order)}.")
    largest = min(order, key=lambda name: expected[name])
    assert f"The largest loss is {loss_names(False)[largest]} with {-1e3 * expected[largest]:.2f} mW cm⁻²" in told
    (labels,) = (trace for trace in figure.data if trace.uid == "labels")
    assert f"−{-1e3 * expected[largest]:.2f}" in labels.text[order.index(largest)]


@pytest.mark.parametrize("order", [["ideality"], ["charm"] * 5, None, []])
def test_an_order_that_does_not_name_each_mechanism_once_falls_back(lit, order):
    workspace, entry = lit
    assert losses_screen(workspace, {"active": entry, "ladder": "steps", "order": order})[1]["order"] == PARAMETERS


def test_emission_from_both_faces_lowers_the_limit(lit):
    workspace, entry = lit
    front, both = (losses_of(workspace, entry, emission).shares.start for emission in ("front", "both"))
    assert both == pytest.approx(limit(GAP, emission="both").pmp) and both < front
    assert losses_screen(workspace, {"active": entry, "emission": "sideways"})[1]["emission"] == "front"


# What is assumed

def test_a_gap_that_nobody_gave_is_read_off_the_photocurrent_and_marked_wherever_it_appears():
    workspace, (entry,) = bench(LIT, models=(CELL,))
    figure, data = losses_screen(workspace, {"active": entry})
    gap = gap_from_photocurrent(CELL.photocurrent, LIT.irradiance)
    assert data["bandGap"] == {"text": f"{gap:.4g}", "assumed": True}
    assert figure.layout.yaxis.ticktext[0].endswith("(gap assumed)")
    assert "assumed band gap" in data["story"][0] and "a typed gap changes both" in data["cautions"]


@pytest.mark.parametrize("model", [replace(CELL, shunt_resistance=60.0, series_resistance=10.0), replace(CELL, series_resistance=25.0)])
def test_no_device_collects_more_than_the_limit_that_was_made_for_it(model):
    workspace, (entry,) = bench(sweep_of(model), models=(model,))
    data = losses_screen(workspace, {"active": entry})[1]
    assert losses_in(data)["photocurrent"] <= 0 and "gains" not in " ".join(data["story"])


def test_a_gap_that_was_typed_is_marked_nowhere(lit):
    workspace, entry = lit
    figure, data = losses_screen(workspace, {"active": entry})
    assert data["bandGap"] == {"text": "1.6", "assumed": False}
    assert figure.layout.yaxis.ticktext[0] == "limit at 1.6 eV"
    assert "assumed band gap" not in data["story"][0] and "band gap is assumed" not in data["cautions"]


def test_a_photocurrent_above_the_limit_of_its_gap_is_said():
    workspace, (entry,) = bench(LIT, models=(CELL,))
    workspace = with_gap(workspace, entry, 1.9)
    data = losses_screen(workspace, {"active": entry})[1]
    assert len(data["story"]) == 3 and "band gap is wrong" in data["cautions"] and "check gap" in data["cautions"]


# What is refused

NO_GAP_CARED = {
    "nothing in the tray": ((), "nothing in the tray"),
    "no area": ((AMPERES,), "area"),
    "dark": ((IN_THE_DARK,), "dark sweep"),
    "no Jsc and no gap": ((sweep_of(CELL, low=0.1),), "type the band gap"),
}


@pytest.mark.parametrize("case", NO_GAP_CARED)
def test_a_refusal_is_a_sentence_and_no_figure(case):
    sweeps, words = NO_GAP_CARED[case]
    workspace, _ = bench(*sweeps)
    figure, data = losses_screen(workspace, {})
    assert words in data["refusal"] and data["refusal"].endswith(".")
    assert not figure.data and "rows" not in data


# What is not broken down: the measured power, the limit and the gap between them stay

UNTOLD = {
    "S-shaped": (S_SHAPED, "S-shaped"),
    "points as many as parameters": (sweep_of(CELL, points=5, noise=0.0), "5 points"),
}


@pytest.mark.parametrize("ladder", ["shares", "steps"])
@pytest.mark.parametrize("case", UNTOLD)
def test_what_says_nothing_of_its_mechanisms_keeps_the_whole_gap_and_gets_a_sentence(case, ladder):
    sweep, words = UNTOLD[case]
    workspace, (entry,) = bench(sweep)
    workspace = with_gap(workspace, entry)
    figure, data = losses_screen(workspace, {"active": entry, "ladder": ladder})
    power = measure(sweep).pmp.value
    assert data["refusal"] == "" and words in data["story"][1]
    assert f"{1e3 * power:.2f} mW cm⁻²" in data["story"][0] and f"{1e3 * limit(GAP).pmp:.2f} mW cm⁻²" in data["story"][0]
    assert [row["parameter"] for row in data["rows"]] == ["total"]
    assert losses_in(data)["total"] == pytest.approx(1e3 * (power - limit(GAP).pmp), abs=0.005)
    assert rungs_of(figure)[0] == ["not broken down"]
    assert data["targets"] == {}
    with pytest.raises(StepRefused, match=words):
        live.answer(workspace, {"kind": "target", "entry": entry, "fractions": {"ideality": 0.5}})


@pytest.mark.parametrize(("sweep", "words"), [(sweep_of(CELL, high=0.4), "no Voc"), (sweep_of(CELL, points=4), "No diode curve")])
def test_the_limit_is_told_where_the_sweep_gives_no_power(sweep, words):
    workspace, (entry,) = bench(sweep)
    refusal = losses_screen(with_gap(workspace, entry), {"active": entry})[1]["refusal"]
    assert words in refusal and f"limit at 1.6 eV is {1e3 * limit(GAP).pmp:.2f} mW cm⁻²" in refusal


def test_a_gap_is_not_assumed_from_a_model_that_means_nothing():
    workspace, (entry,) = bench(S_SHAPED, models=(replace(CELL, photocurrent=0.03),))
    data = losses_screen(workspace, {"active": entry})[1]
    assert data["bandGap"]["text"] == f"{gap_from_photocurrent(measure(S_SHAPED).jsc.value):.4g}"
    assert "a typed gap changes both" in data["cautions"]


def test_a_shunt_is_called_so_only_if_the_dark_sweep_confirms_it():
    leaky = replace(CELL, shunt_resistance=400.0)
    dark = sweep_of(replace(leaky, photocurrent=0.0), "dark", conditions=IN_THE_DARK.conditions, low=-0.2, points=80)
    for sweeps, word in (((sweep_of(leaky),), "shunt or collection"), ((sweep_of(leaky), dark), "shunt")):
        workspace, (entry, *_) = bench(*sweeps, models=(leaky,))
        figure, data = losses_screen(with_gap(workspace, entry), {"active": entry})
        assert word in rungs_of(figure)[0] and word in [row["name"] for row in data["rows"]]
        assert data["names"]["shunt_resistance"] == word
        assert "or collection" in " ".join(data["story"]) or word == "shunt"


def test_without_intervals_the_reason_is_told(lit):
    workspace, entry = lit
    assert "not refined, so the shares have no intervals" in losses_screen(workspace, {"active": entry})[1]["cautions"]
    workspace = steps.apply(workspace, steps.record_refinement(workspace, entry, refine(LIT)))
    assert "intervals" not in losses_screen(workspace, {"active": entry})[1]["cautions"]


def test_a_string_of_cells_has_no_limit_of_a_single_gap():
    string = sweep_of(CELL.at(series_cells=4), conditions=Conditions(area=0.1, series_cells=4))
    workspace, (entry,) = bench(string, models=(CELL.at(series_cells=4),))
    assert "4 cells in series" in losses_screen(workspace, {"active": entry})[1]["refusal"]


def test_no_light_is_refused_although_the_sweep_counts_as_lit():
    workspace, (entry,) = bench(replace(LIT, conditions=replace(LIT.conditions, irradiance=5e-324)), models=(CELL,))
    assert losses_screen(workspace, {"active": entry})[1]["refusal"].endswith(".")


def test_two_diodes_lose_through_one_with_targets_of_one():
    workspace, (entry,) = bench(LIT, models=(two_diodes_like(CELL),))
    workspace = with_gap(workspace, entry)
    for view in ({}, {"ladder": "steps"}):
        data = losses_screen(workspace, {"active": entry, **view})[1]
        assert data["refusal"] == "" and set(data["targets"]) == set(PARAMETERS)
    assert live.answer(workspace, {"kind": "target", "entry": entry, "fractions": {"ideality": 0.5}})["words"].endswith(".")


# Targets

def test_at_rest_the_sliders_stand_for_the_device(lit):
    workspace, entry = lit
    data = losses_screen(workspace, {"active": entry})[1]
    power, measured = 1e3 * CELL.landmarks().pmp, 1e3 * measure(LIT).pmp.value
    assert f"model as it stands: {power:.2f} mW cm⁻², PCE {power:.2f} %" in data["targetWords"]
    assert f"Measured: {measured:.2f} mW cm⁻²" in data["targetWords"]
    for name, place in data["targets"].items():
        assert place["text"] == target_text(name, mechanism_value(CELL, name))
        model, words = with_targets(CELL, {name: place["fraction"]})
        assert mechanism_value(model, name) == pytest.approx(mechanism_value(CELL, name), rel=1e-12)
        assert words == {name: place["text"]}
        assert model.landmarks().pmp == pytest.approx(CELL.landmarks().pmp, rel=1e-9)


def asked(lit, fractions):
    workspace, entry = lit
    return live.answer(workspace, {"kind": "target", "entry": entry, "fractions": fractions})


ENDS = {"photocurrent": 1.25 * 0.022, "ideality": 1.5 * 1.6, "series_resistance": 6.0, "shunt_resistance": 20 * 2000.0}


@pytest.mark.parametrize("name", ENDS)
def test_a_target_is_core_s_with_the_other_mechanisms_kept(lit, name):
    answer = asked(lit, {name: 1.0})
    expected = target(CELL, name, ENDS[name])
    power = 1e3 * expected.landmarks().pmp
    assert answer["x"] == [pytest.approx(power)] and answer["y"] == [FOOT]
    assert answer["words"].startswith(f"The model with these targets: {power:.2f} mW cm⁻², PCE {power:.2f} %, ")
    assert answer["values"] == {name: target_text(name, ENDS[name])}
    gain = power - 1e3 * CELL.landmarks().pmp
    assert answer["words"].endswith(f"{'+' if gain > 0 else '−'}{abs(gain):.2f} mW cm⁻².")


def test_the_voltage_target_moves_what_the_diode_alone_reaches(lit):
    here = mechanism_value(CELL, "saturation_current")
    answer = asked(lit, {"saturation_current": 1.0})
    assert answer["values"]["saturation_current"] == f"{1.2 * here:.3f} V"
    assert answer["x"][0] == pytest.approx(1e3 * target(CELL, "saturation_current", 1.2 * here).landmarks().pmp)


def test_several_targets_hold_together(lit):
    answer = asked(lit, {"photocurrent": 1.0, "saturation_current": 0.9, "series_resistance": 0.0})
    low, high = (f * mechanism_value(CELL, "saturation_current") for f in (0.8, 1.2))
    model = target(target(CELL, "saturation_current", low + 0.9 * (high - low)), "series_resistance", 0.0)
    model = target(model, "photocurrent", ENDS["photocurrent"])
    assert answer["x"][0] == pytest.approx(1e3 * model.landmarks().pmp)
    assert set(answer["values"]) == {"photocurrent", "saturation_current", "series_resistance"}


@pytest.mark.parametrize("fraction", [-5.0, 7.0])
def test_a_slider_cannot_go_beyond_its_ends(lit, fraction):
    assert asked(lit, {"series_resistance": fraction}) == asked(lit, {"series_resistance": float(fraction > 0)})


def test_a_device_without_series_resistance_or_shunt_has_targets_too():
    ideal = replace(CELL, series_resistance=0.0, shunt_resistance=float("inf"))
    workspace, (entry,) = bench(sweep_of(ideal), models=(ideal,))
    data = losses_screen(with_gap(workspace, entry), {"active": entry})[1]
    assert data["targets"]["series_resistance"] == {"fraction": 0.0, "text": "0 Ω cm²"}
    assert data["targets"]["shunt_resistance"] == {"fraction": 1.0, "text": "∞ Ω cm²"}
    assert with_targets(ideal, {"shunt_resistance": 1.0})[0] == ideal
    halfway, words = with_targets(ideal, {"shunt_resistance": 0.5})
    assert halfway.shunt_resistance == pytest.approx(200.0) and words == {"shunt_resistance": "200.0 Ω cm²"}
    moved, _ = with_targets(ideal, {"series_resistance": 1.0})
    assert moved.series_resistance == 1.0


def test_a_sweep_without_curve_has_no_targets():
    workspace, (few,) = bench(sweep_of(CELL, points=4))
    with pytest.raises(StepRefused, match=r"\.$"):
        live.answer(workspace, {"kind": "target", "entry": few, "fractions": {}})


def test_intervals_come_with_a_refined_model_only(lit):
    workspace, entry = lit
    assert not losses_of(workspace, entry, "front").shares.intervals
    workspace = steps.apply(workspace, steps.record_refinement(workspace, entry, refine(LIT)))
    assert set(losses_of(workspace, entry, "front").shares.intervals) == set(PARAMETERS)


def test_without_area_there_is_no_breakdown():
    workspace, (entry, other) = bench(AMPERES, OTHER)
    with pytest.raises(ComparisonRefused, match=r"\.$"):
        losses_of(workspace, entry, "front")
    assert losses_of(workspace, other, "front").assumed
