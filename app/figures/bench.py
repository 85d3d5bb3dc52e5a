"""The bench's one figure: current and power over voltage, and the strip below on the same voltage axis.

The printed colours are those of the light theme; on the screen the style sheet recolours the same marks,
so that switching the theme redraws nothing and an exported picture is always on white.
"""

from __future__ import annotations

from html import escape

import numpy as np
import plotly.graph_objects as go

from app.curves import Curve, Strip, model_curves, squeezed, strip_points, thinned
from app.units import Units
from core.diode import OneDiode
from core.fit_settings import Weights
from core.sweep import Sweep

from .style import CLEAR, FAINT, HAIR, INK, quiet_axis, quiet_layout

STRIP_TOP, PLOT_BOTTOM = 0.215, 0.285
MARKED_POINTS = 1000  # of the active sweep
LINE_POINTS = 150  # of every other sweep


def bench_figure(
    sweep: Sweep,
    model: OneDiode | None,
    *,
    left_out: np.ndarray | None = None,
    companions: tuple[Sweep, ...] = (),
    overlay: tuple[Sweep, ...] = (),
    strip: Strip = "residuals",
    weights: Weights = "automatic",
    zoom_key: str = "bench",
) -> go.Figure:
    """The measured points, the model's lines and the strip.

    Parameters
    ----------
    sweep : Sweep
        The active one: filled marks.
    model : OneDiode or None
    left_out : ndarray of bool, shape (n,), optional
        Points that the fit does not use: shown as faint crosses.
    companions : tuple of Sweep
        Other sweeps of the same device and light: hollow marks.
    overlay : tuple of Sweep
        Sweeps of other devices to look at beside it: thin lines.
    weights : str
        Of the fit; those from the file set the unit of the residuals.
    zoom_key : str
        The user's zoom survives every redraw with the same key.
    """
    units = Units.of(sweep.per_area)
    curves = {c.uid: c for c in model_curves(sweep, model, strip, weights)} if model else {}
    figure = go.Figure()
    for number, other in enumerate(s for s in overlay if s.per_area == sweep.per_area and s.lit == sweep.lit):
        figure.add_trace(_line_of(other, f"overlay{number}", units))
    for number, other in enumerate(companions):
        figure.add_trace(_marks_of(other, f"companion{number}", units, hollow=True))
    # In the dark these two stay empty: Plotly takes it ill when the power axis comes and goes.
    figure.add_trace(_model_trace(curves.get("power"), "power", "y2", FAINT, 1.4, "dash"))
    figure.add_trace(_model_trace(curves.get("corner"), "corner", "y", FAINT, 1, "dot"))
    if left_out is None or not left_out.any():
        figure.add_trace(_marks_of(sweep, "points", units, hollow=False))
    else:
        figure.add_trace(_marks_of(sweep.only(~left_out), "points", units, hollow=False))
        crosses = _marks_of(sweep.only(left_out), "left-out", units, hollow=False)
        figure.add_trace(crosses.update(marker={"symbol": "x-thin", "size": 6, "line": {"width": 1.2, "color": FAINT}}))
    figure.add_trace(_model_trace(curves.get("model"), "model", "y", INK, 2, "solid"))

    points = strip_points(sweep, model, strip, units)
    figure.add_trace(
        go.Scatter(x=points.x, y=points.y, yaxis="y3", uid="strip-points", mode="markers", hoverinfo="skip",
                   marker={"size": 4, "color": INK})
    )
    strip_trace = _model_trace(curves.get("strip-model"), "strip-model", "y3", INK, 1.4, "solid")
    if strip == "residuals":
        strip_trace.update(mode="lines+markers", line_width=0.6, marker={"size": 4, "color": INK})
    figure.add_trace(strip_trace)
    return figure.update_layout(_layout(sweep, strip, points, units, zoom_key))


def empty_figure() -> go.Figure:
    """The same axes without a sweep; Plotly takes it ill when axes appear later."""
    nothing = {"showgrid": False, "zeroline": False, "showticklabels": False}
    return go.Figure(
        layout={
            "xaxis": {**nothing, "anchor": "y3"},
            "yaxis": {**nothing, "domain": [PLOT_BOTTOM, 1]},
            "yaxis2": {**nothing, "overlaying": "y", "side": "right"},
            "yaxis3": {**nothing, "domain": [0, STRIP_TOP]},
            **CLEAR,
        },
        data=[{"x": [], "y": [], "yaxis": axis} for axis in ("y", "y2", "y3")],
    )


def _marks_of(sweep: Sweep, uid: str, units: Units, *, hollow: bool) -> go.Scatter:
    voltage, current = thinned(sweep, LINE_POINTS if hollow else MARKED_POINTS)
    shown = _on_axis(current, sweep.lit) * units.current_factor
    marker = {"size": 5.5, "color": "rgba(255,255,255,0)" if hollow else INK, "line": {"width": 1 if hollow else 0, "color": INK}}
    return go.Scatter(
        x=voltage, y=shown, uid=uid, mode="markers", marker=marker, name=escape(sweep.name, quote=False),
        opacity=0.6 if hollow else 1,
        customdata=[[escape(sweep.name, quote=False)]] * len(voltage),
        hovertemplate=f"%{{x:.4f}} V<br>%{{y:.4g}} {units.current}<extra>%{{customdata[0]}}</extra>",
    )


def _line_of(sweep: Sweep, uid: str, units: Units) -> go.Scatter:
    voltage, current = thinned(sweep, LINE_POINTS)
    return go.Scatter(
        x=voltage, y=_on_axis(current, sweep.lit) * units.current_factor, uid=uid, mode="lines", hoverinfo="skip",
        line={"width": 1, "color": FAINT}, name=escape(sweep.name, quote=False),
    )


def _model_trace(curve: Curve | None, uid: str, axis: str, colour: str, width: float, dash: str) -> go.Scatter:
    return go.Scatter(
        x=[] if curve is None else curve.x, y=[] if curve is None else curve.y, yaxis=axis, uid=uid, mode="lines",
        hoverinfo="skip", line={"color": colour, "width": width, "dash": dash},
    )


def _on_axis(current: np.ndarray, lit: bool) -> np.ndarray:
    """A dark sweep is drawn as |J| on a logarithmic axis."""
    return current if lit else np.where(current != 0, np.abs(current), np.nan)


def _layout(sweep: Sweep, strip: Strip, points: Curve, units: Units, zoom_key: str) -> dict:
    x_range, y_range = plot_ranges(sweep, units)
    word = "current density" if sweep.per_area else "current"
    letter = units.letter
    zero = {"zeroline": sweep.lit, "zerolinecolor": HAIR, "zerolinewidth": 1}
    layout = quiet_layout(
        zoom_key,
        xaxis=quiet_axis("voltage (V)", range=x_range, anchor="y3", **zero),
        yaxis=quiet_axis(f"{word} {letter} ({units.current})", range=y_range, domain=[PLOT_BOTTOM, 1], **zero),
        yaxis3=_strip_axis(sweep, strip, points, units),
        margin={"l": 64, "r": 64 if sweep.lit else 24, "t": 16, "b": 44},
    )
    if sweep.lit:
        power = float(np.max(sweep.voltage * sweep.current)) * units.power_factor
        top = max(power, 1e-30) / 0.78
        layout["yaxis2"] = quiet_axis(
            f"power ({units.power})", overlaying="y", side="right", range=[top * y_range[0] / y_range[1], top], tickmode="auto"
        )
    else:
        layout["yaxis2"] = {"overlaying": "y", "side": "right", "showgrid": False, "zeroline": False, "showticklabels": False,
                            "ticks": "", "showline": False, "title": {"text": ""}}
        layout["yaxis"].update(type="log", dtick=1, exponentformat="power", title_text=f"|{letter}| ({units.current}), dark")
    return layout


def plot_ranges(sweep: Sweep, units: Units) -> tuple[list[float], list[float]]:
    """Axis ranges that frame the measured points; on a logarithmic axis in decades."""
    low, high = float(sweep.voltage.min()), float(sweep.voltage.max())
    if not sweep.lit:
        size = np.abs(sweep.current[sweep.current != 0]) * units.current_factor
        bottom, top = (np.log10(size.min()), np.log10(size.max())) if size.size else (-6.0, 0.0)
        margin = 0.04 * (high - low)
        return [low - margin, high + margin], [max(bottom, top - 10) - 0.3, top + 0.4]
    top = float(sweep.current.max()) * units.current_factor
    bottom = float(sweep.current.min()) * units.current_factor
    if top <= 0:  # no generation at all: show what there is
        return [low, high], [1.1 * bottom if bottom < 0 else -1.0, 0.1 * abs(bottom) or 1.0]
    crossing = sweep.voltage[sweep.current > 0]
    voc = float(crossing.max()) if crossing.size else high
    start = max(min(low, 0.0), -0.25 * voc) if voc > 0 else low
    end = min(max(high, voc), 1.3 * voc) if voc > 0 else high
    margin = 0.04 * (end - start)
    return [start - margin, end + margin], [max(bottom, -0.22 * top) - 0.04 * top, 1.14 * top]


def _strip_axis(sweep: Sweep, strip: Strip, points: Curve, units: Units) -> dict:
    place = {"domain": [0, STRIP_TOP], "nticks": 5}
    if strip == "residuals":
        ticks = {-1000: "", -100: "−100", -10: "−10", -1: "", 0: "0", 1: "", 10: "10", 100: "100", 1000: ""}
        places = squeezed(np.array(list(ticks))).tolist()
        zero = {"zeroline": True, "zerolinecolor": HAIR}
        return quiet_axis("residual / noise", range=[-2.4, 2.4], tickvals=places, ticktext=list(ticks.values()), **zero, **place)
    if strip == "ideality":
        return quiet_axis("local ideality", range=[0, 4], **place)
    size = points.y[np.isfinite(points.y)]
    bottom, top = (np.log10(size.min()) - 0.3, np.log10(size.max()) + 0.3) if size.size else (-6, 2)
    title = f"{units.letter}sc − {units.letter}" if sweep.lit else f"|{units.letter}|"
    return quiet_axis(title, type="log", exponentformat="power", range=[max(bottom, top - 7), top], **place)
