"""Sweeps of one device refined together: what the panel offers, and the step that comes of it."""

import pytest

from app.hand import step_for
from app.places import SAMPLE_SWEEPS
from app.together import offered
from core import steps
from core.errors import StepRefused
from core.joint import refine_together
from core.reading import read_sweeps
from core.workspace import Workspace


@pytest.fixture(scope="module")
def levels() -> Workspace:
    sweeps = read_sweeps((SAMPLE_SWEEPS / "K33_levels.tsv").read_bytes(), "K33_levels.tsv")
    empty = Workspace("w", "Levels")
    return steps.apply(empty, steps.add_sweeps(empty, sweeps, source="0" * 64, source_name="K33_levels.tsv"))


def event(entries, **shared):
    return {"kind": "together", "entry": entries[0], "entries": entries[1:], "shared": shared}


def test_the_other_sweeps_of_the_device_are_offered_with_what_they_share(levels):
    first, *others = levels.entries
    found = offered(levels, first)
    assert [s["entry"] for s in found["sweeps"]] == others
    assert {s["parameter"] for s in found["shared"] if s["on"]} == {"saturation_current", "ideality", "series_resistance"}


def test_the_step_keeps_what_core_finds_and_says_whether_the_sweeps_agree(levels):
    entries = list(levels.entries)
    step, sentence = step_for(levels, event(entries))
    after, expected = steps.apply(levels, step), refine_together([levels.sweep(e) for e in entries])
    assert sentence == ""
    for entry, refinement in zip(entries, expected.refinements, strict=True):
        assert after.fit(entry).model == refinement.model
        assert after.refined(entry).findings[: len(expected.findings)] == expected.findings
    assert expected.findings


def test_a_switch_leaves_a_parameter_to_each_sweep(levels):
    entries = list(levels.entries)[:3]
    step, _ = step_for(levels, event(entries, ideality=False))
    after = steps.apply(levels, step)
    assert len({after.fit(e).model.ideality for e in entries}) == 3
    assert len({after.fit(e).model.saturation_current for e in entries}) == 1


def test_one_sweep_alone_is_refused_with_a_sentence(levels):
    first = next(iter(levels.entries))
    with pytest.raises(StepRefused, match="at least one other sweep"):
        step_for(levels, event([first, first]))
