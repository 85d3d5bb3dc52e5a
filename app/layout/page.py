"""The whole page."""

from __future__ import annotations

from dash import dcc, html

from app.ids import Id

from .bench import bench
from .dials import side
from .help import help_sheet
from .losses import losses
from .pair import pair
from .tray import tray
from .workspaces import workspace_sheet

# All screens stay mounted; the address chooses which one is seen.
SCREENS = (("bench", "/", "Bench"), ("pair", "/pair", "Pair"), ("losses", "/losses", "Losses"))
SCREENS_LAID_OUT = (
    html.Div([bench(), side()], className="view", **{"data-view": "bench"}),
    html.Div(pair(), className="view", **{"data-view": "pair"}),
    html.Div(losses(), className="view", **{"data-view": "losses"}),
)


def page(workspace_id: str, revision: int, *, token_cookie: str) -> html.Div:
    """The page of one tab, opened on a workspace as it stands."""
    return html.Div(
        className="page",
        **{"data-token-cookie": token_cookie},
        children=[
            *_stores(workspace_id, revision),
            _header(),
            html.Main(className="screen", children=[tray(), *SCREENS_LAID_OUT]),
            help_sheet(),
            workspace_sheet(),
            html.Div(className="notice", id="notice-line", role="status", **{"aria-live": "polite"}),
            html.Div(className="drop-veil", children="Drop files or folders anywhere"),
        ],
    )


def _stores(workspace_id: str, revision: int) -> list:
    return [
        dcc.Store(id=Id.VIEW, storage_type="session", data={}),
        dcc.Store(id=Id.REVISION, data={"workspace": workspace_id, "revision": revision}),
        dcc.Store(id=Id.HAND),
        dcc.Store(id=Id.SCENE),
        dcc.Store(id=Id.TRAY),
        dcc.Store(id=Id.TRAY_DRAWN, data=""),
        dcc.Store(id=Id.TRAY_UNREAD),
        dcc.Store(id=Id.TRAY_READ),
        dcc.Store(id=Id.DRAWN, data=""),
        dcc.Store(id=Id.INTERVALS),
        dcc.Store(id=Id.NOTICE),
        dcc.Store(id=Id.PAIR),
        dcc.Store(id=Id.LOSSES),
        dcc.Store(id=Id.ERRAND),
        dcc.Store(id=Id.WORKSPACES),
        dcc.Store(id=Id.JOB, storage_type="session"),
        dcc.Interval(id=Id.JOB_CLOCK, interval=250, disabled=True),
        dcc.Interval(id=Id.INTERVALS_CLOCK, interval=250, disabled=True),
    ]


def _header() -> html.Header:
    return html.Header(
        className="header",
        children=[
            html.H1("Sweepbench"),
            html.Nav(
                [html.A(words, href=address, **{"data-screen": name}) for name, address, words in SCREENS],
                **{"aria-label": "Screens"},
            ),
            html.Span(className="saved", id="saved-line"),
            html.Button(
                "workspace", id="workspace-name", className="quiet", **{"data-act": "workspaces", "aria-haspopup": "menu"}
            ),
            html.Button("undo", id=Id.UNDO, disabled=True, title="Ctrl+Z", className="quiet", **{"data-act": "undo"}),
            html.Button("redo", id=Id.REDO, disabled=True, title="Ctrl+Shift+Z", className="quiet", **{"data-act": "redo"}),
            html.Button("theme", className="quiet", **{"data-act": "theme"}, title="Light or dark"),
            html.Button("?", className="quiet", **{"data-act": "help", "aria-label": "Help and keys"}),
        ],
    )
