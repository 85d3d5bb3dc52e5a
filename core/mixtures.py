"""The five mechanisms as coordinates of a one-diode state, and the exact power of many states at once.

Two states are described by: photocurrent Jph; the voltage m·ln(1 + Jref/J0) that the diode alone reaches at one
reference photocurrent Jref, the same for both; ideality n; Rs; 1/Rsh. In these coordinates dimming alone moves the
photocurrent alone, and a change of n leaves the diode's voltage at Jref where it is.

Each mechanism carries the name of the parameter that it moves: the voltage is "saturation_current".
"""

from __future__ import annotations

import math

import numpy as np
from scipy.special import wrightomega

from .constants import thermal_voltage
from .diode import PARAMETERS, OneDiode
from .errors import ComparisonRefused

_PASSES = 100
# Error of the junction voltage at the maximum, in units of m or of itself, that ends the search: the power feels its
# square.
_SETTLED = 1e-8


def coordinates(model: OneDiode, reference: float) -> np.ndarray:
    """Coordinates of a state, shape (5,): Jph [A cm⁻²], Voc,ref [V], n, Rs [Ω cm²], 1/Rsh [Ω⁻¹ cm⁻²].

    Parameters
    ----------
    model : OneDiode
    reference : float
        Jref [A cm⁻²].
    """
    return np.array(
        [
            model.photocurrent,
            model.slope_voltage * math.log1p(reference / model.saturation_current),
            model.ideality,
            model.series_resistance,
            1.0 / model.shunt_resistance,
        ]
    )


def diode_at(place: np.ndarray, reference: float, like: OneDiode) -> OneDiode:
    """The state at coordinates, shape (5,); temperature and cells in series are those of ``like``."""
    photocurrent, voltage, ideality, resistance, conductance = (float(value) for value in place)
    slope = ideality * like.series_cells * thermal_voltage(like.temperature)
    return OneDiode(
        photocurrent=photocurrent,
        saturation_current=math.exp(float(log_saturation(voltage, slope, reference))),
        ideality=ideality,
        series_resistance=resistance,
        shunt_resistance=1.0 / conductance if conductance > 0 else math.inf,
        series_cells=like.series_cells,
        temperature=like.temperature,
    )


def reference_photocurrent(a: OneDiode, b: OneDiode) -> float:
    """Jref = √(Jph,A·Jph,B) [A cm⁻²].

    Raises
    ------
    ComparisonRefused
        If one of the two gives no photocurrent.
    """
    if not (a.photocurrent > 0 and b.photocurrent > 0):
        raise ComparisonRefused("One of the two models has no photocurrent, so it delivers no power to be explained.")
    return math.sqrt(a.photocurrent) * math.sqrt(b.photocurrent)


def log_saturation(voltage: np.ndarray, slope: np.ndarray, reference: np.ndarray) -> np.ndarray:
    """ln J0 of a diode that reaches a voltage [V] at the reference photocurrent; slope is m [V]."""
    steepness = voltage / slope
    return np.log(reference) - steepness - np.log(-np.expm1(-steepness))


def mixtures(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    """All 32 states that take each coordinate from a or from b.

    Parameters
    ----------
    a, b : ndarray, shape (…, 5)

    Returns
    -------
    ndarray, shape (…, 32, 5)
        In mixture i the coordinates whose bit of i is set come from b: 0 is a, 31 is b.
    """
    from_b = (np.arange(32)[:, None] >> np.arange(5)) & 1 == 1
    return np.where(from_b, b[..., None, :], a[..., None, :])


def largest_power(place: np.ndarray, reference: np.ndarray, cell_voltage: np.ndarray) -> np.ndarray:
    """Power at the maximum power point of many states.

    Parameters
    ----------
    place : ndarray, shape (…, 5)
        Coordinates as from ``coordinates``, with Jph above zero.
    reference : ndarray, broadcast against (…)
        Jref [A cm⁻²].
    cell_voltage : ndarray, broadcast against (…)
        Ns·kT/q [V].

    Returns
    -------
    ndarray, shape (…)
        [W cm⁻²], to 1e-12 of itself at lab parameters.

    Notes
    -----
    In the junction voltage u = V + J·Rs the current is explicit, and dP/du = J + J'·(u − 2·J·Rs) falls through zero
    exactly once between 0 and Voc: Newton's method, with bisection where a step would leave the bracket.
    """
    photocurrent, voltage, ideality, resistance, conductance = np.moveaxis(np.asarray(place, dtype=float), -1, 0)
    slope = ideality * cell_voltage
    log_j0 = log_saturation(voltage, slope, reference)
    saturation = np.exp(log_j0)

    def current_at(junction: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        emission = np.exp(junction / slope + log_j0)
        return photocurrent + saturation - emission - junction * conductance, emission

    # Voc and maximum of the diode alone; Rs and Rsh only lower both, so the root lies between 0 and high.
    open_circuit = np.logaddexp(0.0, np.log(photocurrent) - log_j0)
    low, high = np.zeros_like(open_circuit), slope * open_circuit
    junction = np.minimum(slope * (np.real(wrightomega(1.0 + open_circuit)) - 1.0), high)
    for _ in range(_PASSES):
        current, emission = current_at(junction)
        steepness = emission / slope + conductance
        lever = junction - 2.0 * current * resistance
        gradient = current - steepness * lever
        bend = -steepness - emission / slope**2 * lever - steepness * (1.0 + 2.0 * steepness * resistance)
        low, high = np.where(gradient > 0, junction, low), np.where(gradient > 0, high, junction)
        aim = junction - gradient / bend
        aim = np.where((aim >= low) & (aim <= high), aim, 0.5 * (low + high))
        settled = np.all(np.minimum(np.abs(aim - junction), high - low) <= _SETTLED * np.minimum(slope, aim))
        junction = aim
        if settled:
            break
    current = current_at(junction)[0]
    return current * (junction - current * resistance)


def _shapley_weights() -> np.ndarray:
    """Matrix (5, 32) from the powers of the mixtures to the shares.

    A mechanism's share is its gain averaged over all orders of change: the gain on top of a set of s mechanisms that
    changed before stands in s!·(4 − s)! of the 5! orders.

    References
    ----------
    L. S. Shapley, "A value for n-person games", Contributions to the Theory of Games II (1953) 307 (from memory).
    """
    count = len(PARAMETERS)
    weights = np.zeros((count, 2**count))
    for index in range(count):
        for before in range(2**count):
            if not before >> index & 1:
                size = before.bit_count()
                weight = math.factorial(size) * math.factorial(count - 1 - size) / math.factorial(count)
                weights[index, before | 1 << index] += weight
                weights[index, before] -= weight
    weights.setflags(write=False)
    return weights


SHAPLEY_WEIGHTS = _shapley_weights()


def shapley(powers: np.ndarray) -> np.ndarray:
    """Shares, shape (…, 5), of powers of mixtures, shape (…, 32)."""
    return powers @ SHAPLEY_WEIGHTS.T
