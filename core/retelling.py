"""What the numbers say, in plain sentences made from them.

A number carries as many digits as its interval allows, and its unit. What rounds to nothing is said to be nothing, a share
whose sign the fit does not settle is said to be unsettled, and percentages are left out where large shares cancel. Each
sentence says one thing, so that it can be read aloud.
"""

from __future__ import annotations

from collections.abc import Collection, Sequence

from .diode import Landmarks
from .sentences import (
    MILLI,
    UNIT,
    as_percent,
    by_size,
    capital,
    conditions,
    in_milliwatts,
    listed,
    mechanism_word,
    power_digits,
    share_digits,
)
from .shares import Shares
from .verdict import Verdict

# Leading mechanisms are named until they carry this much of what pulls their way, three at most.
_ENOUGH, _MOST_NAMED = 0.9, 3
# Shares below this part of the largest one are not worth a word; what cannot be, or is not explained, is much sooner.
_WORTH_A_WORD, _ODD_WORTH_A_WORD = 0.05, 0.01
# Percentages of a difference mislead where the shares add up to more than this many times of it.
_CANCELLING = 4.0


def tell_difference(
    name_a: str,
    name_b: str,
    shares: Shares,
    verdict: Verdict | None = None,
    *,
    shunt_confirmed: bool = False,
    assumed: Collection[str] = (),
) -> str:
    """One paragraph on two devices: which is better by how much, what carries it, what counteracts, whether it stands out.

    Parameters
    ----------
    name_a, name_b : str
        Of the first and the second state of the shares.
    shares : Shares
    verdict : Verdict or None
        Of the measured difference; None says that it was not weighed.
    shunt_confirmed : bool
        The dark sweeps give the same Rsh, so that the slope of the plateau is a shunt.
    assumed : collection of str
        Names of conditions that neither file nor user gave.
    """
    digits, of_power = share_digits(shares), power_digits(shares)
    equal = in_milliwatts(shares.start, of_power) == in_milliwatts(shares.end, of_power)
    better = shares if equal or shares.difference > 0 else shares.swapped()
    sentences = [
        _which_is_better(name_a, name_b, shares),
        *_carriers(better, digits, shunt_confirmed, name_b if equal else ""),
        *_uncertain_signs(better, digits, shunt_confirmed),
        *_residual(better, digits, equal),
        _weighed(verdict),
        *shares.notes,
        *([shares.reason] if shares.reason else []),
        *_assumed(assumed),
    ]
    return " ".join(sentences)


def tell_measured(
    name_a: str, name_b: str, powers: tuple[float, float] | None, verdict: Verdict | None, remarks: Sequence[str]
) -> str:
    """The paragraph on two devices whose difference is not shared out: what was measured, and the remarks why.

    Parameters
    ----------
    name_a, name_b : str
    powers : (float, float) or None
        Measured [W cm⁻²]; None where one was not reached.
    verdict, remarks
        As for ``tell_difference``; whole sentences.
    """
    if powers is None:
        return " ".join(remarks)
    return " ".join([_which_is_better(name_a, name_b, Shares(*powers, {}, residual=0.0)), _weighed(verdict), *remarks])


def tell_losses(
    name: str,
    shares: Shares,
    limit: Landmarks,
    band_gap: float,
    *,
    shunt_confirmed: bool = False,
    assumed: Collection[str] = (),
    order: Sequence[str] = (),
) -> tuple[str, ...]:
    """Three sentences for the projector, on how far the device comes, where most is lost and what is left; then cautions.

    Parameters
    ----------
    name : str
    shares : Shares
        From the limit down to the device; or the rungs of a ladder in their place, with its ``order``.
    limit : Landmarks
        Of that limit.
    band_gap : float
        [eV]
    shunt_confirmed, assumed
        As for ``tell_difference``; "band_gap" among the assumed means that the gap was taken from the photocurrent.
    order : sequence of str
        Mechanisms as they change one after another; () for shares that depend on no order.
    """
    digits = share_digits(shares)
    losses = {n: -share for n, share in shares.by_mechanism.items() if -MILLI * share >= 0.5 * 10.0**-digits}
    least = max(0.5 * 10.0**-digits / MILLI, _ODD_WORTH_A_WORD * max(losses.values(), default=0.0))
    gains = {n: share for n, share in shares.by_mechanism.items() if share >= least}
    by_model = shares.residual is None
    return (
        tell_whole(name, shares.end, limit, band_gap, assumed=assumed, by_model=by_model),
        _largest_losses(losses, digits, shunt_confirmed, order),
        _other_losses({n: losses[n] for n in by_size(losses)[2:]}, gains, digits, shunt_confirmed),
        *_cautions(shares, gains, digits, shunt_confirmed, assumed),
    )


def tell_whole(
    name: str, power: float, limit: Landmarks, band_gap: float, *, assumed: Collection[str] = (), by_model: bool = False
) -> str:
    """How much of its limit a device delivers [W cm⁻²]; other arguments as for ``tell_losses``."""
    of_power = power_digits(Shares(limit.pmp, power, {}))
    gap = f"{'an assumed' if 'band_gap' in assumed else 'a'} band gap of {band_gap:.4g} eV"
    return (
        f"{name}{', by its model,' if by_model else ''} delivers {in_milliwatts(power, of_power)} {UNIT}, {as_percent(power / limit.pmp)} "
        f"of the {in_milliwatts(limit.pmp, of_power)} {UNIT} that {gap} allows."
    )


def tell_assumed_gap() -> str:
    """What hangs on a band gap that nobody gave."""
    return "The band gap is assumed from the photocurrent; the limit and the voltage loss depend on it, and a typed gap changes both."


def _which_is_better(name_a: str, name_b: str, shares: Shares) -> str:
    of_power = power_digits(shares)
    start, end = in_milliwatts(shares.start, of_power), in_milliwatts(shares.end, of_power)
    by_models = "" if shares.residual is not None else "By their models, "
    if start == end:
        return f"{by_models}{name_a} and {name_b} deliver the same power within rounding, {start} {UNIT}."
    first, second = (name_b, name_a) if shares.difference > 0 else (name_a, name_b)
    better = shares if shares.difference > 0 else shares.swapped()
    relative = f" ({as_percent(better.difference / better.start)})" if better.start > 0 else ""
    return (
        f"{by_models}{first} delivers {in_milliwatts(better.end, of_power)} {UNIT}, "
        f"{in_milliwatts(better.difference, of_power)} {UNIT}{relative} more than {second}."
    )


def _weighed(verdict: Verdict | None) -> str:
    power = None if verdict is None else verdict.by_metric.get("pmp")
    return power.sentence if power else "Whether the difference is more than chance was not weighed."


def _assumed(names: Collection[str]) -> list[str]:
    return [f"Assumed, not given: {listed(conditions(names))}."] if names else []


def _largest_losses(losses: dict[str, float], digits: int, shunt_confirmed: bool, order: Sequence[str]) -> str:
    words = {n: mechanism_word(n, shunt_confirmed) for n in (*losses, *order)}
    taken = f"One after another: {', '.join(words[n] for n in order)}. " if order else ""
    ranked, total = by_size(losses), sum(losses.values())
    if not ranked:
        return f"{taken}No mechanism loses anything that shows."
    amounts = {n: in_milliwatts(losses[n], digits) for n in ranked}
    largest = ranked[0]
    if len(ranked) == 1:
        return f"{taken}The only loss that shows is {words[largest]} with {amounts[largest]} {UNIT}."
    second = ranked[1]
    if amounts[second] == amounts[largest]:
        part = as_percent((losses[largest] + losses[second]) / total)
        return f"{taken}The largest losses are {words[largest]} and {words[second]}, {amounts[largest]} {UNIT} each ({part} of all losses together)."
    return (
        f"{taken}The largest loss is {words[largest]} with {amounts[largest]} {UNIT} ({as_percent(losses[largest] / total)} of all losses), "
        f"followed by {words[second]} with {amounts[second]} {UNIT} ({as_percent(losses[second] / total)})."
    )


def _other_losses(left: dict[str, float], gains: dict[str, float], digits: int, shunt_confirmed: bool) -> str:
    clauses = []
    if left:
        words = [mechanism_word(name, shunt_confirmed) for name in by_size(left)]
        verb = "together cost" if len(words) > 1 else "costs"
        clauses.append(f"{listed(words)} {verb} {in_milliwatts(sum(left.values()), digits)} {UNIT}")
    if gains:
        parts = [f"{in_milliwatts(gains[n], digits)} {UNIT} by {mechanism_word(n, shunt_confirmed)}" for n in by_size(gains)]
        clauses.append(f"the device gains {listed(parts)} against the limit")
    return f"{capital(', and '.join(clauses))}." if clauses else "Nothing else loses anything that shows."


def _cautions(
    shares: Shares, gains: dict[str, float], digits: int, shunt_confirmed: bool, assumed: Collection[str]
) -> list[str]:
    """What to mind beside the three sentences, a sentence each."""
    said = []
    if gains:
        word = listed([mechanism_word(n, shunt_confirmed) for n in by_size(gains)])
        said.append(f"No device can gain by {word} against its limit: check gap, area, light and fit.")
    worth = max(0.5 * 10.0**-digits / MILLI, _ODD_WORTH_A_WORD * max(map(abs, shares.by_mechanism.values())))
    if shares.residual is not None and abs(shares.residual) >= worth:
        side = "above" if shares.residual > 0 else "below"
        said.append(f"The measured power lies {in_milliwatts(abs(shares.residual), digits)} {UNIT} {side} the model's.")
    said.extend(shares.notes)
    if shares.reason:
        said.append(shares.reason)
    if "band_gap" in assumed:
        said.append(tell_assumed_gap())
    return [*said, *_assumed([name for name in assumed if name != "band_gap"])]


def _carriers(shares: Shares, digits: int, shunt_confirmed: bool, equal_to: str) -> list[str]:
    """Sentences on what carries a gain and what counteracts; shares are from the worse to the better.

    For two equal powers ``equal_to`` names the second device, else it is "".
    """
    visible = {n: s for n, s in shares.by_mechanism.items() if abs(MILLI * s) >= 0.5 * 10.0**-digits}
    if not visible:
        return ["No mechanism contributes anything that shows."]
    largest = max(abs(share) for share in visible.values())
    visible = {n: s for n, s in visible.items() if abs(s) >= _WORTH_A_WORD * largest}
    gains = {n: s for n, s in visible.items() if s > 0}
    losses = {n: -s for n, s in visible.items() if s < 0}

    def told(names: list[str], amounts: dict[str, float], with_percent: bool) -> str:
        parts = []
        for n in names:
            whole = " of the difference" if not parts else ""
            percent = f" ({as_percent(amounts[n] / shares.difference)}{whole})" if with_percent else ""
            parts.append(f"{mechanism_word(n, shunt_confirmed)} with {in_milliwatts(amounts[n], digits)} {UNIT}{percent}")
        return listed(parts)

    if equal_to:
        if gains and losses:
            return [
                f"Mechanisms differ all the same, and cancel: {equal_to} gains by {told(by_size(gains), gains, False)}, "
                f"and loses by {told(by_size(losses), losses, False)}."
            ]
        kind = gains or losses
        return [f"The models differ by {told(by_size(kind), kind, False)}."]
    moved = sum(abs(share) for share in shares.by_mechanism.values())
    cancelling = moved > _CANCELLING * shares.difference
    sentences = []
    if gains:
        names, carried, whole = [], 0.0, sum(share for share in shares.by_mechanism.values() if share > 0)
        for n in by_size(gains):
            if len(names) == _MOST_NAMED or carried >= _ENOUGH * whole:
                break
            names.append(n)
            carried += gains[n]
        sentences.append(f"It comes from {told(names, gains, not cancelling)}.")
        rest = whole - carried
        if MILLI * rest >= 0.5 * 10.0**-digits:
            sentences.append(f"Smaller gains add {in_milliwatts(rest, digits)} {UNIT}.")
    else:
        sentences.append("No mechanism of the models speaks for it.")
    if losses:
        verb = "works" if len(losses) == 1 else "work"
        sentences.append(f"{capital(told(by_size(losses), losses, False))} {verb} against it.")
    if cancelling and gains and losses:
        sentences.append("The difference is small beside these shares, which largely cancel.")
    return sentences


def _uncertain_signs(shares: Shares, digits: int, shunt_confirmed: bool) -> list[str]:
    """A sentence on shares that are told but whose interval holds zero inside."""
    largest = max((abs(share) for share in shares.by_mechanism.values()), default=0.0)
    names = [
        name
        for name in by_size({n: abs(s) for n, s in shares.by_mechanism.items()})
        if name in shares.intervals
        and shares.intervals[name][0] < 0 < shares.intervals[name][1]
        and abs(shares.by_mechanism[name]) >= max(_WORTH_A_WORD * largest, 0.5 * 10.0**-digits / MILLI)
    ]
    if not names:
        return []
    words = [mechanism_word(name, shunt_confirmed) for name in names]
    verb = "acts" if len(words) == 1 else "act"
    return [f"Fit noise alone leaves open which way {listed(words)} {verb}."]


def _residual(shares: Shares, digits: int, equal: bool) -> list[str]:
    """A sentence on what the models miss of the difference; shares are from the worse to the better."""
    if shares.residual is None or abs(MILLI * shares.residual) < 0.5 * 10.0**-digits:
        return []
    amount = f"{in_milliwatts(abs(shares.residual), digits)} {UNIT}"
    side = "larger" if shares.residual > 0 else "smaller"
    sentence = f"By the models alone they would differ by {amount}." if equal else f"The measured difference is {amount} {side} than that of the models."
    largest = max(abs(share) for share in shares.by_mechanism.values())
    if abs(shares.residual) > 0.5 * largest or abs(shares.residual) > abs(shares.difference):
        return [sentence, "That is too much to trust the shares: look at the fits first."]
    return [sentence]
