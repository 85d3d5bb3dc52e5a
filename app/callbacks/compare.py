"""The pair and losses screens follow the workspace and the tab's view; each computes only while it is seen."""

from __future__ import annotations

from typing import Any

from dash import Dash, Input, Output, no_update

from app.ids import Id
from app.jobs import Jobs
from app.losses_scene import losses_screen
from app.pair_scene import pair_screen
from core.store import Store


def register(app: Dash, store: Store, jobs: Jobs) -> None:
    @app.callback(
        Output(Id.PAIR_PLOT, "figure"),
        Output(Id.PAIR_BARS, "figure"),
        Output(Id.PAIR, "data"),
        inputs={"revision": Input(Id.REVISION, "data"), "view": Input(Id.VIEW, "data")},
        prevent_initial_call=True,
    )
    def show_pair(revision: dict[str, Any], view: dict[str, Any] | None) -> tuple:
        if (view or {}).get("screen") != "pair":
            return no_update, no_update, no_update
        return pair_screen(store.current(revision["workspace"]), view)

    @app.callback(
        Output(Id.LADDER, "figure"),
        Output(Id.LOSSES, "data"),
        inputs={"revision": Input(Id.REVISION, "data"), "view": Input(Id.VIEW, "data")},
        prevent_initial_call=True,
    )
    def show_losses(revision: dict[str, Any], view: dict[str, Any] | None) -> tuple:
        if (view or {}).get("screen") != "losses":
            return no_update, no_update
        return losses_screen(store.current(revision["workspace"]), view)
