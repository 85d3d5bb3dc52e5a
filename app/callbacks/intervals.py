"""Intervals by profile likelihood: after the scene, because they take longer than a fit, and only while the panel is open."""

from __future__ import annotations

from typing import Any

from dash import Dash, Input, Output, no_update

from app import insight
from app.ids import Id
from app.jobs import Jobs
from app.scene import active_entry, panel_of
from core.store import Store


def register(app: Dash, store: Store, jobs: Jobs) -> None:
    @app.callback(
        Output(Id.INTERVALS, "data"),
        inputs={"revision": Input(Id.REVISION, "data"), "view": Input(Id.VIEW, "data")},
        prevent_initial_call=True,
    )
    def show_intervals(revision: dict[str, Any], view: dict[str, Any] | None) -> Any:
        workspace, view = store.current(revision["workspace"]), view or {}
        entry = active_entry(workspace, view)
        if entry is None or panel_of(view) != "fit":
            return no_update
        return insight.interval_rows(workspace, entry)
