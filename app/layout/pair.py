"""The pair screen: two devices, and why one is better."""

from dash import dcc, html

from app.ids import Id
from app.mechanisms import MECHANISMS

from .bench import PLOT_CONFIG
from .dials import METRIC_LABELS
from .panels import KNOWN, stated, stated_switch


def pair() -> list:
    return [
        html.Section(
            className="pair-room",
            **{"aria-label": "Pair"},
            children=[
                html.Div(
                    className="bench-head",
                    children=[
                        html.Span("A", className="slot-name"),
                        html.Span(className="slot", **{"data-slot": "a", "data-title": "Device A"}),
                        html.Span("B", className="slot-name"),
                        html.Span(className="slot", **{"data-slot": "b", "data-title": "Device B"}),
                        html.Button("swap", className="quiet", **{"data-act": "swap"}, title="Exchange A and B (X)"),
                        html.Button("report", className="quiet", title="Both devices as one HTML file", **{"data-act": "save-report"}),
                        html.Div(
                            className="picture",
                            children=[
                                html.Span("save", className="hint"),
                                html.Button("SVG", className="quiet", **{"data-save": "svg", "data-graph": Id.PAIR_PLOT}),
                                html.Button("PNG", className="quiet", **{"data-save": "png", "data-graph": Id.PAIR_PLOT}),
                            ],
                        ),
                    ],
                ),
                html.Div(
                    className="pair-plot-room",
                    children=[
                        dcc.Graph(id=Id.PAIR_PLOT, config=PLOT_CONFIG, className="pair-plot", responsive=True),
                        html.Div(
                            className="scale-choice",
                            role="radiogroup",
                            **{"aria-label": "Axes of the plot"},
                            children=[_choice("absolute", "pair-scale", "absolute"), _choice("normalised", "pair-scale", "normalised")],
                        ),
                    ],
                ),
                html.Div(
                    className="bars-head",
                    children=[
                        html.H2("What turns A into B"),
                        html.Span(id="pair-bars-note", className="subtitle"),
                        html.Div(
                            className="picture",
                            children=[
                                html.Button("SVG", className="quiet", **{"data-save": "svg", "data-graph": Id.PAIR_BARS}),
                                html.Button("PNG", className="quiet", **{"data-save": "png", "data-graph": Id.PAIR_BARS}),
                                _table("CSV", "save-shares", "What each mechanism adds to the difference"),
                            ],
                        ),
                    ],
                ),
                dcc.Graph(id=Id.PAIR_BARS, config=PLOT_CONFIG, className="pair-bars", responsive=True),
                html.Div(id="pair-refusal", className="refusal", hidden=True),
            ],
        ),
        html.Aside(
            className="side",
            **{"aria-label": "Why the difference"},
            children=[
                html.P(id="pair-story", className="story"),
                html.P(id="pair-sources", className="fit-line"),
                _comparison(),
                html.Div(
                    className="budget",
                    children=[
                        html.Span("known besides noise:", className="hint"),
                        *(stated(name, words, title) for name, (words, title) in KNOWN.items()),
                        stated_switch(),
                        html.Div(
                            className="picture",
                            children=[
                                _table("CSV", "save-pair", "Both, difference and verdict of each metric"),
                                _table("XLSX", "save-shown", "All tables of these two"),
                            ],
                        ),
                    ],
                ),
                html.H3("What if A had B’s …"),
                html.Div(className="what-ifs", children=[_what_if(m.parameter, m.loss) for m in MECHANISMS]),
                html.P(id="what-if-line", className="what-if-line", role="status", **{"aria-live": "polite"}),
            ],
        ),
    ]


def _choice(words: str, group: str, value: str) -> html.Button:
    return html.Button(words, role="radio", className="quiet", **{f"data-{group}": value, "aria-checked": "false"})


def _table(words: str, act: str, title: str) -> html.Button:
    return html.Button(words, className="quiet", title=title, **{"data-act": act})


def _comparison() -> html.Table:
    head = html.Tr([html.Th(), html.Th("A"), html.Th("B"), html.Th("B − A"), html.Th("verdict")])
    rows = []
    for name, (letter, index) in METRIC_LABELS.items():
        cells = [html.Td(className=column, **{"data-column": column}) for column in ("a", "b", "difference", "verdict")]
        rows.append(html.Tr([html.Th([letter, html.Sub(index)], scope="row"), *cells], **{"data-compared": name}))
    return html.Table(className="metrics", children=[html.Thead(head), html.Tbody(rows)])


def _what_if(parameter: str, words: str) -> html.Div:
    return html.Div(
        className="what-if",
        **{"data-parameter": parameter, "data-title": words},
        children=[html.Span(className="mark"), html.Span(words, className="what"), html.Span(className="slider")],
    )
