"""Handles: grips on the model curve, and the exact inverse problem behind each drag.

Under light five of them, in the dark four on the semi-logarithmic view. A drag is a pure function of the model that
it started from and of the pointer, so the order in which pointer positions arrive does not matter.

| under light | dragged | solves for | keeps |
| --- | --- | --- | --- |
| at V = 0 | up, down | Jph | J0, n, Rs, Rsh |
| at J = 0 | left, right | J0 | Jph, n, Rs, Rsh |
| at the knee, on the ray V/Voc = J/Jsc | along the ray | n | Jsc, Voc, Rs, Rsh |
| on the fall, at J = Jsc/2 | left, right | Rs | Jsc, Voc, n, Rsh |
| on the plateau, at V = 0.4·Voc | up, down | Rsh | Jsc, Voc, n, Rs |

In the dark all move up and down: Rsh at low voltage, J0 and n in the exponential part (n keeps the current at the J0
handle, so J0 follows), Rs at high voltage.

With two diodes J0₁ takes the place of J0, and J0₂ that of n: at the knee under light (J0₁ and Jph follow), between Rsh
and J0₁ in the dark. n₁ and n₂ have dials alone.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from types import ModuleType
from typing import Literal

from . import (
    dark_handles,
    lit_handles,
    moves,
    two_diode_dark_handles,
    two_diode_handles,
)
from .models import Model
from .moves import Move, not_taken, why_locked
from .two_diode import TwoDiode

__all__ = ["Handle", "Move", "drag", "handles", "set_parameter", "type_parameter"]

Motion = Literal["vertical", "horizontal", "ray"]


@dataclass(frozen=True, slots=True)
class Handle:
    """One grip on the model curve.

    Attributes
    ----------
    parameter : str
        What dragging it solves for, one of the model's parameters.
    x, y : float
        Where it sits: voltage [V] and current [A cm⁻²], in the dark the current's size.
    motion : "vertical", "horizontal" or "ray"
        The ray runs from the origin through (Voc, Jsc).
    locked : bool
    reason : str
        A sentence why it is locked, else empty.
    """

    parameter: str
    x: float
    y: float
    motion: Motion
    locked: bool = False
    reason: str = ""


def handles(
    model: Model,
    *,
    lit: bool = True,
    hold: frozenset[str] = frozenset(),
    span: tuple[float, float] = (0.0, 1.0),
) -> tuple[Handle, ...]:
    """The handles of a model curve.

    Parameters
    ----------
    model : OneDiode or TwoDiode
    lit : bool
        In the dark the photocurrent counts as zero.
    hold : set of str
        Parameters that dragging must leave alone.
    span : (float, float)
        Voltage range of the sweep [V]; places the handles in the dark.

    Returns
    -------
    tuple of Handle
        Without photocurrent the lit curve has the photocurrent's handle alone; a dark sweep without forward
        voltages has none.
    """
    under_light, in_dark = _grips(model)
    places = under_light.positions(model) if lit else in_dark.positions(model, span)
    followers = under_light.FOLLOWERS if lit else in_dark.FOLLOWERS
    found = []
    for parameter, (x, y) in places.items():
        if not (math.isfinite(x) and math.isfinite(y)):
            continue
        reason = why_locked(parameter, followers[parameter], hold)
        motion = under_light.MOTIONS[parameter] if lit else "vertical"
        found.append(Handle(parameter, x, y, motion, bool(reason), reason))
    return tuple(found)


def drag(
    model: Model,
    parameter: str,
    x: float,
    y: float,
    *,
    lit: bool = True,
    hold: frozenset[str] = frozenset(),
    span: tuple[float, float] = (0.0, 1.0),
) -> Move:
    """The model after a handle was dragged to a pointer position.

    Parameters
    ----------
    model : OneDiode or TwoDiode
        As it was when the drag began.
    parameter : str
        Of the handle.
    x, y : float
        Pointer: voltage [V] and current [A cm⁻²], in the dark the current's size. Any number is taken; a horizontal
        handle looks at x alone, a vertical one at y alone, and on the ray both count, in units of Voc and Jsc.
    lit, hold, span
        As for ``handles``.

    Returns
    -------
    Move
        Stopped at the edge, with a sentence, where physics allows no more; unchanged, with the reason, where the
        handle is locked or absent.
    """
    under_light, in_dark = _grips(model)
    followers = under_light.FOLLOWERS if lit else in_dark.FOLLOWERS
    if parameter not in followers:
        return Move(model, "There is no such handle in the dark." if not lit else "There is no such handle.")
    locked = why_locked(parameter, followers[parameter], hold)
    if locked:
        return Move(model, locked)
    x, y = float(x), float(y)
    if math.isnan(x) or math.isnan(y):
        return Move(model)
    return under_light.drag(model, parameter, x, y) if lit else in_dark.drag(model, parameter, y, span)


def set_parameter(
    model: Model,
    parameter: str,
    value: float,
    *,
    hold: frozenset[str] = frozenset(),
    keep_jsc_voc: bool = False,
) -> Move:
    """Set one parameter, as a dial does; see ``moves.set_parameter``.

    With two diodes J0₁ and Jph follow where Jsc and Voc are kept.
    """
    chosen = two_diode_handles if isinstance(model, TwoDiode) else moves
    return chosen.set_parameter(model, parameter, value, hold=hold, keep_jsc_voc=keep_jsc_voc)


def type_parameter(
    model: Model,
    parameter: str,
    value: float,
    *,
    hold: frozenset[str] = frozenset(),
    keep_jsc_voc: bool = False,
) -> Move:
    """Set one parameter to exactly the value that was typed, or leave all as it is and say why.

    Whoever drags sees where the hand is stopped; whoever types means the number, so nothing stops on the way to it.
    """
    move = set_parameter(model, parameter, value, hold=hold, keep_jsc_voc=keep_jsc_voc)
    if getattr(move.model, parameter) == value:
        return move
    return Move(model, not_taken(parameter, move.message))


def _grips(model: Model) -> tuple[ModuleType, ModuleType]:
    """The modules that place and solve the handles of this kind of model: under light, and in the dark."""
    if isinstance(model, TwoDiode):
        return two_diode_handles, two_diode_dark_handles
    return lit_handles, dark_handles
