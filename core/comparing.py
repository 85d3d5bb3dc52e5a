"""Shares for sweeps: sees that two sweeps may be compared at all, and explains the measured difference.

The mechanisms are those of one diode: a two-diode model stands aside for a one-diode fit made alongside, and the shares
say so.
"""

from __future__ import annotations

from dataclasses import replace

from .breakdown import one_sided, why_no_breakdown
from .detailed_balance import Emission, limiting_diode
from .diode import OneDiode
from .errors import BreakdownRefused, ComparisonRefused, FitFailed
from .fit_settings import FitSettings
from .metrics import measure
from .quantity import Metrics
from .refine import refine
from .refinement import Refinement
from .share_sampling import State, model_of, sample_shares
from .shares import EQUAL_TEMPERATURE, Shares, difference_shares, refuse_string
from .sweep import Sweep
from .two_diode import TwoDiode

# Irradiances that count as equal, relative.
_EQUAL_IRRADIANCE = 1e-3


def compare(
    sweep_a: Sweep,
    state_a: State | TwoDiode,
    sweep_b: Sweep,
    state_b: State | TwoDiode,
    *,
    metrics_a: Metrics | None = None,
    metrics_b: Metrics | None = None,
) -> Shares:
    """Shares of the mechanisms in the measured difference between two sweeps.

    Parameters
    ----------
    sweep_a, sweep_b : Sweep
    state_a, state_b : Refinement, OneDiode or TwoDiode
        The model of each; intervals need refinements on both sides.
    metrics_a, metrics_b : Metrics or None
        Metrics of the sweeps where they are at hand; None measures them here.

    Raises
    ------
    ComparisonRefused
        If a sweep is dark or has no area, if temperature, irradiance or cells in series differ, or if two diodes cannot
        be replaced by one.
    BreakdownRefused
        If a sweep or its fit says nothing of its mechanisms.
    """
    for sweep in (sweep_a, sweep_b):
        _refuse_unfit(sweep)
    if abs(sweep_a.temperature - sweep_b.temperature) > EQUAL_TEMPERATURE:
        raise ComparisonRefused(
            f"{_title(sweep_a)} was measured at {sweep_a.temperature - 273.15:.1f} °C and {_title(sweep_b)} at "
            f"{sweep_b.temperature - 273.15:.1f} °C; shares of the mechanisms need equal temperatures. "
            "Choose sweeps of one temperature, or correct the conditions."
        )
    if abs(sweep_a.irradiance - sweep_b.irradiance) > _EQUAL_IRRADIANCE * max(sweep_a.irradiance, sweep_b.irradiance):
        raise ComparisonRefused(
            f"{_title(sweep_a)} was measured under {1e4 * sweep_a.irradiance:.5g} W m⁻² and {_title(sweep_b)} under "
            f"{1e4 * sweep_b.irradiance:.5g} W m⁻²; shares of the mechanisms need equal irradiance. "
            "Choose sweeps of one irradiance, or correct the conditions."
        )
    (state_a, note_a), (state_b, note_b) = alongside(sweep_a, state_a), alongside(sweep_b, state_b)
    metrics_a, metrics_b = metrics_a or measure(sweep_a), metrics_b or measure(sweep_b)
    _refuse_untold(sweep_a, state_a, metrics_a)
    _refuse_untold(sweep_b, state_b, metrics_b)
    model_a, model_b = _under(sweep_a, state_a), _under(sweep_b, state_b)
    power_a, power_b = metrics_a.pmp.value, metrics_b.pmp.value
    if power_a is None or power_b is None:  # half a measured difference explains nothing
        power_a = power_b = None
    shares = difference_shares(model_a, model_b, measured_power_a=power_a, measured_power_b=power_b)
    bounds = one_sided(sweep_a, state_a) + one_sided(sweep_b, state_b)
    shares = replace(shares, notes=directions(sweep_a, sweep_b) + note_a + note_b + bounds)
    if isinstance(state_a, OneDiode) or isinstance(state_b, OneDiode):
        return replace(shares, reason="Not both models are refined, so the shares have no intervals.")
    sampled = sample_shares(_refinement_under(state_a, model_a), _refinement_under(state_b, model_b))
    return replace(shares, intervals=sampled.intervals, confidence=sampled.confidence, reason=sampled.reason)


def losses(
    sweep: Sweep,
    state: State | TwoDiode,
    band_gap: float,
    emission: Emission = "front",
    *,
    metrics: Metrics | None = None,
) -> Shares:
    """Shares of the mechanisms from the detailed-balance limit down to a measured sweep; losses are negative.

    Parameters
    ----------
    sweep : Sweep
    state : Refinement, OneDiode or TwoDiode
        Its model; intervals need a refinement.
    band_gap : float
        [eV]
    emission : "front" or "both"
    metrics : Metrics or None
        Metrics of the sweep where they are at hand.

    Raises
    ------
    ComparisonRefused
        If the sweep is dark, has no area, or several cells in series.
    BreakdownRefused
        If the sweep or its fit says nothing of its mechanisms.
    ConditionRefused
        If there is no limit for this gap.
    """
    _refuse_unfit(sweep)
    state, notes = alongside(sweep, state)
    model = _under(sweep, state)
    refuse_string(model)
    metrics = metrics or measure(sweep)
    _refuse_untold(sweep, state, metrics)
    start = limiting_diode(band_gap, sweep.temperature, sweep.irradiance, emission)
    shares = difference_shares(start, model, measured_power_b=metrics.pmp.value)
    shares = replace(shares, notes=notes + one_sided(sweep, state))
    if isinstance(state, OneDiode):
        return replace(shares, reason="The model is not refined, so the shares have no intervals.")
    sampled = sample_shares(start, _refinement_under(state, model))
    return replace(shares, intervals=sampled.intervals, confidence=sampled.confidence, reason=sampled.reason)


def directions(sweep_a: Sweep, sweep_b: Sweep) -> tuple[str, ...]:
    """A sentence where one sweep ran forward and the other reverse."""
    if sweep_a.direction == sweep_b.direction:
        return ()
    return (
        f"{_title(sweep_a)} ran {sweep_a.direction} and {_title(sweep_b)} {sweep_b.direction}, so part of the difference may be hysteresis.",
    )


def alongside(sweep: Sweep, state: State | TwoDiode) -> tuple[State, tuple[str, ...]]:
    """The state itself, or for two diodes a one-diode refinement of the same points with the sentence that says so."""
    model = state.model if isinstance(state, Refinement) else state
    if not isinstance(model, TwoDiode):
        return state, ()
    settings = FitSettings()
    if isinstance(state, Refinement):
        chosen = state.settings
        kept = ("weights", "voltage_noise", "current_noise", "loss", "window", "excluded")
        settings = replace(settings, **{name: getattr(chosen, name) for name in kept})
    try:
        alongside = refine(sweep, settings=settings)
    except FitFailed as failed:
        raise ComparisonRefused(f"Two diodes are compared through one, which cannot be fitted here. {failed}") from failed
    return alongside, (f"{_title(sweep)} has a two-diode model and is compared through a one-diode fit made alongside.",)


def _under(sweep: Sweep, state: State) -> OneDiode:
    """The model read under the sweep's conditions; the curve stays."""
    return model_of(state).at(temperature=sweep.temperature, series_cells=sweep.series_cells)


def _refinement_under(state: State, model: OneDiode) -> State:
    """A refinement read under the conditions of a model: n alone is rescaled, and its covariance with it."""
    if isinstance(state, OneDiode) or state.model == model:
        return model if isinstance(state, OneDiode) else state
    factor = model.ideality / state.model.ideality
    scale = [factor if name == "ideality" else 1.0 for name in state.free]
    covariance = state.covariance * [[a * b for b in scale] for a in scale]
    return replace(state, model=model, covariance=covariance)


def _refuse_untold(sweep: Sweep, state: State, metrics: Metrics) -> None:
    if reason := why_no_breakdown(sweep, state, metrics):
        raise BreakdownRefused(reason)


def _refuse_unfit(sweep: Sweep) -> None:
    if not sweep.lit or not sweep.irradiance > 0:
        raise ComparisonRefused(
            f"{_title(sweep)} is a dark sweep and delivers no power to be explained. Choose a sweep under light."
        )
    if not sweep.per_area:
        raise ComparisonRefused(
            f"The area of {_title(sweep)} is not known, and nothing is divided by an area that nobody gave. "
            "Give the area in the conditions, and the shares appear."
        )


def _title(sweep: Sweep) -> str:
    return f"“{sweep.name or sweep.device or 'unnamed'}”"
