"""What reaches the page is handed to its own script: scene, tray, revision, view, sentences."""

from __future__ import annotations

from dash import ClientsideFunction, Dash, Input

from app.ids import Id
from app.jobs import Jobs
from core.store import Store

RECEIVERS = {
    "revision": Input(Id.REVISION, "data"),
    "view": Input(Id.VIEW, "data"),
    "scene": Input(Id.SCENE, "data"),
    "tray": Input(Id.TRAY, "data"),
    "trayRead": Input(Id.TRAY_READ, "data"),
    "intervals": Input(Id.INTERVALS, "data"),
    "pair": Input(Id.PAIR, "data"),
    "losses": Input(Id.LOSSES, "data"),
    "workspaces": Input(Id.WORKSPACES, "data"),
    "notice": Input(Id.NOTICE, "data"),
    "samples": Input(Id.OPEN_SAMPLES, "n_clicks"),
}


def register(app: Dash, store: Store, jobs: Jobs) -> None:
    for name, arrival in RECEIVERS.items():
        app.clientside_callback(ClientsideFunction("sweepbench", name), arrival)
