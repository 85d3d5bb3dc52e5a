"""Invented sweeps and workspaces for the tests of the workspace and the store."""

import itertools
import math

import numpy as np

from core import steps
from core.diode import OneDiode
from core.refine import FitSettings, Refinement
from core.sweep import Conditions, Sweep
from core.workspace import Workspace

MODEL = OneDiode(0.021, 3e-12, 1.4, 2.5, math.inf)


def invented_sweep(device="A", name="forward", *, points=12, offset=0.0, **fields):
    voltage = np.linspace(0, 1.1, points)
    conditions = fields.pop("conditions", Conditions(area=0.1))
    return Sweep(
        voltage,
        MODEL.current(voltage) + offset,
        per_area=conditions.area is not None,
        name=name,
        device=device,
        conditions=conditions,
        **fields,
    )


def counted_ids(prefix="id"):
    counter = itertools.count(1)
    return lambda: f"{prefix}{next(counter)}"


def workspace_with(*sweeps, **origin):
    """A workspace with these sweeps, entries and devices called id1, id2, …"""
    empty = Workspace("w", "test")
    return steps.apply(empty, steps.add_sweeps(empty, sweeps, new_id=counted_ids(), **origin))


def entry_named(workspace, name, device=None):
    (entry,) = (
        entry
        for entry in workspace.entries.values()
        if entry.name == name and device in (None, workspace.devices[entry.device].name)
    )
    return entry


def refinement(model=MODEL, settings=FitSettings(), findings=()):
    return Refinement(
        model=model,
        settings=settings,
        standard_errors={"photocurrent": 1e-5, "ideality": None},
        covariance=np.array([[1e-10, 0.0], [0.0, math.inf]]),
        free=("photocurrent", "shunt_resistance"),
        intervals={"photocurrent": (0.02, 0.022), "shunt_resistance": (4100.0, math.inf)},
        rmse=2e-6,
        points=12,
        findings=tuple(findings),
    )
