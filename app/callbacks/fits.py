"""First guess and refine, for the sweep on the bench and for the whole tray."""

from __future__ import annotations

from typing import Any

from dash import Dash, Input, Output, State, ctx

from app.ids import Id
from app.jobs import Jobs
from app.scene import active_entry
from core import steps
from core.errors import StepRefused
from core.first_guess import first_guess
from core.refine import refine
from core.store import Store
from core.two_diode_guess import guess_two_diodes
from core.workspace import Workspace

from .answer import answered


def register(app: Dash, store: Store, jobs: Jobs) -> None:
    @app.callback(
        Output(Id.REVISION, "data", allow_duplicate=True),
        Input(Id.FIRST_GUESS, "n_clicks"),
        Input(Id.REFINE, "n_clicks"),
        State(Id.REVISION, "data"),
        State(Id.VIEW, "data"),
        prevent_initial_call=True,
        running=[(Output(Id.REFINE, "disabled"), True, False)],
    )
    def fit(guess: int | None, refined: int | None, revision: dict[str, Any], view: dict[str, Any]) -> dict[str, Any]:
        action = guess_step if ctx.triggered_id == Id.FIRST_GUESS else refine_step

        def change() -> tuple[Workspace, str]:
            workspace = store.current(revision["workspace"])
            entry = active_entry(workspace, view or {})
            if entry is None:
                raise StepRefused("There is no sweep on the bench yet. Drop a file first.")
            return store.commit(workspace.id, action(workspace, entry), seen=revision["revision"]), ""

        return answered(store, revision["workspace"], change)


def guess_step(workspace: Workspace, entry: str) -> dict[str, Any]:
    """Parameters read off the sweep; held ones keep their value."""
    fit = workspace.fit(entry)
    held = {name: getattr(fit.model, name) for name in fit.settings.hold} if fit.model else {}
    guess = guess_two_diodes if fit.settings.model == "two diodes" else first_guess
    return steps.set_model(workspace, entry, guess(workspace.sweep(entry), held), label="first guess")


def refine_step(workspace: Workspace, entry: str) -> dict[str, Any]:
    """Least squares from where the dials stand."""
    fit = workspace.fit(entry)
    return steps.record_refinement(workspace, entry, refine(workspace.sweep(entry), fit.model, fit.settings))
