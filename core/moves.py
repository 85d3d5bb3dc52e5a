"""One parameter set to a value: alone, or with Jsc and Voc kept; and what a user is told where it stops."""

from __future__ import annotations

import math
from collections.abc import Callable, Collection
from dataclasses import dataclass, replace

from scipy.optimize import brentq

from .diode import PARAMETERS, OneDiode
from .models import Model

SYMBOLS = dict(zip(PARAMETERS, ("Jph", "J0", "n", "Rs", "Rsh"), strict=True)) | {
    "saturation_current_1": "J0₁",
    "saturation_current_2": "J0₂",
    "ideality_1": "n₁",
    "ideality_2": "n₂",
}

# Physics where it has a say; elsewhere far beyond any device, so that no input leaves what floats carry.
# A module whose number of cells is not yet given reads as one cell of large n.
LIMITS = {
    "photocurrent": (0.0, 1e6),
    "saturation_current": (1e-200, 1e6),
    "ideality": (0.1, 1000.0),
    "series_resistance": (0.0, 1e15),
    "shunt_resistance": (1e-15, math.inf),
    "saturation_current_1": (1e-200, 1e6),
    "saturation_current_2": (0.0, 1e6),
    "ideality_1": (0.1, 1000.0),
    "ideality_2": (0.1, 1000.0),
}
# What a person may type: a narrower choice, because a slip of the hand in a number field has no edge to stop at.
TYPED_LIMITS = LIMITS | {
    "photocurrent": (0.0, 1e4),
    "saturation_current": (1e-200, 1e4),
    "saturation_current_1": (1e-200, 1e4),
    "saturation_current_2": (0.0, 1e4),
    "ideality": (0.1, 20.0),
    "ideality_1": (0.1, 20.0),
    "ideality_2": (0.1, 20.0),
    "series_resistance": (0.0, 1e9),
    "shunt_resistance": (1e-6, math.inf),
}
LARGEST_EXPONENT = 400.0  # Voc/m beyond which no float is left for J0
# Share of Jsc that the diode has to carry, so that J0 is more than rounding error of a shunt-limited curve.
SMALLEST_DIODE_SHARE = 1e-9
# Voltage, in units of m, that has to remain between Jsc·Rs and Voc; Jph is then a hundred times Jsc already.
SMALLEST_ROOM = 0.01
_ROUNDING = 1e-15
_DIGITS_OF_ROOM = 1e-6  # the same, below which rounding decides


@dataclass(frozen=True, slots=True)
class Move:
    """Where a handle or dial has brought the model.

    Attributes
    ----------
    model : OneDiode or TwoDiode
    message : str
        A sentence where the move was stopped or refused, else empty.
    """

    model: Model
    message: str = ""


def no_further(parameter: str, because: str) -> str:
    return f"{SYMBOLS[parameter]} can go no further: {because}."


def not_taken(parameter: str, message: str) -> str:
    """What is said of a typed value in place of the sentence of a move that stopped on the way to it."""
    stopped = no_further(parameter, "").removesuffix(".")
    if not message.startswith(stopped):
        return message
    return f"{SYMBOLS[parameter]} cannot have this value and stays as it was: {message.removeprefix(stopped)}"


def why_locked(parameter: str, followers: Collection[str], hold: Collection[str]) -> str:
    """The sentence why a parameter cannot move while some are held; empty if it can."""
    symbol = SYMBOLS[parameter]
    if parameter in hold:
        return f"{symbol} is held."
    held = [SYMBOLS[name] for name in followers if name in hold]
    if not held:
        return ""
    verb = "is" if len(held) == 1 else "are"
    return f"{symbol} is locked because {' and '.join(held)} {verb} held and would have to follow."


@dataclass(frozen=True, slots=True)
class KeptCurve:
    """All one-diode curves through the same Jsc and Voc; J0 and Jph follow from n, Rs and Rsh.

    J0·(exp(Voc/m) − exp(Jsc·Rs/m)) = Jsc·(1 + Rs/Rsh) − Voc/Rsh and Jph = J0·(exp(Voc/m) − 1) + Voc/Rsh,
    from the one-diode equation at V = 0 and at J = 0.

    Attributes
    ----------
    jsc, voc : float
        [A cm⁻²], [V]
    """

    jsc: float
    voc: float

    @classmethod
    def of(cls, model: OneDiode) -> KeptCurve | None:
        """Through the Jsc and Voc of a model; None for a model that has none."""
        if not model.photocurrent > 0:
            return None
        jsc, voc = float(model.current(0.0)), float(model.voltage(0.0))
        if not (0 < jsc < math.inf and 0 < voc < math.inf):
            return None
        return cls(jsc, voc)

    def diode_current(self, resistance: float, conductance: float) -> float:
        """J0·(exp(Voc/m) − exp(Jsc·Rs/m)): what the diode takes of Jsc on the way to Voc [A cm⁻²]."""
        left = self.jsc - conductance * (self.voc - self.jsc * resistance)
        return max(left, _ROUNDING * self.jsc)

    def current(self, junction: float, slope: float, resistance: float, conductance: float) -> float:
        """Current of the member (m, Rs, 1/Rsh) at a junction voltage [V]."""
        at_voc = self.diode_current(resistance, conductance) / -math.expm1((self.jsc * resistance - self.voc) / slope)
        exponent = min((junction - self.voc) / slope, 700.0)
        return at_voc * -math.expm1(exponent) + (self.voc - junction) * conductance

    def member(self, model: OneDiode, ideality: float, resistance: float, shunt: float) -> OneDiode:
        """The model with these n, Rs, Rsh, and with the J0 and Jph that keep Jsc and Voc."""
        slope = model.slope_voltage / model.ideality * ideality
        diode_current = self.diode_current(resistance, 1.0 / shunt)
        at_voc = diode_current / -math.expm1((self.jsc * resistance - self.voc) / slope)  # J0·exp(Voc/m)
        return replace(
            model,
            photocurrent=at_voc * -math.expm1(-self.voc / slope) + self.voc / shunt,
            saturation_current=at_voc * math.exp(-self.voc / slope),
            ideality=ideality,
            series_resistance=resistance,
            shunt_resistance=shunt,
        )

    def has_room(self, model: OneDiode, resistance: float) -> bool:
        """Whether Jsc·Rs leaves the digits that J0 is computed from."""
        return self.voc - self.jsc * resistance > _DIGITS_OF_ROOM * model.slope_voltage

    def ideality_range(self, model: OneDiode) -> tuple[float, float]:
        """Smallest and largest n: J0 stays a float; at m = 5·Voc the curve is straight for every eye."""
        of_one = model.slope_voltage / model.ideality
        low = max(LIMITS["ideality"][0], self.voc / (LARGEST_EXPONENT * of_one))
        return min(low, model.ideality), max(5.0 * self.voc / of_one, model.ideality)

    def resistance_range(self, model: OneDiode) -> tuple[float, float]:
        """Smallest and largest Rs: Rsh > Voc/Jsc − Rs, and Jsc·Rs < Voc [Ω cm²]."""
        whole = self.voc / self.jsc
        low = max(0.0, whole - model.shunt_resistance * (1.0 - SMALLEST_DIODE_SHARE))
        high = whole * (1.0 - min(0.5, SMALLEST_ROOM * model.slope_voltage / self.voc))
        return low, max(low, high)

    def largest_conductance(self, model: OneDiode) -> float:
        """Largest 1/Rsh that leaves the diode its share of Jsc [Ω⁻¹ cm⁻²]."""
        room = self.voc - self.jsc * model.series_resistance
        return self.jsc * (1.0 - SMALLEST_DIODE_SHARE) / room if room > 0 else math.inf


STRAIGHT = "the curve is already a straight line between Jsc and Voc"
SHUNT_ALONE = "a shunt this strong would set Voc alone"
SERIES_ALONE = "the drop Jsc·Rs has to stay below Voc"


def set_parameter(
    model: OneDiode,
    parameter: str,
    value: float,
    *,
    hold: frozenset[str] = frozenset(),
    keep_jsc_voc: bool = False,
) -> Move:
    """Set one parameter, as a dial does.

    Parameters
    ----------
    model : OneDiode
    parameter : one of PARAMETERS
    value : float
        In the parameter's own unit; Rsh may be infinite. Beyond a limit that the parameter can reach (n = 0.1,
        Rs = 0, Jph = 0) it stops there; a value that means nothing (NaN, J0 or Rsh not above zero) changes nothing.
    hold : set of str
        Parameters that stay; a held one does not move, nor does one whose followers are held.
    keep_jsc_voc : bool
        For n, Rs and Rsh: J0 and Jph follow, so that Jsc and Voc stay. Jph and J0 fix Jsc and Voc, so they
        move alone in any case and the message says so; so does everything in a model without Voc.
    """
    if not keep_jsc_voc:
        return set_alone(model, parameter, value, hold=hold)
    value, message = within_limits(parameter, float(value), getattr(model, parameter))
    if value is None:
        return Move(model, message)
    if parameter in ("photocurrent", "saturation_current"):
        alone = set_alone(model, parameter, value, hold=hold)
        return Move(alone.model, alone.message or message or moves_alone(parameter))
    locked = why_locked(parameter, ("saturation_current", "photocurrent"), hold)
    if locked:
        return Move(model, locked)
    kept = KeptCurve.of(model)
    if kept is None:
        return Move(replace(model, **{parameter: value}), message or moves_alone(parameter, lit=False))
    value, edge = _within_kept(kept, model, parameter, value)
    five = {name: getattr(model, name) for name in PARAMETERS[2:]} | {parameter: value}
    if not kept.has_room(model, five["series_resistance"]):
        return Move(model, no_further(parameter, SERIES_ALONE))
    through_diode = kept.diode_current(five["series_resistance"], 1.0 / five["shunt_resistance"])
    if through_diode < 0.5 * SMALLEST_DIODE_SHARE * kept.jsc:
        return Move(model, no_further(parameter, SHUNT_ALONE))
    return Move(kept.member(model, *(five[name] for name in PARAMETERS[2:])), edge or message)


def set_alone(model: Model, parameter: str, value: float, *, hold: frozenset[str] = frozenset()) -> Move:
    """Set one parameter of either model and leave all others; limits and holds as for ``set_parameter``."""
    value, message = within_limits(parameter, float(value), getattr(model, parameter))
    if value is None:
        return Move(model, message)
    locked = why_locked(parameter, (), hold)
    return Move(model, locked) if locked else Move(replace(model, **{parameter: value}), message)


def moves_alone(parameter: str, *, lit: bool = True) -> str:
    """The note on a parameter that moves alone although Jsc and Voc were to be kept."""
    because = "Jsc and Voc follow from it and cannot be kept" if lit else "without photocurrent there is no Voc to keep"
    return f"{SYMBOLS[parameter]} moves alone: {because}."


def within_limits(parameter: str, value: float, before: float) -> tuple[float | None, str]:
    """The nearest value that the parameter may have on its own (None: no such value), and a sentence if it differs."""
    symbol = SYMBOLS[parameter]
    if math.isnan(value) or (math.isinf(value) and parameter != "shunt_resistance"):
        return None, f"{symbol} has to be a number; it stays at {before:.4g}."
    if not value > 0 and parameter in ("saturation_current", "saturation_current_1", "shunt_resistance"):
        return None, f"{symbol} has to be above zero; it stays at {before:.4g}."
    low, high = LIMITS[parameter]
    if value < low:
        return low, no_further(parameter, "it cannot be negative" if low == 0 else "no device lies below this value")
    if value > high:
        return high, no_further(parameter, "no device lies above this value")
    return value, ""


def _within_kept(kept: KeptCurve, model: OneDiode, parameter: str, value: float) -> tuple[float, str]:
    """The nearest value for which J0 and Jph exist that keep Jsc and Voc, and a sentence if it differs."""
    if parameter == "ideality":
        low, high = kept.ideality_range(model)
        if value < low:
            return low, no_further(parameter, "J0 would have to be smaller than any number the program can carry")
        return (value, "") if value <= high else (high, no_further(parameter, STRAIGHT))
    if parameter == "series_resistance":
        low, high = kept.resistance_range(model)
        if value < low:
            return low, no_further(parameter, SHUNT_ALONE)
        return (value, "") if value <= high else (high, no_further(parameter, SERIES_ALONE))
    smallest = 1.0 / kept.largest_conductance(model)
    return (value, "") if value >= smallest else (smallest, no_further(parameter, SHUNT_ALONE))


def root_or_end(function: Callable[[float], float], low: float, high: float, slack: float) -> tuple[float, int]:
    """Root of a falling function between two ends, or the end nearer to it; −1 or 1 for the end that stopped it."""
    at_low, at_high = function(low), function(high)
    if at_low * at_high < 0:
        return brentq(function, low, high, xtol=1e-15 * max(abs(low), abs(high)), rtol=1e-15, maxiter=500), 0
    end, miss, side = (low, at_low, -1) if at_low <= 0 else (high, at_high, 1)
    return end, side if abs(miss) > slack else 0
