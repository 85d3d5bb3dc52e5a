"""The report's figures: curves with residuals, the ladder of losses, the bars of a difference."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from app.curves import chosen_points, squeezed, strip_noise, thinned, voltage_grid
from app.figures.bench import plot_ranges
from app.figures.style import FAINT, HAIR, INK, SOFT
from app.mechanisms import MECHANISMS
from app.readout import measured
from app.units import Units
from core.fit_settings import Weights
from core.models import Model
from core.sentences import share_digits
from core.shares import Shares
from core.sweep import Sweep

from .drawing import Drawing, Scale, axis_below, axis_left, legend
from .markup import Markup

WIDTH = 660.0
HALF = 318.0  # of two side by side
MARKS = 140  # of a sweep; more only fill the line
_HEIGHT = 208.0  # of the plot
_LEFT = 64.0  # room for the axis of current
_WHITE = "#ffffff"
# Marks and lines of the sweeps in one picture, in their order: hue is left to the mechanisms.
_MARKS = (
    {"fill": INK},
    {"fill": _WHITE, "stroke": INK},
    {"fill": FAINT},
    {"fill": _WHITE, "stroke": FAINT},
)
_DASHES = (None, "7 4", "2 3", "9 3 2 3")
NOT_IN_MODEL = "not in the model"
_OF_NONE = (FAINT, "-")  # hue and hatch of what is no mechanism's
FINEST = 2  # decimals of a share in mW cm⁻²
_PITCH, _BAR, _TOP, _BASELINE = 19.0, 14.0, 3.0, 14.0  # of the ladder's rows
_DIFFERENCE_PITCH = 20.0


@dataclass(frozen=True)
class Shown:
    """A sweep in a picture, with its model if there is one."""

    name: str
    sweep: Sweep
    model: Model | None
    weights: Weights = "automatic"


def unit_of_residuals(shown: Sequence[Shown]) -> str:
    """What the residuals of a picture are measured in, as its caption says it."""
    stated = [one.name for one in shown if one.model is not None and one.weights == "from the file"]
    return "the points’ noise" + (f", for {', '.join(stated)} the standard deviations in the file" if stated else "")


def curves(shown: Sequence[Shown], name: str, width: float = WIDTH) -> Markup:
    """Points and model lines of sweeps of one unit and one kind of light, with the residuals below."""
    lit, units = shown[0].sweep.lit, Units.of(shown[0].sweep.per_area)
    fitted = any(one.model is not None for one in shown)
    drawing = Drawing(width, 0.0, f"Current–voltage curves of {', '.join(s.name for s in shown)}", name)
    top = legend(drawing, _LEFT, [(s.name, _marks(n), _line(n) if s.model is not None else {}) for n, s in enumerate(shown)])
    x, y = _frame(shown, units, lit, top, width)
    if lit:
        drawing.line(x.start, float(y(0.0)), x.end, float(y(0.0)))
        if x.low < 0 < x.high:
            drawing.line(float(x(0.0)), y.end, float(x(0.0)), y.start)
    drawing.clip(x.start, y.end, x.end - x.start, y.start - y.end)
    for place, one in enumerate(shown):
        _sweep_in(drawing, one, place, x, y, units, lit)
    if lit and len(shown) <= 2:
        for one in shown:
            _maximum_in(drawing, one, x, y, units)
    drawing.unclip()
    letter = units.letter if lit else f"|{units.letter}|"
    axis_below(drawing, x, y.start, "" if fitted else "voltage (V)", labels=not fitted)
    axis_left(drawing, y, x.start, f"{letter} ({units.current})")
    if fitted:
        _residuals(drawing, shown, x, Scale(-2.4, 2.4, y.start + 76, y.start + 20))
    drawing.height = y.start + (112 if fitted else 38)
    return drawing.svg()


def _frame(shown: Sequence[Shown], units: Units, lit: bool, top_edge: float, width: float) -> tuple[Scale, Scale]:
    ranges = [plot_ranges(one.sweep, units) for one in shown]
    left, right = min(r[0][0] for r in ranges), max(r[0][1] for r in ranges)
    bottom, top = min(r[1][0] for r in ranges), max(r[1][1] for r in ranges)
    if not lit:
        bottom, top = 10.0**bottom, 10.0**top
    return Scale(left, right, _LEFT, width - 16.0), Scale(bottom, top, top_edge + _HEIGHT, top_edge, log=not lit)


def _marks(place: int) -> dict:
    return _MARKS[place % len(_MARKS)]


def _line(place: int) -> dict:
    return {"colour": INK if place < len(_DASHES) else SOFT, "width": 1.4, "dash": _DASHES[place % len(_DASHES)]}


def _sweep_in(drawing: Drawing, one: Shown, place: int, x: Scale, y: Scale, units: Units, lit: bool) -> None:
    voltage, current = thinned(one.sweep, MARKS)
    drawing.marks(x(voltage), y(_on_axis(current, lit) * units.current_factor), radius=1.9, **_marks(place))
    if one.model is not None:
        grid = voltage_grid(one.sweep, one.model)
        drawing.curve(x(grid), y(_on_axis(one.model.current(grid), lit) * units.current_factor), **_line(place))


def _on_axis(current: np.ndarray, lit: bool) -> np.ndarray:
    return current if lit else np.where(current != 0, np.abs(current), np.nan)


def _maximum_in(drawing: Drawing, one: Shown, x: Scale, y: Scale, units: Units) -> None:
    """The largest measured power as the corner of its rectangle."""
    metrics = measured(one.sweep)
    if metrics.vmp.value is None or metrics.jmp.value is None:
        return
    right, top = float(x(metrics.vmp.value)), float(y(metrics.jmp.value * units.current_factor))
    drawing.line(right, top, right, float(y(0.0)), FAINT, 1, "1.5 3")
    drawing.line(float(x(0.0)), top, right, top, FAINT, 1, "1.5 3")
    drawing.add("circle", cx=right, cy=top, r=4.5, fill="none", stroke=INK, stroke_width=1.2)


def _residuals(drawing: Drawing, shown: Sequence[Shown], x: Scale, y: Scale) -> None:
    drawing.line(x.start, float(y(0.0)), x.end, float(y(0.0)))
    drawing.clip(x.start, y.end, x.end - x.start, y.start - y.end)
    for place, one in enumerate(shown):
        if one.model is not None:
            voltage, current = thinned(one.sweep, MARKS)
            noise = strip_noise(one.sweep, one.weights)[chosen_points(one.sweep, MARKS)]
            residual = (current - one.model.current(voltage)) / noise
            drawing.marks(x(voltage), y(squeezed(residual)), radius=1.4, **_marks(place))
    drawing.unclip()
    ticks = [(float(squeezed(np.array(v))), words) for v, words in ((-100, "−100"), (-10, "−10"), (0, "0"), (10, "10"), (100, "100"))]
    axis_left(drawing, y, x.start, "resid. / noise", ticks=ticks)
    axis_below(drawing, x, y.start, "voltage (V)")


def difference_bars(shares: Shares, names: Mapping[str, str], name: str, title: str) -> Markup:
    """What each mechanism adds to a difference in power, with its interval of fit noise; ``names`` are their words."""
    rows = [
        (names[m.parameter], 1e3 * shares.by_mechanism[m.parameter], m.hue, m.hatch, _milli(shares.intervals.get(m.parameter)))
        for m in MECHANISMS
    ]
    if shows(shares.residual):
        rows.append((NOT_IN_MODEL, 1e3 * shares.residual, *_OF_NONE, None))
    rows.append(("together", 1e3 * shares.difference, INK, "", None))
    digits, height = digits_of(shares), _DIFFERENCE_PITCH * len(rows)
    drawing = Drawing(WIDTH, height + 44, title, name)
    ends = [end for _, value, _, _, interval in rows for end in (value, *(interval or ()))]
    low, high = min(*ends, 0.0), max(*ends, 0.0)
    room = 0.18 * (high - low) or 1.0  # for the numbers beside the bars
    x = Scale(low - room, high + room, 170.0, WIDTH - 16.0)
    zero = float(x(0.0))
    for place, (words, value, hue, hatch, interval) in enumerate(rows):
        top, middle = _DIFFERENCE_PITCH * place + 3, _DIFFERENCE_PITCH * place + 9
        last = place == len(rows) - 1
        if last:
            drawing.line(0, top - 3, WIDTH, top - 3)
        drawing.words(160, middle + 4, words, "end", bold=last)
        drawing.bar(zero, float(x(value)), top, 13, hue, hatch)
        edge = float(x(value))
        if interval:
            left, right = (float(x(end)) for end in interval)
            drawing.line(left, middle, right, middle, INK, 1.2)
            for end in (left, right):
                drawing.line(end, middle - 4, end, middle + 4, INK, 1.2)
            edge = max(edge, right) if value >= 0 else min(edge, left)
        beside = 6 if value >= 0 else -6
        drawing.words(edge + beside, middle + 4, signed(value, digits), "start" if value >= 0 else "end", bold=last)
    drawing.line(zero, 2, zero, height + 4, FAINT)
    axis_below(drawing, x, height + 6, "mW cm⁻²")
    return drawing.svg()


@dataclass(frozen=True)
class Rung:
    """One step of the ladder: what it is called, what it changes [mW cm⁻²], and its look."""

    words: str
    change: float
    hue: str = FAINT
    hatch: str = "-"


def rungs_of(shares: Shares, names: Mapping[str, str]) -> list[Rung]:
    """The largest loss first, what is not in the model last; ``names`` are the mechanisms' words."""
    ranked = sorted(MECHANISMS, key=lambda m: shares.by_mechanism[m.parameter])
    rungs = [Rung(names[m.parameter], 1e3 * shares.by_mechanism[m.parameter], m.hue, m.hatch) for m in ranked]
    return [*rungs, Rung(NOT_IN_MODEL, 1e3 * shares.residual)] if shows(shares.residual) else rungs


def shows(residual: float | None) -> bool:
    """Whether there is anything to draw of what the model misses [W cm⁻²]."""
    return residual is not None and abs(1e3 * residual) >= 0.5 * 10.0**-FINEST


def ladder(limit: float, device: float, rungs: Sequence[Rung], name: str, *, limit_name: str, device_name: str, digits: int = 2) -> Markup:
    """From the detailed-balance limit down to the device [mW cm⁻²], rung after rung."""
    height = _PITCH * (len(rungs) + 2)
    drawing = Drawing(WIDTH, height + 40, f"Losses of {device_name} from the detailed-balance limit down", name)
    x = Scale(0.0, 1.04 * max(limit, device), 170.0, WIDTH - 16.0)
    level = limit
    drawing.words(160, _BASELINE, limit_name, "end", bold=True)
    drawing.bar(x.start, float(x(limit)), _TOP, _BAR, SOFT)
    drawing.words(x.start + 8, _BASELINE, f"{limit:.{FINEST}f} mW cm⁻²", colour=_WHITE)
    for place, rung in enumerate(rungs, start=1):
        top, before, after = _PITCH * place + _TOP, float(x(level)), float(x(level + rung.change))
        baseline = _PITCH * place + _BASELINE
        drawing.line(before, top - (_PITCH - _BAR), before, top, FAINT)
        drawing.words(160, baseline, rung.words, "end")
        drawing.bar(before, after, top, _BAR, rung.hue, rung.hatch)
        said = f"{signed(rung.change, digits)} ({100 * abs(rung.change) / limit:.1f} %)"
        # Beside the rung on the side with more room.
        left = min(before, after)
        if left - x.start > 130:
            drawing.words(left - 7, baseline, said, "end")
        else:
            drawing.words(max(before, after) + 7, baseline, said)
        level += rung.change
    last = _PITCH * (len(rungs) + 1)
    drawing.line(float(x(level)), last + _TOP - (_PITCH - _BAR), float(x(level)), last + _TOP, FAINT)
    drawing.words(160, last + _BASELINE, device_name if len(device_name) < 26 else f"{device_name[:24]}…", "end", bold=True)
    drawing.bar(x.start, float(x(device)), last + _TOP, _BAR, INK)
    inside = float(x(device)) - x.start > 190
    said = f"{device:.{FINEST}f} mW cm⁻², {100 * device / limit:.1f} % of the limit"
    drawing.words(x.start + 8 if inside else float(x(device)) + 7, last + _BASELINE, said, colour=_WHITE if inside else INK)
    drawing.line(x.start, 2, x.start, height + 2, HAIR)
    axis_below(drawing, x, height + 5, "power (mW cm⁻²)")
    return drawing.svg()


def digits_of(shares: Shares) -> int:
    """Decimals of shares in mW cm⁻²: as the widest interval allows, never beyond the hundredth that lamps and areas allow."""
    return min(share_digits(shares), FINEST)


def signed(value: float, digits: int) -> str:
    """A change with its sign and a fixed number of decimals; nothing has no sign."""
    words = f"{value:+.{digits}f}".replace("-", "−")
    return words if words.strip("+−0.") else words[1:]


def _milli(interval: tuple[float, float] | None) -> tuple[float, float] | None:
    if interval is None or not all(math.isfinite(end) for end in interval):
        return None
    return 1e3 * interval[0], 1e3 * interval[1]
