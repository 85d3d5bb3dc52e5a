"""Whether a sweep and its model can be broken down into mechanisms at all.

Numbers for five mechanisms can be computed from any five parameters. They mean something only where the sweep is one
that a diode can follow, reaches both ends of its curve, and determines the diode. Elsewhere the measured figures, the
limit and the whole gap stand, and a sentence stands in place of the breakdown.
"""

from __future__ import annotations

import numpy as np

from .checks import check
from .curve_shape import held_current, shape_of
from .diode import OneDiode
from .fit_findings import UNSETTLED
from .fit_problem import used
from .quantity import Metrics
from .refinement import Refinement
from .sweep import Sweep

# An open shunt leaves the other shares standing: those of a missing shunt and of one just too large to see are alike.
_NEEDED = ("photocurrent", "saturation_current", "ideality", "series_resistance")
_WORDS = {"saturation_current": "saturation current", "ideality": "ideality factor", "series_resistance": "series resistance"}


def why_no_breakdown(sweep: Sweep, state: Refinement | OneDiode, metrics: Metrics) -> str:
    """The sentence why no mechanism can be told from this sweep and its model, and what to do; "" if they can.

    Parameters
    ----------
    sweep : Sweep
        Under light.
    state : Refinement or OneDiode
        A model laid by hand is taken as the user's word; what the sweep itself forbids holds for it too.
    metrics : Metrics
        Of the sweep.
    """
    reason = _of_sweep(sweep, metrics) or (_of_fit(sweep, state) if isinstance(state, Refinement) else "")
    return f"“{sweep.name or sweep.device or 'unnamed'}” is not broken down: {reason}" if reason else ""


def one_sided(sweep: Sweep, state: Refinement | OneDiode) -> tuple[str, ...]:
    """Sentences on resistances that the fit only bounds, so that their share may be none at all."""
    if not isinstance(state, Refinement):
        return ()
    name, said = f"“{sweep.name or sweep.device or 'unnamed'}”", []
    if "shunt_resistance" in state.free and np.isinf(state.intervals["shunt_resistance"][1]):
        said.append(f"The points of {name} bound Rsh only from below, so it may cost nothing at all.")
    if "series_resistance" in state.free and state.intervals["series_resistance"][0] <= 0:
        said.append(f"The points of {name} bound Rs only from above, so it may cost nothing at all.")
    return tuple(said)


def _of_sweep(sweep: Sweep, metrics: Metrics) -> str:
    findings = check(sweep)
    for finding in findings:
        if finding.severity == "stop":
            return _clause(f"{finding.what} {finding.remedy}")
    if any(finding.name == "s-shape" for finding in findings):
        return (
            "its curve is S-shaped, which no diode with series and shunt resistance can follow. "
            "Look for a barrier at a contact, and use the measured figures."
        )
    if metrics.jsc.value is None:
        return "the sweep gives no Jsc. Measure again from a voltage a little below zero."
    if metrics.voc.value is None:
        return "the sweep gives no Voc. Measure again to a voltage a little above Voc."
    return ""


def _of_fit(sweep: Sweep, refined: Refinement) -> str:
    held = held_current(shape_of(sweep))
    if held and not held.to_the_end and np.any(used(sweep, refined.settings) & (sweep.voltage <= held.voltage)):
        return (
            f"up to {held.voltage:.3g} V its current is that of the source-meter's limit, and the fit rests on it. "
            "Raise the limit and measure again, or exclude these points and refine."
        )
    if refined.points <= len(refined.free) and not refined.others:
        return (
            f"its {refined.points} points are no more than the {len(refined.free)} parameters of the fit, so any values would do. "
            "Measure more points, or hold parameters on the bench."
        )
    if UNSETTLED in refined.findings:
        return "its fit did not come to rest. Refine it again on the bench, or hold a parameter."
    known = np.isfinite(np.diag(refined.covariance))
    unknown = [name for name, told in zip(refined.free, known, strict=True) if not told and name in _NEEDED]
    if not unknown:
        return ""
    if set(unknown) == set(_NEEDED) & set(refined.free) and len(unknown) > 1:
        return "its fit determines none of the parameters. Read what the bench says of the fit, and hold what you know from elsewhere."
    words = " and ".join(_WORDS.get(name, name) for name in unknown)
    return f"its fit does not determine the {words}. Hold what you know from elsewhere, or measure more points at the knee."


def _clause(sentence: str) -> str:
    """A sentence that goes on after a colon; symbols such as Jsc keep their capital."""
    first, rest = sentence.split(" ", 1)
    return f"{first.lower() if first in ('The', 'It') else first} {rest}"
