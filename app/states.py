"""The model of a sweep for the screens that need one: the user's own, else one fitted on the spot."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

from core.breakdown import why_no_breakdown
from core.comparing import alongside
from core.diode import OneDiode
from core.errors import ComparisonRefused, FitFailed
from core.first_guess import first_guess
from core.models import one_diode_like
from core.refine import refine
from core.refinement import Refinement
from core.share_sampling import model_of
from core.sweep import Sweep
from core.two_diode import TwoDiode
from core.workspace import Workspace

from .readout import measured

_BY_HAND = "laid by hand and not refined"
_ON_THE_SPOT = "fitted for this screen; refine on the bench to keep that"


@dataclass(frozen=True)
class State:
    """A model and where it comes from.

    Attributes
    ----------
    model : OneDiode
        Mechanisms are those of one diode: for two diodes, the one-diode fit made alongside.
    known : Refinement, OneDiode or TwoDiode
        The refinement where the model still stands where it left it; shares then have intervals.
    source : str
        For the user: how this model came about; "" for a refined one.
    untold : str
        Why no mechanism can be told from it; "" where they can.
    """

    model: OneDiode
    known: Refinement | OneDiode | TwoDiode
    source: str = ""
    untold: str = ""

    @property
    def worth_drawing(self) -> bool:
        """A curve of the user's own in any case, one fitted on the spot only if it says something."""
        return not self.untold or self.source != _ON_THE_SPOT


def state_of(workspace: Workspace, entry: str) -> State | None:
    """The state of a sweep, or None where no curve can be laid over it."""
    refined, model = workspace.refined(entry), workspace.fit(entry).model
    sweep = workspace.sweep(entry)
    if isinstance(model, TwoDiode):
        return _through_one(sweep, refined or model, "" if refined else _BY_HAND)
    if refined is not None:
        return _state(sweep, refined, refined)
    if model is not None and model != _guessed(sweep):
        return _state(sweep, model, model, _BY_HAND)
    fitted = _fitted(sweep)
    return None if fitted is None else _state(sweep, fitted, fitted, _ON_THE_SPOT)


def _state(sweep: Sweep, one: Refinement | OneDiode, known: Refinement | OneDiode | TwoDiode, source: str = "") -> State:
    untold = why_no_breakdown(sweep, one, measured(sweep)) if sweep.lit else ""
    return State(model_of(one), known, source, untold)


def _through_one(sweep: Sweep, known: Refinement | TwoDiode, source: str) -> State | None:
    if not sweep.lit:  # nothing to compare, and the sentence that refuses says why
        return State(one_diode_like(known.model if isinstance(known, Refinement) else known), known, source)
    try:
        one, _ = alongside(sweep, known)
    except ComparisonRefused:
        return None
    return _state(sweep, one, known, source)


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
