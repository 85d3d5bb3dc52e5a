"""The report says what the screens say: the same fit, intervals, verdict and losses, and nothing twice."""

import re
from dataclasses import replace

import pytest

from app.losses_scene import losses_of, losses_screen
from app.pair_scene import pair_screen
from app.report.shares import interval_words
from core import steps
from core.detailed_balance import limiting_diode
from core.diode import PARAMETERS
from core.first_guess import first_guess
from core.refine import FitSettings, refine
from core.shares import ladder
from core.sweep import Conditions
from core.verdict import METRICS
from tests.app.benches import (
    AMPERES,
    CELL,
    DARK,
    LAMP,
    LIT,
    OTHER,
    REVERSE,
    S_SHAPED,
    bench,
    intervals,
    sweep_of,
)
from tests.app.test_report import page_of, refined

ORDER = ("series_resistance", "shunt_resistance", "ideality", "photocurrent", "saturation_current")
STATEMENTS = (("area_uncertainty", 0.03), ("lamp_uncertainty", 0.02))


def guessed(*sweeps):
    """As the program leaves sweeps that nobody has touched."""
    return bench(*sweeps, models=[first_guess(sweep) for sweep in sweeps])


@pytest.mark.parametrize(("emission", "words"), [("front", "the front of the cell alone"), ("both", "both faces of the cell")])
def test_the_limit_is_that_of_the_emission_that_the_user_chose(emission, words):
    workspace, (entry,) = refined(LIT)
    text = page_of(workspace, [entry], emission=emission).text
    assert text.count(f"Limit with emission from {words}") == 1 and f"black-body emission from {words}" in text
    _, data = losses_screen(workspace, {"active": entry, "emission": emission})
    assert data["story"][0] in text


def test_the_ladder_stands_beside_the_shares_in_the_order_that_the_user_chose():
    workspace, (entry,) = refined(LIT)
    text = page_of(workspace, [entry], order=ORDER).text
    assert "Order of “one after another”: Rs, Rsh, n, Jph, J0" in text
    found = losses_of(workspace, entry, "front")
    rungs = ladder(limiting_diode(1.6), found.state.model, ORDER)
    for name in PARAMETERS:
        assert f"{1e3 * rungs[name]:+.2f}".replace("-", "−").replace("+0.00", "0.00") in text
    assert text != page_of(workspace, [entry]).text


def test_a_sweep_that_nobody_touched_is_told_by_a_fit_that_is_printed():
    workspace, (entry,) = guessed(LIT)
    text = page_of(workspace, [entry]).text
    assert "fitted for this report" in text and "by hand" not in text and "this screen" not in text
    fit = refine(LIT)
    assert f"points used {fit.points}" in text and f"{1e3 * fit.model.photocurrent:.1f}" in text
    assert workspace.fit(entry).model == first_guess(LIT)


@pytest.mark.parametrize("model", [replace(CELL, ideality=1.7), None], ids=["by hand", "refined"])
def test_what_the_user_did_is_called_so(model):
    workspace, (entry,) = bench(LIT, models=(model,)) if model else refined(LIT)
    text = page_of(workspace, [entry]).text
    assert ("laid by hand, not refined" in text) == bool(model) and "fitted for this report" not in text


def test_a_first_guess_that_no_fit_bears_out_is_called_one():
    workspace, (entry,) = guessed(S_SHAPED)
    text = page_of(workspace, [entry]).text
    assert "first guess, not refined" in text and "fitted for this report" not in text


def test_a_pair_names_the_fit_that_its_shares_rest_on():
    workspace, entries = guessed(LIT, OTHER)
    text = page_of(workspace, entries).text
    assert text.count("A forward: fitted for this report.") == 1 and "this screen" not in text


def test_two_diodes_and_the_one_diode_that_speaks_for_their_losses_are_both_printed():
    workspace, (entry,) = bench(LIT)
    workspace = steps.apply(workspace, steps.record_refinement(workspace, entry, refine(LIT, settings=FitSettings(model="two diodes"))))
    text = page_of(workspace, [entry]).text
    assert "forward, two diodes" in text and "forward, one diode" in text
    assert "fitted for this report, for the losses" in text and "Two-diode model" in text and "One-diode model" in text


@pytest.mark.parametrize("statements", [(), STATEMENTS, (*STATEMENTS, ("area_shared", True))], ids=["nothing", "budget", "one aperture"])
@pytest.mark.parametrize("sweeps", [(LIT, REVERSE, OTHER), (LIT, OTHER)], ids=["hysteresis", "one direction"])
def test_screen_and_report_give_the_same_verdict(sweeps, statements):
    workspace, entries = refined(*sweeps)
    for name, value in statements:
        workspace = steps.apply(workspace, steps.state(workspace, name, value))
    a, b = entries[0], entries[-1]
    *_, data = pair_screen(workspace, {"screen": "pair", "pair": {"a": a, "b": b}})
    page = page_of(workspace, [a, b], pair=(a, b))
    table = page.text[page.text.index("uncertainty mostly from") :]
    told = re.findall(r"stands out|may be chance|cannot be told", table[: table.index("Why the difference")])
    # One row for PCE and Pmp: at one sun their numbers are the same.
    assert told[:4] == [data["compared"][name]["verdict"] for name in METRICS[:4]]
    assert data["story"] in page.text or data["story"].split(" Assumed")[0] in page.text


def test_what_the_user_states_of_area_and_lamp_stands_beside_the_verdicts():
    workspace, entries = refined(LIT, OTHER)
    for name, value in (*STATEMENTS, ("area_shared", True)):
        workspace = steps.apply(workspace, steps.state(workspace, name, value))
    assert "Stated by the user: area ± 3 %, lamp ± 2 % and one aperture for all." in page_of(workspace, entries).text


def test_numbers_that_are_the_same_share_a_row_and_no_sentence_comes_twice():
    workspace, entries = refined(LIT, OTHER)
    text = page_of(workspace, entries).text
    pair = text[: text.index("Conditions")]
    assert "P mp (mW cm⁻²) = PCE (%)" in pair and "PCE (%) = P mp (mW cm⁻²)" in text
    sentences = [s for s in re.split(r"(?<=[.])\s+(?=[A-Z“])", pair) if len(s) > 60]
    assert len(sentences) == len(set(sentences))


def test_intervals_are_those_of_the_bench():
    workspace, (entry,) = refined(LIT)
    text = page_of(workspace, [entry]).text
    for row in intervals(workspace, entry)["rows"]:
        if " to " in row["words"]:
            low = row["words"].split(" to ")[0]
            assert low.partition("·")[0] in text, row
    assert "interval by profile likelihood" in text and "Intervals by profile likelihood" in text


def test_a_fit_without_profile_says_that_its_intervals_are_linear():
    workspace, (entry,) = refined(LIT)
    fit = workspace.fit(entry)
    lonely = replace(fit.refinement, others=1)  # refined together with a sweep that is gone
    workspace = replace(workspace, fits={entry: replace(fit, refinement=lonely)})
    text = page_of(workspace, [entry]).text
    assert "linear ones, from the covariance" in text and "Linear intervals" in text


@pytest.mark.parametrize(
    ("low", "high", "words"),
    [
        (-6.2009e-3, -6.1966e-3, "within 0.01"),
        (-6.23e-3, -6.17e-3, "−6.23 … −6.17"),
        (-7.9e-3, -4.1e-3, "−7.9 … −4.1"),
        (-90e-3, 10e-3, "−90 … +10"),
        (0.0, 0.0, "within 0.01"),
        (-float("inf"), 0.0, "–"),
    ],
)
def test_an_interval_of_a_share_is_as_fine_as_its_width_but_never_finer_than_a_hundredth(low, high, words):
    assert interval_words(low, high) == words


def test_no_share_is_finer_than_a_hundredth():
    workspace, entries = refined(LIT, OTHER)
    text = page_of(workspace, entries).text
    shares = text[text.index("in mW cm⁻² share") :]
    assert re.findall(r"[−+]\d+\.\d{3,}", shares[: shares.index("Checks")]) == []


def test_a_sweep_that_is_not_broken_down_has_its_limit_power_and_whole_gap():
    workspace, (entry,) = bench(S_SHAPED)
    workspace = steps.apply(workspace, steps.set_band_gap(workspace, entry, 1.6))
    page = page_of(workspace, [entry])
    _, data = losses_screen(workspace, {"active": entry})
    for sentence in data["story"]:
        assert page.text.count(sentence) == 1
    assert "not broken down" in page.text and "limit at 1.6 eV" in page.text and "in mW cm⁻² share" not in page.text


def test_a_pair_that_is_not_shared_out_says_what_was_measured():
    workspace, entries = bench(LIT, S_SHAPED)
    *_, data = pair_screen(workspace, {"screen": "pair", "pair": {"a": entries[0], "b": entries[1]}})
    assert data["story"] in page_of(workspace, entries).text


def test_a_shunt_is_one_only_where_the_dark_sweep_confirms_it():
    leaky = replace(CELL, shunt_resistance=300.0)
    lit = sweep_of(leaky, low=-0.2)
    workspace, entries = refined(lit, sweep_of(replace(leaky, photocurrent=0.0), "dark", conditions=DARK, low=-0.2))
    alone, (entry,) = refined(LIT)

    def losses(page):
        return page.text[page.text.index("Losses") : page.text.index("Checks")]

    assert "shunt or collection" not in losses(page_of(workspace, entries)) and "shunt" in losses(page_of(workspace, entries))
    assert "shunt or collection" in losses(page_of(alone, [entry]))


@pytest.mark.parametrize(
    "sentence", ["The band gap is assumed from the photocurrent", "The model is not refined, so the shares have no intervals."]
)
def test_remarks_on_losses_are_made_once(sentence):
    workspace, (entry,) = bench(LIT, models=(replace(CELL, ideality=1.7),))
    assert page_of(workspace, [entry]).text.count(sentence) == 1


def test_a_sweep_without_an_area_gets_the_reason_and_no_limit():
    workspace, (entry,) = guessed(AMPERES)
    text = page_of(workspace, [entry]).text
    assert "area" in text[text.index("Losses") : text.index("Checks")] and "limit at" not in text


@pytest.mark.parametrize(
    ("conditions", "words"),
    [(Conditions(), "Without an area there is no limit"), (replace(LAMP, series_cells=2), "that of 2 cells in series")],
    ids=["no area", "a string"],
)
def test_no_limit_of_one_junction_stands_beside_what_it_does_not_hold_for(conditions, words):
    area = 1.0 if conditions.area else 0.1
    bent = replace(S_SHAPED, current=S_SHAPED.current * area, per_area=conditions.area is not None, read_as="current", conditions=conditions)
    workspace, (entry,) = bench(bent)
    _, data = losses_screen(workspace, {"active": entry})
    assert "S-shaped" in data["refusal"] and words in data["refusal"]
    assert data["refusal"] in page_of(workspace, [entry]).text
