"""From the detailed-balance limit down to the device: one rung a mechanism."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from html import escape

import plotly.graph_objects as go

from app.mechanisms import BY_PARAMETER, loss_names
from app.wording import number, percent, power_change

from .style import FAINT, HAIR, INK, SOFT, quiet_axis, quiet_layout

# Rows are told apart by words of our own, because a device may have any name, that of a mechanism too.
TOP, FOOT = "top", "foot"
_USUAL_ROWS = 7
_SEEN = 0.002  # width of a rung that shows, as a share of the limit
LONGEST_LABEL = 32  # characters; a longer name would take the chart's room


def ladder_figure(
    limit: float,
    device: float,
    losses: Mapping[str, float],
    order: Sequence[str],
    *,
    limit_name: str,
    device_name: str,
    rest: float | None = None,
    rest_name: str = "not in the model",
    shunt_confirmed: bool = False,
    large: bool = False,
) -> go.Figure:
    """The ladder.

    Parameters
    ----------
    limit, device : float
        Power at the top and at the foot [mW cm⁻²].
    losses : mapping of mechanism to float
        What each takes [mW cm⁻²], negative where power is lost.
    order : sequence of mechanisms
        From the top down; empty where the gap is not broken down.
    rest : float, optional
        Measured minus model [mW cm⁻²]; no rung where it rounds to nothing.
    rest_name : str
        What the last rung is called.
    shunt_confirmed : bool
        The dark sweep gives the same Rsh.
    large : bool
        Type for a projector.
    """
    called = loss_names(shunt_confirmed)
    steps = [(called[name], losses[name], BY_PARAMETER[name].hue, BY_PARAMETER[name].hatch) for name in order]
    if rest is not None and power_change(rest) != "0.00":
        steps.append((rest_name, rest, FAINT, "-"))
    names, bases, widths, colours, hatches, words, levels = [], [], [], [], [], [], []
    level = limit
    for name, change, colour, hatch in steps:
        names.append(name)
        bases.append(min(level, level + change))
        widths.append(abs(change))
        colours.append(colour)
        hatches.append(hatch)
        words.append(_words(change, limit))
        levels.append((level, level + change))
        level += change
    size, thickness = (22, 0.62) if large else (13, 0.5)
    thickness *= min((len(names) + 2) / _USUAL_ROWS, 1.0)  # few rows are no reason for heavy bars
    words_of_device = f"{number(device)} mW cm⁻² ({percent(device / limit)})"
    # Words that the foot's bar has no room for stand beside it.
    inside = device > 0.5 * limit
    ends = go.Bar(
        y=[TOP, FOOT], x=[limit, device], orientation="h", width=thickness, marker={"color": [SOFT, INK]}, uid="ends",
        text=[f"{number(limit)} mW cm⁻²", words_of_device if inside else ""],
        textposition="inside", insidetextanchor="start", constraintext="none", textfont={"size": size, "color": "#fffdf9"}, hoverinfo="skip",
    )
    rungs = go.Bar(
        y=names, x=widths, base=bases, orientation="h", width=thickness, uid="rungs", hoverinfo="skip",
        marker={"color": colours, "pattern": {"shape": hatches, "fgcolor": "rgba(255,255,255,0.75)", "size": 6, "solidity": 0.25}},
    )
    # Words stand where there is room: left of a rung that is far to the right, else right of it.
    left = [min(pair) > 0.4 * limit for pair in levels]
    labels = go.Scatter(
        y=[*names, *([] if inside else [FOOT])],
        x=[*(min(pair) if to_left else max(pair) for pair, to_left in zip(levels, left, strict=True)), *([] if inside else [device])],
        text=[f"  {w}  " for w in (*words, *([] if inside else [words_of_device]))],
        textposition=[*("middle left" if to_left else "middle right" for to_left in left), *([] if inside else ["middle right"])],
        mode="text", textfont={"size": size}, hoverinfo="skip", cliponaxis=False, uid="labels",
    )
    target = go.Scatter(x=[], y=[], mode="markers", uid="target", hoverinfo="skip",
                        marker={"symbol": "line-ns", "size": 26 if not large else 44, "line": {"width": 3, "color": FAINT}})
    figure = go.Figure([ends, rungs, labels, target])
    rows = [TOP, *names, FOOT]
    shown = [_label(limit_name), *names, _label(device_name)]
    for place, (start, _) in enumerate([*levels, (level, level)]):
        # A plumb line from each level to the next rung, so that the eye can go down; through a rung too thin to be seen.
        thin = place > 0 and widths[place - 1] < _SEEN * limit
        figure.add_shape(type="line", x0=start, x1=start, y0=place + (-1 if thin else 1) * thickness / 2, y1=place + 1 - thickness / 2, line={"color": FAINT, "width": 1})
    return figure.update_layout(
        quiet_layout(
            "ladder",
            barmode="overlay",
            xaxis=quiet_axis("power (mW cm⁻²)", range=[0, 1.04 * max(limit, *(max(pair) for pair in levels))], fixedrange=True, tickfont={"size": size}),
            yaxis={"type": "category", "categoryorder": "array", "categoryarray": rows, "tickvals": rows, "ticktext": shown,
                   "autorange": "reversed", "showgrid": False, "ticks": "",
                   "showline": True, "linecolor": HAIR, "fixedrange": True, "tickfont": {"size": size}, "automargin": True},
            xaxis_title_font={"size": size},
            margin={"l": 40, "r": 24, "t": 8, "b": 48},
            dragmode=False,
        )
    )


def _label(name: str) -> str:
    """A name as a tick: Plotly would take some of its characters for HTML."""
    return escape(name if len(name) <= LONGEST_LABEL else f"{name[: LONGEST_LABEL - 1]}…", quote=False)


def _words(change: float, limit: float) -> str:
    return f"{power_change(change)} ({percent(change / limit)})"
