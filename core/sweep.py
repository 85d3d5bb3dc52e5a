"""One pass of voltage with its currents and the conditions it was measured under.

Signs: current is positive where the device delivers power.
Units: V; A cm⁻² where an area is known or the file gives a density, else A; W cm⁻²; K; V s⁻¹.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import asdict, dataclass, field, replace
from typing import Any, Literal

import numpy as np

from .constants import ONE_SUN, STANDARD_TEMPERATURE
from .errors import ConditionRefused

Direction = Literal["forward", "reverse"]
Quantity = Literal["current", "density"]

# Units that a file may mean by a bare number: factor to A or A cm⁻², and which of the two.
CURRENT_UNITS: Mapping[str, tuple[float, Quantity]] = {
    "A": (1.0, "current"),
    "mA": (1e-3, "current"),
    "µA": (1e-6, "current"),
    "A cm⁻²": (1.0, "density"),
    "mA cm⁻²": (1e-3, "density"),
}


@dataclass(frozen=True, slots=True)
class Conditions:
    """What a sweep was measured under; the part that a user may correct.

    Attributes
    ----------
    area : float or None
        Area that densities refer to [cm²]; None where nobody gave one.
    file_area : float or None
        Area that the file itself divided by [cm²]; matters only for files that give a density.
    temperature : float
        Device temperature [K].
    irradiance : float
        [W cm⁻²]; zero in the dark.
    lit : bool
        Light or dark sweep.
    series_cells : int
        Cells in series in the device.
    """

    area: float | None = None
    file_area: float | None = None
    temperature: float = STANDARD_TEMPERATURE
    irradiance: float = ONE_SUN
    lit: bool = True
    series_cells: int = 1

    def __post_init__(self):
        for name, word in (("area", "The area"), ("file_area", "The area used by the file")):
            value = getattr(self, name)
            if value is not None and not (np.isfinite(value) and value > 0):
                raise ConditionRefused(f"{word} must be a number above zero in cm², not {value}.")
            if value is not None and not 1e-12 <= value <= 1e12:
                raise ConditionRefused(f"{word} of {value:.3g} cm² is that of no device; check the unit.")
        if not (50 <= self.temperature <= 1000):
            raise ConditionRefused(
                f"A device temperature of {self.temperature - 273.15:.4g} °C is outside −223 to 727 °C; check the unit."
            )
        if not (np.isfinite(self.irradiance) and self.irradiance >= 0):
            raise ConditionRefused("The irradiance must be zero (dark) or a number above zero.")
        if self.irradiance > 1e6:
            raise ConditionRefused(f"An irradiance of {self.irradiance:.3g} W cm⁻² is that of no lamp; check the unit.")
        if self.series_cells != int(self.series_cells) or not 1 <= self.series_cells <= 10_000:
            raise ConditionRefused("The number of cells in series must be a whole number from 1 to 10000.")


@dataclass(frozen=True, slots=True, eq=False)
class Sweep:
    """One monotonic pass of voltage, in the order it was measured.

    Attributes
    ----------
    voltage : ndarray, shape (n,)
        [V], monotonic; rising in a forward sweep, falling in a reverse sweep.
    current : ndarray, shape (n,)
        [A cm⁻²] if ``per_area`` else [A]; positive where the device delivers power.
    per_area : bool
    conditions : Conditions
    direction : "forward" or "reverse"
        Forward runs from short circuit to open circuit.
    read_as : "current" or "density"
        The quantity that the file gives.
    scan_rate : float or None
        [V s⁻¹]
    name, device : str
        As read from the file or its name.
    notes : tuple of str
        Sentences on what was done on reading (sign turned, millivolts read, rows left out).
    header : mapping of str to str
        What the file's header says, kept as it stands.
    assumed : frozenset of str
        Names of conditions that the file does not give: assumed until the user confirms them.
    read_unit : str
        Where the file gives no unit of the current: the one in ``CURRENT_UNITS`` that it is taken for; else "".
    current_error : ndarray, shape (n,), or None
        Standard deviation of each current that the file gives [unit of current], NaN where it is missing; None where
        the file gives none. It stands as read, so that values at or below zero may be among them.
    """

    voltage: np.ndarray
    current: np.ndarray
    per_area: bool = False
    conditions: Conditions = field(default_factory=Conditions)
    direction: Direction = "forward"
    read_as: Quantity = "current"
    scan_rate: float | None = None
    name: str = ""
    device: str = ""
    notes: tuple[str, ...] = ()
    header: Mapping[str, str] = field(default_factory=dict)
    assumed: frozenset[str] = frozenset({"temperature", "irradiance", "series_cells"})
    read_unit: str = ""
    current_error: np.ndarray | None = None

    def __post_init__(self):
        for name in ("voltage", "current", "current_error"):
            if name == "current_error" and self.current_error is None:
                continue
            array = np.array(getattr(self, name), dtype=float)  # a copy: nobody else holds it
            array.setflags(write=False)
            object.__setattr__(self, name, array)

    # The names of the design's table, read through the conditions.
    @property
    def area(self) -> float | None:
        return self.conditions.area

    @property
    def lit(self) -> bool:
        return self.conditions.lit

    @property
    def irradiance(self) -> float:
        return self.conditions.irradiance

    @property
    def temperature(self) -> float:
        return self.conditions.temperature

    @property
    def series_cells(self) -> int:
        return self.conditions.series_cells

    def only(self, chosen: np.ndarray) -> Sweep:
        """The same sweep with some of its points alone: a mask, shape (n,), or indices."""
        return replace(
            self,
            voltage=self.voltage[chosen],
            current=self.current[chosen],
            current_error=_each(self.current_error, lambda error: error[chosen]),
        )

    def under(self, conditions: Conditions) -> Sweep:
        """The same measurement with other conditions; currents are rescaled with the area.

        Raises
        ------
        ConditionRefused
            If the file gives a density without its area and another area is asked for:
            the current that was measured is then not known.
        """
        factor = self.rescaling(conditions)
        return replace(
            self,
            current=self.current * factor,
            current_error=_each(self.current_error, lambda error: error * factor),
            per_area=self.read_as == "density" or conditions.area is not None,
            conditions=_with_area_of_density(self.read_as, conditions),
        )

    def rescaling(self, conditions: Conditions) -> float:
        """Factor by which ``under(conditions)`` multiplies the current. Raises as ``under`` does."""
        if self.read_as == "current":
            return (self.area or 1.0) / (conditions.area or 1.0)
        before, after = (_with_area_of_density(self.read_as, c) for c in (self.conditions, conditions))
        # A density is measured current over the file's area; undo one rescaling, do the other.
        return _density_factor(after) / _density_factor(before)

    def with_unit(self, unit: str) -> Sweep:
        """The same file with its bare numbers taken for another unit of current.

        Raises
        ------
        ConditionRefused
            If the file gives its unit itself, or there is no such unit.
        """
        if not self.read_unit:
            raise ConditionRefused("The file says in which unit its current is given, so it is read in that unit.")
        if unit not in CURRENT_UNITS:
            raise ConditionRefused(f"The current can be read as {', '.join(CURRENT_UNITS)}, not as “{unit}”.")
        (before, was), (after, becomes) = CURRENT_UNITS[self.read_unit], CURRENT_UNITS[unit]
        area = self.area if was == "current" else self.conditions.file_area  # the one that the file names

        def taken(values: np.ndarray) -> np.ndarray:
            numbers = values / before * (area or 1.0 if was == "current" else 1.0)
            return numbers * after / (1.0 if becomes == "density" else area or 1.0)

        return replace(
            self,
            current=taken(self.current),
            current_error=_each(self.current_error, taken),
            per_area=becomes == "density" or area is not None,
            conditions=replace(self.conditions, area=area, file_area=area if becomes == "density" else None),
            read_as=becomes,
            notes=(*(note for note in self.notes if note not in _TAKEN.values()), _TAKEN[unit]),
            read_unit=unit,
        )

    def to_dict(self) -> dict[str, Any]:
        """As JSON-ready values; ``from_dict`` gives the same sweep back. A missing standard deviation is None."""
        values = {
            "voltage": self.voltage.tolist(),
            "current": self.current.tolist(),
            "per_area": self.per_area,
            "conditions": asdict(self.conditions),
            "direction": self.direction,
            "read_as": self.read_as,
            "scan_rate": self.scan_rate,
            "name": self.name,
            "device": self.device,
            "notes": list(self.notes),
            "header": dict(self.header),
            "assumed": sorted(self.assumed),
            "read_unit": self.read_unit,
        }
        # Not there where the file gives none, so that such a reading is written as it always was and keeps its id.
        if self.current_error is not None:
            values["current_error"] = [value if np.isfinite(value) else None for value in self.current_error.tolist()]
        return values

    @classmethod
    def from_dict(cls, values: Mapping[str, Any]) -> Sweep:
        return cls(
            **{
                **values,
                "conditions": Conditions(**values["conditions"]),
                "notes": tuple(values["notes"]),
                "assumed": frozenset(values["assumed"]),
            }
        )


_TAKEN = {unit: f"You said that the file gives its current in {unit}." for unit in CURRENT_UNITS}


def _each(values: np.ndarray | None, change: Callable[[np.ndarray], np.ndarray]) -> np.ndarray | None:
    return None if values is None else change(values)


def _with_area_of_density(read_as: Quantity, conditions: Conditions) -> Conditions:
    """For a density, the file's area stands for the area until another one is given."""
    if read_as == "density" and conditions.area is None and conditions.file_area is not None:
        return replace(conditions, area=conditions.file_area)
    return conditions


def _density_factor(conditions: Conditions) -> float:
    if conditions.area is None:
        return 1.0
    if conditions.file_area is None:
        raise ConditionRefused(
            "The file gives a current density but not the area it was divided by, so a new area cannot rescale it. "
            "Give the area that the file used first."
        )
    return conditions.file_area / conditions.area
