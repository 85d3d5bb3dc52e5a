"""The pair screen: which two, what it says of them, and what it refuses in a sentence."""

from dataclasses import replace

import numpy as np
import pytest

from app import live
from app.pair_scene import answer_what_if, chosen_pair, pair_screen
from app.readout import METRIC_ROWS
from core import steps
from core.diode import PARAMETERS
from core.errors import StepRefused
from core.metrics import measure
from core.models import two_diodes_like
from core.refine import refine
from core.shares import difference_shares, what_if
from core.sweep import Conditions
from tests.app.benches import (
    AMPERES,
    CELL,
    IN_THE_DARK,
    LIT,
    OTHER,
    REVERSE,
    S_SHAPED,
    bench,
    sweep_of,
)

DIM = sweep_of(replace(CELL, photocurrent=0.011), "dim", device="D", conditions=Conditions(area=0.1, irradiance=0.05))
WARM = sweep_of(CELL.at(temperature=320.0), "warm", device="E", conditions=Conditions(area=0.1, temperature=320.0))
MODELS = {"a": CELL, "b": replace(CELL, photocurrent=0.02, series_resistance=5.0, ideality=1.5)}


def refined(*sweeps):
    workspace, entries = bench(*sweeps)
    for entry in entries:
        workspace = steps.apply(workspace, steps.record_refinement(workspace, entry, refine(workspace.sweep(entry))))
    return workspace, entries


@pytest.fixture(scope="module")
def two():
    return refined(LIT, OTHER)


@pytest.fixture(scope="module")
def by_hand():
    return bench(LIT, OTHER, models=tuple(MODELS.values()))


def shown(workspace, a, b, **view):
    return pair_screen(workspace, {"pair": {"a": a, "b": b}, **view})


def stated(workspace, **statements):
    for name, value in statements.items():
        workspace = steps.apply(workspace, steps.state(workspace, name, value))
    return workspace


def bars_of(figure):
    (bars,) = (trace for trace in figure.data if trace.uid == "shares")
    return dict(zip(bars.y, bars.x, strict=True))


def test_without_a_choice_the_sweep_on_the_bench_meets_the_next_device():
    workspace, (lit, reverse, dark, other) = bench(LIT, REVERSE, IN_THE_DARK, OTHER)
    assert chosen_pair(workspace, {}) == (lit, other)
    assert chosen_pair(workspace, {"active": reverse}) == (reverse, other)
    assert chosen_pair(workspace, {"active": other}) == (other, lit)
    assert chosen_pair(workspace, {"active": dark}) == (lit, other), "a dark sweep has nothing to compare"


def test_without_a_choice_b_was_measured_as_a_was_where_there_is_such_a_sweep():
    back = replace(OTHER, direction="reverse", name="back")
    alike = sweep_of(CELL, "alike", device="E")
    workspace, (lit, reverse, _, _, last) = bench(LIT, REVERSE, back, DIM, alike)
    assert chosen_pair(workspace, {}) == (lit, last), "not the reverse sweep, and not the dim one"
    assert chosen_pair(workspace, {"active": reverse})[1] == next(e for e in workspace.entries if workspace.entries[e].name == "back")
    assert chosen_pair(workspace, {"active": last}) == (last, lit)


def test_unlike_directions_are_said():
    workspace, (lit, back) = bench(LIT, replace(OTHER, direction="reverse"))
    assert "hysteresis" in shown(workspace, lit, back)[2]["story"]
    workspace, (lit, bent) = bench(LIT, replace(S_SHAPED, direction="reverse"))
    assert "hysteresis" in shown(workspace, lit, bent)[2]["story"]


UNTOLD = {"S-shaped": (S_SHAPED, "S-shaped"), "five points": (sweep_of(CELL, "five", device="F", points=5, noise=0.0), "5 points")}


@pytest.mark.parametrize("case", UNTOLD)
def test_what_says_nothing_of_mechanisms_keeps_the_measured_difference_and_gets_a_sentence(case):
    sweep, words = UNTOLD[case]
    workspace, (lit, bent) = bench(LIT, sweep)
    for pair in ((lit, bent), (bent, lit)):
        curves, bars, data = shown(workspace, *pair)
        assert len(curves.data) == 5 and data["compared"]["pmp"]["a"] != "–"
        powers = [1e3 * measure(workspace.sweep(entry)).pmp.value for entry in pair]
        assert bars_of(bars) == {"together": pytest.approx(powers[1] - powers[0])}
        lines = {trace.uid: len(trace.x) for trace in curves.data}
        side = "ab"[pair.index(bent)]
        assert lines[f"model-{side}"] == 0 < lines[f"points-{side}"], "nothing is laid over it that nobody asked for"
        assert f"curve of {side.upper()}" not in data["sources"]
        assert words in data["story"] and f"{max(powers):.2f} mW cm⁻²" in data["story"] and "It comes from" not in data["story"]
        assert data["still"] is True
        with pytest.raises(StepRefused, match=words):
            asked(workspace, *pair, {"ideality": 1.0})


def test_a_choice_holds_until_its_sweep_is_gone():
    workspace, (lit, reverse, other) = bench(LIT, REVERSE, OTHER)
    asked = {"pair": {"a": other, "b": lit}, "active": reverse}
    assert chosen_pair(workspace, asked) == (other, lit)
    without = steps.apply(workspace, steps.remove_entries(workspace, [other]))
    assert chosen_pair(without, asked) == (reverse, lit)


@pytest.mark.parametrize("sweeps", [(), (LIT,), (LIT, IN_THE_DARK), (IN_THE_DARK,)], ids=["none", "one", "dark beside", "dark"])
def test_fewer_than_two_lit_sweeps_are_refused_in_a_sentence(sweeps):
    workspace, _ = bench(*sweeps)
    curves, bars, data = pair_screen(workspace, {"screen": "pair"})
    assert data["refusal"].startswith("Two lit sweeps are needed")
    assert not curves.data and not bars.data


def test_a_sweep_without_area_meets_one_with_area_only_normalised():
    workspace, (lit, amperes) = bench(LIT, AMPERES, models=(CELL, CELL.scaled(0.1)))
    curves, _, data = shown(workspace, lit, amperes)
    assert "Give the missing area" in data["refusal"] and not curves.data
    curves, bars, data = shown(workspace, lit, amperes, normalised=True)
    assert data["refusal"] == "" and len(curves.data) == 5
    assert not bars.data and "area" in data["story"] and data["story"].endswith(".")


def test_two_without_area_are_laid_over_each_other_but_not_shared_out():
    workspace, (first, second) = bench(AMPERES, replace(AMPERES, device="F", name="more"), models=(CELL.scaled(0.1),) * 2)
    curves, bars, data = shown(workspace, first, second)
    assert curves.layout.yaxis.title.text == "I (A)"
    assert not bars.data and "nobody gave" in data["story"]


@pytest.mark.parametrize(("sweep", "what"), [(DIM, "equal irradiance"), (WARM, "equal temperatures")], ids=["irradiance", "temperature"])
def test_unequal_conditions_leave_the_curves_and_say_why_there_are_no_shares(sweep, what):
    workspace, (lit, other) = bench(LIT, sweep, models=(CELL, None))
    curves, bars, data = shown(workspace, lit, other)
    assert len(curves.data) == 5 and not bars.data
    assert what in data["story"] and data["story"].endswith(".")
    assert data["compared"]["voc"]["a"] != "–"


def test_the_bars_add_up_to_the_measured_difference(two):
    workspace, (a, b) = two
    _, figure, data = shown(workspace, a, b)
    bars = bars_of(figure)
    assert sum(bars.values()) == pytest.approx(2 * bars["together"], abs=0.005)
    gap = measure(OTHER).pmp.value - measure(LIT).pmp.value
    assert bars["together"] == pytest.approx(1e3 * gap, abs=1e-9)
    assert bars.keys() >= {"shunt or collection"} and "not in the model" not in bars, "it rounds to nothing"
    expected = difference_shares(workspace.fit(a).model, workspace.fit(b).model)
    assert bars["photocurrent"] == pytest.approx(1e3 * expected.by_mechanism["photocurrent"], abs=1e-9)
    assert bars["photocurrent"] < -1 < 10 * min(v for name, v in bars.items() if name not in ("photocurrent", "together"))
    assert "fit noise only" in data["note"]


def test_swapping_turns_every_bar_round(two):
    workspace, (a, b) = two
    there, back = (bars_of(shown(workspace, *pair)[1]) for pair in ((a, b), (b, a)))
    for name, value in there.items():
        assert back[name] == pytest.approx(-value, abs=1e-9)


def test_the_table_holds_both_and_their_difference(two):
    workspace, (a, b) = two
    rows = shown(workspace, a, b)[2]["compared"]
    assert set(rows) == set(METRIC_ROWS)
    assert rows["jsc"]["a"] == f"{1e3 * measure(LIT).jsc.value:.2f}"
    gap = 1e3 * (measure(OTHER).jsc.value - measure(LIT).jsc.value)
    assert rows["jsc"]["difference"].startswith(f"−{abs(gap):.3f}(") and rows["jsc"]["reason"].startswith("mA cm⁻².")
    assert shown(workspace, b, a)[2]["compared"]["jsc"]["difference"].startswith(f"+{abs(gap):.3f}(")


def test_a_difference_stands_out_only_once_area_and_lamp_are_known(two):
    workspace, (a, b) = two
    unknown = shown(workspace, a, b)[2]
    assert unknown["compared"]["jsc"]["verdict"] == "cannot be told"
    assert "area" in unknown["compared"]["jsc"]["reason"] and "Not known: area" in unknown["story"]
    loose, tight = (shown(stated(workspace, area_uncertainty=share, lamp_uncertainty=share), a, b)[2] for share in (0.2, 0.001))
    assert (loose["compared"]["jsc"]["verdict"], tight["compared"]["jsc"]["verdict"]) == ("may be chance", "stands out")
    assert loose["compared"]["jsc"]["difference"] == "−2(8)"  # 20 % of 22 and of 20, once for the areas and once for the lamp
    assert loose["stated"]["area_uncertainty"] == loose["stated"]["lamp_uncertainty"] == "20"


def test_assumed_conditions_are_named_until_they_are_confirmed(two):
    workspace, (a, b) = two
    assert "Assumed, not given" in shown(workspace, a, b)[2]["sources"]
    for entry in (a, b):
        workspace = steps.apply(workspace, steps.confirm_conditions(workspace, entry, workspace.assumed(entry)))
    assert shown(workspace, a, b)[2]["sources"] == ""


def test_the_screen_says_where_unrefined_curves_come_from(by_hand):
    workspace, (a, b) = by_hand
    assert shown(workspace, a, b)[2]["sources"].startswith("Both curves were laid by hand and not refined.")
    workspace, (a, b) = bench(LIT, OTHER, models=(CELL, None))
    said = shown(workspace, a, b)[2]
    assert said["sources"].startswith("The curve of A was laid by hand and not refined. The curve of B was fitted for this screen")
    assert "whiskers" not in said["note"]


def test_a_side_that_no_curve_fits_keeps_its_points_and_says_so():
    workspace, (lit, few) = bench(LIT, sweep_of(CELL, "few", device="G", points=3), models=(CELL,))
    curves, bars, data = shown(workspace, lit, few)
    assert len(curves.data) == 5
    assert "No diode curve can be laid over one of the two" in data["story"]


def test_two_diodes_are_compared_through_one_and_the_screen_says_so():
    workspace, (a, b) = bench(LIT, OTHER, models=(two_diodes_like(CELL), replace(CELL, photocurrent=0.02)))
    _, bars, data = shown(workspace, a, b)
    assert "compared through a one-diode fit made alongside" in data["story"]
    assert bars_of(bars)["photocurrent"] < -1
    answer = asked(workspace, a, b, {"photocurrent": 1.0})
    assert answer["words"].startswith("A would deliver ") and len(answer["x"]) > 100


# What if

def asked(workspace, a, b, fractions, **more):
    return live.answer(workspace, {"kind": "what-if", "a": a, "b": b, "fractions": fractions, **more})


@pytest.mark.parametrize("fraction", [0.35, 1.0])
@pytest.mark.parametrize("mechanism", PARAMETERS)
def test_one_mechanism_moves_as_core_moves_it(by_hand, mechanism, fraction):
    workspace, (a, b) = by_hand
    answer = asked(workspace, a, b, {**dict.fromkeys(PARAMETERS, 0.0), mechanism: fraction})
    expected = what_if(*MODELS.values(), [mechanism], fraction)
    np.testing.assert_allclose(answer["y"], 1e3 * expected.current(np.array(answer["x"])), atol=2e-4)
    power = 1e3 * expected.landmarks().pmp
    gain = power - 1e3 * CELL.landmarks().pmp
    sign = "+" if round(gain, 2) > 0 else "−" if round(gain, 2) < 0 else ""
    assert answer["words"] == f"A would deliver {power:.2f} mW cm⁻², {sign}{abs(gain):.2f}; PCE {power:.2f} %."


def test_all_mechanisms_all_the_way_are_the_other_device(by_hand):
    workspace, (a, b) = by_hand
    answer = asked(workspace, a, b, dict.fromkeys(PARAMETERS, 1.0))
    np.testing.assert_allclose(answer["y"], 1e3 * MODELS["b"].current(np.array(answer["x"])), atol=2e-4)


def test_at_rest_nothing_is_drawn_and_the_power_is_the_device_s(by_hand):
    workspace, (a, b) = by_hand
    answer = asked(workspace, a, b, dict.fromkeys(PARAMETERS, 0.0))
    assert (answer["x"], answer["y"]) == ([], [])
    assert answer["words"].startswith(f"A would deliver {1e3 * CELL.landmarks().pmp:.2f} mW cm⁻², 0.00;")


def test_normalised_the_curve_is_on_the_axes_of_a(by_hand):
    workspace, (a, b) = by_hand
    plain, normal = (asked(workspace, a, b, {"photocurrent": 1.0}, normalised=n) for n in (False, True))
    marks = measure(LIT)
    np.testing.assert_allclose(np.array(normal["x"]) * marks.voc.value, plain["x"], atol=2e-6)
    np.testing.assert_allclose(np.array(normal["y"]) * 1e3 * marks.jsc.value, plain["y"], atol=1e-4)


def test_a_side_that_is_gone_or_has_no_curve_is_refused_in_a_sentence(by_hand):
    workspace, (a, b) = by_hand
    with pytest.raises(StepRefused, match=r"\.$"):
        asked(workspace, a, "gone", {"ideality": 1.0})
    workspace, (lit, few) = bench(LIT, sweep_of(CELL, "few", device="G", points=3), models=(CELL,))
    with pytest.raises(StepRefused, match="No diode curve"):
        answer_what_if(workspace, {"a": lit, "b": few, "fractions": {}})
