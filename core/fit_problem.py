"""One sweep made ready for least squares: its points, unknowns, bounds and weights."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from .errors import FitFailed
from .first_guess import Scales, scales
from .fit_settings import FitSettings
from .intervals import AnyUnknowns
from .least_squares import Minimum, minimise
from .models import Model, one_diode_like, two_diodes_like
from .noise import noise_level
from .residuals import Structure, structure
from .sweep import Sweep
from .two_diode import TwoDiode
from .two_diode_unknowns import TwoDiodeUnknowns
from .unknowns import Unknowns
from .weighting import point_weights, slope_weights

_ROUNDING = 1e-9
# Huber's constant: 95 % efficiency for normal noise; P. J. Huber, Ann. Math. Stat. 35 (1964) 73 (from memory).
_HUBER = 1.345
_PASSES = 20
# Evaluations before a fit gives up; two diodes with n free end in long curved valleys.
_USUAL, _CURVED = 100, 1000


@dataclass(frozen=True, slots=True, eq=False)
class Problem:
    """A least-squares problem in the scaled unknowns of one sweep.

    Attributes
    ----------
    sweep : Sweep
        With the points that the settings leave.
    settings : FitSettings
    unknowns : Unknowns or TwoDiodeUnknowns
    limits : dict of str to (low, high)
        Of natural parameters.
    lower, upper : ndarray, shape (k,)
        Of the unknowns.
    weight : ndarray, shape (n,)
        Of the residuals, frozen.
    coupled : bool
        Whether J0 and n may move as one combination.
    """

    sweep: Sweep
    settings: FitSettings
    unknowns: AnyUnknowns
    limits: dict[str, tuple[float, float]]
    lower: np.ndarray
    upper: np.ndarray
    weight: np.ndarray
    coupled: bool = True

    @classmethod
    def of(
        cls,
        sweep: Sweep,
        settings: FitSettings,
        base: Model,
        *,
        size: Scales | None = None,
        coupled: bool = True,
        hold: Sequence[str] = (),
    ) -> Problem:
        """The problem on points that are chosen already, with the held values of ``base``.

        Raises
        ------
        FitFailed
            If the settings name a parameter that the model has not, effective weights lack the voltage noise, or the
            file does not give the weights that are asked from it.
        """
        if settings.weights == "effective" and settings.voltage_noise is None:
            raise FitFailed("Effective weights need the noise of the voltage; give it, or choose uniform weights.")
        held = settings.hold | set(hold)
        if not sweep.lit:
            held |= {"photocurrent"}
        kind = TwoDiodeUnknowns if settings.model == "two diodes" else Unknowns
        unknowns = kind.of(base, held, size or scales(sweep), settings.bounds, coupled=coupled)
        limits = unknowns.limits(settings.bounds)
        lower, upper = unknowns.box(limits)
        return cls(sweep, settings, unknowns, limits, lower, upper, point_weights(sweep, settings.weights), coupled)

    def evaluate(self, place: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Weighted residuals, model less measured, and their Jacobian in the unknowns."""
        with np.errstate(all="ignore"):  # a place far from wild points may leave the range of floats
            modelled, jacobian = self.unknowns.model(place).current_and_jacobian(self.sweep.voltage)
            residual = self.weight * (modelled - self.sweep.current)
            return residual, (self.weight[:, None] * jacobian) @ self.unknowns.chain(place)

    def minimum_from(self, start: Model) -> Minimum:
        """The minimum reached from a model."""
        return self.minimum_near(self.unknowns.place(start))

    def minimum_near(self, place: np.ndarray) -> Minimum:
        """The minimum reached from a place, shape (k,)."""
        limit = _CURVED if {"ideality_1", "ideality_2"} & set(self.unknowns.free) else _USUAL
        return minimise(self.evaluate, place, self.lower, self.upper, limit=limit)

    def pattern(self, minimum: Minimum) -> Structure:
        """Structure of the weighted residuals, in units of the noise that they show between neighbours."""
        order = np.argsort(self.sweep.voltage, kind="stable")
        noise = noise_level(replace(self.sweep, current=minimum.residual))
        # What is left on exact curves is rounding, whose structure means nothing.
        rounding = _ROUNDING * float(np.abs(self.sweep.current * self.weight).max())
        return structure(minimum.residual[order], max(noise, rounding))

    def polished(self, minimum: Minimum) -> tuple[Problem, Minimum]:
        """The problem with the weights that its settings ask for around a minimum, and its own minimum.

        Weights that follow the slope and robust ones depend on the model; they are found by repeated passes and frozen within each.
        """
        problem = self
        for _ in range(_PASSES if self.settings.weights_follow_slope else 0):
            before = problem.weight
            model = self.unknowns.model(minimum.place)
            problem = problem.with_weight(slope_weights(self.sweep, model, self.settings))
            if np.max(np.abs(problem.weight - before)) < 1e-6:
                break
            minimum = problem.minimum_near(minimum.place)
        plain = problem
        share = np.ones(self.sweep.voltage.size)
        for _ in range(_PASSES if self.settings.loss == "robust" else 0):
            previous, share = share, _huber(plain.evaluate(minimum.place)[0])
            if np.max(np.abs(share - previous)) < 1e-6:
                break
            problem = plain.with_weight(plain.weight * share)
            minimum = problem.minimum_near(minimum.place)
        return problem, minimum

    def around(self, model: Model) -> Problem:
        """The problem with the weights that its settings ask for, frozen at a model that was refined with them."""
        place = self.unknowns.place(model)
        problem = self
        if self.settings.weights_follow_slope:
            problem = self.with_weight(slope_weights(self.sweep, model, self.settings))
        if self.settings.loss == "robust":
            problem = problem.with_weight(problem.weight * _huber(problem.evaluate(place)[0]))
        return problem

    def with_weight(self, weight: np.ndarray) -> Problem:
        """The problem with other weights, shape (n,)."""
        return replace(self, weight=weight)

    def holding(self, name: str, model: Model) -> Problem:
        """The problem with one more parameter held, at the value of a model; points and weights stay."""
        held = Problem.of(
            self.sweep, self.settings, model, size=self.unknowns.scales, coupled=self.coupled, hold=(name,)
        )
        return held.with_weight(self.weight)

    def held_at(self, name: str, value: float) -> Problem:
        """The problem with another value of a held parameter."""
        unknowns = replace(self.unknowns, base=replace(self.unknowns.base, **{name: value}))
        return replace(self, unknowns=unknowns)


def used(sweep: Sweep, settings: FitSettings) -> np.ndarray:
    """Mask of the points that the settings leave for the fit, shape (n,)."""
    mask = np.isfinite(sweep.voltage) & np.isfinite(sweep.current)
    if settings.excluded:
        mask[[index for index in settings.excluded if 0 <= index < mask.size]] = False
    if settings.window is not None:
        mask &= (sweep.voltage >= settings.window[0]) & (sweep.voltage <= settings.window[1])
    return mask


def points_used(sweep: Sweep, settings: FitSettings) -> Sweep:
    """The sweep with only the points that the settings leave for the fit."""
    keep = used(sweep, settings)
    return sweep if keep.all() else sweep.only(keep)


def laid_over(model: Model, sweep: Sweep, kind: str) -> Model:
    """A start's curve read under the sweep's temperature and cells in series, as the model that is to be fitted."""
    if kind == "two diodes" and not isinstance(model, TwoDiode):
        model = two_diodes_like(model)
    elif kind == "one diode" and isinstance(model, TwoDiode):
        model = one_diode_like(model)
    if (model.temperature, model.series_cells) == (sweep.temperature, sweep.series_cells):
        return model
    return model.at(temperature=sweep.temperature, series_cells=sweep.series_cells)


def _huber(residual: np.ndarray) -> np.ndarray:
    """Factor on the weight of each residual by Huber's loss."""
    scale = max(float(np.median(np.abs(residual))) / 0.6745, 1e-300)
    return np.sqrt(1.0 / np.maximum(np.abs(residual) / (_HUBER * scale), 1.0))
