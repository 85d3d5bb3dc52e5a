"""The family of two-diode curves through one Jsc and one Voc, along which handles and dials move."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

from .moves import (
    LARGEST_EXPONENT,
    SERIES_ALONE,
    SHUNT_ALONE,
    SMALLEST_DIODE_SHARE,
    SMALLEST_ROOM,
    STRAIGHT,
)
from .two_diode import TwoDiode

SECOND_ALONE = "J0₂ alone would set Voc"
_TOO_SMALL = "J0₁ would have to be smaller than any number the program can carry"


@dataclass(frozen=True, slots=True)
class KeptPair:
    """All two-diode curves through the same Jsc and Voc; J0₁ and Jph follow from the other five parameters.

    With Bᵢ = J0ᵢ·exp(Voc/mᵢ), sᵢ(u) = 1 − exp((u − Voc)/mᵢ) and the junction voltage U = Jsc·Rs at V = 0 the curve is
    J(u) = B₁·s₁(u) + B₂·s₂(u) + (Voc − u)/Rsh, and B₁ = [Jsc − (Voc − U)/Rsh − B₂·s₂(U)]/s₁(U).

    Attributes
    ----------
    jsc, voc : float
        [A cm⁻²], [V]
    """

    jsc: float
    voc: float

    @classmethod
    def of(cls, model: TwoDiode) -> KeptPair | None:
        """Through the Jsc and Voc of a model; None for a model that has none."""
        if not model.photocurrent > 0:
            return None
        jsc, voc = float(model.current(0.0)), float(model.voltage(0.0))
        if not (0 < jsc < math.inf and 0 < voc < math.inf):
            return None
        return cls(jsc, voc)

    def shapes(self, model: TwoDiode, junction: float) -> tuple[float, float]:
        """s₁(u) and s₂(u)."""
        first, second = (-math.expm1(min((junction - self.voc) / slope, 690.0)) for slope in model.slope_voltages)
        return first, second

    def without_diodes(self, model: TwoDiode, conductance: float) -> float:
        """What the diodes together take of Jsc on the way to Voc [A cm⁻²]."""
        return self.jsc - (self.voc - self.jsc * model.series_resistance) * conductance

    def second_at_voc(self, model: TwoDiode) -> float:
        """B₂ [A cm⁻²]."""
        return model.saturation_current_2 * math.exp(min(self.voc / model.slope_voltages[1], 690.0))

    def first_share(self, model: TwoDiode) -> float:
        """B₁·s₁(U): what the first diode takes of Jsc on the way to Voc [A cm⁻²]."""
        second = self.second_at_voc(model) * self.shapes(model, self.jsc * model.series_resistance)[1]
        return self.without_diodes(model, 1.0 / model.shunt_resistance) - second

    def current(self, model: TwoDiode, junction: float) -> float:
        """Current of the member with this model's n₁, n₂, J0₂, Rs and Rsh at a junction voltage [V]."""
        first, second = self.shapes(model, junction)
        at_start = self.shapes(model, self.jsc * model.series_resistance)[0]
        through_first = self.first_share(model) / at_start * first
        return through_first + self.second_at_voc(model) * second + (self.voc - junction) / model.shunt_resistance

    def member(self, model: TwoDiode) -> TwoDiode:
        """The model with the J0₁ and Jph that keep Jsc and Voc."""
        first, second = model.slope_voltages
        share = max(self.first_share(model), 1e-15 * self.jsc)
        first_at_voc = share / self.shapes(model, self.jsc * model.series_resistance)[0]
        through_first = first_at_voc * -math.expm1(-self.voc / first)
        through_second = self.second_at_voc(model) * -math.expm1(-self.voc / second)
        return replace(
            model,
            photocurrent=through_first + through_second + self.voc / model.shunt_resistance,
            saturation_current_1=first_at_voc * math.exp(-self.voc / first),
        )

    def obstacle(self, model: TwoDiode) -> str:
        """Why no J0₁ and Jph keep Jsc and Voc with this model's other parameters; empty if they do."""
        slope = model.slope_voltages[0]
        if self.voc - self.jsc * model.series_resistance < SMALLEST_ROOM * slope:
            return SERIES_ALONE
        if self.voc > LARGEST_EXPONENT * slope:
            return _TOO_SMALL
        if min(model.slope_voltages) > 5.0 * self.voc:
            return STRAIGHT
        smallest = SMALLEST_DIODE_SHARE * self.jsc
        if self.without_diodes(model, 1.0 / model.shunt_resistance) < smallest:
            return SHUNT_ALONE
        return "" if self.first_share(model) >= smallest else SECOND_ALONE
