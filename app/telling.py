"""How losses and pair are told in what leaves as a file: as the user set the screens."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from core.comparing import losses as shares_of_losses
from core.detailed_balance import Emission, limiting_diode
from core.diode import PARAMETERS, Landmarks
from core.errors import ComparisonRefused
from core.retelling import tell_assumed_gap, tell_losses, tell_whole
from core.shares import Shares, ladder
from core.workspace import Workspace

from .insight import is_shunt
from .losses_scene import NO_CURVE, emission_of, gap_of, order_of, refuse_whole
from .mechanisms import loss_names
from .readout import measured
from .scene import full_name
from .states import state_of
from .wording import number

EMISSIONS: dict[Emission, str] = {"front": "the front of the cell alone", "both": "both faces of the cell"}


@dataclass(frozen=True)
class Telling:
    """What a user chooses on the screens of losses and pair.

    Attributes
    ----------
    emission : "front" or "both"
    order : tuple of str
        In which mechanisms change one after another.
    pair : tuple of two str, or ()
        A and B.
    """

    emission: Emission = "front"
    order: tuple[str, ...] = PARAMETERS
    pair: tuple[str, ...] = ()


def telling_of(address: Mapping[str, str]) -> Telling:
    """The choices that an address names, ``emission=both&order=…,…&pair=a,b``; what it leaves out is as usual."""
    order = [name for name in address.get("order", "").split(",") if name]
    pair = [name for name in address.get("pair", "").split(",") if name]
    return Telling(emission_of(address), order_of({"order": order}), tuple(pair))


@dataclass(frozen=True)
class ToldLosses:
    """The way from the limit down to one device.

    Attributes
    ----------
    name : str
    gap, gap_assumed : float, bool
        [eV]
    best : Landmarks
        Of the limit.
    power : float
        That the device delivers [W cm⁻²].
    shares : Shares or None
        None where the gap between limit and device is not broken down.
    rungs : dict of str to float
        Of the one-after-another ladder in its order [W cm⁻²].
    names : dict of str to str
        What each mechanism is called.
    story, cautions : tuple of str
        Sentences, none of them twice.
    """

    name: str
    gap: float
    gap_assumed: bool
    best: Landmarks
    power: float
    shares: Shares | None
    rungs: dict[str, float]
    names: dict[str, str]
    story: tuple[str, ...]
    cautions: tuple[str, ...]


def told_losses(workspace: Workspace, entry: str, telling: Telling = Telling()) -> ToldLosses:
    """What the losses screen says of a sweep.

    Raises
    ------
    ComparisonRefused, ConditionRefused
        With a sentence, where there is no limit or no power to set against it.
    """
    sweep, state, shunt = workspace.sweep(entry), state_of(workspace, entry), is_shunt(workspace, entry)
    name, names, metrics = full_name(workspace, entry), loss_names(shunt), measured(sweep)
    untold = state.untold if state else NO_CURVE
    gap, gap_assumed = gap_of(workspace, entry, sweep, state)
    assumed = workspace.assumed(entry) | ({"band_gap"} if gap_assumed else set())
    if not untold:
        shares = shares_of_losses(sweep, state.known, gap, telling.emission, metrics=metrics)
    limit = limiting_diode(gap, sweep.temperature, sweep.irradiance, telling.emission)
    best = limit.landmarks()
    if untold:
        refuse_whole(sweep, untold)
        if metrics.pmp.value is None:
            allowed = f"The limit at {gap:.4g} eV is {number(1e3 * best.pmp)} mW cm⁻²"
            raise ComparisonRefused(f"{untold} {allowed}; the sweep gives no power to set against it.")
        whole = tell_whole(name, metrics.pmp.value, best, gap, assumed=assumed)
        cautions = (tell_assumed_gap(),) if gap_assumed else ()
        return ToldLosses(name, gap, gap_assumed, best, metrics.pmp.value, None, {}, names, (whole, untold), cautions)
    told = tell_losses(name, shares, best, gap, shunt_confirmed=shunt, assumed=assumed)
    rungs = ladder(limit, state.model, telling.order)
    return ToldLosses(name, gap, gap_assumed, best, shares.end, shares, rungs, names, told[:3], told[3:])
