"""Units and column labels, in the many ways that benches write them."""

from __future__ import annotations

import re
import unicodedata
from dataclasses import dataclass, field
from functools import lru_cache
from typing import Literal

from .limits import MAX_WORDS
from .words import direction_in, light_in

Kind = Literal["voltage", "current", "density", "other"]

# No M: nobody measures a solar cell in mega-anything, so that MV in capitals is mV.
_PREFIXES = {"": 1.0, "k": 1e3, "m": 1e-3, "u": 1e-6, "n": 1e-9, "p": 1e-12, "f": 1e-15}
_AREAS = {"cm": 1.0, "m": 1e-4, "mm": 1e2}  # per area → per cm²
_UNIT = re.compile(r"^([kMmunpf]?)([VA])(?:(?:/|per)(cm|mm|m)2|(cm|mm|m)-2)?$")
_OTHER_UNIT = re.compile(
    r"^(?:[kMmun]?(?:W|Wp)(?:/(?:cm|m)2|(?:cm|m)-2)?|[mun]?s|sec|min|h|[kM]?ohms?(?:\*?cm2)?|[kM]?Ω(?:cm2)?"
    r"|K|°?C|%|suns?|lx|lux|nm|Hz|#)$"
)
_WORDED = {
    "volt": "V", "volts": "V", "millivolt": "mV", "millivolts": "mV",
    "amp": "A", "amps": "A", "ampere": "A", "amperes": "A",
    "milliamp": "mA", "milliamps": "mA", "milliampere": "mA", "microamp": "uA", "microamps": "uA", "mikroampere": "uA",
    "sqcm": "cm2", "cm²": "cm2",
}  # fmt: skip

_VOLTAGE_WORDS = {"v", "u", "voltage", "spannung", "bias", "potential", "klemmenspannung", "vbias", "vdc", "uv"}
_CURRENT_WORDS = {"i", "current", "strom", "curr", "idc", "amperage", "photocurrent", "klemmenstrom"}
_DENSITY_WORDS = {"j", "density", "stromdichte", "jsc"}
_OTHER_WORDS = {
    "time", "zeit", "zeitstempel", "timestamp", "t", "power", "leistung", "p", "index", "nr", "no", "point", "punkt",
    "messpunkt", "resistance", "widerstand", "r", "temperature", "temperatur", "temp", "status", "irradiance",
    "log", "ln", "log10", "step", "cycle",
    "datum", "date", "id", "comment", "kommentar", "range", "lfd", "einstrahlung", "efficiency", "wirkungsgrad",
}  # fmt: skip
# With a current they name its standard deviation; of anything else the column is none that is read.
_ERROR_WORDS = {
    "error", "err", "fehler", "std", "stdev", "stddev", "sigma", "deviation", "uncertainty",
    "unsicherheit", "messunsicherheit", "standardabweichung",
}  # fmt: skip
# These say that it is no standard deviation of the current in its own right.
_RELATIVE_WORDS = {"rel", "relative", "relativ", "percent", "prozent", "expanded", "k", "code", "flag", "count", "max", "min"}
_SEVERAL_SIGMA = re.compile(r"(?<![a-z0-9])[2-9]\s*sigma")
_MAGNITUDE_WORDS = {"abs", "betrag", "absolute", "magnitude"}
_SET_WORDS = {"set", "source", "sourced", "src", "applied", "app", "soll", "prog", "programmed", "nominal", "vorgabe"}
_MEASURED_WORDS = {"meas", "measured", "sense", "sensed", "gemessen", "mess", "ist", "actual", "mpp"}
_JOINED = re.compile(
    r"^([viuj])(meas|measured|set|source|src|app|fwd|rev|forward|reverse|light|dark|mess|soll|ist|std|err|sigma|\d+)$"
    r"|^(std|err|sigma)([viuj])$"
)


@dataclass(frozen=True, slots=True)
class Unit:
    """A unit as what it measures and the factor to V, A or A cm⁻²."""

    kind: Kind
    factor: float = 1.0
    capital: bool = field(default=False, repr=False)  # written with M for milli


@dataclass(frozen=True, slots=True)
class Label:
    """What a column's heading says; None where it says nothing."""

    kind: Kind | None = None
    factor: float | None = None
    role: Literal["set", "measured"] | None = None
    direction: str | None = None
    lit: bool | None = None
    magnitude: bool = False
    rest: str = ""
    capital: bool = False  # its unit is written with M for milli
    error_of: Literal["current", "density"] | None = None  # whose standard deviation it is; the kind is then "other"


def plain(text: str) -> str:
    """Characters in one form: µ as u, ² as 2, every minus as -, no-break space as space."""
    # NFKC brings both micro signs, both ohm signs and superscripts together.
    return unicodedata.normalize("NFKC", text[:MAX_WORDS]).translate(_SAME)


_SAME = str.maketrans({"μ": "u", "−": "-", "–": "-", "‐": "-", "‑": "-", "⋅": "*", "·": "*", "∙": "*", "\ufeff": None})


@lru_cache(maxsize=2048)
def parse_unit(text: str) -> Unit | None:
    """The unit that a piece of text is, or None if it is none.

    >>> parse_unit("mA cm^-2")
    Unit(kind='density', factor=0.001)
    """
    text = plain(text).strip(" .,:;")
    text = " ".join(_WORDED.get(word.lower(), word) for word in text.split())
    text = re.sub(r"[\s*^{}().$\\_]", "", text).replace("æ", "u")  # æ: a micro sign read in the wrong code page
    if not text or len(text) > 20:
        return None
    if _OTHER_UNIT.match(text):
        return Unit("other")
    text = text.replace("sqcm", "cm2").replace("qcm", "cm2").replace("²", "2")
    found = _UNIT.match(text) or _UNIT.match(_loose_case(text))
    if not found:
        return None
    prefix, base, over, power = found.groups()
    area, factor, capital = over or power, _PREFIXES[prefix.replace("M", "m")], text[0] == "M"
    if base == "V":
        return None if area else Unit("voltage", factor, capital)
    if area:
        return Unit("density", factor * _AREAS[area], capital)
    return Unit("current", factor, capital)


def _loose_case(text: str) -> str:
    """'ma/CM2' → 'mA/cm2'; U is a voltage, not micro."""
    if text.startswith("U"):
        return ""
    lower = text.lower()
    return re.sub(r"^([kmunpf]?)([va])(?![a-z]*[b-ln-z])", lambda m: m[1] + m[2].upper(), lower)


@lru_cache(maxsize=4096)
def parse_label(text: str) -> Label:
    """What a heading such as 'Current density (mA/cm²)', 'U / V' or 'I_fwd_mA' says."""
    words = plain(text).replace("σ", " sigma ").strip().strip("\"'#% ")
    whole = parse_unit(words.strip("()[]"))
    if whole is not None and not re.search(r"[(\[]", words.strip("()[]")):
        return Label(kind=whole.kind, factor=whole.factor, capital=whole.capital)
    words, unit = _split_unit(words)
    tokens = [t for t in re.split(r"[^A-Za-zÀ-ÿ0-9]+", words) if t]
    kind, role, rest = None, None, []
    magnitude = "|" in words
    relative = "%" in text or _SEVERAL_SIGMA.search(words.lower()) is not None
    seen: set[str] = set()
    for token in tokens:
        lower = token.lower()
        joined = _JOINED.match(lower)
        parts = tuple(part for part in joined.groups() if part) if joined else (lower,)
        used = False
        for part in parts:
            if part in _OTHER_WORDS and not (len(part) == 1 and len(tokens) > 1):
                seen.add("other")
            elif part in _ERROR_WORDS:
                seen.add("error")
            elif part in _DENSITY_WORDS:
                seen.add("density")
            elif part in _CURRENT_WORDS:
                seen.add("current")
            elif part in _VOLTAGE_WORDS:
                seen.add("voltage")
            elif part in _MAGNITUDE_WORDS:
                magnitude = True
            elif part in _SET_WORDS:
                role = "set"
            elif part in _MEASURED_WORDS:
                role = "measured"
            else:
                relative = relative or part in _RELATIVE_WORDS
                used = used or direction_in(part) is not None or light_in(part) is not None
                continue
            used = True
        if not used:
            rest.append(token)
    if "error" in seen:
        error_of = None if relative else _error_of(seen, unit)
        factor = unit.factor if unit is not None and error_of is not None else None
        return Label("other", factor, role, direction_in(words), light_in(words), magnitude, " ".join(rest), error_of=error_of)
    for name in ("other", "density", "current", "voltage"):
        if name in seen:
            kind = name
            break
    if unit is not None and kind is not None and unit.kind != kind and {unit.kind, kind} != {"current", "density"}:
        kind = unit.kind if kind != "other" else "other"
    elif unit is not None and (kind is None or unit.kind == "density"):
        kind = unit.kind
    own = unit if unit is not None and unit.kind == kind else None
    factor, capital = (own.factor, own.capital) if own else (None, False)
    return Label(kind, factor, role, direction_in(words), light_in(words), magnitude, " ".join(rest), capital)


def _error_of(seen: set[str], unit: Unit | None) -> Literal["current", "density"] | None:
    """Whose standard deviation a heading names by its words and its unit; None where that is no current or in doubt."""
    if seen & {"other", "voltage"} or unit is not None and unit.kind not in ("current", "density"):
        return None
    if unit is not None:
        return unit.kind
    return "density" if "density" in seen else "current" if "current" in seen else None


def _split_unit(words: str) -> tuple[str, Unit | None]:
    """A heading without its unit, and the unit."""
    for found in reversed(list(re.finditer(r"[(\[<{]([^()\[\]<>{}]{1,30})[)\]>}]", words))):
        unit = parse_unit(found[1])
        if unit is not None:
            return words[: found.start()] + " " + words[found.end() :], unit
    for separator in ("/", " in ", ",", ";", ":", "_", " "):
        head, found, tail = words.partition(separator)
        while found:
            unit = parse_unit(tail)
            if unit is not None and head.strip():
                # 'Pixel A' is no current: a bare last letter needs a quantity that fits before it.
                said = parse_label(head)
                if separator not in (" ", "_", ",") or unit.kind in (said.kind, said.error_of, "density"):
                    return head, unit
            more, found, tail = tail.partition(separator)
            head += separator + more
    return words, None
