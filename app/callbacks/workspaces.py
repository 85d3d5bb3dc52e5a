"""Several workspaces: open, make, rename, duplicate, delete and bring back."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from dash import Dash, Input, Output, State

from app.ids import Id
from app.jobs import Jobs
from core.store import Store
from core.workspace import Workspace

from .answer import answered


def register(app: Dash, store: Store, jobs: Jobs) -> None:
    @app.callback(
        Output(Id.REVISION, "data", allow_duplicate=True),
        Input(Id.ERRAND, "data"),
        State(Id.REVISION, "data"),
        prevent_initial_call=True,
    )
    def run_errand(errand: dict[str, Any], revision: dict[str, Any]) -> dict[str, Any]:
        def change() -> tuple[Workspace, str]:
            workspace_id, sentence = ERRANDS[errand["kind"]](store, errand)
            store.opened(workspace_id)
            return store.current(workspace_id), sentence

        return answered(store, revision["workspace"], change)

    @app.callback(Output(Id.WORKSPACES, "data"), Input(Id.REVISION, "data"))
    def list_workspaces(revision: dict[str, Any]) -> dict[str, Any]:
        return {
            "here": revision["workspace"],
            "there": [{"id": w.id, "name": w.name, "sweeps": w.sweeps} for w in store.workspaces()],
            "deleted": [{"id": w.id, "name": w.name, "sweeps": w.sweeps} for w in store.deleted()],
        }


def _rename(store: Store, errand: dict[str, Any]) -> tuple[str, str]:
    store.rename(errand["workspace"], errand["name"])
    return errand["workspace"], ""


def _delete(store: Store, errand: dict[str, Any]) -> tuple[str, str]:
    name = store.current(errand["workspace"]).name
    store.delete(errand["workspace"])
    return store.first(), f"“{name}” was deleted; the list of workspaces can bring it back for 30 days."


def _restore(store: Store, errand: dict[str, Any]) -> tuple[str, str]:
    store.restore(errand["workspace"])
    return errand["workspace"], ""


ERRANDS: dict[str, Callable[[Store, dict[str, Any]], tuple[str, str]]] = {
    "open": lambda store, errand: (errand["workspace"], ""),
    "new": lambda store, errand: (store.create(errand["name"]), ""),
    "rename": _rename,
    "duplicate": lambda store, errand: (store.duplicate(errand["workspace"]), ""),
    "delete": _delete,
    "restore": _restore,
}
