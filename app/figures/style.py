"""What all figures share: ink, type, quiet axes. Colours are those of the printed page; the screen recolours them."""

from __future__ import annotations

from typing import Any

import plotly.graph_objects as go

INK, SOFT, FAINT, HAIR = "#23211c", "#6d685d", "#8c887d", "#dedacf"
FONT = "system-ui, -apple-system, 'Segoe UI', Roboto, 'Noto Sans', sans-serif"
CLEAR = {"paper_bgcolor": "rgba(255,255,255,0)", "plot_bgcolor": "rgba(255,255,255,0)"}


def quiet_axis(title: str = "", **more: Any) -> dict[str, Any]:
    """A hairline axis without a grid."""
    return {
        "showgrid": False,
        "zeroline": False,
        "ticks": "outside",
        "ticklen": 4,
        "tickcolor": HAIR,
        "linecolor": HAIR,
        "showline": True,
        "title": {"text": title, "standoff": 8, "font": {"size": 13}},
        **more,
    }


def quiet_layout(zoom_key: str = "", **more: Any) -> dict[str, Any]:
    """A figure without legend, frame or ground; the user's zoom survives redraws with the same key."""
    return {
        "showlegend": False,
        "hovermode": "closest",
        "dragmode": "pan",
        "font": {"family": FONT, "size": 13, "color": INK},
        "hoverlabel": {"font": {"family": FONT}},
        "uirevision": zoom_key,
        **CLEAR,
        **more,
    }


def blank_figure() -> go.Figure:
    """Nothing on no ground, for the place where a sentence stands instead."""
    return go.Figure(layout=quiet_layout(xaxis={"visible": False}, yaxis={"visible": False}))
