"""Points and commas in numbers: which marks decimals, and whether the other stands between thousands."""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np

from .refusal import Refusal

OTHER = {".": ",", ",": "."}
NAMES = {".": "point", ",": "comma"}
WITHOUT = "Write the numbers without thousands signs and export again"
_SHAPE = re.compile(r"[-+−–]?([\d.,]+)((?:[eEdD][-+−–]?\d+)?)")
_GROUPED = {
    decimal: re.compile(rf"[-+]?[1-9]\d{{0,2}}(?:\{other}\d{{3}})+(?:\{decimal}\d*)?") for decimal, other in OTHER.items()
}
_ONCE_GROUPED = {mark: re.compile(rf"(?<![\d.,])[1-9]\d{{0,2}}\{mark}\d{{3}}(?!\d)") for mark in OTHER}
# An apostrophe or a narrow blank between digits is a thousands sign whatever divides the cells.
_APOSTROPHES = re.compile(r"(?<![\d'’])([1-9]\d{0,2}(?:(?:'\d{3})+|(?:’\d{3})+|(?:[\u2009\u202f]\d{3})+))(?![\d'’])")
_HARD_BLANKS = re.compile(r"(?<![\d.,])([1-9]\d{0,2}(?:\u00a0\d{3})+)(?!\d)")
_BLANK_GROUPS = re.compile(r"[-+]?[1-9]\d{0,2}(?:[ \u00a0]\d{3})+(?:[.,]\d*)?")
_SIGNS = "'’\u2009\u202f\u00a0"
# How much less a column must run to and fro in one way of reading before that way is taken.
_CLEARLY_STEADIER = 0.8


@dataclass(frozen=True, slots=True)
class Doubt:
    """A mark that every number of a file has before exactly three digits; ``first`` is where, by column."""

    mark: str
    first: dict[int, tuple[int, str]]

    def refusal(self, column: int) -> Refusal:
        """The sentence for a column in which nothing tells the two readings apart."""
        line, cell = self.first[column]
        return _ambiguous(cell, self.mark, line)


@dataclass(frozen=True, slots=True)
class Marks:
    """How the numbers of a file are written."""

    decimal: str
    grouped: bool = False  # the other mark stands between thousands
    doubt: Doubt | None = None
    note: str = ""


def ungroup(cell: str, decimal: str, *, grouped: bool = False, blanks: bool = True) -> str:
    """A cell without its thousands signs, as far as they are beyond doubt; with ``grouped`` the other mark is one."""
    other = OTHER[decimal]
    if other in cell and (grouped or decimal in cell or cell.count(other) > 1) and _GROUPED[decimal].fullmatch(cell):
        return cell.replace(other, "")
    if blanks and _BLANK_GROUPS.fullmatch(cell):
        return cell.replace(" ", "").replace("\u00a0", "")
    return cell


def lines_without_signs(text: str) -> list[str]:
    """The lines with 1'000 as 1000, where the sign can be nothing else; lines of words stay as they are."""
    lines = text.split("\n")
    if not any(sign in text for sign in _SIGNS):
        return lines
    return [_without_signs(line) if any(sign in line for sign in _SIGNS) else line for line in lines]


def _without_signs(line: str) -> str:
    if line.lstrip(" \t\"'")[:1] not in tuple("+-−–0123456789"):
        return line
    line = _APOSTROPHES.sub(lambda found: re.sub(r"\D", "", found[1]), line)
    # A no-break space may divide the cells as well, unless something else does.
    if any(divider in line.strip() for divider in "\t;| "):
        line = _HARD_BLANKS.sub(lambda found: found[1].replace("\u00a0", ""), line)
    return line


def looks_numeric(cell: str) -> bool:
    """Whether a cell has nothing but digits and what stands between and before them."""
    return _SHAPE.fullmatch(cell.strip("\"' \u00a0")) is not None


def may_be_grouped(lines: Iterable[str], mark: str) -> bool:
    """Whether any line has the mark between digits as a thousands sign would stand."""
    return any(mark in line and _ONCE_GROUPED[mark].search(line) for line in lines)


def plainly_decimal(rows: Iterable[tuple[int, Sequence[str]]], mark: str) -> bool:
    """Whether the mark stands before decimals beyond doubt, or not at all; ends at the first number that tells."""
    seen = False
    for _, cells in rows:
        for cell in cells:
            if mark in cell:
                says = _says(cell, mark)
                if says == "decimal":
                    return True
                if says is not None:
                    seen = True
    return not seen


def marks_of(rows: Iterable[tuple[int, Sequence[str]]], decimal: str) -> Marks:
    """How numbers are written, judged by all of them; ``decimal`` is what they look like at first sight.

    Parameters
    ----------
    rows : iterable of (line, cells)
    decimal : "." or ","

    Raises
    ------
    Refusal
        If the numbers contradict each other.
    """
    rows = list(rows)
    said: dict[str, dict[str, tuple[int, int, str]]] = {".": {}, ",": {}}  # mark → what → where first
    first: dict[str, dict[int, tuple[int, str]]] = {".": {}, ",": {}}
    for line, cells in rows:
        for column, cell in enumerate(cells):
            for mark in OTHER:
                says = _says(cell, mark) if mark in cell else None
                if says is not None:
                    said[mark].setdefault(says, (line, column, cell))
                    first[mark].setdefault(column, (line, cell))
    for mark in (decimal, OTHER[decimal]):
        if "decimal" in said[mark]:
            other = said[OTHER[mark]]
            if "decimal" in other:
                return Marks(decimal)  # some cells have a point, others a comma
            return _grouped(mark, other)
    for mark in (decimal, OTHER[decimal]):
        if "thousands" in said[mark]:
            return _grouped(OTHER[mark], said[mark])
    open_marks = [mark for mark in (decimal, OTHER[decimal]) if said[mark]]
    if not open_marks:
        return Marks(decimal)
    mark = open_marks[0]
    line, _, cell = said[mark]["open"]
    if len(open_marks) == 2:
        other_cell = said[OTHER[mark]]["open"][2]
        raise Refusal(f"one of “{cell}” and “{other_cell}” has a thousands sign, and nothing tells which", WITHOUT, line=line)
    verdict = _by_run(rows, mark)
    if verdict == "both":
        raise _ambiguous(cell, mark, line)
    if verdict == "thousands":
        return _grouped(OTHER[mark], said[mark])
    return Marks(mark, doubt=None if verdict == "decimal" else Doubt(mark, first[mark]))


def _ambiguous(cell: str, mark: str, line: int) -> Refusal:
    return Refusal(
        f"“{cell}” may be {cell.replace(mark, '.')} or {cell.replace(mark, '')}, for its {NAMES[mark]} may mark decimals or "
        "thousands, and nothing in the file tells which",
        WITHOUT,
        line=line,
    )


def _grouped(decimal: str, other: dict[str, tuple[int, int, str]]) -> Marks:
    if not other:
        return Marks(decimal)
    _, _, cell = min(other.values())
    digits = cell.replace(OTHER[decimal], "").replace(",", ".")
    return Marks(decimal, grouped=True, note=f"A {NAMES[OTHER[decimal]]} stands between thousands: “{cell}” is read as {digits}.")


def _says(cell: str, mark: str) -> str | None:
    """What one number says of a mark in it: it is "decimal", "thousands" or "open"; None if it is no such number."""
    found = _SHAPE.fullmatch(cell.strip("\"' \u00a0"))
    if not found:
        return None
    body, exponent = found[1], found[2]
    other = OTHER[mark]
    if other in body or body.count(mark) > 1:
        if _GROUPED[mark].fullmatch(body):  # 1,234.5 for the point
            return "decimal" if mark in body else None
        return "thousands" if _GROUPED[other].fullmatch(body) else None
    lead, _, tail = body.partition(mark)
    if exponent or len(tail) != 3 or not 1 <= len(lead) <= 3 or lead[0] == "0":
        return "decimal"
    return "open"


def _by_run(rows: list[tuple[int, Sequence[str]]], mark: str) -> str | None:
    """The reading in which columns with and without the mark run steadily; "both" where they contradict, else None."""
    columns: dict[int, tuple[list[float], list[float], set[str]]] = {}
    for _, cells in rows:
        for index, cell in enumerate(cells):
            found = _SHAPE.fullmatch(cell.strip("\"' \u00a0"))
            if not found:
                continue
            body = found[1]
            marked = mark in body
            if _says(cell, mark) is None if marked else not body.isdecimal():
                continue  # 530.5.0000 is no number in either reading
            decimals, thousands, kinds = columns.setdefault(index, ([], [], set()))
            sign = -1.0 if cell.strip()[0] in "-−–" else 1.0
            decimals.append(sign * float(body.replace(mark, ".")))
            thousands.append(sign * float(body.replace(mark, "")))
            kinds.add("marked" if marked else "long" if len(body) > 3 else "short" if body.strip("0") else "zero")
    verdicts = set()
    for decimals, thousands, kinds in columns.values():
        if "marked" not in kinds or not kinds & {"short", "long"}:
            continue
        if "long" in kinds:  # 1234 beside 1,250: nobody groups one and not the other
            verdicts.add("decimal")
            continue
        as_decimals, as_thousands = _to_and_fro(decimals), _to_and_fro(thousands)
        if as_thousands < _CLEARLY_STEADIER * as_decimals:
            verdicts.add("thousands")
        elif as_decimals < _CLEARLY_STEADIER * as_thousands:
            verdicts.add("decimal")
        else:
            verdicts.add("open")
    if {"decimal", "thousands"} <= verdicts:
        return "both"
    if verdicts & {"decimal", "thousands"}:
        return (verdicts & {"decimal", "thousands"}).pop()
    return "both" if verdicts else None


def _to_and_fro(values: list[float]) -> float:
    """Way that a column runs, in spans; 1 where it never turns."""
    span = float(np.ptp(values))
    return float(np.sum(np.abs(np.diff(values)))) / span if span else 0.0
