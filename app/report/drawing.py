"""Figures of the report as inline SVG: ink on white, text as text, nothing that needs a script.

A ``Drawing`` collects shapes; a ``Scale`` takes values to places. Units are CSS pixels of the printed page.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from html import escape

import numpy as np

from app.figures.style import HAIR, INK, SOFT
from app.wording import number

from .markup import Markup

# Plotly's names of the hatches, as lines through a tile of 6 by 6.
_HATCHES = {
    "/": "M-1.5 1.5L1.5 -1.5M0 6L6 0M4.5 7.5L7.5 4.5",
    "\\": "M-1.5 4.5L1.5 7.5M0 0L6 6M4.5 -1.5L7.5 1.5",
    "x": "M0 6L6 0M0 0L6 6",
    "-": "M0 3H6",
    ".": "M3 2.99V3.01",
}
_HATCH_NAMES = {"/": "rising", "\\": "falling", "x": "crossed", "-": "level", ".": "dotted"}


@dataclass(frozen=True)
class Scale:
    """Values from ``low`` to ``high`` laid between two places; logarithmic if ``log``."""

    low: float
    high: float
    start: float
    end: float
    log: bool = False

    def __call__(self, values: float | np.ndarray) -> np.ndarray:
        with np.errstate(all="ignore"):
            low, high, values = (np.log10(v) if self.log else v for v in (self.low, self.high, np.asarray(values, float)))
            return self.start + (values - low) / (high - low) * (self.end - self.start)

    def ticks(self, most: int = 6) -> list[float]:
        """Round values on the scale."""
        if self.log:
            decades = range(math.ceil(math.log10(self.low) - 1e-9), math.floor(math.log10(self.high) + 1e-9) + 1)
            step = math.ceil(len(decades) / most) or 1
            return [10.0**d for d in decades if d % step == 0]
        rough = (self.high - self.low) / most
        power = 10.0 ** math.floor(math.log10(rough))
        step = power * next(factor for factor in (1, 2, 5, 10) if factor * power >= rough * (1 - 1e-9))
        first, last = math.ceil(self.low / step - 1e-9), math.floor(self.high / step + 1e-9)
        return [round(n * step, 12) + 0.0 for n in range(first, last + 1)]


class Drawing:
    """An SVG picture in the making.

    Parameters
    ----------
    width, height : float
    title : str
        What the picture shows, for those who cannot see it.
    name : str
        Distinct within the page: hatches are found by it.
    """

    def __init__(self, width: float, height: float, title: str, name: str):
        self.width, self.height, self._title, self._name = width, height, title, name
        self._hatches: dict[tuple[str, str], str] = {}
        self._parts: list[str] = []

    def add(self, tag: str, **attributes: object) -> None:
        self._parts.append(f"<{tag}{_written(attributes)}/>")

    def line(self, x1: float, y1: float, x2: float, y2: float, colour: str = HAIR, width: float = 1, dash: str | None = None) -> None:
        self.add("line", x1=x1, y1=y1, x2=x2, y2=y2, stroke=colour, stroke_width=width, stroke_dasharray=dash)

    def curve(self, x: np.ndarray, y: np.ndarray, colour: str = INK, width: float = 1.4, dash: str | None = None) -> None:
        """A line through points; it breaks where one is not finite."""
        steps, pen_down = [], False
        for a, b in zip(np.asarray(x, float).tolist(), np.asarray(y, float).tolist(), strict=True):
            if not (math.isfinite(a) and math.isfinite(b)):
                pen_down = False
                continue
            steps.append(f"{'L' if pen_down else 'M'}{_short(a)} {_short(b)}")
            pen_down = True
        if steps:
            self.add("path", d="".join(steps), fill="none", stroke=colour, stroke_width=width, stroke_dasharray=dash,
                     stroke_linejoin="round")

    def marks(self, x: np.ndarray, y: np.ndarray, *, radius: float = 2.0, fill: str = INK, stroke: str = "none") -> None:
        """Round marks, all in one group."""
        inside = [
            f'<circle cx="{_short(a)}" cy="{_short(b)}" r="{_short(radius)}"/>'
            for a, b in zip(np.asarray(x, float).tolist(), np.asarray(y, float).tolist(), strict=True)
            if math.isfinite(a) and math.isfinite(b)
        ]
        self._parts.append(f"<g{_written({'fill': fill, 'stroke': stroke, 'stroke_width': 0.9})}>{''.join(inside)}</g>")

    def words(
        self, x: float, y: float, words: str, anchor: str = "start", size: float = 11, colour: str = INK, *,
        bold: bool = False, turned: bool = False,
    ) -> None:  # fmt: skip
        turn = f"rotate(-90 {_short(x)} {_short(y)})" if turned else None
        attributes = {"x": x, "y": y, "text_anchor": anchor, "font_size": size, "fill": colour, "transform": turn,
                      "font_weight": 600 if bold else None}
        self._parts.append(f"<text{_written(attributes)}>{escape(words)}</text>")

    def bar(self, x1: float, x2: float, y: float, height: float, colour: str, hatch: str = "") -> None:
        """A level bar, the hatch in white over its colour."""
        left, width = min(x1, x2), abs(x2 - x1)
        self.add("rect", x=left, y=y, width=width, height=height, fill=colour)
        if hatch in _HATCHES:
            self.add("rect", x=left, y=y, width=width, height=height, fill=f"url(#{self._hatch(hatch)})")

    def clip(self, x: float, y: float, width: float, height: float) -> None:
        """What is added until ``unclip`` shows inside this frame alone."""
        name = f"{self._name}-frame-{len(self._parts)}"
        frame = {"x": x, "y": y, "width": width, "height": height}
        self._parts.append(f'<clipPath id="{escape(name)}"><rect{_written(frame)}/></clipPath><g clip-path="url(#{escape(name)})">')

    def unclip(self) -> None:
        self._parts.append("</g>")

    def _hatch(self, hatch: str) -> str:
        name = f"{self._name}-{_HATCH_NAMES[hatch]}"
        round_dot = "round" if hatch == "." else "butt"
        width = 2 if hatch == "." else 1
        self._hatches[name, hatch] = (
            f'<pattern id="{escape(name)}" width="6" height="6" patternUnits="userSpaceOnUse"><path d="{_HATCHES[hatch]}" '
            f'fill="none" stroke="#fff" stroke-opacity="0.8" stroke-width="{width}" stroke-linecap="{round_dot}"/></pattern>'
        )
        return name

    def svg(self) -> Markup:
        patterns = "".join(self._hatches.values())
        defined = f"<defs>{patterns}</defs>" if patterns else ""
        return Markup(
            f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 {_short(self.width)} {_short(self.height)}" role="img" '
            f'aria-label="{escape(self._title)}"><title>{escape(self._title)}</title>{defined}{"".join(self._parts)}</svg>'
        )


def axis_below(drawing: Drawing, scale: Scale, y: float, title: str = "", *, labels: bool = True) -> None:
    """A hairline axis with ticks downwards."""
    drawing.line(scale.start, y, scale.end, y)
    for tick in scale.ticks(8):
        place = float(scale(tick))
        drawing.line(place, y, place, y + 4)
        if labels:
            drawing.words(place, y + 16, _tick_words(tick), "middle", 10.5, SOFT)
    if title:
        drawing.words((scale.start + scale.end) / 2, y + 33, title, "middle", 11)


def axis_left(
    drawing: Drawing, scale: Scale, x: float, title: str = "", most: int = 6, ticks: Sequence[tuple[float, str]] | None = None
) -> None:
    """A hairline axis with ticks to the left; ``ticks`` are values with their words where the scale's own do not fit."""
    drawing.line(x, scale.start, x, scale.end)
    for tick, words in ticks if ticks is not None else [(t, _tick_words(t)) for t in scale.ticks(most)]:
        place = float(scale(tick))
        drawing.line(x - 4, place, x, place)
        drawing.words(x - 8, place + 3.5, words, "end", 10.5, SOFT)
    if title:
        drawing.words(x - 46, (scale.start + scale.end) / 2, title, "middle", 11, turned=True)


def legend(drawing: Drawing, x: float, rows: Iterable[tuple[str, dict, dict]]) -> float:
    """Samples of marks and line with their names, side by side from the top; returns the height that they take."""
    place, height = x, 9.0
    for words, marks, line in rows:
        width = 50 + 6.2 * len(words)
        if place > x and place + width > drawing.width:
            place, height = x, height + 16
        if line:
            drawing.line(place, height, place + 26, height, **line)
        drawing.marks(np.array([place + 13]), np.array([height]), **marks)
        drawing.words(place + 33, height + 3.5, words, size=10.5)
        place += width
    return height + 13


def _tick_words(value: float) -> str:
    if value and not 1e-3 <= abs(value) < 1e5:
        return number(value, digits=1).replace("1·", "")
    return f"{value:.6g}".replace("-", "−")


def _written(attributes: dict[str, object]) -> str:
    return "".join(
        f' {name.rstrip("_").replace("_", "-")}="{_short(value) if isinstance(value, float) else escape(str(value))}"'
        for name, value in attributes.items()
        if value is not None
    )


def _short(value: float) -> str:
    """A place to a hundredth of a pixel; what lies far off the page is brought near, for printers that choke on it."""
    return f"{min(max(float(value), -1e5), 1e5):.2f}".rstrip("0").rstrip(".")
