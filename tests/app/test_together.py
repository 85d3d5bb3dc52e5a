"""Sweeps of one device refined together: what the panel offers, and the step that comes of it."""

from dataclasses import replace

import pytest

from app import insight
from app.hand import step_for
from app.places import SAMPLE_SWEEPS
from app.together import offered
from app.units import Units
from core import steps
from core.errors import StepRefused
from core.joint import refine_together
from core.profile import profile_intervals
from core.reading import read_sweeps
from core.refine import refine
from core.workspace import Workspace
from tests.app.benches import intervals


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


# Intervals of a joint fit

@pytest.fixture(scope="module")
def joined(levels):
    entries = list(levels.entries)[:3]
    return steps.apply(levels, step_for(levels, event(entries))[0]), entries


def test_intervals_after_refining_together_are_those_of_the_joint_fit(joined):
    workspace, entries = joined
    for entry in entries:
        shown = intervals(workspace, entry)
        assert "profile likelihood of all sweeps refined together" in shown["sentence"]
        assert [row["name"] for row in shown["rows"]] == [
            "photocurrent", "saturation current", "ideality factor", "series resistance", "shunt resistance",
        ]  # fmt: skip
        refined, units = workspace.refined(entry), Units.of(workspace.sweep(entry).per_area)
        found = profile_intervals(workspace.sweep(entry), refined, beside=workspace.beside(entry))
        assert shown["rows"][3]["words"] == insight.interval_words(found["series_resistance"], units, "series_resistance")
    alone = profile_intervals(workspace.sweep(entries[0]), refine(workspace.sweep(entries[0])))["series_resistance"]
    found = profile_intervals(workspace.sweep(entries[0]), workspace.refined(entries[0]), beside=workspace.beside(entries[0]))
    assert found["series_resistance"].high - found["series_resistance"].low < alone.high - alone.low


def test_a_parameter_that_sweeps_share_has_the_same_words_for_each(joined):
    workspace, entries = joined
    words = [[row["words"] for row in intervals(workspace, entry)["rows"]] for entry in entries]
    assert words[0][1:4] == words[1][1:4] == words[2][1:4]
    assert len({row[0] for row in words}) == 3


def test_intervals_stay_while_another_sweep_s_dial_moves(joined):
    workspace, entries = joined
    before = intervals(workspace, entries[0])
    moved = replace(workspace.fit(entries[1]).model, ideality=1.9)
    workspace = steps.apply(workspace, steps.set_model(workspace, entries[1], moved))
    assert intervals(workspace, entries[0]) == before


def test_intervals_are_refused_with_a_sentence_once_another_sweep_is_gone_or_refined_anew(joined):
    workspace, entries = joined
    anew = steps.record_refinement(workspace, entries[1], refine(workspace.sweep(entries[1])))
    hotter = steps.set_conditions(workspace, entries[1], temperature=310.0)
    pair = step_for(workspace, event(entries[1:]))[0]
    for step in (anew, hotter, pair, steps.remove_entries(workspace, [entries[1]])):
        after = steps.apply(workspace, step)
        shown = intervals(after, entries[0])
        assert shown["rows"] == [] and "refine them together again" in shown["sentence"]
        back = steps.apply(after, steps.inverse(workspace, step))
        assert intervals(back, entries[0])["rows"]


def test_a_joint_refinement_of_before_still_loads_and_asks_to_be_made_again(joined):
    workspace, entries = joined
    record = workspace.record("fits", entries[0])
    del record["refinement"]["bond"]
    old = steps.apply(workspace, {"label": "old", "put": {"fits": {entries[0]: record}}})
    shown = intervals(old, entries[0])
    assert shown["rows"] == [] and "refine them together again" in shown["sentence"]
