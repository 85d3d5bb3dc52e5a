"""The right side: dials, fit buttons, metrics, conditions and findings.

Dials and input fields are put in by the page's own script, which writes into them while a hand moves; the rest is
laid out here.
"""

from dash import html

from app.ids import Id
from app.readout import UNIT_GIVEN
from core.sweep import CURRENT_UNITS

from .panels import estimates_panel, fit_panel, record_panel

METRIC_LABELS = {
    "jsc": ("J", "sc"),
    "voc": ("V", "oc"),
    "fill_factor": ("FF", ""),
    "efficiency": ("PCE", ""),
    "pmp": ("P", "mp"),
    "jmp": ("J", "mp"),
    "vmp": ("V", "mp"),
}

CONDITION_LABELS = {
    "area": ("area", "cm²"),
    "file_area": ("area in the file", "cm²"),
    "temperature": ("temperature", "°C"),
    "irradiance": ("irradiance", "mW cm⁻²"),
    "series_cells": ("cells in series", ""),
    "lit": ("measured in", ""),
    "units": ("current read as", ""),
    "group": ("group", ""),
}

CONDITION_CHOICES = {"lit": ("light", "dark"), "units": (*CURRENT_UNITS, UNIT_GIVEN)}


def side() -> html.Aside:
    return html.Aside(
        className="side",
        **{"aria-label": "Dials and numbers"},
        children=[
            html.Div(className="dials", id="dials", role="group", **{"aria-label": "Dials"}),
            html.Div(
                className="fit-row",
                children=[
                    html.Button(
                        "first guess",
                        id=Id.FIRST_GUESS,
                        className="plain",
                        title="Read parameters off the sweep (G)",
                        **{"data-act": "first-guess"},
                    ),
                    html.Button(
                        "refine", id=Id.REFINE, className="strong", title="Least squares from here (R)", **{"data-act": "refine"}
                    ),
                ],
            ),
            html.Div(id="fit-line", className="fit-line"),
            html.Div(id="fit-caution", className="fit-caution", role="status"),
            html.Div(
                className="tabs",
                role="radiogroup",
                **{"aria-label": "Panel"},
                children=[
                    html.Button(words, role="radio", className="quiet", **{"data-panel-choice": name, "aria-checked": "false"})
                    for name, words in (("numbers", "numbers"), ("fit", "fit"), ("estimates", "estimates"), ("record", "record"))
                ],
            ),
            html.Div(
                className="panel",
                **{"data-panel": "numbers"},
                children=[
                    _metrics(),
                    _conditions(),
                    html.Div(id="findings", className="findings", **{"aria-label": "Checks"}),
                ],
            ),
            html.Div(className="panel", **{"data-panel": "fit"}, children=fit_panel()),
            html.Div(className="panel", **{"data-panel": "estimates"}, children=estimates_panel()),
            html.Div(className="panel", **{"data-panel": "record"}, children=record_panel()),
        ],
    )


def _metrics() -> html.Table:
    head = html.Tr([html.Th(), html.Th("measured"), html.Th("model"), html.Th("difference"), html.Th()])
    return html.Table(className="metrics", children=[html.Thead(head), html.Tbody([_metric(n) for n in METRIC_LABELS])])


def _metric(name: str) -> html.Tr:
    letter, index = METRIC_LABELS[name]
    symbol = [html.Span(letter, className="letter" if letter == "J" else ""), html.Sub(index)]
    cells = [html.Td(className=column, **{"data-column": column}) for column in ("measured", "model", "difference", "unit")]
    return html.Tr([html.Th(symbol, scope="row"), *cells], **{"data-metric": name})


def _conditions() -> html.Div:
    return html.Div(
        className="conditions",
        role="group",
        **{"aria-label": "Conditions"},
        children=[
            html.Div(
                className="condition",
                **{"data-condition": name, "data-title": label, "data-options": "|".join(CONDITION_CHOICES.get(name, ()))},
                children=[
                    html.Span(label, className="label"),
                    html.Span(className="value"),
                    html.Span(unit, className="unit"),
                    html.Button("assumed", className="assumed", title="Not in the file. Press to confirm."),
                ],
            )
            for name, (label, unit) in CONDITION_LABELS.items()
        ],
    )
