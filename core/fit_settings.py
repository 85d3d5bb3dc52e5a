"""What a fit is asked to do; kept with its result, so that anyone can make it again."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, Literal

from .errors import FitFailed

Weights = Literal["automatic", "uniform", "relative"]
Loss = Literal["linear", "robust"]


@dataclass(frozen=True, slots=True)
class FitSettings:
    """Settings of one fit.

    Attributes
    ----------
    model : str
        "one diode".
    weights : "automatic", "uniform" or "relative"
        Uniform: every point counts alike, residuals in the unit of current. Relative: residuals in
        proportion to the current, down to the noise near zero; in the dark, where the current spans
        decades, nothing else lets the low points speak. Automatic: uniform for lit sweeps, relative
        for dark ones.
    loss : "linear" or "robust"
        Linear is least squares; robust lets points beyond a few noise widths count less (Huber).
    window : (low, high) or None
        Only points of this voltage range are used [V].
    excluded : tuple of int
        Indices of points, in the order of the sweep, that are left out.
    hold : frozenset of str
        Parameters that keep the value they start from.
    bounds : mapping of str to (low, high)
        Bounds on natural parameters, in place of the built-in ones; ``inf`` is allowed.
    confidence : float
        Level of the intervals, between 0 and 1.

    Raises
    ------
    FitFailed
        If a setting makes no sense.
    """

    model: str = "one diode"
    weights: Weights = "automatic"
    loss: Loss = "linear"
    window: tuple[float, float] | None = None
    excluded: tuple[int, ...] = ()
    hold: frozenset[str] = frozenset()
    bounds: Mapping[str, tuple[float, float]] = field(default_factory=dict)
    confidence: float = 0.95

    def __post_init__(self):
        if self.model != "one diode":
            raise FitFailed(f"There is no model called “{self.model}”; the model offered is “one diode”.")
        if self.weights not in ("automatic", "uniform", "relative"):
            raise FitFailed(f"There are no weights called “{self.weights}”; use automatic, uniform or relative.")
        if self.loss not in ("linear", "robust"):
            raise FitFailed(f"There is no loss called “{self.loss}”; use linear or robust.")
        if not 0 < self.confidence < 1:
            raise FitFailed("The confidence of intervals must lie between 0 and 1, for instance 0.95.")
        if self.window is not None and not self.window[0] < self.window[1]:
            raise FitFailed("The voltage window must run from a lower to a higher voltage.")
        for name, (low, high) in self.bounds.items():
            if not low < high:
                raise FitFailed(f"The bounds on {name.replace('_', ' ')} must run from a lower to a higher value.")

    def __hash__(self) -> int:
        return hash((self.model, self.weights, self.loss, self.window, self.excluded, self.hold, self.confidence))

    def to_dict(self) -> dict[str, Any]:
        """As JSON-ready values; ``from_dict`` gives equal settings back. Infinite bounds are None."""
        return {
            "model": self.model,
            "weights": self.weights,
            "loss": self.loss,
            "window": None if self.window is None else list(self.window),
            "excluded": list(self.excluded),
            "hold": sorted(self.hold),
            "bounds": {name: [_finite(low), _finite(high)] for name, (low, high) in self.bounds.items()},
            "confidence": self.confidence,
        }

    @classmethod
    def from_dict(cls, values: Mapping[str, Any]) -> FitSettings:
        return cls(
            **{
                **values,
                "window": None if values["window"] is None else tuple(values["window"]),
                "excluded": tuple(values["excluded"]),
                "hold": frozenset(values["hold"]),
                "bounds": {
                    name: (-math.inf if low is None else low, math.inf if high is None else high)
                    for name, (low, high) in values["bounds"].items()
                },
            }
        )


def _finite(value: float) -> float | None:
    return value if math.isfinite(value) else None
