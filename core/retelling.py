"""What the numbers say, in plain sentences made from them.

A number carries as many digits as its interval allows, and its unit. What rounds to nothing is said to be nothing, a share
whose sign the fit does not settle is said to be unsettled, and percentages are left out where large shares cancel.
"""

from __future__ import annotations

from collections.abc import Collection

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
# Shares below this part of the largest one are not worth a word.
_WORTH_A_WORD = 0.05
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
    measured = shares.residual is not None
    start, end = in_milliwatts(shares.start, of_power), in_milliwatts(shares.end, of_power)
    by_models = "" if measured else " by their models"
    sentences = []
    if start == end:
        sentences.append(f"{name_a} and {name_b} deliver the same power{by_models} within rounding, {start} {UNIT}.")
        better = shares
    else:
        first, second = (name_b, name_a) if shares.difference > 0 else (name_a, name_b)
        better = shares if shares.difference > 0 else shares.swapped()
        gain = in_milliwatts(better.difference, of_power)
        relative = f" ({as_percent(better.difference / better.start)} more)" if better.start > 0 else ""
        sentences.append(
            f"{first} delivers {in_milliwatts(better.end, of_power)} {UNIT}, "
            f"{gain} {UNIT}{relative} above {second}{'' if measured else ', by the models'}."
        )
    sentences.extend(_carriers(better, digits, shunt_confirmed, name_b if start == end else ""))
    sentences.extend(_uncertain_signs(better, digits, shunt_confirmed))
    sentences.extend(_residual(better, digits))
    power = None if verdict is None else verdict.by_metric.get("pmp")
    sentences.append(power.sentence if power else "Whether the difference is more than chance was not weighed.")
    sentences.extend([*shares.notes, *([shares.reason] if shares.reason else [])])
    if assumed:
        sentences.append(f"Assumed, not given: {listed(conditions(assumed))}.")
    return " ".join(sentences)


def tell_losses(
    name: str,
    shares: Shares,
    limit: Landmarks,
    band_gap: float,
    *,
    shunt_confirmed: bool = False,
    assumed: Collection[str] = (),
) -> tuple[str, str, str]:
    """Three sentences for the projector: how far the device comes, where most is lost, what is left and what to mind.

    Parameters
    ----------
    name : str
    shares : Shares
        From the limit down to the device.
    limit : Landmarks
        Of that limit.
    band_gap : float
        [eV]
    shunt_confirmed, assumed
        As for ``tell_difference``; "band_gap" among the assumed means that the gap was taken from the photocurrent.
    """
    digits, of_power = share_digits(shares), power_digits(shares)
    gap = f"{'an assumed' if 'band_gap' in assumed else 'a'} band gap of {band_gap:.3g} eV"
    model = "" if shares.residual is not None else ", by its model,"
    first = (
        f"{name}{model} delivers {in_milliwatts(shares.end, of_power)} of the {in_milliwatts(limit.pmp, of_power)} {UNIT} that {gap} "
        f"allows, {as_percent(shares.end / limit.pmp)} of the limit."
    )
    losses = {n: -share for n, share in shares.by_mechanism.items() if -MILLI * share >= 0.5 * 10.0**-digits}
    least = max(0.5 * 10.0**-digits / MILLI, _WORTH_A_WORD * max(losses.values(), default=0.0))
    gains = {n: share for n, share in shares.by_mechanism.items() if share >= least}
    if "band_gap" in assumed:
        gains.pop("photocurrent", None)  # the gap was made to fit it
    ranked = by_size(losses)
    total = sum(losses.values())
    if not ranked:
        return first, "No mechanism loses anything that shows.", _rest({}, gains, shares, digits, assumed, shunt_confirmed)
    largest, runner_up = ranked[0], ranked[1:2]
    word = mechanism_word(largest, shunt_confirmed)
    amount = in_milliwatts(losses[largest], digits)
    share = f" ({as_percent(losses[largest] / total)} of all losses)"
    if not runner_up:
        second = f"The only loss that shows is {word} with {amount} {UNIT}."
    elif in_milliwatts(losses[runner_up[0]], digits) == amount:
        second = (
            f"The largest losses are {word} and {mechanism_word(runner_up[0], shunt_confirmed)}, {amount} {UNIT} each "
            f"({as_percent((losses[largest] + losses[runner_up[0]]) / total)} of all losses together)."
        )
    else:
        second = (
            f"The largest loss is {word} with {amount} {UNIT}{share}, followed by "
            f"{mechanism_word(runner_up[0], shunt_confirmed)} with {in_milliwatts(losses[runner_up[0]], digits)} {UNIT} "
            f"({as_percent(losses[runner_up[0]] / total)})."
        )
    left = {n: losses[n] for n in ranked[2:]}
    return first, second, _rest(left, gains, shares, digits, assumed, shunt_confirmed)


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
            percent = f" ({as_percent(amounts[n] / shares.difference)} of the difference)" if with_percent else ""
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
        sentence = f"It comes from {told(names, gains, not cancelling)}"
        rest = whole - carried
        if MILLI * rest >= 0.5 * 10.0**-digits:
            sentence += f"; the other gains add {in_milliwatts(rest, digits)} {UNIT}"
        sentences.append(sentence + ".")
    else:
        sentences.append("No mechanism of the models speaks for it.")
    if losses:
        verb = "counteracts" if len(losses) == 1 else "counteract"
        sentences.append(f"{capital(told(by_size(losses), losses, False))} {verb}.")
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


def _residual(shares: Shares, digits: int) -> list[str]:
    if shares.residual is None or abs(MILLI * shares.residual) < 0.5 * 10.0**-digits:
        return []
    sign = "" if shares.residual > 0 else "−"
    sentence = f"The models leave {sign}{in_milliwatts(abs(shares.residual), digits)} {UNIT} of the measured difference unexplained"
    largest = max(abs(share) for share in shares.by_mechanism.values())
    if abs(shares.residual) > 0.5 * largest or abs(shares.residual) > abs(shares.difference):
        return [f"{sentence}, so much that the shares should not be trusted before the fits are looked at."]
    return [sentence + "."]


def _rest(
    left: dict[str, float],
    gains: dict[str, float],
    shares: Shares,
    digits: int,
    assumed: Collection[str],
    shunt_confirmed: bool,
) -> str:
    """The third sentence on losses: what is left, what is gained, what the models miss, what is assumed."""
    clauses = []
    if left:
        words = [mechanism_word(name, shunt_confirmed) for name in by_size(left)]
        together = " together" if len(words) > 1 else ""
        verb = "cost" if len(words) > 1 else "costs"
        clauses.append(f"{listed(words)}{together} {verb} {in_milliwatts(sum(left.values()), digits)} {UNIT}")
    if gains:
        parts = [f"{mechanism_word(n, shunt_confirmed)} ({in_milliwatts(gains[n], digits)} {UNIT})" for n in by_size(gains)]
        clauses.append(f"the device stands above the limit's state in {listed(parts)}, so check gap, area, light and fit")
    if shares.residual is not None and abs(MILLI * shares.residual) >= 0.5 * 10.0**-digits:
        side = "above" if shares.residual > 0 else "below"
        clauses.append(f"the measured power lies {in_milliwatts(abs(shares.residual), digits)} {UNIT} {side} the model's")
    clauses.extend(note.rstrip(".") for note in shares.notes)
    if "band_gap" in assumed:
        clauses.append("the gap is assumed from the photocurrent, whose own loss can therefore not show")
    if others := [name for name in assumed if name != "band_gap"]:
        clauses.append(f"assumed and not given: {listed(conditions(others))}")
    if not clauses:
        return "Nothing else loses anything that shows."
    return capital("; ".join(clauses)) + "."
