"""Undo and redo."""

from __future__ import annotations

from typing import Any

from dash import Dash, Input, Output, State, ctx

from app.ids import Id
from app.jobs import Jobs
from core.store import Store

from .answer import answered


def register(app: Dash, store: Store, jobs: Jobs) -> None:
    @app.callback(
        Output(Id.REVISION, "data", allow_duplicate=True),
        Input(Id.UNDO, "n_clicks"),
        Input(Id.REDO, "n_clicks"),
        State(Id.REVISION, "data"),
        prevent_initial_call=True,
    )
    def step_back_or_forth(undo: int | None, redo: int | None, revision: dict[str, Any]) -> dict[str, Any]:
        move = store.undo if ctx.triggered_id == Id.UNDO else store.redo
        return answered(store, revision["workspace"], lambda: (move(revision["workspace"], revision["revision"]), ""))
