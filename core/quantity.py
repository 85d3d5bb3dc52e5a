"""A measured number with its uncertainty, or the reason why there is none."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass, fields
from typing import Any


@dataclass(frozen=True, slots=True)
class Quantity:
    """One measured quantity.

    Attributes
    ----------
    value : float or None
        None: not reached or not defined; ``reason`` says why.
    uncertainty : float or None
        Statistical standard uncertainty from the scatter of the points; None where it cannot be told.
    reason : str
        Sentence without a full stop, for a table cell or a tooltip; "" where all is well.
    """

    value: float | None = None
    uncertainty: float | None = None
    reason: str = ""


@dataclass(frozen=True, slots=True)
class Metrics:
    """What a sweep says without any model.

    Attributes
    ----------
    jsc, jmp : Quantity
        [A cm⁻²], or [A] where no area is known.
    voc, vmp : Quantity
        [V]
    pmp : Quantity
        [W cm⁻²], or [W] where no area is known.
    fill_factor, efficiency : Quantity
        [-], fractions of one.
    slope_resistance_jsc, slope_resistance_voc : Quantity
        −dV/dJ at V = 0 and at J = 0 [Ω cm²], or [Ω]: slopes of the curve, not Rs and Rsh.
    """

    jsc: Quantity
    voc: Quantity
    jmp: Quantity
    vmp: Quantity
    pmp: Quantity
    fill_factor: Quantity
    efficiency: Quantity
    slope_resistance_jsc: Quantity
    slope_resistance_voc: Quantity

    def to_dict(self) -> dict[str, dict[str, Any]]:
        """As JSON-ready values; ``from_dict`` gives equal metrics back."""
        return asdict(self)

    @classmethod
    def from_dict(cls, values: Mapping[str, Mapping[str, Any]]) -> Metrics:
        return cls(**{item.name: Quantity(**values[item.name]) for item in fields(cls)})
