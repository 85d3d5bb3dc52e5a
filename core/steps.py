"""Every step there is: builders ``(workspace, …) → step``, and what applies and inverts a step.

All are pure. A builder says what it refuses and why; ``apply`` refuses whatever would leave a workspace that
does not hold together, whoever made the step.
"""

from .applying import Step, apply, inverse
from .condition_steps import (
    confirm_conditions,
    set_band_gap,
    set_conditions,
    set_current_unit,
)
from .fit_steps import (
    record_refinement,
    record_refinements,
    set_fit_settings,
    set_hold,
    set_model,
    switch_model,
)
from .statement_steps import state
from .tray_steps import (
    add_sweeps,
    already_loaded,
    remove_entries,
    rename_device,
    rename_entry,
    set_group,
)

__all__ = [
    "Step",
    "add_sweeps",
    "already_loaded",
    "apply",
    "confirm_conditions",
    "inverse",
    "record_refinement",
    "record_refinements",
    "remove_entries",
    "rename_device",
    "rename_entry",
    "set_band_gap",
    "set_conditions",
    "set_current_unit",
    "set_fit_settings",
    "set_group",
    "set_hold",
    "set_model",
    "state",
    "switch_model",
]
