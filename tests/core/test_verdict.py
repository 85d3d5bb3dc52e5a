"""Whether differences stand out: the rules of the guide (JCGM 100:2008), and what is not known is named."""

import math
from dataclasses import replace

import numpy as np
import pytest

from core.budget import Budget, budget_of
from core.diode import OneDiode
from core.metrics import measure
from core.quantity import Metrics, Quantity
from core.steps import add_sweeps, apply, set_group, state
from core.sweep import Conditions, Sweep
from core.verdict import AREA, DIRECTION, LAMP, METRICS, NOISE, SCATTER, stands_out
from core.workspace import Workspace


def metrics(power=0.0187, *, noise=1e-5, jsc=0.022, voc=1.1):
    """Metrics with a given power [W cm⁻²]; noise is its standard uncertainty."""
    nothing = Quantity(reason="not looked at")
    return Metrics(
        jsc=Quantity(jsc, noise),
        voc=Quantity(voc, 1e-4),
        jmp=nothing,
        vmp=nothing,
        pmp=Quantity(power, noise),
        fill_factor=Quantity(power / (jsc * voc), 1e-3),
        efficiency=Quantity(power / 0.1, noise / 0.1),
        slope_resistance_jsc=nothing,
        slope_resistance_voc=nothing,
    )


def weigh(first, second, budget=Budget(), metric="pmp"):
    return stands_out(first, second, budget).by_metric[metric]


def parts(verdict):
    return {part.name: part.uncertainty for part in verdict.contributions}


FULL = Budget(
    area_a=0.005,
    area_b=0.005,
    lamp=0.003,
    other_direction_a=metrics(0.0186),
    other_direction_b=metrics(0.0199),
    group_a=(metrics(0.0186), metrics(0.0188), metrics(0.0187)),
    group_b=(metrics(0.0199), metrics(0.0201), metrics(0.0200)),
)


def test_noise_alone_never_makes_a_difference_stand_out():
    verdict = weigh(metrics(0.0187), metrics(0.0250))
    assert verdict.word == "cannot be told"
    for name in (AREA, LAMP, DIRECTION, SCATTER):
        assert name in verdict.missing
        assert name in verdict.sentence


@pytest.mark.parametrize("budget", [
    Budget(lamp=0.0),
    Budget(area_a=0.0, area_b=0.0),
    Budget(area_a=0.02, area_b=0.02, area_shared=True),
])  # fmt: skip
def test_contributions_of_zero_or_in_common_do_not_lend_weight_to_noise(budget):
    assert weigh(metrics(0.0187), metrics(0.0250), budget).word == "cannot be told"


def test_a_difference_within_the_noise_may_be_chance():
    verdict = weigh(metrics(0.0187), metrics(0.01871))
    assert verdict.word == "may be chance"
    assert "only adding to that" in verdict.sentence and AREA in verdict.sentence


def test_a_large_difference_with_a_full_budget_stands_out():
    verdict = weigh(metrics(0.0187), metrics(0.0200), FULL)
    assert verdict.word == "stands out"
    assert verdict.missing == ()
    assert "not known" not in verdict.sentence.lower()
    assert verdict.contributions[0].name in verdict.sentence


def test_the_largest_contribution_stands_first_and_in_the_sentence():
    verdict = weigh(metrics(0.0187), metrics(0.0200), replace(FULL, lamp=0.05))
    assert verdict.contributions[0].name == LAMP
    assert verdict.word == "may be chance"
    assert "most of which is lamp" in verdict.sentence


def test_contributions_combine_in_quadrature():
    """Independent contributions: JCGM 100:2008, 5.1.2."""
    verdict = weigh(metrics(0.0187), metrics(0.0200), FULL)
    found = parts(verdict)
    assert found[NOISE] == pytest.approx(math.sqrt(2) * 1e-5)
    assert found[AREA] == pytest.approx(0.005 * math.hypot(0.0187, 0.0200))
    assert found[LAMP] == pytest.approx(0.003 * math.hypot(0.0187, 0.0200))
    # Half-width a of a rectangle: a/√3 (JCGM 100:2008, 4.3.7); both gaps are 1e-4.
    assert found[DIRECTION] == pytest.approx(math.sqrt(2) * 0.5e-4 / math.sqrt(3))
    assert found[SCATTER] == pytest.approx(math.sqrt(2) * 1e-4)
    assert verdict.uncertainty == pytest.approx(math.sqrt(sum(u**2 for u in found.values())))
    assert verdict.difference == pytest.approx(0.0013)


def test_the_textbook_sum_of_relative_contributions():
    """Jsc 0.9, Voc 0.3, FF 0.5 and area 0.4 % give 1.145 % (recomputed): quadrature, each once."""
    assert math.sqrt(0.9**2 + 0.3**2 + 0.5**2 + 0.4**2) == pytest.approx(1.145, abs=5e-4)
    one_sided = Budget(area_a=0.004, area_b=0.0, lamp=0.0)
    verdict = weigh(metrics(1.0, noise=math.sqrt(0.9**2 + 0.3**2 + 0.5**2) / 100), metrics(1.0, noise=0.0), one_sided)
    assert 100 * verdict.uncertainty == pytest.approx(1.145, abs=5e-4)


def test_irradiance_enters_the_efficiency_once():
    """It scaled the power already; dividing by the nominal irradiance does not bring it in again."""
    budget = Budget(lamp=0.01)
    power, efficiency = (weigh(metrics(), metrics(), budget, metric) for metric in ("pmp", "efficiency"))
    assert parts(efficiency)[LAMP] / metrics().efficiency.value == pytest.approx(parts(power)[LAMP] / metrics().pmp.value)


def test_the_lamp_moves_voc_by_a_quarter_millivolt_per_cent():
    """n·Vt·u(G)/G = 0.257 mV per 1 % at n = 1 (algebra)."""
    verdict = weigh(metrics(), metrics(), Budget(lamp=0.01), "voc")
    assert 1e3 * parts(verdict)[LAMP] / math.sqrt(2) == pytest.approx(0.257, abs=1e-3)
    doubled = weigh(metrics(), metrics(), Budget(lamp=0.01, ideality=2.0), "voc")
    assert parts(doubled)[LAMP] == pytest.approx(2 * parts(verdict)[LAMP])


def test_area_and_lamp_do_not_touch_the_fill_factor():
    assert set(parts(weigh(metrics(), metrics(), FULL, "fill_factor"))) == {NOISE, DIRECTION, SCATTER}
    assert AREA not in parts(weigh(metrics(), metrics(), FULL, "voc"))


def test_a_shared_aperture_cancels():
    apart = parts(weigh(metrics(0.0187), metrics(0.0190), Budget(area_a=0.02, area_b=0.02)))
    shared = parts(weigh(metrics(0.0187), metrics(0.0190), Budget(area_a=0.02, area_b=0.02, area_shared=True)))
    assert shared[AREA] == pytest.approx(0.02 * 0.0003)
    assert shared[AREA] < 0.02 * apart[AREA]


def test_what_only_one_side_knows_is_a_lower_bound_and_the_missing_side_is_named():
    budget = Budget(area_a=0.01, other_direction_b=metrics(0.0180), group_a=FULL.group_a)
    verdict = stands_out(metrics(), metrics(0.0190), budget, names=("K07", "K11")).by_metric["pmp"]
    assert set(verdict.missing) == {f"{AREA} of K11", f"{DIRECTION} of K07", f"{SCATTER} of K11", LAMP}
    assert all(name in verdict.sentence for name in verdict.missing)
    found = parts(verdict)
    assert found[AREA] == pytest.approx(0.01 * 0.0187)
    assert found[DIRECTION] == pytest.approx(0.5 * 0.0010 / math.sqrt(3))
    assert found[SCATTER] == pytest.approx(1e-4)
    assert not any(part.whole for part in verdict.contributions if part.name != NOISE)


def test_nothing_stands_out_within_the_known_gap_of_one_device():
    """Forward and reverse of A lie 1.0 mW cm⁻² apart; B has one direction only. All else is known to next to nothing."""
    sharp = Budget(area_a=1e-4, area_b=1e-4, lamp=1e-4, other_direction_a=metrics(0.0197))
    for smaller in (0.0003, 0.0006, 0.00099):
        verdict = weigh(metrics(0.0187), metrics(0.0187 + smaller), sharp)
        assert verdict.word == "may be chance" and verdict.reach >= 0.0010 - 1e-12
    assert "differ by as much" in verdict.sentence
    assert weigh(metrics(0.0187), metrics(0.0187 + 0.0012), sharp).word == "stands out"
    without = replace(sharp, other_direction_a=None)
    assert weigh(metrics(0.0187), metrics(0.0187 + 0.0006), without).word == "stands out"


def test_what_one_side_alone_knows_lends_no_weight():
    assert weigh(metrics(0.0187), metrics(0.0250), Budget(other_direction_a=metrics(0.0188))).word == "cannot be told"
    assert weigh(metrics(0.0187), metrics(0.0250), Budget(area_b=0.001)).word == "cannot be told"


def test_few_pixels_widen_the_reach():
    """Welch–Satterthwaite and Student's factor (JCGM 100:2008, G.4.1): two pixels a side give 2 degrees of freedom."""
    quiet = metrics(0.0187, noise=0.0)
    two = Budget(group_a=(metrics(0.0186), metrics(0.0188)), group_b=(metrics(0.0186), metrics(0.0188)))
    verdict = weigh(quiet, quiet, two)
    assert verdict.reach / verdict.uncertainty == pytest.approx(4.3027, abs=1e-4)  # Student's t, 97.5 %, 2
    many = Budget(group_a=two.group_a * 50, group_b=two.group_b * 50)
    verdict = weigh(quiet, quiet, many)
    assert verdict.reach / verdict.uncertainty == pytest.approx(1.9935, abs=1e-3)  # 0.3674 · 198 = 72


def pixels(*powers):
    return tuple(metrics(1e-3 * power) for power in powers)


def test_a_pixel_under_the_mask_does_not_set_the_scatter_of_its_group():
    sound = (18.6, 18.7, 18.8, 18.9, 18.5, 18.7, 18.8, 18.6, 18.9, 18.7)
    odd = Budget(group_a=pixels(*sound, 11.2, 9.8), group_b=pixels(*sound))
    clean = Budget(group_a=pixels(*sound), group_b=pixels(*sound))
    scatters = [parts(weigh(metrics(), metrics(), budget))[SCATTER] for budget in (odd, clean)]
    assert scatters[0] < 1.5 * scatters[1]
    assert float(np.std([*sound, 11.2, 9.8])) > 10 * float(np.std(sound))


@pytest.mark.parametrize("size", [5, 6, 8, 12, 24])
def test_the_robust_scatter_of_normal_pixels_is_their_standard_deviation(size):
    """The factor n/(n − 0.8) for few values, checked by simulation."""
    drawn = np.random.default_rng(size).normal(18.7, 0.2, (400, size))
    mean = np.mean([parts(weigh(metrics(), metrics(), Budget(group_a=pixels(*row), group_b=pixels(*row))))[SCATTER] for row in drawn])
    assert 1e3 * mean / math.sqrt(2) == pytest.approx(0.2, rel=0.08)


def test_the_reach_without_pixels_is_that_of_a_normal_distribution():
    verdict = weigh(metrics(), metrics(), Budget(area_a=0.01, area_b=0.01))
    assert verdict.reach / verdict.uncertainty == pytest.approx(1.959964, abs=1e-5)


def test_the_sentence_says_how_much_of_the_unknown_would_overturn_it():
    known = Budget(area_a=0.005, area_b=0.005)
    verdict = weigh(metrics(0.0187), metrics(0.0200), known)
    assert verdict.word == "stands out"
    said = float(verdict.sentence.split("±")[1].split(" %")[0]) / 100 * 0.01935
    assert math.hypot(verdict.reach, said) == pytest.approx(verdict.difference, rel=0.05)


def test_a_metric_that_is_not_reached_cannot_be_told():
    lost = replace(metrics(), voc=Quantity(reason="not reached: the current does not come to zero within the sweep"))
    verdict = weigh(metrics(), lost, FULL, "voc")
    assert (verdict.word, verdict.difference) == ("cannot be told", None)
    assert "does not come to zero" in verdict.sentence


def test_without_any_knowledge_nothing_is_said():
    bare = replace(metrics(), pmp=Quantity(0.0187, None))
    verdict = weigh(bare, bare)
    assert (verdict.word, verdict.uncertainty) == ("cannot be told", None)
    assert NOISE in verdict.missing


def test_swapping_the_sides_turns_the_difference_and_keeps_the_word():
    there = stands_out(metrics(0.0187), metrics(0.0200), FULL).by_metric
    turned = replace(
        FULL,
        other_direction_a=FULL.other_direction_b,
        other_direction_b=FULL.other_direction_a,
        group_a=FULL.group_b,
        group_b=FULL.group_a,
    )
    back = stands_out(metrics(0.0200), metrics(0.0187), turned).by_metric
    for metric in METRICS:
        assert back[metric].difference == -there[metric].difference
        assert back[metric].reach == pytest.approx(there[metric].reach)
        assert back[metric].word == there[metric].word


def test_two_sweeps_of_one_device_share_its_area_and_are_not_asked_for_pixels():
    one = stands_out(metrics(0.0187), metrics(0.0200), Budget(same_device=True)).by_metric
    assert one["pmp"].missing == (LAMP,)
    assert one["fill_factor"].missing == ()
    assert {verdict.word for verdict in one.values() if abs(verdict.difference) > verdict.reach} == {"cannot be told"}
    assert "Not known" not in one["fill_factor"].sentence and LAMP in one["pmp"].sentence


def swept(device, direction="forward", photocurrent=0.022):
    voltage = np.arange(-0.1, 1.2, 0.01)
    current = OneDiode(photocurrent, 5e-14, 1.6, 3.0, 2000.0).current(voltage)
    if direction == "reverse":
        voltage, current = voltage[::-1], current[::-1] * 1.01
    return Sweep(
        voltage, current, per_area=True, read_as="density", direction=direction, name=f"{device} {direction}", device=device,
        conditions=Conditions(),
    )  # fmt: skip


def test_a_workspace_knows_the_other_direction_and_the_group():
    sweeps = [swept("A"), swept("A", "reverse"), swept("B", photocurrent=0.0225), swept("C", photocurrent=0.0215), swept("D")]
    workspace = Workspace("w", "w")
    workspace = apply(workspace, add_sweeps(workspace, sweeps, source=None, source_name="x.csv"))
    ids = {entry.name: entry.id for entry in workspace.entries.values()}
    devices = {device.name: device.id for device in workspace.devices.values()}
    workspace = apply(workspace, set_group(workspace, [devices[name] for name in "ABC"], "first"))
    asked = []

    def metrics_of(entry_id):
        asked.append(entry_id)
        return measure(workspace.sweep(entry_id))

    for name, value in (("area_uncertainty", 0.01), ("lamp_uncertainty", 0.002)):
        workspace = apply(workspace, state(workspace, name, value))
    budget = budget_of(workspace, ids["A forward"], ids["D forward"], metrics_of)
    assert budget.other_direction_a.jsc.value == pytest.approx(1.01 * 0.022, rel=3e-3)
    assert budget.other_direction_b is None
    assert sorted(member.jsc.value for member in budget.group_a) == pytest.approx([0.0215, 0.022, 0.0225], rel=3e-3)
    assert budget.group_b == ()
    assert (budget.area_a, budget.area_b, budget.lamp) == (0.01, 0.01, 0.002)
    assert ids["A reverse"] in asked
    same = budget_of(workspace, ids["A forward"], ids["A reverse"], metrics_of)
    assert same.same_device and same.area_shared and same.other_direction_a is None
