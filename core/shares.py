"""Why one state delivers more power than another, mechanism by mechanism.

The power of all 32 mixtures of two states is computed exactly, and each of the five mechanisms gets its Shapley share:
its gain averaged over all orders of change. Shares add up to the difference, do not depend on an order, and change sign
when the states are swapped. The one-after-another ladder in an order of choice stands beside them.

Models here are densities (A cm⁻², Ω cm²) under equal temperature and irradiance; ``core.comparing`` sees to that for sweeps.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from .constants import ONE_SUN, thermal_voltage
from .detailed_balance import Emission, limiting_diode
from .diode import PARAMETERS, OneDiode
from .errors import ComparisonRefused
from .mixtures import (
    coordinates,
    diode_at,
    largest_power,
    mixtures,
    reference_photocurrent,
    shapley,
)

# Temperatures [K] that count as equal; a tenth of a kelvin is some 0.2 mV of Voc.
EQUAL_TEMPERATURE = 0.1


@dataclass(frozen=True, slots=True)
class Shares:
    """Where a difference in power comes from.

    Attributes
    ----------
    start, end : float
        Power of the first and the second state [W cm⁻²]: measured where a measured power was given, else the model's.
    by_mechanism : mapping of str to float
        Share of each mechanism [W cm⁻²], positive where the second state gains by it; they add up to the difference
        between the two models. Names are ``PARAMETERS``; "saturation_current" is the voltage mechanism.
    residual : float or None
        What the models leave of the measured difference [W cm⁻²]; None where no measured power was given.
    intervals : mapping of str to (low, high)
        Of the shares, from fit noise only; empty where they cannot be told.
    confidence : float
        Level of the intervals.
    reason : str
        Sentence why there are no intervals, "" where there are.
    notes : tuple of str
        Sentences on how the models came about, where that is out of the ordinary.
    """

    start: float
    end: float
    by_mechanism: Mapping[str, float]
    residual: float | None = None
    intervals: Mapping[str, tuple[float, float]] = field(default_factory=dict)
    confidence: float = 0.95
    reason: str = ""
    notes: tuple[str, ...] = ()

    @property
    def difference(self) -> float:
        """Second less first power [W cm⁻²]: the shares and the residual add up to it."""
        return self.end - self.start

    def swapped(self) -> Shares:
        """The same seen from the second state to the first."""
        return replace(
            self,
            start=self.end,
            end=self.start,
            by_mechanism={name: -share for name, share in self.by_mechanism.items()},
            residual=None if self.residual is None else -self.residual,
            intervals={name: (-high, -low) for name, (low, high) in self.intervals.items()},
        )


def difference_shares(
    model_a: OneDiode,
    model_b: OneDiode,
    *,
    measured_power_a: float | None = None,
    measured_power_b: float | None = None,
) -> Shares:
    """Shares of the five mechanisms in the step from one model to another.

    Parameters
    ----------
    model_a, model_b : OneDiode
        In A cm⁻² and Ω cm², lit, of one temperature and one number of cells in series.
    measured_power_a, measured_power_b : float or None
        [W cm⁻²]; where one is given, the measured difference is explained, and what the models miss is the residual.

    Raises
    ------
    ComparisonRefused
        If temperature or cells in series differ, or a model has no photocurrent.
    """
    model_b = comparable(model_a, model_b)
    powers = _powers(model_a, model_b)
    by_mechanism = dict(zip(PARAMETERS, shapley(powers).tolist(), strict=True))
    modelled = float(powers[0]), float(powers[-1])
    if measured_power_a is None and measured_power_b is None:
        return Shares(*modelled, by_mechanism)
    start = modelled[0] if measured_power_a is None else measured_power_a
    end = modelled[1] if measured_power_b is None else measured_power_b
    return Shares(start, end, by_mechanism, residual=(end - modelled[1]) - (start - modelled[0]))


def loss_shares(
    model: OneDiode,
    band_gap: float,
    temperature: float | None = None,
    irradiance: float = ONE_SUN,
    emission: Emission = "front",
    *,
    measured_power: float | None = None,
) -> Shares:
    """Shares of the five mechanisms in the step from the detailed-balance limit down to a device; losses are negative.

    Parameters
    ----------
    model : OneDiode
        Of one junction, in A cm⁻² and Ω cm².
    band_gap : float
        [eV]
    temperature : float or None
        Of the device [K]; None is the model's own.
    irradiance : float
        That the model was measured under [W cm⁻²].
    emission : "front" or "both"
    measured_power : float or None
        Of the device [W cm⁻²].

    Raises
    ------
    ComparisonRefused
        If the model has several cells in series, another temperature, or no photocurrent.
    ConditionRefused
        If there is no limit for this gap or these conditions.
    """
    refuse_string(model)
    temperature = model.temperature if temperature is None else temperature
    start = limiting_diode(band_gap, temperature, irradiance, emission)
    return difference_shares(start, model, measured_power_b=measured_power)


def ladder(model_a: OneDiode, model_b: OneDiode, order: Sequence[str] = PARAMETERS) -> dict[str, float]:
    """Contributions [W cm⁻²] when the mechanisms change one after another, in an order of choice.

    They add up to the difference between the models as the shares do, but depend on the order. Errors as for
    ``difference_shares``, and ComparisonRefused if the order does not name each mechanism once.
    """
    if sorted(order) != sorted(PARAMETERS):
        raise ComparisonRefused("The order of the ladder must name each of the five mechanisms once.")
    powers = _powers(model_a, comparable(model_a, model_b))
    changed, contributions = 0, {}
    for name in order:
        after = changed | 1 << PARAMETERS.index(name)
        contributions[name] = float(powers[after] - powers[changed])
        changed = after
    return contributions


def what_if(model_a: OneDiode, model_b: OneDiode, mechanisms: Iterable[str], fraction: float = 1.0) -> OneDiode:
    """The first model with some mechanisms moved towards the second's.

    Parameters
    ----------
    model_a, model_b : OneDiode
        As for ``difference_shares``.
    mechanisms : iterable of str
        Which ones move.
    fraction : float
        How far, from 0 (not at all) to 1 (all the way); beyond, the nearer end is taken. In between Jph, n, Rs and
        1/Rsh move in proportion, and the voltage at the reference photocurrent does, which is ln J0.
    """
    model_b = comparable(model_a, model_b)
    reference = reference_photocurrent(model_a, model_b)
    start, end = coordinates(model_a, reference), coordinates(model_b, reference)
    chosen = set(mechanisms)
    _refuse_unknown(chosen)
    if not chosen:
        return model_a
    part = min(max(fraction, 0.0), 1.0)
    moved = [(1.0 - part) * a + part * b if name in chosen else a for name, a, b in zip(PARAMETERS, start, end, strict=True)]
    return diode_at(np.array(moved), reference, model_a)


def mechanism_value(model: OneDiode, mechanism: str) -> float:
    """Where a mechanism stands: Jph [A cm⁻²], the diode's own voltage at Jph [V], n, Rs or Rsh [Ω cm²]."""
    _refuse_unknown({mechanism})
    if mechanism == "saturation_current":
        return float(coordinates(model, reference_photocurrent(model, model))[1])
    return getattr(model, mechanism)


def target(model: OneDiode, mechanism: str, value: float) -> OneDiode:
    """The model with one mechanism at a value, in the units of ``mechanism_value``; the other four stay.

    The photocurrent moves at constant J0; the voltage moves J0; n moves with the diode's voltage at Jph kept, so that
    J0 follows.

    Raises
    ------
    ComparisonRefused
        If the value is not one that the mechanism can have.
    """
    _refuse_unknown({mechanism})
    may_be_zero, may_be_infinite = mechanism == "series_resistance", mechanism == "shunt_resistance"
    fits = value >= 0 if may_be_zero else value > 0
    if not fits or not (math.isfinite(value) or may_be_infinite):
        least = "zero or above" if may_be_zero else "above zero"
        raise ComparisonRefused(f"A target for the {mechanism.replace('_', ' ')} must be a number {least}.")
    if mechanism in ("photocurrent", "series_resistance", "shunt_resistance"):
        return replace(model, **{mechanism: float(value)})
    reference = reference_photocurrent(model, model)
    place = coordinates(model, reference)
    place[PARAMETERS.index(mechanism)] = value
    moved = diode_at(place, reference, model)
    if not moved.saturation_current > 0:
        raise ComparisonRefused("At this target the saturation current would be too small to be computed.")
    return moved


def comparable(model_a: OneDiode, model_b: OneDiode) -> OneDiode:
    """The second model, read at the first one's temperature where the two differ by nothing that matters.

    Raises
    ------
    ComparisonRefused
        If temperature or cells in series differ.
    """
    if model_a.series_cells != model_b.series_cells:
        raise ComparisonRefused(
            f"One model has {model_a.series_cells} and the other {model_b.series_cells} cells in series; "
            "their mechanisms cannot be set against each other. Correct the number of cells, or choose like devices."
        )
    if abs(model_a.temperature - model_b.temperature) > EQUAL_TEMPERATURE:
        raise ComparisonRefused(
            f"The temperatures differ ({model_a.temperature - 273.15:.1f} and {model_b.temperature - 273.15:.1f} °C); "
            "shares of the mechanisms need equal temperatures. Measure both at one temperature, or correct the conditions."
        )
    if model_a.temperature == model_b.temperature:
        return model_b
    return model_b.at(temperature=model_a.temperature)  # the curve stays


def refuse_string(model: OneDiode) -> None:
    """Raises ComparisonRefused for several cells in series: a limit for a single gap is not theirs."""
    if model.series_cells > 1:
        raise ComparisonRefused(
            f"This device has {model.series_cells} cells in series; the detailed-balance limit is that of one junction. "
            "Its metrics and the pair are there, its losses against a single gap are not."
        )


def _powers(model_a: OneDiode, model_b: OneDiode) -> np.ndarray:
    """Power of all mixtures [W cm⁻²], shape (32,)."""
    reference = reference_photocurrent(model_a, model_b)
    states = mixtures(coordinates(model_a, reference), coordinates(model_b, reference))
    return largest_power(states, reference, model_a.series_cells * thermal_voltage(model_a.temperature))


def _refuse_unknown(mechanisms: set[str]) -> None:
    for name in mechanisms - set(PARAMETERS):
        raise ComparisonRefused(f"There is no mechanism called “{name}”.")
