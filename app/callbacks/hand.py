"""What the user did becomes a step: drags, dials, fits, typed numbers, holds, conditions, names, removals, undo and redo."""

from __future__ import annotations

from typing import Any

from dash import Dash, Input, Output, State, no_update

from app.hand import step_for
from app.ids import Id
from app.jobs import Jobs
from core.errors import StaleRevision
from core.store import Store
from core.workspace import Workspace

from .answer import answered
from .batch import begin, is_job


def register(app: Dash, store: Store, jobs: Jobs) -> None:
    @app.callback(
        Output(Id.REVISION, "data", allow_duplicate=True),
        Output(Id.JOB, "data", allow_duplicate=True),
        Input(Id.HAND, "data"),
        State(Id.JOB, "data"),
        prevent_initial_call=True,
    )
    def take_event(event: dict[str, Any], running: dict[str, Any] | None) -> tuple:
        job = no_update

        def change() -> tuple[Workspace, str]:
            nonlocal job
            workspace = store.current(event["workspace"])
            if not is_job(workspace, event):
                return take(store, event)
            job = begin(store, jobs, event, running)
            return workspace, ""

        answer = answered(store, event["workspace"], change, event=event["event"])
        return answer, job


def take(store: Store, event: dict[str, Any]) -> tuple[Workspace, str]:
    """Make the step of an event, once, however often the page sends it because it heard no answer.

    Raises
    ------
    StaleRevision
        If the workspace has moved on and not by this event.
    """
    if event.get("tries", 1) > 1 and store.made(event["workspace"], event["event"]):
        return store.current(event["workspace"]), ""
    try:
        return _made(store, event)
    except StaleRevision:
        # The first try may have been slow and not lost: then it was this very event that moved it on.
        if store.made(event["workspace"], event["event"]):
            return store.current(event["workspace"]), ""
        raise


def _made(store: Store, event: dict[str, Any]) -> tuple[Workspace, str]:
    if event["kind"] in ("undo", "redo"):
        travel = store.undo if event["kind"] == "undo" else store.redo
        return travel(event["workspace"], event["revision"], event=event["event"]), ""
    workspace = store.current(event["workspace"])
    if workspace.revision != event["revision"]:
        raise StaleRevision(event["revision"], workspace.revision)
    step, sentence = step_for(workspace, event)
    if step is None:
        return workspace, sentence
    return store.commit(workspace.id, {**step, "event": event["event"]}, seen=event["revision"]), sentence
