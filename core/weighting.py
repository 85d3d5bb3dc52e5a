"""How much each point counts in a fit."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from .constants import thermal_voltage
from .errors import FitFailed
from .fit_settings import FitSettings, Weights
from .models import Model
from .noise import noise_level
from .sweep import Sweep

# The currents nearest zero that show the noise floor of a sweep, as a share of its points.
_LOW_SHARE = 0.4
# Currents this many floors high show their scatter in proportion, if there are enough of them.
_CLEAR, _ENOUGH = 30.0, 8
# No model meets a device better than the least share, and a dark sweep weighted by less would hear its top alone.
_SHARE_LEAST, _SHARE_USUAL, _SHARE_MOST = 0.003, 0.01, 0.3


def resolved(weights: Weights, sweep: Sweep) -> Weights:
    """What automatic weights come to: relative in the dark, uniform under light."""
    if weights == "automatic":
        return "uniform" if sweep.lit else "relative"
    return weights


def point_weights(sweep: Sweep, weights: Weights = "automatic") -> np.ndarray:
    """Weight of each point's residual [-].

    Relative weights are 1/√(floor² + (share·J)²), scaled to 1 at large currents; floor is the noise of the lowest
    currents and share the scatter in proportion to the current of the higher ones. A point counts by its relative
    miss, and where noise is all there is, by its miss in units of that noise. Weights from the file are 1/σ_i, scaled
    to 1 at the median.

    Returns
    -------
    ndarray, shape (n,)
        1 for uniform weights, and for effective ones, which need the slope of a model (``slope_weights``).

    Raises
    ------
    FitFailed
        For weights from the file, if it gives no standard deviation above zero for a point.
    """
    if weights == "from the file":
        return _scaled(stated_noise(sweep))
    if resolved(weights, sweep) != "relative":
        return np.ones(sweep.voltage.size)
    top = float(np.max(np.abs(sweep.current), initial=0.0))
    if not top > 0:
        return np.ones(sweep.voltage.size)
    floor = noise_near_zero(sweep)
    share = noise_in_proportion(sweep, floor)
    return share * top / np.hypot(floor, share * sweep.current)


def point_noise(sweep: Sweep, weights: Weights = "automatic") -> np.ndarray:
    """Standard deviation of each point's current as the fit weighs it [unit of current]; above zero.

    The level of the whole sweep with uniform weights; with relative ones √(floor² + (share·J)²), see ``point_weights``;
    with those from the file what it gives.

    Returns
    -------
    ndarray, shape (n,)
        NaN where the file should give one and does not.
    """
    if weights == "from the file" and sweep.current_error is not None:
        return np.where(sweep.current_error > 0, sweep.current_error, np.nan)
    if resolved(weights, sweep) != "relative":
        return np.full(sweep.voltage.size, noise_level(sweep))
    floor = noise_near_zero(sweep)
    return np.hypot(floor, noise_in_proportion(sweep, floor) * sweep.current)


def effective_weights(sweep: Sweep, model: Model, voltage_noise: float, current_noise: float | None = None) -> np.ndarray:
    """Weight of each point's residual by its effective variance, σ_J/√(σ_J² + (dJ/dV)²·σ_V²) [-].

    Parameters
    ----------
    sweep : Sweep
    model : OneDiode or TwoDiode
        Gives the slope dJ/dV at each point.
    voltage_noise, current_noise : float, float or None
        σ_V [V] and σ_J [unit of current]; None: σ_J is judged from the sweep.

    Returns
    -------
    ndarray, shape (n,)

    References
    ----------
    J. Orear, Am. J. Phys. 50 (1982) 912 (from memory).
    """
    noise = noise_level(sweep) if not current_noise else current_noise
    return noise / np.hypot(noise, slope(model, sweep.voltage) * voltage_noise)


def stated_noise(sweep: Sweep, model: Model | None = None, voltage_noise: float | None = None) -> np.ndarray:
    """Standard deviation of each current by the file, √(σ_i² + (dJ/dV)²·σ_V²) [unit of current].

    Parameters
    ----------
    sweep : Sweep
        With the points that are used.
    model : OneDiode, TwoDiode or None
        Gives the slope; None leaves σ_V out.
    voltage_noise : float or None
        σ_V [V]

    Returns
    -------
    ndarray, shape (n,)

    Raises
    ------
    FitFailed
        If the file gives none, or none above zero for one of the points.
    """
    refuse_if_unstated(sweep)
    lacking = int(np.count_nonzero(~(sweep.current_error > 0)))
    if lacking:
        points = "1 point that is" if lacking == 1 else f"{lacking} points that are"
        raise FitFailed(
            f"The file gives no standard deviation above zero for {points} used in the fit; leave such points out, "
            "or choose other weights."
        )
    if model is None or not voltage_noise:
        return sweep.current_error
    return np.hypot(sweep.current_error, slope(model, sweep.voltage) * voltage_noise)


def refuse_if_unstated(sweep: Sweep) -> None:
    """Raises FitFailed where the file of a sweep gives no standard deviations of its currents."""
    if sweep.current_error is None:
        raise FitFailed(
            "The file of this sweep has no column with the standard deviation of the current, so it gives no weights; "
            "choose other ones."
        )


def slope_weights(sweep: Sweep, model: Model, settings: FitSettings) -> np.ndarray:
    """Weights of settings whose weights follow the slope of a model, shape (n,). Raises as ``stated_noise`` does."""
    if settings.weights == "from the file":
        return _scaled(stated_noise(sweep, model, settings.voltage_noise))
    return effective_weights(sweep, model, settings.voltage_noise, settings.current_noise)


def _scaled(noise: np.ndarray) -> np.ndarray:
    """Weights in proportion to 1/noise, of order one, so that no unit gets into the fit."""
    with np.errstate(over="ignore"):  # a fit of such points ends in a sentence
        return float(np.median(noise)) / noise


def slope(model: Model, voltage: np.ndarray) -> np.ndarray:
    """dJ/dV of a model [unit of current per V], shape of ``voltage``; negative."""
    _, jacobian = model.current_and_jacobian(voltage)
    damping = jacobian[..., 0]  # 1/(1 + Rs·G) with the conductance G of the junction
    steep = damping / model.shunt_resistance
    of_one = model.series_cells * thermal_voltage(model.temperature)
    for column, name in enumerate(model.parameters):
        if name.startswith("saturation_current"):
            ideality = getattr(model, name.replace("saturation_current", "ideality"))
            emission = getattr(model, name) * damping - jacobian[..., column]  # times the damping
            steep = steep + emission / (ideality * of_one)
    return -steep


def noise_near_zero(sweep: Sweep) -> float:
    """Noise of the lowest currents of a sweep [unit of current]; above zero."""
    size = np.abs(sweep.current)
    low = size <= np.quantile(size, _LOW_SHARE) if size.size > 8 else np.ones(size.size, dtype=bool)
    floor = noise_level(sweep.only(low))
    return max(floor, 1e-12 * float(np.max(size, initial=0.0)), 1e-300)


def noise_in_proportion(sweep: Sweep, floor: float) -> float:
    """Scatter of the currents clearly above the floor, as a share of the current [-]."""
    size = np.abs(sweep.current)
    high = size > _CLEAR * floor
    if np.count_nonzero(high) < _ENOUGH:
        return _SHARE_USUAL
    scatter = noise_level(replace(sweep.only(high), current=np.log(size[high])))
    return min(max(scatter, _SHARE_LEAST), _SHARE_MOST)
