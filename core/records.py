"""A sweep as it was read, written down once and known by its content.

A reading never changes, so its text is stored apart from everything that does: renaming a sweep or
correcting its temperature does not write the points again. Its id is the SHA-256 of that text, which
also shows whether it is still whole.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from typing import Any

import numpy as np

from .errors import StepRefused
from .sweep import CURRENT_UNITS, Sweep

# No bench measures so much; numbers far beyond overflow in the formulas. What is read from files keeps to it too.
_LARGEST = 1e30


def canonical(value: Any) -> str:
    """JSON text with one spelling for one value: keys sorted, no spaces.

    Raises
    ------
    StepRefused
        For NaN, infinity, and whatever JSON cannot hold.
    """
    try:
        return json.dumps(value, sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False)
    except (TypeError, ValueError) as problem:
        raise StepRefused(f"Only plain values and finite numbers can be kept in a workspace ({problem}).") from problem


def plain(value: Any) -> Any:
    """The same value made of dict, list, str, int, float, bool and None alone: no numpy type leaks into JSON.

    Raises
    ------
    StepRefused
        For NaN, infinity, and whatever JSON cannot hold.
    """
    kind = type(value)
    if kind is str or kind is bool or kind is int or value is None:
        return value
    if isinstance(value, (float, np.floating)):
        if not np.isfinite(value):
            raise StepRefused(f"A value that is not a finite number ({value}) cannot be kept.")
        return float(value)
    if isinstance(value, np.ndarray):
        return plain(value.tolist())
    if isinstance(value, np.bool_):
        return bool(value)
    if isinstance(value, np.integer):
        return int(value)
    if isinstance(value, str):
        return str(value)
    if isinstance(value, Mapping):
        return {str(name): plain(item) for name, item in value.items()}
    if isinstance(value, (set, frozenset)):
        return sorted(plain(item) for item in value)
    if isinstance(value, (list, tuple)):
        return [plain(item) for item in value]
    raise StepRefused(f"A value of the kind “{kind.__name__}” cannot be kept in a workspace.")


def reading_record(sweep: Sweep) -> dict[str, Any]:
    """The sweep as JSON-ready values, fit for a step. Raises StepRefused where a point is not finite."""
    if not (np.isfinite(sweep.voltage).all() and np.isfinite(sweep.current).all()):
        raise StepRefused(f"The sweep “{sweep.name}” has points that are not finite numbers.")
    values = sweep.to_dict()
    # Plain, and many.
    points = {name: values.pop(name) for name in ("voltage", "current", "current_error") if name in values}
    return {**plain(values), **points}


def reading_text(record: Mapping[str, Any]) -> str:
    """The one text of a reading; its SHA-256 is the reading's id."""
    return canonical(record)


def id_of_text(text: str) -> str:
    """SHA-256 of a reading's text, as 64 hexadecimal digits."""
    return hashlib.sha256(text.encode()).hexdigest()


def reading_from_record(record: Any) -> Sweep:
    """The sweep behind a record that may come from anywhere.

    Raises
    ------
    StepRefused
        If the record is not that of a sweep.
    """
    try:
        sweep = Sweep.from_dict(record)
        texts = (sweep.name, sweep.device, *sweep.notes, *sweep.assumed, *sweep.header, *sweep.header.values())
        sound = (
            sweep.voltage.ndim == 1
            and sweep.voltage.shape == sweep.current.shape
            and sweep.voltage.size > 0
            and bool((np.abs(sweep.voltage) <= _LARGEST).all() and (np.abs(sweep.current) <= _LARGEST).all())
            and (sweep.current_error is None or _are_errors(sweep))
            and _monotonic(sweep)
            and isinstance(sweep.per_area, bool)
            and isinstance(sweep.lit, bool)
            and sweep.direction in ("forward", "reverse")
            and sweep.read_as in ("current", "density")
            and sweep.read_unit in ("", *CURRENT_UNITS)
            and all(isinstance(text, str) for text in texts)
            and (sweep.scan_rate is None or bool(np.isfinite(sweep.scan_rate)))
        )
    except (LookupError, TypeError, ValueError, AttributeError, ArithmeticError) as problem:
        raise StepRefused(f"A reading is not written as a sweep ({_short(problem)}).") from problem
    if not sound:
        raise StepRefused("A reading is not written as a sweep: its points or its texts are not of the right kind.")
    return sweep


def _are_errors(sweep: Sweep) -> bool:
    """Whether a sweep's standard deviations are one for each point, as far as they are given."""
    errors = sweep.current_error
    return errors.shape == sweep.current.shape and not bool((np.abs(errors) > _LARGEST).any())


def _monotonic(sweep: Sweep) -> bool:
    steps = np.diff(sweep.voltage)
    return bool((steps >= 0).all() or (steps <= 0).all())


def _short(problem: Exception) -> str:
    return str(problem)[:120] or type(problem).__name__
