"""The fits that a report and its tables speak of, with how well the data fix each parameter.

They are those of losses and pair: what the user refined or laid by hand, and one made on the spot where nobody did either.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

from core.errors import FitFailed
from core.models import Model
from core.profile import Interval
from core.refinement import Refinement
from core.two_diode import TwoDiode
from core.workspace import Workspace

from .insight import is_quick, profiles
from .states import Origin, origin_of, state_of

ORIGINS: dict[Origin, str] = {
    "refined": "refined",
    "laid by hand": "laid by hand, not refined",
    "first guess": "first guess, not refined",
    "fitted on the spot": "fitted for this report",
}


@dataclass(frozen=True)
class Fitted:
    """One model of one sweep.

    Attributes
    ----------
    entry : str
    model : OneDiode or TwoDiode
    origin : "refined", "laid by hand", "first guess" or "fitted on the spot"
    refinement : Refinement or None
        None where nothing was fitted.
    beside : bool
        Made beside a two-diode model, because losses and pair are told with one diode.
    intervals : mapping of str to Interval
        Of the free parameters; empty where nothing was fitted.
    confidence : float
        Level of the intervals.
    linear : str
        The sentence why the intervals are linear ones; "" where they are by profile likelihood.
    """

    entry: str
    model: Model
    origin: Origin
    refinement: Refinement | None = None
    beside: bool = False
    intervals: Mapping[str, Interval] = field(default_factory=dict)
    confidence: float = 0.95
    linear: str = ""

    @property
    def words(self) -> str:
        """How it came about."""
        return f"{ORIGINS[self.origin]}{', for the losses' if self.beside else ''}"

    @property
    def kind(self) -> str:
        return "two diodes" if isinstance(self.model, TwoDiode) else "one diode"

    def state(self, parameter: str) -> str:
        """How well the data fix a parameter; "" where nothing was fitted."""
        if self.refinement is None:
            return ""
        if parameter not in self.refinement.free:
            return "held"
        interval = self.intervals[parameter]
        if not interval.low_bounded and not interval.high_bounded:
            return "not determined"
        return "free" if interval.low_bounded and interval.high_bounded else "bounded only"


def fits_of(workspace: Workspace, entry: str) -> tuple[Fitted, ...]:
    """What is told of a sweep: one model, or for two diodes two; () where no model says anything."""
    state, refined = state_of(workspace, entry), workspace.refined(entry)
    if state is None and refined is not None:  # two diodes that no one diode can speak for
        return (_refined(workspace, entry, refined, "refined"),)
    if state is None or not state.worth_drawing:
        model, origin = workspace.fit(entry).model, origin_of(workspace, entry)
        return () if model is None else (Fitted(entry, model, origin),)
    known = state.known
    if not isinstance(known, Refinement):
        first = Fitted(entry, known, state.origin)
    else:
        first = _refined(workspace, entry, known, state.origin)
    if state.mechanisms is known or state.untold or not isinstance(state.mechanisms, Refinement):
        return (first,)
    return first, _refined(workspace, entry, state.mechanisms, "fitted on the spot", beside=True)


def drawn(fits: Sequence[Fitted]) -> Model | None:
    """The model whose curve is laid over the points: the first, unless it is a guess that no fit bears out."""
    return next((fit.model for fit in fits if fit.origin != "first guess"), None)


def _refined(workspace: Workspace, entry: str, refinement: Refinement, origin: Origin, *, beside: bool = False) -> Fitted:
    own = origin == "refined"
    # The level that the bench shows the user's own fit at; it needs no new fit.
    level = workspace.fit(entry).settings.confidence if own else refinement.settings.confidence
    sweep, partners = workspace.sweep(entry), workspace.beside(entry) if own else ()
    try:
        if not is_quick((sweep, refinement, level, partners)):
            raise FitFailed("Intervals by profile likelihood would take long here; the bench works them out beside the fit.")
        found = profiles(sweep, refinement, level, beside=partners)
        return Fitted(entry, refinement.model, origin, refinement, beside, found, level)
    except FitFailed as failure:
        return Fitted(entry, refinement.model, origin, refinement, beside, _linear(refinement), refinement.settings.confidence, str(failure))


def _linear(refinement: Refinement) -> dict[str, Interval]:
    """Intervals from the covariance, open where the bounds of physics are their ends."""
    return {name: Interval(low, high, low > 0, math.isfinite(high)) for name, (low, high) in refinement.intervals.items()}
