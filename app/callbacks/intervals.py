"""Intervals by profile likelihood: after the scene, and only while their panel is open; as a job where they take long."""

from __future__ import annotations

import hashlib
import pickle
from typing import Any

from dash import Dash, Input, Output, State, no_update

from app import insight
from app.ids import Id
from app.jobs import Jobs
from app.scene import active_entry, panel_of
from core.store import Store


def register(app: Dash, store: Store, jobs: Jobs) -> None:
    @app.callback(
        Output(Id.INTERVALS, "data"),
        Output(Id.INTERVALS_CLOCK, "disabled"),
        inputs={"revision": Input(Id.REVISION, "data"), "view": Input(Id.VIEW, "data"), "shown": State(Id.INTERVALS, "data")},
        prevent_initial_call=True,
    )
    def show_intervals(revision: dict[str, Any], view: dict[str, Any] | None, shown: dict[str, Any] | None) -> tuple:
        workspace, view = store.current(revision["workspace"]), view or {}
        entry = active_entry(workspace, view)
        if entry is None or panel_of(view) != "fit":
            return no_update, no_update
        question = insight.interval_question(workspace, entry)
        if question is None:
            return insight.UNREFINED, True
        if insight.is_quick(question):
            return insight.interval_rows(*question), True
        # The same question is the same job: what another step leaves as it was is not worked out again.
        name = hashlib.sha256(pickle.dumps(question)).hexdigest()
        before = (shown or {}).get("job", name)
        if before != name:
            jobs.cancel(before)
        jobs.submit(insight.interval_rows, [question], label="intervals", name=name)
        return {**insight.not_told("Working out the intervals …"), "job": name}, False

    @app.callback(
        Output(Id.INTERVALS, "data", allow_duplicate=True),
        Output(Id.INTERVALS_CLOCK, "disabled", allow_duplicate=True),
        Input(Id.INTERVALS_CLOCK, "n_intervals"),
        State(Id.INTERVALS, "data"),
        prevent_initial_call=True,
    )
    def follow_intervals(ticks: int, shown: dict[str, Any] | None) -> tuple:
        name = (shown or {}).get("job")
        if name is None:
            return no_update, True
        status = jobs.status(name)
        if not status.finished:
            return no_update, no_update
        if found := jobs.results(name):
            return found[0][1], True
        reason = status.failures[0].sentence if status.failures else "The intervals were not worked out. Refine again to have them."
        return insight.not_told(reason), True
