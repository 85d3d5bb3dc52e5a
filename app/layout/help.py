"""The help sheet: keys, what the handles do, and cautions."""

from dash import html

KEYS = (
    ("Tab", "from the plot to its grips, from grip to grip, dial to dial"),
    ("arrow keys", "move the focused handle, with Shift ten times as far; or the focused slider, with Shift keeping Jsc and Voc"),
    ("PageUp, PageDown", "move the focused handle or slider far"),
    ("Enter in a number field", "takes the number; with Shift it keeps Jsc and Voc"),
    ("Esc", "give up the drag, or close this sheet"),
    ("G", "first guess"),
    ("R", "refine"),
    ("H", "hold or free the parameter of the focused handle or dial"),
    ("+ −", "zoom, about the focused handle or the middle of the plot"),
    ("Shift and arrow keys on the plot", "pan"),
    ("0", "the whole view"),
    (
        "E",
        "leave points out: ← → (Home, End, PageUp, PageDown) go from point to point, Space leaves one out or takes it back, "
        "Shift+Space does so with all from the last one to here; or draw a box over points; Esc ends it",
    ),
    ("X", "on the pair screen: exchange A and B"),
    ("P", "on the losses screen: projector; arrow keys go from device to device"),
    ("1, 2, 3", "strip: residuals, semi-log, local ideality"),
    ("↑ ↓ in the tray", "next sweep; Space lays it beside the active one; F2 renames it, Shift+F2 its device; Delete removes"),
    ("Ctrl+Z, Ctrl+Shift+Z", "undo, redo"),
    ("wheel, drag, double click", "zoom, pan, whole view by the pointer"),
)

CAUTIONS = (
    "Lamps of solar simulators emit strong ultraviolet and visible light: eye and skin protection, no look into the beam.",
    "Lamps and stages stay hot. Source-meter outputs and module strings stay live as long as there is light.",
    "Some devices contain lead or traces of solvents. Local rules and trained staff decide.",
    "Results are not a certified calibration.",
)


def help_sheet() -> html.Div:
    return html.Div(
        className="help",
        role="dialog",
        hidden=True,
        **{"aria-label": "Help and keys"},
        children=[
            html.Button("close", className="quiet", **{"data-act": "help"}),
            html.H2("Keys"),
            html.Dl([item for key, what in KEYS for item in (html.Dt(key), html.Dd(what))]),
            html.H2("Handles"),
            html.P(
                "Five grips sit on the lit curve. At V = 0: photocurrent. At J = 0: saturation current. At the knee: ideality. "
                "On the fall: series resistance. On the plateau: shunt. The last three keep Jsc and Voc. "
                "Dials move their parameter alone; with Shift they keep Jsc and Voc."
            ),
            html.H2("Cautions"),
            html.Ul([html.Li(sentence) for sentence in CAUTIONS]),
        ],
    )
