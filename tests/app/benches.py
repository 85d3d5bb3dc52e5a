"""Invented sweeps on a bench, for the tests of what the screen shows."""

from dataclasses import replace

import numpy as np

from app import insight
from core import steps
from core.diode import OneDiode
from core.sweep import Conditions, Sweep
from tests.core.workspaces import entry_named, workspace_with

CELL = OneDiode(0.022, 2e-11, 1.6, 3.0, 2000.0)  # A cm⁻²
LAMP = Conditions(area=0.1)
DARK = Conditions(area=0.1, lit=False, irradiance=0.0)


def sweep_of(model, name="forward", *, device="A", conditions=LAMP, points=56, noise=2e-6, low=None, high=1.15, **fields):
    """A sweep of a model with a little scatter, the same every time."""
    low = (0.0 if conditions.lit else 0.02) if low is None else low
    voltage = np.linspace(low, high, points)
    scatter = np.random.default_rng(len(name)).normal(0.0, noise, points) if conditions.lit else 0.0
    current = model.current(voltage) + scatter
    fields = {"per_area": conditions.area is not None, "read_as": "current", **fields}
    return Sweep(voltage, current, name=name, device=device, conditions=conditions, **fields)


LIT = sweep_of(CELL)
REVERSE = sweep_of(replace(CELL, ideality=1.5), "reverse", direction="reverse")
IN_THE_DARK = sweep_of(replace(CELL, photocurrent=0.0), "dark", conditions=DARK)
# The same device without its area: amperes and ohms.
AMPERES = sweep_of(CELL.scaled(0.1), "amperes", device="B", conditions=Conditions(), noise=2e-7)
OTHER = sweep_of(replace(CELL, photocurrent=0.02), "other", device="C")
# Its file gives the standard deviation of each current.
WITH_ERRORS = replace(LIT, name="averaged", current_error=1e-6 * (1.0 + np.arange(56) % 3))
_S = np.linspace(0.0, 1.05, 106)
# A step in the middle of the fall: no diode does this.
S_SHAPED = Sweep(
    _S, 0.02 * (0.5 * (1 - np.tanh((_S - 0.45) / 0.08)) * 0.55 + 0.45 * (1 - (_S / 1.0) ** 12)), True, LAMP, read_as="density",
    name="bent", device="S",
)


def bench(*sweeps, models=()):
    """A workspace with these sweeps, and the ids of their entries in that order; models by place, None for none."""
    workspace = workspace_with(*sweeps)
    entries = [entry_named(workspace, sweep.name, sweep.device).id for sweep in sweeps]
    for entry, model in zip(entries, models, strict=False):
        if model is not None:
            workspace = steps.apply(workspace, steps.set_model(workspace, entry, model))
    return workspace, entries


def intervals(workspace, entry):
    """What the fit panel says of the intervals of a sweep."""
    question = insight.interval_question(workspace, entry)
    return insight.UNREFINED if question is None else insight.interval_rows(*question)
