"""Steps that leave points out of a fit or take them back."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from .applying import Step
from .fit_steps import set_fit_settings
from .workspace import Workspace


def leave_out_box(
    workspace: Workspace, entry_id: str, voltage: tuple[float, float], current: tuple[float, float]
) -> Step | None:
    """Leave out the points inside a box of voltage [V] and current, or its size in the dark [unit of the sweep].

    Where all of them were left out already, they are taken back. None where the box holds no point.
    """
    sweep, settings = workspace.sweep(entry_id), workspace.fit(entry_id).settings
    height = sweep.current if sweep.lit else np.abs(sweep.current)
    inside = (sweep.voltage >= min(voltage)) & (sweep.voltage <= max(voltage))
    inside &= (height >= min(current)) & (height <= max(current))
    chosen = frozenset(np.flatnonzero(inside).tolist())
    if not chosen:
        return None
    before = frozenset(settings.excluded)
    after = before - chosen if chosen <= before else before | chosen
    verb = "take back" if chosen <= before else "leave out"
    count = f"{len(chosen)} points" if len(chosen) > 1 else "1 point"
    return set_fit_settings(workspace, entry_id, replace(settings, excluded=tuple(sorted(after))), label=f"{verb} {count}")


def use_all(workspace: Workspace, entry_id: str) -> Step:
    """Take back every point, and the whole voltage range."""
    settings = replace(workspace.fit(entry_id).settings, excluded=(), window=None)
    return set_fit_settings(workspace, entry_id, settings, label="use all points")
