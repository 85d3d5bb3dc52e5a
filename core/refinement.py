"""The outcome of a fit: the model, how well its parameters are known, and what the data cannot tell."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from .fit_settings import FitSettings
from .models import Model, model_from_dict


@dataclass(frozen=True, slots=True)
class Bond:
    """What ties the refinement of one sweep to those of the others in a joint fit.

    With the other sweeps and their refinements it gives the least-squares problem of that fit back.

    Attributes
    ----------
    place : int
        Of this sweep among those of the fit.
    shared : frozenset of str
        Parameters that had one value for all.
    alone : OneDiode, TwoDiode or None
        This sweep as refined alone, which set its weight beside the others; None where it could not be.
    entries : tuple of str
        The sweeps of the fit by their ids in a workspace, in order; empty outside one.
    """

    place: int
    shared: frozenset[str]
    alone: Model | None
    entries: tuple[str, ...] = ()

    def to_dict(self) -> dict[str, Any]:
        """As JSON-ready values; ``from_dict`` gives an equal bond back."""
        return {
            "place": self.place,
            "shared": sorted(self.shared),
            "alone": None if self.alone is None else self.alone.to_dict(),
            "entries": list(self.entries),
        }

    @classmethod
    def from_dict(cls, values: Mapping[str, Any]) -> Bond:
        alone = values["alone"]
        return cls(
            int(values["place"]),
            frozenset(values["shared"]),
            None if alone is None else model_from_dict(alone),
            tuple(str(entry) for entry in values["entries"]),
        )


@dataclass(frozen=True, slots=True, eq=False)
class Refinement:
    """A refined model with its statistics. Uncertainties are of fit noise only.

    Attributes
    ----------
    model : OneDiode or TwoDiode
    settings : FitSettings
        As asked for; ``weights`` says what automatic weights came to.
    weights : "uniform", "relative", "effective" or "from the file"
    free : tuple of str
        Parameters that were free, k of them.
    standard_errors : dict of str to (float or None)
        Of all natural parameters; None where held, at a bound, or not determined.
    covariance : ndarray, shape (k, k)
        Of the free unknowns in the order of ``free``, scaled as Jph, ln J0, n, Rs, 1/Rsh; a J0 of the two-diode
        model whose n is held stands as it is, since it may be zero. Infinite variances belong to what the data do
        not determine.
    intervals : dict of str to (low, high)
        At ``settings.confidence``, for free parameters; an end may be a bound, ``inf`` for a shunt
        that may be absent.
    rmse : float
        Root of the mean squared residual over all points used [unit of current].
    points : int
        Number of points used.
    findings : tuple of str
        Sentences on what the fit says, and what it cannot say.
    others : int
        Sweeps that it was refined together with.
    bond : Bond or None
        What ties it to them; None where it was refined alone, or kept before bonds were.
    chi_square : float or None
        Per degree of freedom: the squared residuals in units of the standard deviations that the file gives, over the
        points less the free parameters; None without weights from the file. Errors do not rest on it.
    """

    model: Model
    settings: FitSettings
    standard_errors: dict[str, float | None]
    covariance: np.ndarray
    free: tuple[str, ...]
    intervals: dict[str, tuple[float, float]]
    rmse: float
    points: int
    findings: tuple[str, ...] = ()
    weights: str = "uniform"
    others: int = 0
    bond: Bond | None = None
    chi_square: float | None = None

    def __post_init__(self):
        covariance = np.array(self.covariance, dtype=float)
        covariance.setflags(write=False)
        object.__setattr__(self, "covariance", covariance)

    @property
    def correlation(self) -> np.ndarray:
        """Correlation matrix of the free unknowns, shape (k, k); NaN where not determined."""
        spread = np.sqrt(np.diag(self.covariance))
        known = np.where(np.isfinite(spread) & (spread > 0), spread, np.nan)
        return self.covariance / np.outer(known, known)

    def to_dict(self) -> dict[str, Any]:
        """As JSON-ready values; ``from_dict`` gives the same refinement back. Infinity is None."""
        return {
            "model": self.model.to_dict(),
            "settings": self.settings.to_dict(),
            "standard_errors": dict(self.standard_errors),
            "covariance": [[_finite(value) for value in row] for row in self.covariance.tolist()],
            "free": list(self.free),
            "intervals": {name: [_finite(low), _finite(high)] for name, (low, high) in self.intervals.items()},
            "rmse": self.rmse,
            "points": self.points,
            "findings": list(self.findings),
            "weights": self.weights,
            "others": self.others,
            "bond": None if self.bond is None else self.bond.to_dict(),
            "chi_square": None if self.chi_square is None else _finite(self.chi_square),
        }

    @classmethod
    def from_dict(cls, values: Mapping[str, Any]) -> Refinement:
        return cls(
            **{
                **values,
                "model": model_from_dict(values["model"]),
                "settings": FitSettings.from_dict(values["settings"]),
                "covariance": np.array(
                    [[math.inf if value is None else value for value in row] for row in values["covariance"]]
                ).reshape(len(values["free"]), len(values["free"])),
                "free": tuple(values["free"]),
                "intervals": {
                    name: (-math.inf if low is None else low, math.inf if high is None else high)
                    for name, (low, high) in values["intervals"].items()
                },
                "findings": tuple(values["findings"]),
                "bond": None if values.get("bond") is None else Bond.from_dict(values["bond"]),
            }
        )


def _finite(value: float) -> float | None:
    return value if math.isfinite(value) else None
