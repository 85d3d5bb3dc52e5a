"""Several sweeps of one device refined together: what is offered, and the step that comes of it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

from core import steps
from core.errors import StepRefused
from core.joint import refine_together, usually_shared
from core.workspace import Workspace

from .mechanisms import BY_PARAMETER


def offered(workspace: Workspace, entry: str) -> dict[str, Any]:
    """The device's other sweeps, and which parameters would be shared; empty where there is no other sweep."""
    others = [e for e in workspace.entries_of(workspace.entries[entry].device) if e.id != entry]
    settings = workspace.fit(entry).settings
    device = workspace.devices[workspace.entries[entry].device].name
    alike = [e for e in others if workspace.sweep(e.id).per_area == workspace.sweep(entry).per_area]
    return {
        "sweeps": [{"entry": e.id, "name": e.name.removeprefix(device).strip() or e.name} for e in alike],
        "shared": [
            {"parameter": name, "symbol": BY_PARAMETER[name].symbol, "index": BY_PARAMETER[name].index, "on": on}
            for name, on in usually_shared([workspace.sweep(e.id) for e in (workspace.entries[entry], *alike)], settings.model).items()
        ],
    }


def refine_sweeps_together(workspace: Workspace, event: Mapping[str, Any]) -> dict[str, Any]:
    """One step that keeps the joint refinement of the sweep on the bench and the chosen others."""
    entries = [workspace.entry(str(e)).id for e in dict.fromkeys([event["entry"], *event["entries"]])]
    if len(entries) < 2:
        raise StepRefused("Choose at least one other sweep of this device to refine together.")
    here = workspace.fit(entries[0])
    # The sweep on the bench sets model, holds and bounds for all; points, windows and weights stay each sweep's own.
    settings = [
        replace(workspace.fit(e).settings, model=here.settings.model, hold=here.settings.hold, bounds=here.settings.bounds) for e in entries
    ]
    models = [workspace.fit(e).model for e in entries]
    starts = [m if type(m) is type(here.model) else None for m in models]
    shared = {str(name): bool(on) for name, on in dict(event["shared"]).items()}
    joint = refine_together([workspace.sweep(e) for e in entries], starts, settings, shared)
    told = [
        replace(r, findings=(*joint.findings, *r.findings), bond=replace(r.bond, entries=tuple(entries))) for r in joint.refinements
    ]
    return steps.record_refinements(workspace, dict(zip(entries, told, strict=True)))
