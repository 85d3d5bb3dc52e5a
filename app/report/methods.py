"""How the numbers of a report were made, and where each method was published."""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import dataclass

from app.telling import EMISSIONS


@dataclass(frozen=True)
class Method:
    """A method that the report used.

    Attributes
    ----------
    name, how : str
    sources : tuple of str
        As the modules of core cite them.
    topic : str
        Named where the report uses it; "" for what every report uses.
    """

    name: str
    how: str
    sources: tuple[str, ...] = ()
    topic: str = ""


METHODS = (
    Method(
        "Figures of merit",
        "Read off the points, never off a model: local fits around V = 0, J = 0 and the largest power, over windows that "
        "grow as long as their estimates agree within noise. Nothing is extrapolated.",
        ("A. Goldenshluger, A. Nemirovski, Math. Methods Stat. 6 (1997) 135",),
    ),
    Method(
        "Their uncertainties",
        "Standard uncertainties from the scatter of the points about the local fits. Area, lamp and temperature are not in them.",
    ),
    Method(
        "One-diode model",
        "J = Jph − J0·(exp((V + J·Rs)/(n·Ns·kT/q)) − 1) − (V + J·Rs)/Rsh, solved exactly with the Wright omega function.",
        topic="one diode",
    ),
    Method(
        "Two-diode model",
        "The same with J0₁ and n₁, J0₂ and n₂ of two diodes in parallel, solved exactly in the junction voltage V + J·Rs.",
        topic="two diodes",
    ),
    Method(
        "Refining",
        "Bounded least squares with an analytic Jacobian, from several starts where the first does not reach the noise.",
        ("D. W. Marquardt, J. Soc. Ind. Appl. Math. 11 (1963) 431",),
        topic="refined",
    ),
    Method(
        "Parameter uncertainties",
        "Standard errors from the covariance at the minimum, scaled by the residual: fit noise only.",
        topic="refined",
    ),
    Method(
        "Intervals by profile likelihood",
        "A parameter moves, all others adjust, until the sum of squares has grown by the factor 1 + t²/ν; where the data only "
        "bound it, the interval is open.",
        ('D. M. Bates, D. G. Watts, "Nonlinear Regression Analysis and Its Applications", Wiley 1988',),
        topic="profile",
    ),
    Method("Linear intervals", "From the covariance at the minimum, where a profile cannot be had.", topic="linear"),
    Method(
        "Robust loss",
        "Points beyond a few noise widths count less.",
        ("P. J. Huber, Ann. Math. Stat. 35 (1964) 73",),
        topic="robust",
    ),
    *(
        Method(
            "Detailed-balance limit",
            f"Every photon of AM1.5G above the band gap gives one electron; black-body emission from {faces} is the only "
            "recombination.",
            ("W. Shockley, H. J. Queisser, J. Appl. Phys. 32 (1961) 510", "ASTM G173-03"),
            topic=emission,
        )
        for emission, faces in EMISSIONS.items()
    ),
    Method(
        "External radiative efficiency",
        "exp[(Voc − Vrad)/(kT/q)] with Vrad the voltage at which emission alone would carry Jsc.",
        ("U. Rau, Phys. Rev. B 76 (2007) 085303", "M. A. Green, Prog. Photovolt. 20 (2012) 472"),
        topic="losses",
    ),
    Method(
        "Shares of the mechanisms",
        "The power of all 32 mixtures of the two states is computed exactly; a mechanism's share is its gain averaged over "
        "all orders of change; one after another, they depend on the order that is given. Intervals by drawing the fits within their covariances.",
        ('L. S. Shapley, "A value for n-person games", Contributions to the Theory of Games II (1953) 307',),
        topic="shares",
    ),
    Method(
        "Whether a difference stands out",
        "Known contributions combined in quadrature and expanded to 95 %; noise of the points alone never decides.",
        ("JCGM 100:2008, Guide to the expression of uncertainty in measurement",),
        topic="pair",
    ),
    Method(
        "Hysteresis index",
        "(P reverse − P forward)/P reverse of the largest powers; one of several definitions in use.",
        ("S. N. Habisreutinger, N. K. Noel, H. J. Snaith, ACS Energy Lett. 3 (2018) 2472",),
        topic="hysteresis",
    ),
)


def methods_for(topics: Collection[str]) -> list[Method]:
    """The methods that a report on these topics used."""
    return [method for method in METHODS if not method.topic or method.topic in topics]
