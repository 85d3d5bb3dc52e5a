"""Which model a screen takes for a sweep, and where it says that it comes from."""

from dataclasses import replace

import pytest

from app.states import state_of
from core import steps
from core.errors import FitFailed
from core.first_guess import first_guess
from core.models import two_diodes_like
from core.refine import FitSettings, refine
from tests.app.benches import CELL, IN_THE_DARK, LIT, bench, sweep_of

HAND = replace(CELL, ideality=1.7)
FITTED = "fitted for this screen; refine on the bench to keep that"
BY_HAND = "laid by hand and not refined"


def test_a_refined_model_is_taken_with_its_uncertainty_and_needs_no_words():
    workspace, (entry,) = bench(LIT)
    found = refine(LIT)
    workspace = steps.apply(workspace, steps.record_refinement(workspace, entry, found))
    state = state_of(workspace, entry)
    assert (state.model, state.source) == (found.model, "")
    assert state.known == workspace.refined(entry)


def test_a_model_moved_after_refining_is_the_hand_s():
    workspace, (entry,) = bench(LIT)
    workspace = steps.apply(workspace, steps.record_refinement(workspace, entry, refine(LIT)))
    workspace = steps.apply(workspace, steps.set_model(workspace, entry, HAND))
    state = state_of(workspace, entry)
    assert (state.model, state.known, state.source) == (HAND, HAND, BY_HAND)


@pytest.mark.parametrize("model", [None, first_guess(LIT)], ids=["no model", "the first guess"])
def test_nobody_s_opinion_gives_way_to_a_fit_that_says_so(model):
    workspace, (entry,) = bench(LIT, models=(model,))
    state = state_of(workspace, entry)
    assert (state.model, state.source) == (refine(LIT).model, FITTED)
    assert state.known.model == state.model and state.known.standard_errors
    assert workspace.fit(entry).model == model, "nothing is written"


def test_where_no_curve_can_be_laid_there_is_no_state():
    few = sweep_of(CELL, points=3)
    with pytest.raises(FitFailed):
        refine(few)
    workspace, (entry,) = bench(few)
    assert state_of(workspace, entry) is None


def test_two_diodes_stand_beside_the_one_diode_fit_that_speaks_for_them():
    two = two_diodes_like(HAND)
    workspace, (entry,) = bench(LIT, models=(two,))
    state = state_of(workspace, entry)
    assert (state.known, state.source) == (two, BY_HAND)
    assert state.model == refine(LIT).model
    found = refine(LIT, settings=FitSettings(model="two diodes"))
    workspace = steps.apply(workspace, steps.record_refinement(workspace, entry, found))
    state = state_of(workspace, entry)
    assert (state.known, state.source) == (workspace.refined(entry), "")
    assert state.model == refine(LIT).model


def test_two_diodes_in_the_dark_have_a_state_too():
    workspace, (entry,) = bench(IN_THE_DARK, models=(two_diodes_like(replace(CELL, photocurrent=0.0)),))
    assert state_of(workspace, entry).model.photocurrent == 0.0
