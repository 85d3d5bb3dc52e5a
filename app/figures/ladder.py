"""From the detailed-balance limit down to the device: one rung a mechanism."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import plotly.graph_objects as go

from app.mechanisms import BY_PARAMETER
from app.wording import number, power_change

from .style import FAINT, HAIR, INK, SOFT, quiet_axis, quiet_layout


def ladder_figure(
    limit: float,
    device: float,
    losses: Mapping[str, float],
    order: Sequence[str],
    *,
    limit_name: str,
    device_name: str,
    rest: float | None = None,
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
        From the top down.
    rest : float, optional
        Measured minus model [mW cm⁻²].
    large : bool
        Type for a projector.
    """
    steps = [(BY_PARAMETER[name].loss, losses[name], BY_PARAMETER[name].hue, BY_PARAMETER[name].hatch) for name in order]
    if rest is not None:
        steps.append(("not in the model", rest, FAINT, "-"))
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
    size = 22 if large else 13
    ends = go.Bar(
        y=[limit_name, device_name], x=[limit, device], orientation="h", width=0.5, marker={"color": [SOFT, INK]}, uid="ends",
        text=[f"{number(limit)} mW cm⁻²", f"{number(device)} mW cm⁻², {100 * device / limit:.1f} % of the limit"],
        textposition="inside", insidetextanchor="start", textfont={"size": size, "color": "#fffdf9"}, hoverinfo="skip",
    )
    rungs = go.Bar(
        y=names, x=widths, base=bases, orientation="h", width=0.5, uid="rungs", hoverinfo="skip",
        marker={"color": colours, "pattern": {"shape": hatches, "fgcolor": "rgba(255,255,255,0.75)", "size": 6, "solidity": 0.25}},
    )
    # Words stand where there is room: left of a rung that is far to the right, else right of it.
    left = [min(pair) > 0.4 * limit for pair in levels]
    labels = go.Scatter(
        y=names, x=[min(pair) if to_left else max(pair) for pair, to_left in zip(levels, left, strict=True)], mode="text",
        text=[f"  {w}  " for w in words], textposition=["middle left" if to_left else "middle right" for to_left in left],
        textfont={"size": size}, hoverinfo="skip", cliponaxis=False, uid="labels",
    )
    target = go.Scatter(x=[], y=[], mode="markers", uid="target", hoverinfo="skip",
                        marker={"symbol": "line-ns", "size": 26 if not large else 44, "line": {"width": 3, "color": FAINT}})
    figure = go.Figure([ends, rungs, labels, target])
    rows = [limit_name, *names, device_name]
    for place, (start, _) in enumerate([*levels, (level, level)]):
        # A plumb line from each level to the next rung, so that the eye can go down.
        figure.add_shape(type="line", x0=start, x1=start, y0=place + 0.25, y1=place + 0.75, line={"color": FAINT, "width": 1})
    return figure.update_layout(
        quiet_layout(
            "ladder",
            barmode="overlay",
            xaxis=quiet_axis("power (mW cm⁻²)", range=[0, 1.04 * max(limit, *(max(pair) for pair in levels))], fixedrange=True, tickfont={"size": size}),
            yaxis={"categoryorder": "array", "categoryarray": rows, "autorange": "reversed", "showgrid": False, "ticks": "",
                   "showline": True, "linecolor": HAIR, "fixedrange": True, "tickfont": {"size": size}, "automargin": True},
            xaxis_title_font={"size": size},
            margin={"l": 40, "r": 24, "t": 8, "b": 48},
            dragmode=False,
        )
    )


def _words(change: float, limit: float) -> str:
    return f"{power_change(change)} ({100 * abs(change) / limit:.1f} %)"
