"""First guess and refine of one sweep, as steps."""

from __future__ import annotations

from typing import Any

from core import steps
from core.first_guess import first_guess
from core.refine import refine
from core.two_diode_guess import guess_two_diodes
from core.workspace import Workspace

Step = dict[str, Any]


def guess_step(workspace: Workspace, entry: str) -> Step:
    """Parameters read off the sweep; held ones keep their value."""
    fit = workspace.fit(entry)
    held = {name: getattr(fit.model, name) for name in fit.settings.hold} if fit.model else {}
    guess = guess_two_diodes if fit.settings.model == "two diodes" else first_guess
    return steps.set_model(workspace, entry, guess(workspace.sweep(entry), held), label="first guess")


def refine_step(workspace: Workspace, entry: str) -> Step:
    """Least squares from where the dials stand."""
    fit = workspace.fit(entry)
    return steps.record_refinement(workspace, entry, refine(workspace.sweep(entry), fit.model, fit.settings))
