"""Which points a fit uses, and the steps that leave points out or take them back."""

from dataclasses import replace

import numpy as np
import pytest

from core import steps
from core.fit_problem import used
from core.fit_settings import FitSettings
from core.point_choice import leave_out_box, use_all
from core.sweep import Conditions
from tests.core.workspaces import (
    MODEL,
    entry_named,
    invented_sweep,
    refinement,
    workspace_with,
)

WHOLE = (-10.0, 10.0)


@pytest.fixture
def one():
    workspace = workspace_with(invented_sweep())  # twelve points from 0 to 1.1 V
    return workspace, entry_named(workspace, "forward").id


def boxed(one, voltage, current=WHOLE):
    workspace, entry = one
    step = leave_out_box(workspace, entry, voltage, current)
    after = workspace if step is None else steps.apply(workspace, step)
    return step, (after, entry), after.fit(entry).settings.excluded


@pytest.mark.parametrize(
    ("settings", "kept"),
    [
        (FitSettings(), range(12)),
        (FitSettings(excluded=(0, 5, 11)), [1, 2, 3, 4, 6, 7, 8, 9, 10]),
        (FitSettings(window=(0.25, 0.55)), [3, 4, 5]),
        (FitSettings(window=(0.25, 0.55), excluded=(4, 9)), [3, 5]),
        (FitSettings(excluded=(40, -1)), range(12)),
    ],
    ids=["all", "excluded", "window", "both", "points that are not there"],
)
def test_the_mask_follows_window_and_excluded_points(settings, kept):
    assert np.flatnonzero(used(invented_sweep(), settings)).tolist() == list(kept)


def test_points_that_are_not_numbers_are_never_used():
    sweep = invented_sweep()
    current = sweep.current.copy()
    current[3] = np.nan
    mask = used(replace(sweep, current=current), FitSettings())
    assert np.flatnonzero(~mask).tolist() == [3]


def test_a_box_leaves_out_what_lies_inside_it_in_any_order_of_corners(one):
    step, after, chosen = boxed(one, (0.55, 0.25))
    assert chosen == (3, 4, 5) and step["label"] == "leave out 3 points"
    assert boxed(one, (0.25, 0.55))[2] == chosen
    assert boxed(one, (0.25, 0.35))[0]["label"] == "leave out 1 point"


def test_a_box_holds_points_by_their_current_too(one):
    workspace, entry = one
    sweep = workspace.sweep(entry)
    high = sweep.current >= 0.02
    assert boxed(one, WHOLE, (0.03, 0.02))[2] == tuple(np.flatnonzero(high))
    assert 0 < high.sum() < 12


def test_further_boxes_add_and_a_box_of_points_all_out_takes_them_back(one):
    _, after, chosen = boxed(one, (0.25, 0.55))
    _, after, chosen = boxed(after, (0.45, 0.75))
    assert chosen == (3, 4, 5, 6, 7), "a box that holds one point still used leaves out"
    step, after, chosen = boxed(after, (0.35, 0.65))
    assert chosen == (3, 7) and step["label"] == "take back 3 points"


def test_a_box_without_points_is_no_step(one):
    assert boxed(one, (0.32, 0.38))[0] is None
    assert boxed(one, WHOLE, (5.0, 6.0))[0] is None


def test_in_the_dark_a_box_holds_the_size_of_the_current():
    dark = invented_sweep(name="dark", conditions=Conditions(area=0.1, lit=False, irradiance=0.0))
    dark = replace(dark, current=-np.geomspace(1e-9, 1e-2, 12))
    workspace = workspace_with(dark)
    one = workspace, entry_named(workspace, "dark").id
    assert boxed(one, WHOLE, (1e-9, 1e-8))[2] == (0, 1)


def test_the_model_and_the_last_refinement_stay_when_points_are_left_out(one):
    workspace, entry = one
    workspace = steps.apply(workspace, steps.record_refinement(workspace, entry, refinement()))
    _, (after, _), _ = boxed((workspace, entry), (0.25, 0.55))
    assert after.fit(entry).model == MODEL
    # The refinement remembers what it was made with.
    assert after.fit(entry).refinement.settings.excluded == ()


def test_the_step_can_be_undone_and_use_all_takes_everything_back(one):
    workspace, entry = one
    windowed = steps.set_fit_settings(workspace, entry, FitSettings(window=(0.1, 0.9), loss="robust"))
    workspace = steps.apply(workspace, windowed)
    step, (after, _), _ = boxed((workspace, entry), (0.25, 0.55))
    undone = steps.apply(after, steps.inverse(workspace, step))
    assert undone.fits == workspace.fits
    assert steps.apply(after, use_all(after, entry)).fit(entry).settings == FitSettings(loss="robust")
