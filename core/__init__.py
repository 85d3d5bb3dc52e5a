"""Physics and the workspace of Sweepbench; knows nothing of browsers.

Everything runs in V, A cm⁻², Ω cm², W cm⁻², K (A and Ω where no area is known); current is positive where the
device delivers power.
"""

from .checks import Finding, check, check_pair
from .detailed_balance import limit
from .diode import PARAMETERS, Landmarks, OneDiode
from .errors import (
    BreakdownRefused,
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
from .joint import JointRefinement, refine_together
from .metrics import measure
from .model_choice import ModelChoice, compare_models
from .profile import Interval, ProfileCurve, profile_curve, profile_intervals
from .quantity import Metrics, Quantity
from .reading import read_sweeps
from .refine import refine
from .refinement import Refinement
from .repeats import noise_from_repeats
from .shares import Shares, difference_shares, loss_shares
from .store import Store
from .sweep import Conditions, Sweep
from .two_diode import TwoDiode
from .workspace import Device, Entry, Fit, Workspace

__all__ = [
    "PARAMETERS",
    "BreakdownRefused",
    "ComparisonRefused",
    "ConditionRefused",
    "Conditions",
    "Device",
    "Entry",
    "Finding",
    "Fit",
    "FitFailed",
    "FitSettings",
    "Interval",
    "JointRefinement",
    "Landmarks",
    "Metrics",
    "ModelChoice",
    "OneDiode",
    "ProfileCurve",
    "Quantity",
    "Refinement",
    "Shares",
    "StaleRevision",
    "StepRefused",
    "Store",
    "StoreFailed",
    "Sweep",
    "SweepbenchError",
    "TwoDiode",
    "UnreadableFile",
    "Workspace",
    "check",
    "check_pair",
    "compare_models",
    "difference_shares",
    "first_guess",
    "limit",
    "loss_shares",
    "measure",
    "noise_from_repeats",
    "profile_curve",
    "profile_intervals",
    "read_sweeps",
    "refine",
    "refine_together",
]
