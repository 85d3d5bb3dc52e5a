"""Steps on the fit of a sweep: its model, holds, settings and refinement."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from .applying import Step, make_step
from .diode import OneDiode
from .errors import StepRefused
from .models import Model, one_diode_like, two_diodes_like
from .refine import FitSettings, Refinement
from .two_diode import TwoDiode
from .weighting import refuse_if_unstated
from .workspace import Workspace


def set_model(workspace: Workspace, entry_id: str, model: Model | None, *, label: str = "change model") -> Step:
    """Lay a model over a sweep, or take it away with None.

    Raises
    ------
    StepRefused
        If the model stands under another temperature or number of cells than the sweep.
    """
    if model is not None:
        _same_conditions(workspace, entry_id, model)
    return make_step(label, fits={entry_id: replace(workspace.fit(entry_id), model=model)})


def set_hold(workspace: Workspace, entry_id: str, parameter: str, on: bool) -> Step:
    """Hold a parameter, or let it go."""
    fit = workspace.fit(entry_id)
    if parameter not in fit.settings.parameters:
        raise StepRefused(f"There is no parameter called “{parameter}” to hold.")
    hold = fit.settings.hold | {parameter} if on else fit.settings.hold - {parameter}
    label = f"{'hold' if on else 'release'} {parameter.replace('_', ' ')}"
    return make_step(label, fits={entry_id: replace(fit, settings=replace(fit.settings, hold=frozenset(hold)))})


def set_fit_settings(
    workspace: Workspace, entry_id: str, settings: FitSettings, *, label: str = "change fit settings"
) -> Step:
    """Refine this sweep with these settings from now on.

    Raises
    ------
    FitFailed
        If its file does not give the weights that are asked from it.
    """
    if settings.weights == "from the file":
        refuse_if_unstated(workspace.entry(entry_id).reading)
    return make_step(label, fits={entry_id: replace(workspace.fit(entry_id), settings=settings)})


def switch_model(workspace: Workspace, entry_id: str, name: str) -> Step:
    """Lay the other model over a sweep, of nearly the same curve; n₁ = 1 and n₂ = 2 are held unless the user frees them."""
    fit = workspace.fit(entry_id)
    model = fit.model
    if name == "two diodes" and isinstance(model, OneDiode):
        model = two_diodes_like(model)
    elif name == "one diode" and isinstance(model, TwoDiode):
        model = one_diode_like(model)
    return make_step(f"switch to {name}", fits={entry_id: replace(fit, model=model, settings=fit.settings.of_model(name))})


def record_refinement(workspace: Workspace, entry_id: str, refinement: Refinement) -> Step:
    """Keep a refinement; its model becomes the model of the sweep, its settings those of the fit."""
    return record_refinements(workspace, {entry_id: refinement})


def record_refinements(workspace: Workspace, refinements: Mapping[str, Refinement]) -> Step:
    """Keep several refinements in one step.

    Raises
    ------
    StepRefused
        If a sweep is gone, or its temperature or number of cells changed while it was being refined.
    """
    fits = {}
    for entry_id, refinement in refinements.items():
        workspace.entry(entry_id)
        _same_conditions(workspace, entry_id, refinement.model)
        fits[entry_id] = replace(
            workspace.fit(entry_id), model=refinement.model, settings=refinement.settings, refinement=refinement
        )
    return make_step("refine" if len(fits) == 1 else f"refine {len(fits)} sweeps", fits=fits)


def _same_conditions(workspace: Workspace, entry_id: str, model: Model) -> None:
    conditions = workspace.conditions(entry_id)
    if (model.series_cells, model.temperature) != (conditions.series_cells, conditions.temperature):
        raise StepRefused(
            f"The model for “{workspace.entry(entry_id).name}” was made under another temperature or number of "
            "cells in series than the sweep now has, so it was not kept. Make it again."
        )
