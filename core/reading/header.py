"""Lines of 'key: value' above or below a table, and the conditions among them."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

from ..constants import ONE_SUN, ZERO_CELSIUS
from .limits import MAX_WORDS
from .units import plain
from .words import direction_in, light_in

_NUMBER = re.compile(r"[-+]?(?:\d+(?:[.,]\d*)?|[.,]\d+)(?:[eE][-+]?\d{1,3})?(?![\d.])")
_KEY_VALUE = re.compile(r"^\s*([^\W\d_][^:=\t;]{0,60}?)\s*(?::(?![\\/])|=|\t|;)\s*(.*)$")

# Words by which a key is known, the more telling first; a key is read once, at its first match.
_KEYS: tuple[tuple[str, re.Pattern[str]], ...] = tuple(
    (name, re.compile(pattern, re.IGNORECASE))
    for name, pattern in (
        ("delay", r"\bdelay|settling|dwell|verzögerung|wartezeit|haltezeit|integration"),
        ("precondition", r"precondition|pre-condition|light ?soak|vorbehandlung|vorbeleuchtung|konditionierung"),
        ("scan_rate", r"(scan|sweep|ramp)[ _-]*(rate|speed|velocity)|scanrate|(scan|sweep|mess)?geschwindigkeit|rampe"),
        ("direction", r"direction|richtung"),
        ("series_cells", r"cells? in series|series(-connected)?[ _]cells|in (reihe|serie)|number of cells|cell count"
                         r"|no\.? of cells|n_?cells|anzahl (der )?zellen|zellenzahl|zellzahl|^ns$"),
        ("irradiance", r"irradiance|intensity|intensität|intensitaet|bestrahlung|einstrahlung|beleuchtungsst|light level"
                       r"|lichtst|lichtint|\bsuns?\b|^sonnen$|power density of lamp|illumination ?\(?(m?w|suns?)"),
        ("temperature", r"temp(erature|eratur)?\b|^t$|^t[ _]?(cell|device|stage|chuck|zelle)"),
        ("area", r"\barea|fläche|flaeche|aperture|apertur\b|zellfl"),
        ("size", r"\b(cell|device|pixel) size|zellgröße|abmessung|dimensions?"),
        ("lit", r"^(light|illumination|illuminated|beleuchtung|beleuchtet|dark|dunkel|licht|lamp|lampe|shutter)\b"
                r"|measurement[ _](type|mode|kind)|^(mode|type|modus|messart|messtyp|art)$|(sweep|scan|curve) type"),
        ("pixel", r"^(pixel|px|pixel (id|no\.?|nr\.?|number|name)|pad|finger)$"),
        ("device", r"^(device|sample|cell|specimen|substrate|module|probe|zelle|bauteil|bauelement|solarzelle|modul"
                   r"|substrat)([ _-]*(id|name|no\.?|nr\.?|number|nummer|label|bezeichnung))?$"
                   r"|^(proben|zell|modul)-?(name|nummer|bezeichnung|id)$|^(sample|device|cell) ?(id|name)"),
    )
)  # fmt: skip
# Temperatures of something else than the device during the sweep.
_OTHER_TEMPERATURE = re.compile(r"(?i)anneal|temper[nu]|colou?r|farb|bak(e|ing)|deposit|coeff|koeff|dry|trock|sinter|evapor")
_PLAIN_ENTRY = re.compile(r"^\s*[^\W\d_][^:=\t;|]{0,60}[:=](?![\\/])")
_CELL_KEY = re.compile(r"^[^\W\d_][^\W\d_][^:=]*[:=]?$|^[TA]\s*[:=(\[/]?[^:=]*$")
_KNOWN_START = re.compile(
    r"(?i)^\s*((?:active |aperture |cell |device )?area|fläche|zellfläche|temperature|temperatur|irradiance|light intensity"
    r"|scan rate|sample|device|pixel|probe|zelle)\s+([^\s(\[].*)$"
)


@dataclass(frozen=True, slots=True)
class Recorded:
    """The conditions that a header states; None where it does not."""

    area: float | None = None
    temperature: float | None = None
    irradiance: float | None = None
    series_cells: int | None = None
    scan_rate: float | None = None
    direction: str | None = None
    lit: bool | None = None
    device: str | None = None
    pixel: str | None = None
    notes: tuple[str, ...] = field(default=())


def key_value(line: str, cells: Sequence[str] = ()) -> tuple[str, str] | None:
    """The key and value of a header line, or None if the line is something else.

    ``cells`` are the line's cells where a character divides them; the first is then the key,
    unless it holds key and value itself.
    """
    filled = [c.strip() for c in cells if c.strip()]
    if len(filled) > 1 and _CELL_KEY.match(filled[0]):
        return filled[0].rstrip(" :=")[:MAX_WORDS], " ".join(filled[1:4])[:MAX_WORDS]
    found = _KEY_VALUE.match(line[: 4 * MAX_WORDS]) or _KNOWN_START.match(line[: 4 * MAX_WORDS])
    if not found:
        return None
    key, value = found[1].strip(" \"'"), found[2].strip(" \t;,\"'")
    return (key, value[:MAX_WORDS]) if key and value else None


def is_entry(line: str) -> bool:
    """Whether a line is plainly a key, a colon or equals sign, and a value, whatever numbers are in it."""
    return _PLAIN_ENTRY.match(line) is not None


def recognise(header: Mapping[str, str]) -> Recorded:
    """Conditions among the header's entries, in core's units."""
    values: dict[str, object] = {}
    notes: list[str] = []
    for key, value in header.items():
        words = plain(key).replace("_", " ").strip()
        bare = re.sub(r"[(\[{].*?[)\]}]|/.*$", "", words).strip()
        name = next((name for name, pattern in _KEYS if pattern.search(bare) or pattern.search(words)), None)
        if name is None or (name == "temperature" and _OTHER_TEMPERATURE.search(words)):
            continue
        if name == "lit" and re.search(r"\d\s*(m?w\b|m?w/|m?w |suns?\b|sonnen)", plain(f"{value} {key}").lower()):
            name = "irradiance"  # "Lamp: 100 mW/cm²"
        read = _READERS.get(name)
        if read is None:
            continue
        result, note = read(bare, plain(value), _unit_text(words, plain(value)))
        if result is not None and values.get(name) is None:
            values[name] = result
            if note:
                notes.append(note)
        elif note:
            notes.append(note)
    if "size" in values and "area" not in values:
        values["area"] = values["size"]
    values.pop("size", None)
    return Recorded(**values, notes=tuple(notes))  # type: ignore


def _unit_text(key: str, value: str) -> str:
    """What stands behind the number, else what the key has in brackets or behind a stroke."""
    number = _NUMBER.search(value)
    behind = value[number.end() :].strip() if number else ""
    if behind:
        return behind
    found = re.search(r"[(\[{](.*?)[)\]}]|/\s*(.*)$", key)
    if found:
        return (found[1] or found[2] or "").strip()
    return key.rsplit(" ", 1)[-1] if " " in key else ""


def _number(value: str) -> float | None:
    found = _NUMBER.search(value)
    if not found:
        return None
    number = float(found[0].replace(",", "."))
    return number if math.isfinite(number) else None


def _squeezed(unit: str) -> str:
    return re.sub(r"[\s^*{}()\[\].]", "", unit).lower().replace("per", "/")


def _area(key: str, value: str, unit: str):
    number = _number(value)
    if number is None:
        return None, ""
    sides = re.match(rf"\s*({_NUMBER.pattern})\s*(\w*)\s*[x×]\s*({_NUMBER.pattern})\s*(\S*)", value)
    factor = _area_factor(unit)
    if sides:
        number = (_number(sides[1]) or 0.0) * (_number(sides[3]) or 0.0)
        factor = _area_factor(sides[4] or sides[2] or unit)
    note = ""
    if factor is None:
        factor, note = 1.0, f"The header's area ({value}) has no unit that is known: read as cm²."
    area = number * factor
    if not 1e-12 < area < 1e9:
        return None, f"The header's area ({value}) is not a size that a device can have: left out."
    return area, note


def _area_factor(unit: str) -> float | None:
    unit = _squeezed(unit).replace("sq", "")
    if unit.startswith("cm"):
        return 1.0
    if unit.startswith("mm"):
        return 1e-2
    if unit.startswith("um"):
        return 1e-8
    return 1e4 if unit in ("m", "m2") else None


def _temperature(key: str, value: str, unit: str):
    number = _number(value)
    if number is None:
        return None, ""
    unit = _squeezed(unit).replace("°", "").replace("deg", "")
    note = ""
    if unit.startswith("k"):
        kelvin = number
    elif unit.startswith("f"):
        kelvin = (number - 32) / 1.8 + ZERO_CELSIUS
    elif unit.startswith("c"):
        kelvin = number + ZERO_CELSIUS
    else:
        kelvin = number if number > 150 else number + ZERO_CELSIUS
        note = f"The header's temperature ({value}) has no unit that is known: read as {'K' if number > 150 else '°C'}."
    if not 50 <= kelvin <= 1000:
        return None, f"The header's temperature ({value}) cannot be one: left out."
    return kelvin, note


def _irradiance(key: str, value: str, unit: str):
    number = _number(value)
    if number is None:
        lit = light_in(value)
        return (0.0 if lit is False else None), ""
    unit = _squeezed(unit)
    note = ""
    if "sun" in unit or "sonne" in unit or ("sun" in key.lower() and "w" not in unit):
        watts = number * ONE_SUN
    elif re.search(r"mw(/cm|cm-)", unit):
        watts = number * 1e-3
    elif re.search(r"w(/cm|cm-)", unit):
        watts = number
    elif re.search(r"w(/m|m-)", unit):
        watts = number * 1e-4
    elif unit.startswith("%"):
        watts, note = number / 100 * ONE_SUN, f"The header's irradiance ({value}) is read as a share of one sun."
    elif unit.startswith(("lx", "lux", "klx")):
        return None, f"The header's irradiance ({value}) in lux cannot be turned into power without the spectrum."
    elif number <= 3:
        watts, note = number * ONE_SUN, f"The header's irradiance ({value}) has no unit that is known: read as suns."
    elif number < 200:
        watts, note = number * 1e-3, f"The header's irradiance ({value}) has no unit that is known: read as mW cm⁻²."
    else:
        watts, note = number * 1e-4, f"The header's irradiance ({value}) has no unit that is known: read as W m⁻²."
    if not 0 <= watts < 1e4:
        return None, f"The header's irradiance ({value}) cannot be one: left out."
    return watts, note


def _scan_rate(key: str, value: str, unit: str):
    number = _number(value)
    if number is None or not 0 < abs(number) < 1e9:
        return None, ""
    unit = _squeezed(unit)
    if unit.startswith("mv"):
        return abs(number) * 1e-3, ""
    if unit.startswith("v"):
        return abs(number), ""
    milli = abs(number) > 5
    note = f"The header's scan rate ({value}) has no unit that is known: read as {'mV' if milli else 'V'} s⁻¹."
    return abs(number) * (1e-3 if milli else 1.0), note


def _series_cells(key: str, value: str, unit: str):
    number = _number(value)
    if number is None or number != int(number) or not 1 <= number <= 10_000:
        return None, ""
    return int(number), ""


def _lit(key: str, value: str, unit: str):
    said = light_in(value)
    if said is not None:
        return said, ""
    dark_key = light_in(key) is False
    word = value.lower().strip()
    if word in ("on", "an", "ein", "yes", "ja", "true", "1", "open", "offen"):
        return not dark_key, ""
    if word in ("off", "aus", "no", "nein", "false", "0", "closed", "zu", "geschlossen"):
        return dark_key, ""
    return None, ""


def _direction(key: str, value: str, unit: str):
    return direction_in(value), ""


def _text(key: str, value: str, unit: str):
    value = " ".join(value.split())[:80]
    return (value or None), ""


_READERS = {
    "area": _area,
    "size": _area,
    "temperature": _temperature,
    "irradiance": _irradiance,
    "scan_rate": _scan_rate,
    "series_cells": _series_cells,
    "lit": _lit,
    "direction": _direction,
    "device": _text,
    "pixel": _text,
}
