"""What is known on two measurements beyond the noise of their points, and how a workspace comes to know it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from .constants import STANDARD_TEMPERATURE
from .quantity import Metrics
from .workspace import Workspace


@dataclass(frozen=True, slots=True)
class Budget:
    """What is known on the two measurements beyond the noise of their points. None and () mean not known.

    Attributes
    ----------
    area_a, area_b : float or None
        Relative standard uncertainty of each area [-].
    area_shared : bool
        Both were measured through the same aperture: its error is common and cancels.
    lamp : float or None
        Relative standard uncertainty [-] of the irradiance of one measurement, without what both have in common:
        zero where the lamp is trusted not to have changed between the two.
    other_direction_a, other_direction_b : Metrics or None
        Metrics of the sweep in the other direction.
    group_a, group_b : tuple of Metrics
        Metrics of like devices of the same group, the device itself among them; two or more tell their scatter.
    same_device : bool
        Two sweeps of one device: its area is common, and the gap between directions and the scatter of pixels are no
        part of what is asked.
    ideality : float
        For what the lamp does to Voc.
    temperature : float
        [K], for the same.
    """

    area_a: float | None = None
    area_b: float | None = None
    area_shared: bool = False
    lamp: float | None = None
    other_direction_a: Metrics | None = None
    other_direction_b: Metrics | None = None
    group_a: tuple[Metrics, ...] = ()
    group_b: tuple[Metrics, ...] = ()
    same_device: bool = False
    ideality: float = 1.0
    temperature: float = STANDARD_TEMPERATURE


def budget_of(
    workspace: Workspace,
    entry_a: str,
    entry_b: str,
    metrics_of: Callable[[str], Metrics],
    *,
    ideality: float = 1.0,
) -> Budget:
    """The budget that a workspace holds for two of its sweeps: what its user states, and what its other sweeps tell.

    Parameters
    ----------
    workspace : Workspace
    entry_a, entry_b : str
    metrics_of : callable
        Metrics of a sweep by its id; whoever calls may keep them.
    ideality
        As in ``Budget``.
    """
    area, lamp = workspace.stated("area_uncertainty"), workspace.stated("lamp_uncertainty")
    if workspace.entry(entry_a).device == workspace.entry(entry_b).device:
        temperature = workspace.sweep(entry_a).temperature
        return Budget(area, area, True, lamp, same_device=True, ideality=ideality, temperature=temperature)
    return Budget(
        area_a=area,
        area_b=area,
        area_shared=bool(workspace.stated("area_shared")),
        lamp=lamp,
        other_direction_a=_other_direction(workspace, entry_a, metrics_of),
        other_direction_b=_other_direction(workspace, entry_b, metrics_of),
        group_a=_group(workspace, entry_a, metrics_of),
        group_b=_group(workspace, entry_b, metrics_of),
        ideality=ideality,
        temperature=workspace.sweep(entry_a).temperature,
    )


def _other_direction(
    workspace: Workspace, entry_id: str, metrics_of: Callable[[str], Metrics]
) -> Metrics | None:
    """Metrics of the same device's first sweep in the other direction under the same conditions."""
    here = workspace.sweep(entry_id)
    for other in workspace.entries_of(workspace.entry(entry_id).device):
        there = workspace.sweep(other.id)
        if there.conditions == here.conditions and there.direction != here.direction and there.per_area == here.per_area:
            return metrics_of(other.id)
    return None


def _group(workspace: Workspace, entry_id: str, metrics_of: Callable[[str], Metrics]) -> tuple[Metrics, ...]:
    """Metrics of one like sweep of each device in the group; () where the device has no group."""
    own = workspace.entry(entry_id)
    group, here = workspace.device(own.device).group, workspace.sweep(entry_id)
    if not group:
        return ()
    found = [metrics_of(entry_id)]
    for device in workspace.devices.values():
        if device.group != group or device.id == own.device:
            continue
        for other in workspace.entries_of(device.id):
            there = workspace.sweep(other.id)
            alike = (there.direction, there.lit, there.irradiance, there.temperature, there.per_area)
            if alike == (here.direction, here.lit, here.irradiance, here.temperature, here.per_area):
                found.append(metrics_of(other.id))
                break
    return tuple(found)
