"""The panels beside the numbers: what the fit is asked and what it cannot tell, and estimates by other methods."""

from dash import html

from app.ids import Id

SETTINGS = (
    ("model", "model", "", "one diode|two diodes"),
    ("window_low", "voltage from", "V", ""),
    ("window_high", "voltage to", "V", ""),
    ("weights", "weights", "", "automatic|uniform|relative|effective"),
    ("current_noise", "noise of J", "", ""),
    ("voltage_noise", "noise of V", "mV", ""),
    ("loss", "loss", "", "linear|robust"),
    ("confidence", "level of intervals", "%", ""),
)


def fit_panel() -> list:
    return [
        html.Div(className="settings", role="group", children=[_setting(*row) for row in SETTINGS], **{"aria-label": "Fit settings"}),
        html.Div(
            className="left-out-row",
            children=[
                html.Span(id="left-out-line", className="hint"),
                html.Button(
                    "leave points out", role="switch", className="quiet", title="Draw a box over points (E)",
                    **{"data-act": "leave-out", "aria-checked": "false"},
                ),
                html.Button("use all", className="quiet", **{"data-act": "use-all"}),
            ],
        ),
        html.H3("What the data tell"),
        html.Div(id=Id.INTERVALS_TABLE, className="intervals"),
        html.P(id="model-choice", className="fit-line"),
        html.H3("Correlation", id="correlation-title"),
        html.Table(id="correlation", className="correlation"),
        html.Div(id="together", className="together"),
    ]


def estimates_panel() -> list:
    return [
        html.P(id="plateau-line", className="story"),
        html.Table(
            className="metrics estimates",
            children=[html.Thead(html.Tr([html.Th("estimate"), html.Th("value"), html.Th("fit")])), html.Tbody(id="estimate-rows")],
        ),
        html.Table(
            className="metrics estimates",
            children=[html.Thead(html.Tr([html.Th("derived from the model"), html.Th()])), html.Tbody(id="derived-rows")],
        ),
    ]


def _setting(name: str, words: str, unit: str, options: str) -> html.Div:
    extra = []
    if name == "voltage_noise":
        title = "Judge it from this device's repeated sweeps under the same conditions"
        extra = [html.Button("from repeats", className="quiet", title=title, **{"data-act": "repeats"})]
    return html.Div(
        className="condition",
        **{"data-setting": name, "data-title": words, "data-options": options},
        children=[html.Span(words, className="label"), html.Span(className="value"), html.Span(unit, className="unit"), *extra],
    )
