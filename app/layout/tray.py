"""The tray at the left: the way in, and the list of everything loaded."""

from dash import html

from app.ids import Id


def tray() -> html.Aside:
    return html.Aside(
        className="tray",
        **{"aria-label": "Tray"},
        children=[
            html.Div(
                className="ways-in",
                children=[
                    html.Button("add files", className="quiet", **{"data-act": "pick-files"}),
                    html.Button("add folder", className="quiet", **{"data-act": "pick-folder"}),
                    html.Span("or drop", className="hint"),
                ],
            ),
            html.Div(className="arrivals", id="arrivals", **{"aria-live": "polite"}),
            html.Div(className="tray-list", id="tray-list", role="listbox", tabIndex="0", **{"aria-label": "Sweeps"}),
            html.Div(
                className="tray-foot",
                children=[
                    html.Button(
                        "refine all",
                        id=Id.REFINE_ALL,
                        className="quiet",
                        title="Refine every sweep of the tray",
                        **{"data-act": "refine-all"},
                    ),
                    html.Button("stop", id=Id.CANCEL_JOB, className="quiet", hidden=True),
                    html.Span(className="progress", id=Id.JOB_LINE, role="status"),
                    html.Span(
                        className="tables",
                        children=[
                            html.Button("CSV", className="quiet", title="Every sweep of the tray, one row each", **{"data-act": "save-csv"}),
                            html.Button("XLSX", className="quiet", title="Metrics, parameters, conditions and checks, a sheet each", **{"data-act": "save-xlsx"}),
                            html.Button("JSON", className="quiet", title="Models and refinements of every sweep", **{"data-act": "save-json"}),
                        ],
                    ),
                ],
            ),
        ],
    )
