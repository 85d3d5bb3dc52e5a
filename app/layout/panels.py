"""The panels beside the numbers: what the fit is asked and what it cannot tell, and estimates by other methods."""

from dash import html

from app.ids import Id
from core.statements import TEXTS

SETTINGS = (
    ("model", "model", "", "one diode|two diodes"),
    ("window_low", "voltage from", "V", ""),
    ("window_high", "voltage to", "V", ""),
    ("weights", "weights", "", "automatic|uniform|relative|effective|from the file"),
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


def record_panel() -> list:
    """What the report and the verdict of a pair need to know and few files say."""
    return [
        html.P("How it was measured: for every sweep of this workspace whose file says nothing of it.", className="fit-line"),
        html.Div(className="stated", role="group", children=[_told(name) for name in TEXTS], **{"aria-label": "How it was measured"}),
        html.H3("How well it is known"),
        html.Div(
            className="conditions stated",
            role="group",
            **{"aria-label": "How well it is known"},
            children=[
                *(stated(name, words, title) for name, (words, title) in KNOWN.items()),
                stated_switch(),
            ],
        ),
    ]


KNOWN = {
    "area_uncertainty": ("area ±", "Standard uncertainty of each area"),
    "lamp_uncertainty": (
        "lamp ±",
        "Standard uncertainty of the irradiance of each measurement, without what all have in common",
    ),
}


def stated(name: str, words: str, title: str) -> html.Div:
    """A field for one uncertainty that the user states of the whole workspace."""
    return html.Div(
        [html.Span(words, className="label"), html.Span(className="value"), html.Span("%", className="unit")],
        className="condition known",
        title=title,
        **{"data-stated": name, "data-title": title},
    )


def stated_switch() -> html.Button:
    """The switch that says that all areas are those of one aperture."""
    title = "All devices were measured through the same aperture, so that its error is common to them"
    return html.Button("one aperture", role="switch", className="quiet", title=title, **{"data-stated-switch": "area_shared", "aria-checked": "false"})


def _told(name: str) -> html.Div:
    options = "|aperture|active|total" if name == "area_kind" else ""
    return html.Div(
        [html.Span(TEXTS[name], className="label"), html.Span(className="value"), html.Span(className="unit")],
        className="condition told",
        **{"data-stated": name, "data-title": TEXTS[name], "data-options": options},
    )


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
