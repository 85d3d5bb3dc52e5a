"""What the hand did becomes a step: drags, dials, typed numbers, holds, conditions, names, removals."""

from __future__ import annotations

from typing import Any

from dash import Dash, Input, Output

from app.hand import step_for
from app.ids import Id
from app.jobs import Jobs
from core.errors import StaleRevision
from core.store import Store
from core.workspace import Workspace

from .answer import answered


def register(app: Dash, store: Store, jobs: Jobs) -> None:
    @app.callback(
        Output(Id.REVISION, "data", allow_duplicate=True),
        Input(Id.HAND, "data"),
        prevent_initial_call=True,
    )
    def take_step(event: dict[str, Any]) -> dict[str, Any]:
        def change() -> tuple[Workspace, str]:
            workspace = store.current(event["workspace"])
            if event.get("tries", 1) > 1 and store.last_event(workspace.id) == event["event"]:
                return workspace, ""  # it was made before, and only the answer got lost
            if workspace.revision != event["revision"]:
                raise StaleRevision(event["revision"], workspace.revision)
            step, sentence = step_for(workspace, event)
            if step is None:
                return workspace, sentence
            return store.commit(workspace.id, {**step, "event": event.get("event")}, seen=event["revision"]), sentence

        return answered(store, event["workspace"], change, event=event.get("event"))
