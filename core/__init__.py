"""Physics and the workspace of Sweepbench; knows nothing of browsers.

Everything runs in V, A cm⁻², Ω cm², W cm⁻², K (A and Ω where no area is known); current is positive where the
device delivers power.
"""

from .checks import Finding, check, check_pair
from .detailed_balance import limit
from .diode import PARAMETERS, Landmarks, OneDiode
from .errors import (
    ComparisonRefused,
    ConditionRefused,
    FitFailed,
    StaleRevision,
    StepRefused,
    StoreFailed,
    SweepbenchError,
    UnreadableFile,
)
from .first_guess import first_guess
from .fit_settings import FitSettings
from .metrics import measure
from .quantity import Metrics, Quantity
from .reading import read_sweeps
from .refine import refine
from .refinement import Refinement
from .shares import Shares, difference_shares, loss_shares
from .store import Store
from .sweep import Conditions, Sweep
from .workspace import Device, Entry, Fit, Workspace

__all__ = [
    "PARAMETERS",
    "ComparisonRefused",
    "ConditionRefused",
    "Conditions",
    "Device",
    "Entry",
    "Finding",
    "Fit",
    "FitFailed",
    "FitSettings",
    "Landmarks",
    "Metrics",
    "OneDiode",
    "Quantity",
    "Refinement",
    "Shares",
    "StaleRevision",
    "StepRefused",
    "Store",
    "StoreFailed",
    "Sweep",
    "SweepbenchError",
    "UnreadableFile",
    "Workspace",
    "check",
    "check_pair",
    "difference_shares",
    "first_guess",
    "limit",
    "loss_shares",
    "measure",
    "read_sweeps",
    "refine",
]
