"""The losses screen: from the detailed-balance limit down to the device."""

from dash import dcc, html

from app.ids import Id
from app.mechanisms import MECHANISMS

from .bench import PLOT_CONFIG
from .pair import _choice, _table


def losses() -> list:
    return [
        html.Section(
            className="losses-room",
            **{"aria-label": "Losses"},
            children=[
                html.Div(
                    className="bench-head",
                    children=[
                        html.H2(id="losses-title"),
                        html.Span(id="losses-subtitle", className="subtitle"),
                        html.Div(
                            className="picture",
                            children=[
                                _choice("shares", "ladder", "shares"),
                                _choice("one after another", "ladder", "steps"),
                                html.Button("projector", className="quiet", title="One chart, large type (P)", **{"data-act": "projector"}),
                                html.Button("report", className="quiet", title="This device as one HTML file", **{"data-act": "save-report"}),
                                html.Span("save", className="hint"),
                                html.Button("SVG", className="quiet", **{"data-save": "svg", "data-graph": Id.LADDER}),
                                html.Button("PNG", className="quiet", **{"data-save": "png", "data-graph": Id.LADDER}),
                                _table("CSV", "save-losses", "Loss and rung of each mechanism"),
                                _table("XLSX", "save-shown", "All tables of this device"),
                            ],
                        ),
                    ],
                ),
                dcc.Graph(id=Id.LADDER, config=PLOT_CONFIG, className="ladder", responsive=True),
                html.Div(id="losses-story", className="losses-story"),
                html.P(id="losses-cautions", className="losses-cautions"),
                html.Div(id="losses-refusal", className="refusal", hidden=True),
            ],
        ),
        html.Aside(
            className="side",
            **{"aria-label": "Limit, losses and targets"},
            children=[
                html.Div(
                    className="condition",
                    **{"data-condition": "band_gap", "data-title": "band gap"},
                    children=[
                        html.Span("band gap", className="label"),
                        html.Span(className="value"),
                        html.Span("eV", className="unit"),
                        html.Button("assumed", className="assumed", title="Read off the photocurrent. Press to confirm."),
                    ],
                ),
                html.Div(
                    className="condition",
                    **{"data-title": "emission"},
                    children=[html.Span("emission from", className="label"), html.Span(className="value wide", id="emission-choice")],
                ),
                html.Table(
                    className="metrics losses-numbers",
                    children=[
                        html.Thead(html.Tr([html.Th("lost to"), html.Th("mW cm⁻²"), html.Th("of limit")])),
                        html.Tbody(id="losses-table"),
                    ],
                ),
                html.H3("Targets"),
                html.Div(className="what-ifs targets", children=[_target(m.parameter, m.loss) for m in MECHANISMS]),
                html.P(id="target-line", className="what-if-line", role="status", **{"aria-live": "polite"}),
            ],
        ),
    ]


def _target(parameter: str, words: str) -> html.Div:
    return html.Div(
        className="target what-if",
        **{"data-parameter": parameter, "data-title": words},
        children=[html.Span(className="mark"), html.Span(words, className="what"), html.Span(className="target-value"), html.Span(className="slider")],
    )
