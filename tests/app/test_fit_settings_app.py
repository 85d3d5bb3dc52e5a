"""Fit settings from the page: what is typed or chosen becomes a step, or a sentence that says why not."""

import math
from dataclasses import replace

import numpy as np
import pytest

from app.fit_settings import CHOICES
from app.hand import step_for
from app.layout.panels import SETTINGS
from core import steps
from core.errors import SweepbenchError
from core.fit_problem import used
from core.fit_settings import FitSettings
from core.two_diode import TwoDiode
from tests.app.benches import AMPERES, CELL, IN_THE_DARK, LIT, WITH_ERRORS, bench


@pytest.fixture
def lit():
    workspace, (entry,) = bench(LIT, models=(CELL,))
    return workspace, entry


def after(bench, event):
    workspace, entry = bench
    step, _ = step_for(workspace, {"entry": entry, **event})
    return step, (workspace if step is None else steps.apply(workspace, step)), entry


def settings_after(bench, *changes):
    for name, text in changes:
        _, workspace, entry = after(bench, {"kind": "setting", "name": name, "text": text})
        bench = workspace, entry
    return workspace.fit(entry).settings


def refusal(bench, **event):
    with pytest.raises(SweepbenchError) as refused:
        after(bench, event)
    assert str(refused.value).endswith(".")
    return str(refused.value)


def test_the_panel_offers_what_the_server_understands():
    offered = {name: tuple(options.split("|")) for name, _, _, options in SETTINGS if options}
    assert offered == CHOICES


@pytest.mark.parametrize(("name", "text"), [(name, text) for name in ("weights", "loss") for text in CHOICES[name]])
def test_a_choice_is_kept(name, text):
    workspace, (entry,) = bench(WITH_ERRORS, models=(CELL,))
    assert settings_after((workspace, entry), (name, text)) == replace(FitSettings(), **{name: text})


def test_a_change_says_what_it_was_and_leaves_the_model(lit):
    step, workspace, entry = after(lit, {"kind": "setting", "name": "loss", "text": "robust"})
    assert step["label"] == "change loss" and workspace.fit(entry).model == CELL


def test_the_other_model_is_laid_in_place_of_the_curve(lit):
    _, workspace, entry = after(lit, {"kind": "setting", "name": "model", "text": "two diodes"})
    fit = workspace.fit(entry)
    assert isinstance(fit.model, TwoDiode) and fit.settings.model == "two diodes"
    assert fit.settings.hold == {"ideality_1", "ideality_2"}


@pytest.mark.parametrize(
    ("changes", "window"),
    [
        ([("window_low", "0.2")], (0.2, 1.15)),
        ([("window_high", "0,9")], (0.0, 0.9)),
        ([("window_low", "0.2"), ("window_high", "0.9")], (0.2, 0.9)),
        ([("window_low", "0.2"), ("window_high", "0.9"), ("window_low", "")], (0.0, 0.9)),
        ([("window_low", "0.2"), ("window_low", " ")], None),
        ([("window_low", "-7"), ("window_high", "9")], None),
        ([("window_low", "0.2"), ("window_high", "inf")], (0.2, 1.15)),
        ([("window_low", "-inf")], None),
    ],
    ids=str,
)
def test_a_voltage_window_is_typed_end_by_end(lit, changes, window):
    assert settings_after(lit, *changes).window == window


def test_a_window_leaves_the_points_outside_it_out(lit):
    settings = settings_after(lit, ("window_low", "0.2"), ("window_high", "0.9"))
    kept = LIT.voltage[used(LIT, settings)]
    assert kept.min() >= 0.2 and kept.max() <= 0.9 and kept.size == np.sum((LIT.voltage >= 0.2) & (LIT.voltage <= 0.9))


@pytest.mark.parametrize(("text", "level"), [("68", 0.68), ("95.45 %", 0.9545), ("99%", 0.99), ("50", 0.5)])
def test_the_level_of_intervals_is_a_percentage(lit, text, level):
    assert settings_after(lit, ("confidence", text)).confidence == pytest.approx(level, rel=1e-12)


def test_the_noise_of_the_voltage_is_typed_in_millivolts_and_can_be_taken_away(lit):
    assert settings_after(lit, ("voltage_noise", "0.5")).voltage_noise == pytest.approx(5e-4)
    assert settings_after(lit, ("voltage_noise", "0.5"), ("voltage_noise", "")).voltage_noise is None


def test_the_noise_of_the_current_is_typed_in_the_unit_of_the_screen(lit):
    factor = 1e-3 if LIT.per_area else 1.0
    assert settings_after(lit, ("current_noise", "0.004")).current_noise == pytest.approx(0.004 * factor)
    assert settings_after(lit, ("current_noise", "0.004"), ("current_noise", "")).current_noise is None


@pytest.mark.parametrize(
    ("name", "text", "word"),
    [
        ("confidence", "100", "percentage"),
        ("confidence", "0.95", "percentage"),
        ("confidence", "inf", "percentage"),
        ("confidence", "", "left empty"),
        ("window_low", "1.2", "lower to a higher"),
        ("window_high", "0", "lower to a higher"),
        ("window_low", "half", "“half” is not a number"),
        ("window_low", "5 mA", "takes a number in V"),
        ("current_noise", "-1", "noise"),
        ("current_noise", "much", "“much” is not a number"),
        ("voltage_noise", "-1", "noise"),
        ("voltage_noise", "inf", "noise"),
        ("weights", "heavy", "“heavy”"),
        ("weights", "from the file", "no column with the standard deviation of the current"),
        ("model", "three diodes", "“three diodes”"),
        ("hold", "ideality", "Reload the page"),
        ("excluded", "1", "Reload the page"),
    ],
)
def test_what_makes_no_sense_is_refused_in_a_sentence(lit, name, text, word):
    assert word in refusal(lit, kind="setting", name=name, text=text)


def test_a_sweep_that_is_gone_is_refused(lit):
    workspace, _ = lit
    for event in ({"kind": "setting", "name": "loss", "text": "robust"}, {"kind": "use-all"}, {"kind": "leave-out", "box": [0, 1, 0, 1]}):
        refusal((workspace, "gone"), **event)


# Points left out

def excluded(bench, *box):
    step, workspace, entry = after(bench, {"kind": "leave-out", "box": list(box)})
    return step, workspace.fit(entry).settings.excluded


def test_a_box_is_in_the_units_of_the_screen(lit):
    step, chosen = excluded(lit, 0.5, 0.3, 0.0, 30.0)  # mA cm⁻²; corners in any order
    assert chosen == tuple(np.flatnonzero((LIT.voltage >= 0.3) & (LIT.voltage <= 0.5)))
    assert step["label"] == f"leave out {len(chosen)} points"
    assert excluded(lit, 0.3, 0.5, 0.0, 0.030) == (None, ()), "a box below the points holds none"


def test_a_box_without_area_is_in_amperes():
    workspace, (entry,) = bench(AMPERES, models=(CELL.scaled(0.1),))
    assert len(excluded((workspace, entry), 0.3, 0.5, 0.001, 0.003)[1]) > 3


def test_a_box_in_the_dark_holds_the_size_of_the_current():
    workspace, (entry,) = bench(IN_THE_DARK)
    size = 1e3 * np.abs(IN_THE_DARK.current)
    _, chosen = excluded((workspace, entry), 0.0, 2.0, 1e-30, np.median(size))
    assert chosen == tuple(np.flatnonzero(size <= np.median(size))) and len(chosen) == 28


def test_using_all_points_takes_back_window_and_points(lit):
    _, workspace, entry = after(lit, {"kind": "leave-out", "box": [0.3, 0.5, 0.0, 30.0]})
    _, workspace, entry = after((workspace, entry), {"kind": "setting", "name": "window_low", "text": "0.2"})
    step, workspace, entry = after((workspace, entry), {"kind": "use-all"})
    assert step["label"] == "use all points"
    assert workspace.fit(entry).settings == FitSettings()
    assert math.isclose(used(LIT, workspace.fit(entry).settings).mean(), 1.0)
