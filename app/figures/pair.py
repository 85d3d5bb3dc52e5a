"""Two devices in one picture: A with filled marks and a solid line, B with hollow marks and a dashed one."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from html import escape

import numpy as np
import plotly.graph_objects as go

from app.curves import thinned, voltage_grid
from app.mechanisms import MECHANISMS, loss_names
from app.units import Units
from app.wording import power_change
from core.diode import OneDiode
from core.metrics import measure
from core.sweep import Sweep

from .style import FAINT, HAIR, INK, SOFT, quiet_axis, quiet_layout

MARKS = 120


@dataclass(frozen=True)
class Side:
    """One of the two: its measured points, its model if there is one, and its name."""

    sweep: Sweep
    model: OneDiode | None
    name: str


def pair_figure(a: Side, b: Side, *, normalised: bool = False, zoom_key: str = "pair") -> go.Figure:
    """Both curves, absolute or as J/Jsc over V/Voc. The trace ``what-if`` is empty until a hand moves it.

    Raises
    ------
    ValueError
        If the two do not share a unit and are not normalised.
    """
    if not normalised and a.sweep.per_area != b.sweep.per_area:
        raise ValueError("a density and a current do not share an axis")
    figure = go.Figure()
    for side, hollow in ((b, True), (a, False)):
        x_unit, y_unit = _scales(side, normalised)
        voltage, current = thinned(side.sweep, MARKS)
        marker = {"size": 6, "color": "rgba(255,255,255,0)" if hollow else SOFT, "line": {"width": 1.2 if hollow else 0, "color": INK}}
        figure.add_trace(
            go.Scatter(x=voltage / x_unit, y=current / y_unit, mode="markers", marker=marker, uid=f"points-{'b' if hollow else 'a'}",
                       customdata=[[escape(side.name, quote=False)]] * len(voltage), hovertemplate="%{x:.4f}<br>%{y:.4g}<extra>%{customdata[0]}</extra>")
        )
        line_x, line_y = ([], []) if side.model is None else _line(side, x_unit, y_unit)
        figure.add_trace(
            go.Scatter(x=line_x, y=line_y, mode="lines", hoverinfo="skip", uid=f"model-{'b' if hollow else 'a'}",
                       line={"color": INK, "width": 1.6, "dash": "dash" if hollow else "solid"})
        )
    figure.add_trace(go.Scatter(x=[], y=[], mode="lines", hoverinfo="skip", uid="what-if",
                                line={"color": FAINT, "width": 3, "dash": "dot"}))
    return figure.update_layout(_pair_layout(a, b, normalised, zoom_key))


def what_if_line(side: Side, model: OneDiode, normalised: bool) -> tuple[list[float], list[float]]:
    """The curve that A would have, on the axes of ``pair_figure``."""
    x_unit, y_unit = _scales(side, normalised)
    x, y = _line(Side(side.sweep, model, side.name), x_unit, y_unit)
    return np.round(x, 6).tolist(), np.round(y, 6).tolist()


def _scales(side: Side, normalised: bool) -> tuple[float, float]:
    if not normalised:
        return 1.0, 1.0 / Units.of(side.sweep.per_area).current_factor
    metrics = measure(side.sweep)
    return metrics.voc.value or 1.0, metrics.jsc.value or 1.0


def _line(side: Side, x_unit: float, y_unit: float) -> tuple[np.ndarray, np.ndarray]:
    voltage = voltage_grid(side.sweep, side.model)
    return voltage / x_unit, side.model.current(voltage) / y_unit


def _pair_layout(a: Side, b: Side, normalised: bool, zoom_key: str) -> dict:
    zero = {"zeroline": True, "zerolinecolor": HAIR, "zerolinewidth": 1}
    spans = [_span(side, *_scales(side, normalised)) for side in (a, b)]
    right, top = max(s[0] for s in spans), max(s[1] for s in spans)
    units = Units.of(a.sweep.per_area)
    x_title = "V / Voc" if normalised else "voltage (V)"
    y_title = f"{units.letter} / {units.letter}sc" if normalised else f"{units.letter} ({units.current})"
    return quiet_layout(
        zoom_key,
        xaxis=quiet_axis(x_title, range=[-0.06 * right, 1.06 * right], **zero),
        yaxis=quiet_axis(y_title, range=[-0.2 * top, 1.12 * top], **zero),
        margin={"l": 64, "r": 16, "t": 8, "b": 44},
    )


def _span(side: Side, x_unit: float, y_unit: float) -> tuple[float, float]:
    live = side.sweep.voltage[side.sweep.current > 0]
    right = float(live.max()) if live.size else float(np.abs(side.sweep.voltage).max())
    return max(right, 1e-9) / x_unit, max(float(side.sweep.current.max()), 1e-30) / y_unit


def shares_figure(
    shares: Mapping[str, float],
    total: float,
    *,
    intervals: Mapping[str, tuple[float, float]] | None = None,
    rest: float | None = None,
    shunt_confirmed: bool = False,
) -> go.Figure:
    """What each mechanism adds to the difference in power, as bars to the left and right of zero.

    Parameters
    ----------
    shares : mapping of mechanism to float
        [mW cm⁻²]; empty where the difference is not shared out.
    total : float
        The measured difference, or the model's where nothing was measured [mW cm⁻²].
    rest : float, optional
        Measured minus model [mW cm⁻²]: a bar of its own, but where it rounds to nothing.
    shunt_confirmed : bool
        The dark sweeps give the same Rsh.
    """
    called, shared = loss_names(shunt_confirmed), [m for m in MECHANISMS if m.parameter in shares]
    names, values = [called[m.parameter] for m in shared], [shares[m.parameter] for m in shared]
    colours, hatches = [m.hue for m in shared], [m.hatch for m in shared]
    if rest is not None and power_change(rest) != "0.00":
        names, values, colours, hatches = [*names, "not in the model"], [*values, rest], [*colours, FAINT], [*hatches, "-"]
    names, values, colours, hatches = [*names, "together"], [*values, total], [*colours, INK], [*hatches, ""]
    bars = go.Bar(
        y=names, x=values, orientation="h", uid="shares", width=0.62 if shared else 0.12, hoverinfo="skip",
        marker={"color": colours, "pattern": {"shape": hatches, "fgcolor": "rgba(255,255,255,0.75)", "size": 6, "solidity": 0.25},
                "line": {"width": 0}},
    )
    # Words stand beyond the whisker, so that neither hides the other.
    known = [(intervals or {}).get(m.parameter) for m in shared]
    tips = [_tip(v, known[i] if i < len(known) else None) for i, v in enumerate(values)]
    words = go.Scatter(
        y=names, x=tips, mode="text", text=[f" {power_change(v)} " for v in values], uid="share-words", hoverinfo="skip",
        textposition=["middle left" if v < 0 else "middle right" for v in values], textfont={"size": 13}, cliponaxis=False,
    )
    reach = 1.35 * max(abs(v) for v in (*values, *tips)) or 1.0
    return go.Figure([bars, _whiskers(names, values, known), words]).update_layout(
        quiet_layout(
            "shares",
            xaxis=quiet_axis("mW cm⁻²", range=[-reach, reach], zeroline=True, zerolinecolor=FAINT, zerolinewidth=1, fixedrange=True),
            yaxis={"autorange": "reversed", "showgrid": False, "ticks": "", "showline": False, "fixedrange": True,
                   "tickfont": {"size": 13}, "automargin": True},
            margin={"l": 166, "r": 24, "t": 4, "b": 40},
            dragmode=False,
        )
    )


def _tip(value: float, interval: tuple[float, float] | None) -> float:
    """The end of a bar, or of its whisker where that reaches farther."""
    low, high = interval or (value, value)
    return min(value, low) if value < 0 else max(value, high)


def _whiskers(names: list[str], values: list[float], known: list[tuple[float, float] | None]) -> go.Scatter:
    """Intervals as lines across the ends of bars; a bar without one has none, not one of no length."""
    shown = [(n, v, *i) for n, v, i in zip(names, values, known, strict=False) if i is not None]
    return go.Scatter(
        y=[n for n, *_ in shown], x=[v for _, v, *_ in shown], mode="markers", uid="whiskers", hoverinfo="skip",
        marker={"size": 1, "color": "rgba(255,255,255,0)"},
        error_x={"type": "data", "array": [max(high - v, 0.0) for _, v, _, high in shown],
                 "arrayminus": [max(v - low, 0.0) for _, v, low, _ in shown], "color": INK, "thickness": 1.2, "width": 3},
    )
