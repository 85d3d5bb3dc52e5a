"""Refining the whole tray: a job with progress, whose results enter as one step."""

from __future__ import annotations

from typing import Any

from dash import Dash, Input, Output, State, no_update

from app.ids import Id
from app.jobs import Jobs
from core import steps
from core.errors import StaleRevision
from core.refine import refine
from core.refinement import Refinement
from core.store import Store
from core.workspace import Workspace

from .answer import answered

TRIES = 20  # at recording while other steps come in between


def register(app: Dash, store: Store, jobs: Jobs) -> None:
    @app.callback(
        Output(Id.JOB, "data"),
        Input(Id.REFINE_ALL, "n_clicks"),
        State(Id.REVISION, "data"),
        prevent_initial_call=True,
    )
    def start(clicks: int, revision: dict[str, Any]) -> dict[str, Any]:
        workspace = store.current(revision["workspace"])
        entries = [entry.id for entry in workspace.in_tray_order()]
        fits = [workspace.fit(entry) for entry in entries]
        arguments = [(workspace.sweep(e), fit.model, fit.settings) for e, fit in zip(entries, fits, strict=True)]
        name = jobs.submit(refine, arguments, label="refining")
        return {"job": name, "workspace": workspace.id, "entries": entries}

    @app.callback(
        Output(Id.JOB_CLOCK, "disabled"),
        Output(Id.CANCEL_JOB, "hidden"),
        Output(Id.REFINE_ALL, "disabled"),
        Input(Id.JOB, "data"),
    )
    def watch(job: dict[str, Any] | None) -> tuple[bool, bool, bool]:
        return job is None, job is None, job is not None

    @app.callback(
        Output(Id.JOB_LINE, "children"),
        Output(Id.JOB, "data", allow_duplicate=True),
        Output(Id.REVISION, "data", allow_duplicate=True),
        Input(Id.JOB_CLOCK, "n_intervals"),
        State(Id.JOB, "data"),
        prevent_initial_call=True,
    )
    def follow(ticks: int, job: dict[str, Any] | None) -> tuple:
        if job is None:
            return no_update, no_update, no_update
        status = jobs.status(job["job"])
        if not status.finished:
            return f"{status.label} {status.done} of {status.total}", no_update, no_update
        results = {job["entries"][place]: result for place, result in jobs.take(job["job"])}
        sentence = f"{len(results)} of {status.total} sweeps refined."
        if status.failures:
            first = status.failures[0]
            sentence += f" {len(status.failures)} could not be; the first said: {first.sentence}"

        def change() -> tuple[Workspace, str]:
            return record(store, job["workspace"], results), sentence

        return "", None, answered(store, job["workspace"], change)

    @app.callback(Input(Id.CANCEL_JOB, "n_clicks"), State(Id.JOB, "data"), prevent_initial_call=True)
    def cancel(clicks: int, job: dict[str, Any] | None) -> None:
        if job:
            jobs.cancel(job["job"])


def record(store: Store, workspace_id: str, results: dict[str, Refinement]) -> Workspace:
    """Enter results as one step on whatever state stands now; what has left the tray meanwhile is left out."""
    for attempt in range(TRIES):
        workspace = store.current(workspace_id)
        present = {entry: result for entry, result in results.items() if entry in workspace.entries}
        if not present:
            return workspace
        try:
            return store.commit(workspace_id, steps.record_refinements(workspace, present), seen=workspace.revision)
        except StaleRevision:
            if attempt == TRIES - 1:
                raise
    return workspace
