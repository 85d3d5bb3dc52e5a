"""What a fit is asked to do; kept with its result, so that anyone can make it again."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Any, Literal, get_args

from .diode import PARAMETERS
from .errors import FitFailed
from .two_diode import TWO_DIODE_PARAMETERS

Weights = Literal["automatic", "uniform", "relative", "effective", "from the file"]
Loss = Literal["linear", "robust"]

# The parameters of each model, and those that are held unless the user frees them.
MODELS = {"one diode": PARAMETERS, "two diodes": TWO_DIODE_PARAMETERS}
USUALLY_HELD = {"one diode": frozenset[str](), "two diodes": frozenset({"ideality_1", "ideality_2"})}


@dataclass(frozen=True, slots=True)
class FitSettings:
    """Settings of one fit.

    Attributes
    ----------
    model : "one diode" or "two diodes"
    weights : "automatic", "uniform", "relative", "effective" or "from the file"
        Uniform: every point counts alike, residuals in the unit of current. Relative: residuals in
        proportion to the current, down to the noise near zero; in the dark, where the current spans
        decades, nothing else lets the low points speak. Automatic: uniform for lit sweeps, relative
        for dark ones. Effective: by the effective variance σ_J² + (dJ/dV)²·σ_V², for which
        ``voltage_noise`` must be given; the steep part of the curve then counts less.
        From the file: by the standard deviation σ_i of each current that the file gives, 1/σ_i, or
        1/√(σ_i² + (dJ/dV)²·σ_V²) where ``voltage_noise`` is given. Only the ratios of the weights count:
        errors follow the residuals, whatever the weights.
    loss : "linear" or "robust"
        Linear is least squares; robust lets points beyond a few noise widths count less (Huber).
    window : (low, high) or None
        Only points of this voltage range are used [V].
    excluded : tuple of int
        Indices of points, in the order of the sweep, that are left out.
    hold : frozenset of str
        Parameters that keep the value they start from; if not given, none of the one-diode model, and n₁ and n₂
        of the two-diode model.
    bounds : mapping of str to (low, high)
        Bounds on natural parameters, in place of the built-in ones; ``inf`` is allowed.
    confidence : float
        Level of the intervals, between 0 and 1.
    voltage_noise : float or None
        σ_V, standard deviation of a voltage reading [V], for effective weights and those from the file.
    current_noise : float or None
        σ_J, standard deviation of a current reading [unit of current], for effective weights; None: judged
        from the sweep.

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
    hold: frozenset[str] | None = None
    bounds: Mapping[str, tuple[float, float]] = field(default_factory=dict)
    confidence: float = 0.95
    voltage_noise: float | None = None
    current_noise: float | None = None

    def __post_init__(self):
        if self.model not in MODELS:
            raise FitFailed(f"There is no model called “{self.model}”; use “one diode” or “two diodes”.")
        if self.hold is None:
            object.__setattr__(self, "hold", USUALLY_HELD[self.model])
        if self.weights not in get_args(Weights):
            known = f"{', '.join(get_args(Weights)[:-1])} or {get_args(Weights)[-1]}"
            raise FitFailed(f"There are no weights called “{self.weights}”; use {known}.")
        for noise, what in ((self.voltage_noise, "voltage"), (self.current_noise, "current")):
            if noise is not None and not 0 <= noise < math.inf:
                raise FitFailed(f"The noise of the {what} must be zero or a number above zero.")
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

    @property
    def weights_follow_slope(self) -> bool:
        """Whether the weights depend on the slope of the model, hence on where the fit stands."""
        return self.weights == "effective" or self.weights == "from the file" and bool(self.voltage_noise)

    @property
    def parameters(self) -> tuple[str, ...]:
        """The parameters of the model."""
        return MODELS[self.model]

    def of_model(self, model: str) -> FitSettings:
        """The same settings for another model: holds and bounds stay where both models have the parameter."""
        if model == self.model:
            return self
        shared = set(self.parameters) & set(MODELS.get(model, ()))
        return replace(
            self,
            model=model,
            hold=(self.hold & shared) | USUALLY_HELD.get(model, frozenset()),
            bounds={name: ends for name, ends in self.bounds.items() if name in shared},
        )

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
            "voltage_noise": self.voltage_noise,
            "current_noise": self.current_noise,
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
