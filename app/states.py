"""The model of a sweep for the screens that need one: the user's own, else one fitted on the spot."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

from core.diode import OneDiode
from core.errors import FitFailed
from core.first_guess import first_guess
from core.refine import refine
from core.refinement import Refinement
from core.sweep import Sweep
from core.workspace import Workspace


@dataclass(frozen=True)
class State:
    """A model and where it comes from.

    Attributes
    ----------
    model : OneDiode
    known : Refinement or OneDiode
        The refinement where the model still stands where it left it; shares then have intervals.
    source : str
        For the user: how this model came about; "" for a refined one.
    """

    model: OneDiode
    known: Refinement | OneDiode
    source: str = ""


def state_of(workspace: Workspace, entry: str) -> State | None:
    """The state of a sweep, or None where no curve can be laid over it."""
    refined, model = workspace.refined(entry), workspace.fit(entry).model
    if refined is not None:
        return State(refined.model, refined)
    sweep = workspace.sweep(entry)
    if model is not None and model != _guessed(sweep):
        return State(model, model, "laid by hand and not refined")
    fitted = _fitted(sweep)
    return None if fitted is None else State(fitted.model, fitted, "fitted for this screen; refine on the bench to keep that")


@lru_cache(maxsize=512)
def _guessed(sweep: Sweep) -> OneDiode | None:
    """What the program laid by itself when the sweep was loaded; nobody's opinion."""
    try:
        return first_guess(sweep)
    except FitFailed:
        return None


@lru_cache(maxsize=512)
def _fitted(sweep: Sweep) -> Refinement | None:
    try:
        return refine(sweep)
    except FitFailed:
        return None
