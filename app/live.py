"""The live route: where the hand is → curves, handles and numbers. It never writes.

One request is in flight at a time and the latest position wins (the page sees to that); on release the page
sends the same event as a step, so that what was drawn last is what is kept.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from flask import Flask, Response, jsonify, request

from core.diode import OneDiode
from core.errors import StaleRevision, StepRefused, SweepbenchError
from core.store import Store
from core.sweep import Sweep
from core.workspace import Workspace

from . import readout
from .curves import STRIPS, landmarks_of, model_curves
from .hand import MODEL_KINDS, moved, sweep_of
from .losses_scene import answer_target
from .pair_scene import answer_what_if

PATH = "/live"


def register(server: Flask, store: Store) -> None:
    @server.post(PATH)
    def live() -> tuple[Response, int]:
        event = request.get_json()
        try:
            if not isinstance(event, dict) or not isinstance(event.get("workspace"), str) or "revision" not in event:
                raise StepRefused("The page named no workspace. Reload the page.")
            workspace = store.current(event["workspace"])
            if workspace.revision != event["revision"]:
                raise StaleRevision(event["revision"], workspace.revision)
            return jsonify(answer(workspace, event)), 200
        except StaleRevision as stale:
            return jsonify({"sentence": str(stale), "revision": stale.current}), 409
        except SweepbenchError as error:
            return jsonify({"sentence": str(error)}), 422

    @server.get(PATH + "/<workspace_id>")
    def revision(workspace_id: str) -> tuple[Response, int]:
        """Which revision stands: how a tab learns of another tab's change, or of the server's return."""
        try:
            return jsonify({"revision": store.current(workspace_id).revision}), 200
        except SweepbenchError as error:
            return jsonify({"sentence": str(error)}), 404


def answer(workspace: Workspace, event: dict[str, Any]) -> dict[str, Any]:
    """The moving state for one position of the hand; each source has its own pure function."""
    source = SOURCES.get(event.get("kind"))
    if source is None:
        raise StepRefused("The page asked for something that this version does not know. Reload the page.")
    return source(workspace, event)


def answer_bench(workspace: Workspace, event: dict[str, Any]) -> dict[str, Any]:
    """Handles and dials: lines, grips, dials, metrics."""
    strip = event.get("strip") if event.get("strip") in STRIPS else STRIPS[0]
    sweep = sweep_of(workspace, event)
    move = moved(workspace, event)
    settings = workspace.fit(event["entry"]).settings
    return {
        "message": move.message,
        "curves": [curve.to_dict() for curve in model_curves(sweep, move.model, strip, settings.weights)],
        "handles": _marks(event, sweep, workspace.fit(event["entry"]).model, move.model, settings.hold),
        "dials": readout.dial_values(sweep, move.model),
        "metrics": readout.live_metrics(sweep, landmarks_of(move.model)) if sweep.lit else {},
    }


def _marks(
    event: dict[str, Any], sweep: Sweep, start: OneDiode, model: OneDiode, hold: frozenset[str]
) -> list[dict[str, Any]]:
    """The grips on the moved curve; in the dark the one in the hand keeps its voltage until it is let go."""
    marks = readout.handle_marks(sweep, model, hold)
    if event["kind"] != "drag" or sweep.lit:
        return marks
    grabbed = [m for m in readout.handle_marks(sweep, start, hold) if m["parameter"] == event["parameter"]]
    pinned = {m["parameter"]: readout.on_dark_curve(sweep, model, m) for m in grabbed}
    return [{**m, **pinned.get(m["parameter"], {})} for m in marks]


SOURCES: dict[str | None, Callable[[Workspace, dict[str, Any]], dict[str, Any]]] = {
    **dict.fromkeys(MODEL_KINDS, answer_bench),
    "what-if": answer_what_if,
    "target": answer_target,
}
