"""The model of a sweep for the screens that need one: the user's own, else one fitted on the spot."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Literal

from core.breakdown import why_no_breakdown
from core.comparing import alongside as _fitted_alongside
from core.diode import OneDiode
from core.errors import ComparisonRefused, FitFailed
from core.first_guess import first_guess
from core.models import one_diode_like
from core.refine import refine
from core.refinement import Refinement
from core.share_sampling import model_of
from core.sweep import Sweep
from core.two_diode import TwoDiode
from core.two_diode_guess import guess_two_diodes
from core.workspace import Workspace

from .readout import measured

Origin = Literal["refined", "laid by hand", "first guess", "fitted on the spot"]

# How a screen says it; a refined model needs no words.
_ON_SCREEN: dict[Origin, str] = {
    "refined": "",
    "laid by hand": "laid by hand and not refined",
    "first guess": "laid by the program as a first guess and not refined",
    "fitted on the spot": "fitted for this screen; refine on the bench to keep that",
}

# A fit of these very points; a refinement is never equal to another, so neither is what comes of it.
alongside = lru_cache(maxsize=64)(_fitted_alongside)


@dataclass(frozen=True)
class State:
    """A model and where it comes from.

    Attributes
    ----------
    model : OneDiode
        Mechanisms are those of one diode: for two diodes, the one-diode fit made alongside.
    known : Refinement, OneDiode or TwoDiode
        The refinement where the model still stands where it left it; shares then have intervals.
    origin : "refined", "laid by hand", "first guess" or "fitted on the spot"
        How ``known`` came about.
    mechanisms : Refinement or OneDiode
        Where ``model`` is from: ``known`` itself, or for two diodes the fit made alongside.
    untold : str
        Why no mechanism can be told from it; "" where they can.
    """

    model: OneDiode
    known: Refinement | OneDiode | TwoDiode
    origin: Origin
    mechanisms: Refinement | OneDiode
    untold: str = ""

    @property
    def source(self) -> str:
        """How the model came about, for the user of a screen; "" for a refined one."""
        return _ON_SCREEN[self.origin]

    @property
    def worth_drawing(self) -> bool:
        """A curve of the user's own in any case, one fitted on the spot only if it says something."""
        return not self.untold or self.origin != "fitted on the spot"


def origin_of(workspace: Workspace, entry: str) -> Origin | None:
    """How the model that the workspace holds for a sweep came about; None where it holds none."""
    model, sweep = workspace.fit(entry).model, workspace.sweep(entry)
    if model is None:
        return None
    if workspace.refined(entry) is not None:
        return "refined"
    guessed = _guessed_two(sweep) if isinstance(model, TwoDiode) else _guessed(sweep)
    return "first guess" if model == guessed else "laid by hand"


def state_of(workspace: Workspace, entry: str) -> State | None:
    """The state of a sweep, or None where no curve can be laid over it."""
    refined, model, origin = workspace.refined(entry), workspace.fit(entry).model, origin_of(workspace, entry)
    sweep = workspace.sweep(entry)
    if isinstance(model, TwoDiode):
        return _through_one(sweep, refined or model, origin)
    if refined is not None:
        return _state(sweep, refined, refined, origin)
    if origin == "laid by hand":
        return _state(sweep, model, model, origin)
    fitted = _fitted(sweep)
    return None if fitted is None else _state(sweep, fitted, fitted, "fitted on the spot")


def _state(sweep: Sweep, one: Refinement | OneDiode, known: Refinement | OneDiode | TwoDiode, origin: Origin) -> State:
    untold = why_no_breakdown(sweep, one, measured(sweep)) if sweep.lit else ""
    return State(model_of(one), known, origin, one, untold)


def _through_one(sweep: Sweep, known: Refinement | TwoDiode, origin: Origin) -> State | None:
    if not sweep.lit:  # nothing to compare, and the sentence that refuses says why
        one = one_diode_like(known.model if isinstance(known, Refinement) else known)
        return State(one, known, origin, one)
    try:
        one, _ = alongside(sweep, known)
    except ComparisonRefused:
        return None
    return _state(sweep, one, known, origin)


@lru_cache(maxsize=512)
def _guessed(sweep: Sweep) -> OneDiode | None:
    """What the program laid by itself when the sweep was loaded; nobody's opinion."""
    try:
        return first_guess(sweep)
    except FitFailed:
        return None


@lru_cache(maxsize=512)
def _guessed_two(sweep: Sweep) -> TwoDiode | None:
    try:
        return guess_two_diodes(sweep)
    except FitFailed:
        return None


@lru_cache(maxsize=512)
def _fitted(sweep: Sweep) -> Refinement | None:
    try:
        return refine(sweep)
    except FitFailed:
        return None
