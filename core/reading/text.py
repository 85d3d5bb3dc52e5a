"""Delimited text: which character divides the cells, which marks decimals, and the rows."""

from __future__ import annotations

import csv
import math
import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

from .header import is_entry
from .limits import MAX_COLUMNS
from .refusal import EXPORT_TEXT, Refusal
from .table import Block, Gatherer
from .thousands import (
    OTHER,
    WITHOUT,
    Doubt,
    lines_without_signs,
    looks_numeric,
    marks_of,
    may_be_grouped,
    plainly_decimal,
    ungroup,
)
from .units import parse_label, parse_unit, plain

# Lines looked at to find the delimiter; longer ones are cut.
_SAMPLE_LINES = 400
_DIALECT_LINES = 150  # each is cut and read in up to ten ways
_SAMPLE_WIDTH = 20_000
# Characters of a line that is looked at as a whole; 1000 columns of 40 characters.
_LONG_LINE = 40 * MAX_COLUMNS
# More blank lines than this share of the others: the file is double spaced, blanks divide nothing.
_DOUBLE_SPACED = 0.4
_COMMENT = re.compile(r"^\s*\"?\s*(#+|%+|//+|!+)\s*")
_NUMBER = re.compile(r"^[-+]?(\d+\.?\d*|\.\d+)([eEdD][-+]?\d{1,4})?$", re.ASCII)
_NUMBER_STARTS = tuple("+-−–.,0123456789")
# Two neighbouring cells that may be one number; behind a decimal comma ("-100,22 050") only without decimals.
_CUT_NUMBER = re.compile(r"[-+]?[1-9]\d{0,2} (\d{3})(?:[.,]\d*)?|\S*,[-+]?[1-9]\d{0,2} (\d{3})")
_POINTS_BETWEEN_THOUSANDS = re.compile(r"[-+]?[1-9]\d{0,2}(?:\.\d{3})+")
_PADDED = {",": re.compile(r",0\d\d(?!\d)"), None: re.compile(r"[ \t\u00a0]0\d\d(?!\d)")}
# Share of rows in which a divider must stand where a thousands sign would.
_MOST_ROWS = 0.9


@dataclass(frozen=True, slots=True)
class Dialect:
    delimiter: str | None  # None: runs of white space
    decimal: str  # "." or ","
    quoted: bool = False
    grouped: bool = False  # the other of "." and "," stands between thousands

    def cells(self, line: str) -> list[str]:
        if self.quoted and '"' in line:
            try:
                row = next(csv.reader([line], delimiter=self.delimiter or " ", skipinitialspace=True), [])
            except csv.Error:
                row = line.replace('"', "").split(self.delimiter)
            return [c.strip() for c in row if self.delimiter or c]
        return [c.strip() for c in line.split(self.delimiter)]

    def number(self, cell: str) -> float | None:
        """The number that a cell is, or None; inf and nan are not numbers here."""
        # Between commas, "100 220" is as likely the end of one decimal number and the start of the next.
        return number_in(cell, self.decimal, grouped=self.grouped, blanks=self.delimiter != ",")

    def split_heading(self, line: str, width: int) -> Sequence[str]:
        """A heading in as many cells as the table has columns, if any way of cutting gives that."""
        line = _COMMENT.sub("", line).strip("\n")
        candidates = [self.cells(line)]
        if len(candidates[0]) == width and (self.delimiter or _labels(candidates[0]) >= 2):
            return candidates[0]
        for delimiter in ("\t", ";", "|", ","):
            if delimiter in line:
                candidates.append([c.strip() for c in line.split(delimiter)])
        candidates.append([c.strip() for c in re.split(r"\s{2,}", line.strip())])
        candidates.append(_merged(line))
        words = line.split()
        if len(words) == 2 * width:  # "Voltage V Current mA"
            candidates.append([" ".join(pair) for pair in zip(words[::2], words[1::2], strict=True)])
        for cells in candidates:
            if len(cells) == width and _labels(cells):
                return cells
        return max(candidates, key=lambda cells: (_labels(cells), len(cells) == width))


def number_in(cell: str, decimal: str, *, grouped: bool = False, blanks: bool = True) -> float | None:
    """The number that a cell is, or None; ``grouped`` and ``blanks`` say which thousands signs it may have."""
    if len(cell) > 60:
        return None
    cell = cell.strip("\"' \u00a0").replace("−", "-").replace("–", "-")
    other = OTHER[decimal]
    if other in cell or " " in cell or "\u00a0" in cell:
        bare = ungroup(cell, decimal, grouped=grouped, blanks=blanks)
        if grouped and other in bare:
            return None
        cell = bare
    if decimal == ",":
        cell = cell.replace(",", ".") if cell.count(",") == 1 and "." not in cell else cell
    if not _NUMBER.match(cell):
        return None
    return float(cell.replace("d", "e").replace("D", "e"))


def _labels(cells: Sequence[str]) -> int:
    return sum(parse_label(c).kind is not None for c in cells[:50] if c)


def _merged(line: str) -> list[str]:
    """'Voltage (V) Current density (mA cm-2)' → two headings: a closing bracket ends one."""
    found = re.findall(r"[^()\[\]]+[(\[][^()\[\]]*[)\]]|[^()\[\]]+$", plain(line))
    cells = [c.strip() for c in found if c.strip()]
    if len(cells) > 1:
        return cells
    merged: list[str] = []
    for token in plain(line).split():
        if merged and (token.lower() in ("density", "/") or merged[-1].endswith("/") or _continues(merged[-1], token)):
            merged[-1] += " " + token
        else:
            merged.append(token)
    return merged


def _continues(before: str, token: str) -> bool:
    return parse_unit(token) is not None and token not in ("V", "A") and parse_label(before).factor is None


def read_text(text: str) -> list[Block]:
    """All blocks of numbers in a text.

    Raises
    ------
    Refusal
        If the text has no rows of numbers, or one column only.
    """
    if text.lstrip()[:1] == "{" or text.lstrip()[:2] in ("[[", "[{"):
        raise Refusal("this is a JSON file or the like, not a table of voltage and current", EXPORT_TEXT)
    lines = lines_without_signs(text)
    if not text.strip():
        raise Refusal("the file has nothing but blank lines", "Export the sweep again and drop that file")
    dialect = _dialect(lines)
    _refuse_commas_for_both(lines, dialect)
    if dialect.delimiter in _PADDED and _PADDED[dialect.delimiter].search(text):
        _refuse_divided_thousands(lines, dialect)
    dialect, doubt, note = _settled(lines, dialect)
    blanks = sum(1 for line in lines if not line or line.isspace())
    gatherer = Gatherer(
        split=dialect.split_heading,
        number=dialect.number,
        divided=dialect.delimiter is not None,
        heed_blanks=blanks < _DOUBLE_SPACED * (len(lines) - blanks),
    )
    _feed(lines, dialect, gatherer)
    blocks = gatherer.finish()
    if not blocks:
        if gatherer.stray_numbers:
            rows = "one row" if gatherer.stray_numbers == 1 else f"{gatherer.stray_numbers} rows"
            raise Refusal(
                f"the file has only {rows} of numbers",
                "A sweep needs at least three points; check that the export is complete",
            )
        raise Refusal("the text has no table of numbers", "A sweep needs a column of voltage and one of current")
    for block in blocks:
        block.doubt, block.note = doubt, note
    return blocks


def _feed(lines: list[str], dialect: Dialect, gatherer: Gatherer) -> None:
    delimiter, comma = dialect.delimiter, dialect.decimal == ","
    strip = " \t" if delimiter is None else delimiter + " \t"
    worded: tuple[int, ...] = ()  # columns of words in the last row that had numbers as well
    width = 0
    for number, line in enumerate(lines, 1):
        # The quick way for rows that are plain numbers; nearly all are.
        if len(line) > _LONG_LINE:
            line = _bounded(line, number, dialect)
        quick = line.replace(",", ".") if comma else line
        # Python's float takes digits of any script, mixed as well.
        slow = not line.isascii() or (dialect.grouped and OTHER[dialect.decimal] in line)
        try:
            values = [] if slow else list(map(float, quick.rstrip(strip).split(delimiter)))
        except ValueError:
            values = []  # as of a blank line between white space
        if values:
            if "n" in line or "N" in line:  # nan, inf
                values = [v if v == v else math.inf for v in values]
            gatherer.numbers(number, values)
            continue
        if worded and not slow:
            # The same for rows with a column of words, such as a time of day or "OK".
            cells = quick.split(delimiter)
            try:
                values = [math.nan if i in worded else float(c) for i, c in enumerate(cells)]
            except ValueError:
                values = []
            if len(values) == width and "n" not in line.lower():
                gatherer.numbers(number, values)
                continue
        if not line or line.isspace():
            gatherer.blank()
            continue
        comment = _COMMENT.match(line)
        bare = line[comment.end() :] if comment else line
        cells = dialect.cells(bare)
        if gatherer.mixed(number, bare, cells, comment is not None):
            width = len(cells)
            worded = tuple(i for i, cell in enumerate(cells) if dialect.number(cell) is None)
            if width - len(worded) < 2:
                worded = ()


def _bounded(line: str, number: int, dialect: Dialect) -> str:
    """A very long line: a table too wide, or prose that is cut."""
    start = dialect.cells(line[:_LONG_LINE])
    if sum(dialect.number(c) is not None for c in start) > MAX_COLUMNS // 10:
        raise Refusal(
            f"the table has more than {MAX_COLUMNS} columns",
            "Keep the columns of voltage and current and leave the others out",
            line=number,
        )
    return line[:_LONG_LINE]


def _refuse_commas_for_both(lines: list[str], dialect: Dialect) -> None:
    """'0,10,21,95' may be two numbers or four; a guess would be silent nonsense."""
    if dialect.delimiter != "," or dialect.decimal != ".":
        return
    rows = [line.strip().split(",") for line in lines[:_SAMPLE_LINES] if line[:1] in "+-0123456789" and line.strip()]
    rows = [row[:MAX_COLUMNS] for row in rows if len(row) == len(rows[0])]
    if len(rows) < 5 or len(rows[0]) % 2 or len(rows[0]) < 4:
        return
    headings = (dialect.cells(line[:_SAMPLE_WIDTH]) for line in lines[:_SAMPLE_LINES] if line.count(",") == len(rows[0]) - 1)
    if any(_labels(cells) >= 2 for cells in headings):
        return  # as many headings as cells: no comma is a decimal mark
    fractions = [cell for row in rows for cell in row[1::2]]
    pointed = [cell for row in rows for cell in row if "." in cell]
    if all(cell.isdigit() for cell in fractions) and all(_POINTS_BETWEEN_THOUSANDS.fullmatch(cell) for cell in pointed):
        if len({len(cell) for cell in fractions}) <= 2 and (pointed or max(map(len, fractions)) > 1):
            raise Refusal(
                "commas seem to divide the cells and to mark decimals as well",
                "Export again with semicolons between the cells, or with decimal points",
            )


def _refuse_divided_thousands(lines: list[str], dialect: Dialect) -> None:
    """'1,000,21,467' has commas between cells and between thousands; cut at each it would be other numbers."""
    if dialect.quoted:
        return
    padded = told = rows = 0
    widths, whole = set(), set()  # cells of the rows as they are cut, and with numbers put together
    for number, line in enumerate(lines, 1):
        if line.lstrip()[:1] not in _NUMBER_STARTS:
            continue
        cells = dialect.cells(line[:_SAMPLE_WIDTH])[:MAX_COLUMNS]
        cut = [_CUT_NUMBER.fullmatch(" ".join(pair)) for pair in zip(cells, cells[1:], strict=False)]
        groups = [found[1] or found[2] for found in cut if found]
        rows += 1
        told += bool(groups)
        widths.add(len(cells))
        whole.add(len(cells) - len(groups))
        if not padded and any(group[0] == "0" for group in groups):
            padded = number
    if padded and (told > _MOST_ROWS * rows or len(whole) == 1 < len(widths)):
        signs = "commas" if dialect.delimiter else "blanks"
        raise Refusal(f"{signs} seem to divide the cells and to stand between thousands as well", WITHOUT, line=padded)


def _settled(lines: list[str], dialect: Dialect) -> tuple[Dialect, Doubt | None, str]:
    """The dialect with what its points and commas mean, what stays in doubt of it, and a note."""
    decimal, other = dialect.decimal, OTHER[dialect.decimal]
    both = (other != dialect.delimiter or dialect.quoted) and may_be_grouped(lines, other)
    if not both and plainly_decimal(_rows(lines, dialect, decimal), decimal):
        return dialect, None, ""
    marks = marks_of(_rows(lines, dialect), decimal)
    return replace(dialect, decimal=marks.decimal, grouped=marks.grouped), marks.doubt, marks.note


def _rows(lines: list[str], dialect: Dialect, mark: str = "") -> Iterator[tuple[int, list[str]]]:
    """Lines that have the mark and at least two numbers, as cells."""
    for number, line in enumerate(lines, 1):
        if mark in line:
            cells = dialect.cells(line[:_SAMPLE_WIDTH])
            if sum(map(looks_numeric, cells)) >= 2:
                yield number, cells


def _dialect(lines: list[str]) -> Dialect:
    """The delimiter and decimal mark that make most rows of numbers."""
    # The beginning, the end and some in between: a short table under a long header must not be missed.
    step = max(1, len(lines) // _DIALECT_LINES)
    sample = lines if step == 1 else [*lines[:_DIALECT_LINES], *lines[::step], *lines[-_DIALECT_LINES // 5 :]]
    sample = [line[:_SAMPLE_WIDTH] for line in sample if line and not line.isspace()]
    sample = [line for line in sample if not _COMMENT.match(line) and not is_entry(line)]
    quoted = any('"' in line for line in sample)
    best, best_score = Dialect(None, "."), (0.0, 0)
    for rank, (delimiter, decimal) in enumerate(
        (("\t", "."), ("\t", ","), (";", "."), (";", ","), ("|", "."), ("|", ","), (",", "."), (None, "."), (None, ","))
        + (((",", ","),) if quoted else ())
    ):
        dialect = Dialect(delimiter, decimal, quoted)
        score = 0.0
        for line in sample:
            if delimiter is not None and delimiter not in line:
                continue
            if _all_numbers(line, dialect) >= 2:  # nearly every row of the right dialect, and much quicker
                score += 1.0
                continue
            cells = dialect.cells(line)
            if len(cells) < 2:
                continue
            numbers = sum(dialect.number(c) is not None for c in cells[:MAX_COLUMNS])
            others = sum(1 for c in cells[:MAX_COLUMNS] if c) - numbers
            if numbers >= 2:
                score += 1.0 if not others else numbers / (numbers + 2 * others)
        if score > 0 and (score, -rank) > best_score:
            best, best_score = dialect, (score, -rank)
    return best


def _all_numbers(line: str, dialect: Dialect) -> int:
    """How many cells a line has if all are plain numbers, else 0."""
    if "_" in line or "n" in line or "N" in line:  # 1_000, nan, inf: numbers to Python alone
        return 0
    try:
        return len(list(map(float, (line.replace(",", ".") if dialect.decimal == "," else line).split(dialect.delimiter))))
    except ValueError:
        return 0
