"""The five mechanisms: one hue, one shape and one symbol each, everywhere on the screen.

Hues: the colour set of M. Okabe and K. Ito, "Color universal design" (2008), from memory;
five of its eight that colour-blind readers tell apart. Shapes double the hue, for print and for eyes that need it.
"""

from dataclasses import dataclass, replace


@dataclass(frozen=True)
class Mechanism:
    """How one parameter of the diode equation appears.

    Attributes
    ----------
    parameter : str
        Name in core.
    title : str
        In words.
    symbol, index : str
        Letter and subscript; a ``J`` becomes ``I`` where no area is known.
    hue : str
    shape : str
        SVG path in a box of 16 by 16.
    loss : str
        What it is called where power is counted; see ``loss_names`` for the shunt.
    hatch : str
        Plotly's name of the fill pattern on bars.
    """

    parameter: str
    title: str
    symbol: str
    index: str
    hue: str
    shape: str
    loss: str
    hatch: str


MECHANISMS = (
    Mechanism("photocurrent", "photocurrent", "J", "ph", "#E69F00", "M8 1.5A6.5 6.5 0 1 0 8 14.5A6.5 6.5 0 1 0 8 1.5Z",
              "photocurrent", ""),
    Mechanism("saturation_current", "saturation current", "J", "0", "#0072B2", "M2.5 2.5H13.5V13.5H2.5Z",
              "voltage (recombination)", "/"),
    Mechanism("ideality", "ideality factor", "n", "", "#CC79A7", "M8 0.5L15.5 8L8 15.5L0.5 8Z",
              "ideality", "."),
    Mechanism("series_resistance", "series resistance", "R", "s", "#009E73", "M8 1L15.5 14H0.5Z",
              "series resistance", "\\"),
    Mechanism("shunt_resistance", "shunt resistance", "R", "sh", "#D55E00", "M0.5 2H15.5L8 15Z",
              "shunt or collection", "x"),
)


def loss_names(shunt_confirmed: bool) -> dict[str, str]:
    """What mechanisms are called where power is counted; a shunt is one only if the dark sweep confirms it."""
    return {m.parameter: "shunt" if shunt_confirmed and m.parameter == "shunt_resistance" else m.loss for m in MECHANISMS}


BY_PARAMETER = {mechanism.parameter: mechanism for mechanism in MECHANISMS}


def _twice(parameter: str, number: int, index: str) -> Mechanism:
    of_one = BY_PARAMETER[parameter]
    return replace(of_one, parameter=f"{parameter}_{number}", title=f"{of_one.title} {number}", index=index)


# With two diodes a mechanism that comes twice keeps hue and shape; the index tells the two apart.
BY_PARAMETER |= {
    m.parameter: m
    for m in (
        _twice("saturation_current", 1, "01"),
        _twice("saturation_current", 2, "02"),
        _twice("ideality", 1, "1"),
        _twice("ideality", 2, "2"),
    )
}


def style_sheet() -> str:
    """Hues and shapes as CSS variables, so that the style sheets repeat none of them."""
    rules = [f"--{m.parameter.replace('_', '-')}:{m.hue};" for m in MECHANISMS]
    shapes = [
        f"[data-parameter={m.parameter}]{{--hue:{m.hue}}}"
        f"[data-parameter={m.parameter}] .mark{{clip-path:path('{m.shape}')}}"
        for m in BY_PARAMETER.values()
    ]
    return ":root{" + "".join(rules) + "}" + "".join(shapes)
