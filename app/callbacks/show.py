"""From the workspace to the page: figure, scene, tray."""

from __future__ import annotations

import time
from typing import Any

from dash import Dash, Input, Output, State, no_update

from app import scene
from app.ids import Id
from app.jobs import Jobs
from core.store import Store

SLICE = 0.15  # [s] that one answer may spend on reading sweeps for the tray


def register(app: Dash, store: Store, jobs: Jobs) -> None:
    @app.callback(
        Output(Id.PLOT, "figure"),
        Output(Id.SCENE, "data"),
        Output(Id.DRAWN, "data"),
        inputs={"revision": Input(Id.REVISION, "data"), "view": Input(Id.VIEW, "data")},
        state={"drawn": State(Id.DRAWN, "data")},
    )
    def show_bench(revision: dict[str, Any], view: dict[str, Any] | None, drawn: str) -> tuple:
        workspace, view = store.current(revision["workspace"]), view or {}
        key = scene.figure_key(workspace, view)
        figure = no_update if key == drawn else scene.figure(workspace, view)
        if figure is not no_update:
            whole = {f"{axis}.range": figure.layout[axis].range for axis in ("xaxis", "yaxis", "yaxis2", "yaxis3")}
            figure.update_layout(meta={"key": key, "revision": workspace.revision, "whole": whole})
        painted = scene.scene(workspace, view, store.history(workspace.id))
        # The page must know which figure this scene belongs to: the two do not arrive at one moment.
        return figure, {**painted, "figure": key}, key

    @app.callback(
        Output(Id.TRAY, "data"),
        Output(Id.TRAY_DRAWN, "data"),
        inputs={"revision": Input(Id.REVISION, "data")},
        state={"drawn": State(Id.TRAY_DRAWN, "data")},
    )
    def show_tray(revision: dict[str, Any], drawn: str) -> tuple:
        workspace = store.current(revision["workspace"])
        key = scene.tray_key(workspace)
        if key == drawn:
            return no_update, no_update
        return scene.tray(workspace, until=time.monotonic() + SLICE), key

    @app.callback(
        Output(Id.TRAY_READ, "data"),
        Input(Id.TRAY_UNREAD, "data"),
        prevent_initial_call=True,
    )
    def read_on(unread: dict[str, Any]) -> dict[str, dict[str, Any]]:
        """The page asks for the lines of a long tray slice by slice, so that nothing else has to wait for them."""
        workspace = store.current(unread["workspace"])
        return scene.tray_readings(workspace, unread["entries"], until=time.monotonic() + SLICE)

    @app.callback(
        Output(Id.UNDO, "disabled"),
        Output(Id.UNDO, "title"),
        Output(Id.REDO, "disabled"),
        Output(Id.REDO, "title"),
        inputs={"revision": Input(Id.REVISION, "data")},
    )
    def show_history(revision: dict[str, Any]) -> tuple:
        history = store.history(revision["workspace"])
        return (
            history.undo is None,
            f"Undo: {history.undo} (Ctrl+Z)" if history.undo else "Nothing to undo",
            history.redo is None,
            f"Redo: {history.redo} (Ctrl+Shift+Z)" if history.redo else "Nothing to redo",
        )
