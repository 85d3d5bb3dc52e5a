"""Refining the whole tray: progress, one step at the end, and what changed meanwhile stays."""

import contextlib
from dataclasses import replace

import pytest
from dash import no_update

from app.callbacks import batch
from app.jobs import Failure, Status
from core import steps
from core.errors import StaleRevision, StepRefused
from core.fit_settings import FitSettings
from core.store import Store
from tests.app.benches import CELL, LIT, OTHER, REVERSE, sweep_of
from tests.app.desk import Desk


class PatientJobs:
    """Computes in this process, when told to."""

    def __init__(self):
        self.items, self.results, self.failures, self.cancelled = {}, {}, [], []

    def submit(self, function, arguments, *, label, name):
        self.label, self.function, self.items = label, function, dict(enumerate(arguments))
        self.total = len(arguments)
        return "job"

    def compute(self, count=None):
        for place in list(self.items)[:count]:
            try:
                self.results[place] = self.function(*self.items.pop(place))
            except Exception as error:
                self.failures.append(Failure(place, str(error)))

    def status(self, name):
        if name != "job":
            return Status("", 0, 0, "lost")
        state = "running" if self.items else "cancelled" if self.cancelled else "done"
        return Status(self.label, self.total - len(self.items), self.total, state, tuple(self.failures))

    def take(self, name):
        taken, self.results = list(self.results.items()), {}
        return taken

    def cancel(self, name):
        self.cancelled.append(name)
        self.items = {}


@pytest.fixture
def store(tmp_path):
    with contextlib.closing(Store(tmp_path)) as store:
        yield store


@pytest.fixture
def jobs():
    return PatientJobs()


@pytest.fixture
def desk(store, jobs):
    return Desk(batch, store, jobs)


def begun(store, jobs, workspace):
    return batch.begin(store, jobs, {"kind": "refine-all", "workspace": workspace, "event": "e"})


def started(jobs, store, *sweeps):
    name = store.first()
    workspace = store.commit(name, steps.add_sweeps(store.current(name), sweeps), 0)
    ids = [next(e.id for e in workspace.entries.values() if e.name == sweep.name) for sweep in sweeps]
    return begun(store, jobs, name), ids


def test_progress_is_shown_until_the_results_enter_as_one_step(desk, store, jobs):
    job, ids = started(jobs, store, LIT, REVERSE, OTHER)
    name = job["workspace"]
    assert set(job["entries"]) == set(ids)
    assert desk.watch(job) == (False, False, True) and desk.watch(None) == (True, True, False)
    assert desk.follow(1, job) == ("refining 0 of 3", no_update, no_update)
    jobs.compute(2)
    assert desk.follow(2, job) == ("refining 2 of 3", no_update, no_update)
    assert store.current(name).revision == 1, "nothing enters before the end"
    jobs.compute()
    line, after, answer = desk.follow(3, job)
    assert (line, after) == ("", None)
    assert answer == {"workspace": name, "revision": 2, "event": None, "outcome": "done", "sentence": "3 of 3 sweeps refined."}
    workspace = store.current(name)
    assert all(workspace.refined(entry) is not None for entry in ids)
    assert store.history(name).undo == "refine 3 sweeps"
    assert store.undo(name, 2).fits == {}


def test_one_sweep_whose_fit_takes_long_is_a_job_too_and_says_nothing_but_its_failure(desk, store, jobs):
    name = store.first()
    workspace = store.commit(name, steps.add_sweeps(store.current(name), [LIT, OTHER]), 0)
    first, second = (e.id for e in workspace.in_tray_order())
    event = {"kind": "refine", "entry": first, "workspace": name, "event": "e"}
    assert not batch.is_job(workspace, event) and batch.is_job(workspace, {"kind": "refine-all"})
    free = FitSettings(model="two diodes", hold=frozenset({"ideality_1"}))
    workspace = store.commit(name, steps.set_fit_settings(workspace, first, free), 1)
    assert batch.is_job(workspace, event) and not batch.is_job(workspace, {**event, "entry": second})
    job = batch.begin(store, jobs, event)
    assert job["entries"] == [first]
    with pytest.raises(StepRefused, match="already"):
        batch.begin(store, jobs, {**event, "event": "another"}, job)
    jobs.compute()
    assert desk.follow(1, job)[2]["sentence"] == ""
    assert store.current(name).refined(first).settings == free
    failed = Status("refining", 1, 1, "done", (Failure(0, "Too few points."),))
    assert batch.outcome(failed, 0, 0, alone=True) == "Too few points."


def test_without_a_job_the_clock_changes_nothing(desk):
    assert desk.follow(1, None) == (no_update,) * 3


def test_each_sweep_is_refined_from_its_own_model_and_settings(desk, store, jobs):
    name = store.first()
    workspace = store.commit(name, steps.add_sweeps(store.current(name), [LIT, OTHER]), 0)
    first, second = (e.id for e in workspace.in_tray_order())
    held = FitSettings(hold=frozenset({"ideality"}))
    workspace = store.commit(name, steps.set_model(workspace, first, replace(CELL, ideality=1.3)), 1)
    workspace = store.commit(name, steps.set_fit_settings(workspace, first, held), 2)
    job = begun(store, jobs, name)
    jobs.compute()
    desk.follow(1, job)
    fits = store.current(name).fits
    assert fits[first].model.ideality == 1.3 and fits[first].settings == held
    assert fits[second].model.ideality == pytest.approx(1.6, abs=0.02)


def test_what_could_not_be_refined_is_counted_with_the_first_reason(desk, store, jobs):
    job, (good, few) = started(jobs, store, LIT, sweep_of(CELL, "few", device="F", points=3))
    jobs.compute()
    sentence = desk.follow(1, job)[2]["sentence"]
    assert sentence.startswith("1 of 2 sweeps refined. 1 could not be; the first said: ") and sentence.endswith(".")
    assert store.current(job["workspace"]).refined(good) is not None
    assert few not in store.current(job["workspace"]).fits


def test_stopping_keeps_what_was_done(desk, store, jobs):
    job, _ = started(jobs, store, LIT, REVERSE, OTHER)
    jobs.compute(1)
    desk.cancel(1, job)
    assert jobs.cancelled == ["job"]
    assert desk.follow(1, job)[2]["sentence"] == "1 of 3 sweeps refined."
    assert len(store.current(job["workspace"]).fits) == 1
    desk.cancel(1, None)
    assert jobs.cancelled == ["job"]


def test_a_sweep_that_left_the_tray_meanwhile_is_left_out(desk, store, jobs):
    job, (lit, other) = started(jobs, store, LIT, OTHER)
    name = job["workspace"]
    store.commit(name, steps.remove_entries(store.current(name), [lit]), 1)
    jobs.compute()
    assert desk.follow(1, job)[2]["sentence"] == "1 of 2 sweeps refined. 1 was changed or removed meanwhile and left alone."
    assert set(store.current(name).fits) == {other}


@pytest.mark.parametrize("change", [{"area": 0.2}, {"temperature": 310.0}, {"series_cells": 2}], ids=str)
def test_a_result_under_conditions_that_no_longer_hold_is_not_laid_over_the_sweep(desk, store, jobs, change):
    job, (lit, other) = started(jobs, store, LIT, OTHER)
    name = job["workspace"]
    jobs.compute()
    workspace = store.commit(name, steps.set_conditions(store.current(name), lit, **change), 1)
    answer = desk.follow(1, job)[2]
    assert answer["sentence"].startswith("1 of 2 sweeps refined.")
    assert store.current(name).fit(lit) == workspace.fit(lit)
    assert store.current(name).refined(other) is not None


def test_settings_changed_meanwhile_are_not_overwritten(desk, store, jobs):
    job, (lit, _) = started(jobs, store, LIT, OTHER)
    name, robust = job["workspace"], FitSettings(loss="robust")
    jobs.compute()
    store.commit(name, steps.set_fit_settings(store.current(name), lit, robust), 1)
    desk.follow(1, job)
    assert store.current(name).fit(lit).settings == robust


def test_steps_that_come_in_between_are_waited_out(desk, store, jobs, monkeypatch):
    job, (lit, other) = started(jobs, store, LIT, OTHER)
    name, commit, refusals = job["workspace"], store.commit, iter([True, True, False])

    def busy(workspace_id, step, seen):
        if next(refusals):
            raise StaleRevision(seen, seen + 1)
        return commit(workspace_id, step, seen)

    monkeypatch.setattr(store, "commit", busy)
    jobs.compute()
    assert desk.follow(1, job)[2]["sentence"] == "2 of 2 sweeps refined."
    assert set(store.current(name).fits) == {lit, other}


def test_a_job_that_the_server_no_longer_knows_ends_with_a_sentence(desk, store, jobs):
    job, _ = started(jobs, store, LIT)
    line, after, answer = desk.follow(1, {**job, "job": "gone"})
    assert (line, after) == ("", None) and answer["revision"] == 1
    assert answer["sentence"].endswith("Refine again.")
