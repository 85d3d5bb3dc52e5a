"""Refining as a job with progress, whose results enter as one step: the whole tray, or one sweep whose fit takes long."""

from __future__ import annotations

import json
from collections.abc import Sequence
from hashlib import sha256
from typing import Any

from dash import Dash, Input, Output, State, no_update

from app.ids import Id
from app.jobs import Jobs, Status
from core import steps
from core.errors import StaleRevision, StepRefused
from core.refine import refine
from core.refinement import Refinement
from core.store import Store
from core.workspace import Workspace

from .answer import answered

TRIES = 20  # at recording while other steps come in between


def register(app: Dash, store: Store, jobs: Jobs) -> None:
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
        results = [(job["entries"][place], job["stamps"][place], result) for place, result in jobs.take(job["job"])]

        def change() -> tuple[Workspace, str]:
            workspace, kept = record(store, job["workspace"], results)
            return workspace, outcome(status, len(results), kept, alone=job.get("alone", False))

        return "", None, answered(store, job["workspace"], change)

    @app.callback(Input(Id.CANCEL_JOB, "n_clicks"), State(Id.JOB, "data"), prevent_initial_call=True)
    def cancel(clicks: int, job: dict[str, Any] | None) -> None:
        if job:
            jobs.cancel(job["job"])


def begin(store: Store, jobs: Jobs, event: dict[str, Any], running: dict[str, Any] | None = None) -> dict[str, Any]:
    """Start refining what an event asks for, once, however often the page sends it; what follows the job.

    A server that was started anew knows nothing of the job, and nothing of it was kept, so it starts once more.

    Raises
    ------
    StepRefused
        If the tray is empty, or the page still follows another job.
    """
    if running and running["job"] != event["event"] and not jobs.status(running["job"]).finished:
        raise StepRefused("Sweeps are being refined already. Wait until that is done, or cancel it at the foot of the tray.")
    workspace = store.current(event["workspace"])
    entries = [workspace.entry(event["entry"]).id] if event["kind"] == "refine" else [e.id for e in workspace.in_tray_order()]
    if not entries:
        raise StepRefused("There is no sweep in the tray yet. Drop a file first.")
    fits = [workspace.fit(entry) for entry in entries]
    arguments = [(workspace.sweep(e), fit.model, fit.settings) for e, fit in zip(entries, fits, strict=True)]
    name = jobs.submit(refine, arguments, label="refining", name=event["event"])
    return {
        "job": name,
        "workspace": workspace.id,
        "entries": entries,
        "stamps": [stamp(workspace, e) for e in entries],
        "alone": event["kind"] == "refine",
    }


def is_job(workspace: Workspace, event: dict[str, Any]) -> bool:
    """Whether an event is one for the workers: the whole tray, or two diodes with an ideality factor free, which takes long."""
    if event["kind"] != "refine" or event.get("entry") not in workspace.entries:
        return event["kind"] == "refine-all"
    settings = workspace.fit(event["entry"]).settings
    return settings.model == "two diodes" and not {"ideality_1", "ideality_2"} <= set(settings.hold)


def stamp(workspace: Workspace, entry: str) -> str:
    """Short for the conditions and settings that a sweep is refined under."""
    asked = [repr(workspace.conditions(entry)), workspace.fit(entry).settings.to_dict()]
    return sha256(json.dumps(asked).encode()).hexdigest()[:12]


def record(store: Store, workspace_id: str, results: Sequence[tuple[str, str, Refinement]]) -> tuple[Workspace, int]:
    """Enter results as one step on whatever state stands now, and say how many.

    What has left the tray meanwhile is left out, and what now has other conditions or settings: its result is in units
    of an area, or of points, that the sweep no longer has.

    Parameters
    ----------
    results : sequence of (entry, stamp at the start, Refinement)
    """
    for attempt in range(TRIES):
        workspace = store.current(workspace_id)
        present = {e: found for e, before, found in results if e in workspace.entries and stamp(workspace, e) == before}
        if not present:
            return workspace, 0
        try:
            step = steps.record_refinements(workspace, present)
            return store.commit(workspace_id, step, seen=workspace.revision), len(present)
        except StaleRevision:
            if attempt == TRIES - 1:
                raise
    return workspace, 0


def outcome(status: Status, found: int, kept: int, *, alone: bool = False) -> str:
    """What the user hears at the end; of the one sweep on the bench only what went wrong, for the rest is seen."""
    if status.state == "lost":
        return "The server was started anew while it was refining, so nothing was kept. Refine again."
    if alone and status.failures:
        return status.failures[0].sentence
    sentences = [] if alone else [f"{kept} of {status.total} sweeps refined."]
    if found > kept:
        were = "was" if found - kept == 1 else "were"
        sentences.append(f"{found - kept} {were} changed or removed meanwhile and left alone.")
    if status.failures:
        sentences.append(f"{len(status.failures)} could not be; the first said: {status.failures[0].sentence}")
    return " ".join(sentences)
