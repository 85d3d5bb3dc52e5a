"""Words for direction and light, and what they leave of a name."""

from __future__ import annotations

import re

_FORWARD = {"fwd", "fw", "forward", "forwards", "vorwärts", "vorwaerts", "fwdscan"}
_REVERSE = {
    "rev", "rv", "reverse", "backward", "backwards", "bwd", "rückwärts", "rueckwaerts", "revscan",
}  # fmt: skip
# These mean a direction only where hardly another word stands beside them.
_LOOSE_FORWARD = {"up", "vor", "hin", "aufwärts"}
_LOOSE_REVERSE = {"down", "rück", "rueck", "zurück", "abwärts"}
_FEW_WORDS = 2
_DARK = {
    "dark", "dunkel", "dunkelkennlinie", "dunkelmessung", "darkiv", "darkjv", "unbeleuchtet", "unilluminated", "dkl",
}  # fmt: skip
_LIGHT = {
    "light", "lit", "hell", "hellkennlinie", "illuminated", "illumination", "beleuchtet", "licht", "lightiv",
    "lightjv", "1sun", "onesun", "am15", "am15g",
}  # fmt: skip
_FILLER = {"iv", "jv", "ui", "scan", "sweep", "kennlinie", "curve", "messung", "measurement", "run", "data", "daten"}
# Words that name no device, whatever they stand beside.
_GENERIC = {
    "abs", "all", "avg", "average", "averaged", "col", "cols", "column", "columns", "corrected", "copy", "export", "file", "final",
    "log", "lin", "mean", "out", "output", "raw", "results", "result", "summary", "table", "tabelle",
    "values", "werte", "ergebnis", "ergebnisse", "kopie", "and", "und", "both", "pair", "txt", "csv",
}  # fmt: skip
_DATE = re.compile(r"(19|20)\d\d([ _.-]?\d\d){0,2}|\d\d[ _.-]\d\d[ _.-](19|20)\d\d")
_SUFFIXES = _FORWARD | _REVERSE | _LOOSE_FORWARD | _LOOSE_REVERSE | _DARK | _LIGHT | _FILLER
_GLUED = re.compile(r"(?i)^(.*\d)(fwd|forward|rev|reverse|dark|light|dunkel|hell)$")
_GENERIC_SHEET = re.compile(r"(?i)^(sheet|tabelle|table|blatt|feuille|hoja|data|daten|iv|jv|sweep|raw|messung)[\s_]*\d*$")
_SUNS = re.compile(r"(?i)(?<![A-Za-z0-9])(\d{1,4}(?:[.,p]\d{1,4})?)[\s_-]?suns?(?![A-Za-z])")
_NUMBERED_FILLER = re.compile(r"^(scan|sweep|run|iv|jv|messung)\d+$")

_GERMAN = {"spannung", "strom", "stromdichte", "leistung", "zeit", "messpunkt", "fläche", "flaeche", "betrag"}


def is_german(headings: str) -> bool:
    """Whether headings are German, so that a comma is the decimal mark to expect."""
    return not _GERMAN.isdisjoint(_tokens(headings))


def _tokens(text: str) -> list[str]:
    return [t for t in re.split(r"[^A-Za-zÀ-ÿ0-9]+", text.lower()) if t]


def direction_in(text: str) -> str | None:
    """'forward', 'reverse', or None where the words name neither or both."""
    tokens = set(_tokens(text))
    forward, reverse = tokens & _FORWARD, tokens & _REVERSE
    if len(tokens) <= _FEW_WORDS:
        forward, reverse = tokens & (_FORWARD | _LOOSE_FORWARD), tokens & (_REVERSE | _LOOSE_REVERSE)
    if bool(forward) == bool(reverse):
        return None
    return "forward" if forward else "reverse"


def light_in(text: str) -> bool | None:
    """True for light, False for dark, None where the words name neither or both."""
    tokens = set(_tokens(text))
    dark, light = tokens & _DARK, tokens & _LIGHT
    if bool(dark) == bool(light):
        return None
    return bool(light)


def from_file_name(stem: str) -> tuple[str | None, bool | None]:
    """Direction and light that a file's stem names, short letters at its end included."""
    tokens = [_t for t in re.split(r"[^A-Za-zÀ-ÿ0-9]+", stem) if t for _t in _unglue(t)]
    direction, lit = direction_in(" ".join(tokens)), light_in(" ".join(tokens))
    for token in _short_tail(tokens):
        direction = direction or {"f": "forward", "r": "reverse"}.get(token)
        if lit is None:
            lit = {"d": False, "l": True}.get(token)
    return direction, lit


def suns_in(text: str) -> float | None:
    """Light level that a name states, in suns: 'K07_0p5sun' → 0.5."""
    found = _SUNS.search(text)
    return None if found is None else float(re.sub("[,pP]", ".", found[1]))


def device_in(name: str) -> str:
    """A file's or sheet's name without words for direction, light and scan; '' if nothing is left that names a device.

    Words before the rest go only if the rest looks like a device, for files that have no more in common than a word
    would else share one.

    >>> device_in("K07_fwd"), device_in("dark_K07"), device_in("control_fwd"), device_in("jv_control_fwd")
    ('K07', 'K07', 'control', 'jv_control')
    """
    name = _SUNS.sub(" ", name).strip()
    pieces = re.findall(r"[A-Za-zÀ-ÿ0-9]+|[^A-Za-zÀ-ÿ0-9]+", name)
    pieces = [p for piece in pieces for p in _unglue(piece)]
    words = [p for p in pieces if p[0].isalnum()]
    short = len(_short_tail(words))
    changed = True
    while changed:
        changed = False
        while pieces and not pieces[-1][0].isalnum() and pieces[-1][-1] not in ")]":
            pieces.pop()
        words = [i for i, p in enumerate(pieces) if p[0].isalnum()]
        if not words:
            return ""
        last = pieces[words[-1]]
        before = pieces[words[-2]] if len(words) > 1 else ""
        if _is_suffix(last) or (short and len(last) == 1 and last in "dlfr" and len(words) > 1):
            del pieces[words[-1] :]
            short -= 1 if len(last) == 1 else 0
            changed = True
        elif last.isdigit() and len(last) <= 3 and _is_suffix(before):
            del pieces[words[-1] :]  # 'fwd 2' counts the scans; 'pixel 2' names the pixel
            changed = True
    whole = "".join(pieces).strip(" _-.,;")
    while pieces and (not pieces[0][0].isalnum() or _is_suffix(pieces[0])) and pieces[0][0] not in "([":
        pieces.pop(0)
    rest = "".join(pieces).strip(" _-.,;")
    if all(token in _GENERIC or _is_suffix(token) for token in _tokens(rest)):
        return ""
    return rest if _looks_like_a_device(rest) else whole


def _looks_like_a_device(name: str) -> bool:
    """A number that is no date, or a word of capitals: 'K07', 'pixel 3', 'B'."""
    without_dates = _DATE.sub("", name)
    return any(c.isdigit() for c in without_dates) or any(word.isupper() for word in re.findall(r"[A-Za-zÀ-ÿ]+", without_dates))


def device_of_sheet(sheet: str, stem_device: str) -> str:
    """The device that a sheet of a spreadsheet holds."""
    if _GENERIC_SHEET.match(sheet.strip()):
        return stem_device
    device = device_in(sheet)
    if not device:
        return stem_device
    if re.fullmatch(r"(?i)(pixel|px|pix|cell|zelle|p)?[\s_-]*([0-9]{1,2}|[A-Za-z])", device) and stem_device:
        return f"{stem_device} {device}"
    return device


def _is_suffix(word: str) -> bool:
    lower = word.lower()
    return lower in _SUFFIXES or _NUMBERED_FILLER.match(lower) is not None


def _unglue(token: str) -> list[str]:
    glued = _GLUED.match(token)
    return [glued[1], glued[2]] if glued else [token]


def _short_tail(words: list[str]) -> list[str]:
    """Lower-case d, l, f, r at the end of a name; capitals are left alone, they name pixels."""
    tail: list[str] = []
    for word in reversed(words[1:]):
        if word in ("d", "l", "f", "r"):
            tail.append(word)
        elif not (_is_suffix(word) or (word.isdigit() and len(word) <= 3)):
            break
    return tail
