"""The middle of the bench: title, the plot with its strip, and the invitation of an empty workspace."""

from dash import dcc, html

from app.figures.bench import empty_figure
from app.ids import Id

PLOT_CONFIG = {
    "displaylogo": False,
    "showSendToCloud": False,
    "scrollZoom": True,
    "doubleClick": False,  # the page brings the whole view back itself; Plotly forgets it when a figure is replaced
    "displayModeBar": False,
    "responsive": True,
}

STRIP_LABELS = {"residuals": "residuals", "log": "semi-log", "ideality": "local ideality"}


def bench() -> html.Section:
    return html.Section(
        className="bench",
        **{"aria-label": "Bench"},
        children=[
            html.Div(
                className="bench-head",
                children=[
                    html.H2(id="bench-title"),
                    html.Span(id="bench-subtitle", className="subtitle"),
                    html.Div(
                        className="picture",
                        children=[
                            html.Span("save", className="hint"),
                            html.Button("SVG", className="quiet", title="For a page of two columns", **{"data-act": "save-svg"}),
                            html.Button("PNG", className="quiet", title="For a slide", **{"data-act": "save-png"}),
                            html.Button(
                                "report",
                                className="quiet",
                                title="This device, and the sweeps laid beside it, as one HTML file to keep or print",
                                **{"data-act": "save-report"},
                            ),
                        ],
                    ),
                ],
            ),
            html.Div(
                className="plot-room",
                tabIndex="0",
                role="group",
                **{"aria-label": "Plot: + and − zoom, Shift with arrow keys pans, 0 shows all, E leaves points out"},
                children=[
                    dcc.Graph(id=Id.PLOT, config=PLOT_CONFIG, className="plot", responsive=True, figure=empty_figure()),
                    html.Div(id="overlay", className="overlay"),
                    html.Div(
                        className="strip-choice",
                        role="radiogroup",
                        **{"aria-label": "Strip below the plot"},
                        children=[
                            html.Button(label, role="radio", className="quiet", **{"data-strip": strip, "aria-checked": "false"})
                            for strip, label in STRIP_LABELS.items()
                        ],
                    ),
                ],
            ),
            html.Div(id="edge-line", className="edge-line", role="status", **{"aria-live": "polite"}),
            _invitation(),
        ],
    )


def _invitation() -> html.Div:
    return html.Div(
        className="invitation",
        children=[
            html.P("Drop a sweep file here", className="large"),
            html.P("Text or spreadsheet, as your bench wrote it: any delimiter, sign, unit; one sweep or many; whole folders."),
            html.Div(
                children=[
                    html.Button("choose files", className="plain", **{"data-act": "pick-files"}),
                    html.Button("open the sample sweeps", id=Id.OPEN_SAMPLES, className="strong"),
                ]
            ),
            html.P("Everything stays on this computer.", className="hint"),
        ],
    )
