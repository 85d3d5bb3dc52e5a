"""Rows of cells, from text or a sheet, gathered into blocks of numbers with what stands above them."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np

from .header import is_entry, key_value
from .limits import (
    MAX_CELLS,
    MAX_COLUMNS,
    MAX_HEADER,
    MAX_TEXT_LINES,
    MAX_WORDS,
    MIN_POINTS,
)
from .refusal import EXPORT_TEXT, Refusal
from .thousands import Doubt
from .units import parse_label
from .words import direction_in, light_in

Cell = str | float | None

# Source-meters write these where a reading failed or ran over.
_MARKERS = re.compile(
    r"(?i)^(nan|n/?a|#n/?a|#num!?|#wert!?|#value!?|#div/0!?|#zahl!?|[-+]?inf(inity)?|overflow|over|ovf|ovld|ol|"
    r"overload|compliance|cmpl|comp|err(or)?|fehler|invalid|null|none|-+|#+|\*+|\?+|[-+]?1\.#(inf|qnan|ind)\d*)$"
)
_KEY_START = re.compile(r"^[^\W\d_]{2}")
# Larger than any reading; source-meters write 9.9e37 for "over range".
_OVER_RANGE = 1e30
# Words of a line that may name the direction or light of the table under it.
_TITLE_WORDS = 4
# How far above the numbers a heading may stand.
_LABEL_ROWS = 4


@dataclass(slots=True)
class Block:
    """One run of rows with numbers, and the words that belong to it.

    ``values`` has NaN where a cell is empty and inf where the file marks a reading as void; ``broken`` maps
    (row, column) to text that stands where a number should. ``doubt`` is what is open in how the file writes
    its numbers, and ``note`` says what is peculiar in it.
    """

    values: np.ndarray
    lines: np.ndarray
    broken: dict[tuple[int, int], str]
    labels: tuple[tuple[str, ...], ...]
    header: dict[str, str]
    words: str
    doubt: Doubt | None = None
    note: str = ""


@dataclass(slots=True)
class _TextRow:
    line: int
    raw: str
    cells: tuple[str, ...]
    has_number: bool


@dataclass(slots=True)
class Gatherer:
    """Takes rows in order and gives blocks; ``split`` cuts a heading into cells for a width."""

    split: Callable[[str, int], Sequence[str]]
    number: Callable[[str], float | None]
    heed_blanks: bool = True
    divided: bool = True  # whether cells are cells; False where white space divides words as well
    blocks: list[Block] = field(default_factory=list)
    stray_numbers: int = 0
    _rows: list[list[float]] = field(default_factory=list)
    _lines: list[int] = field(default_factory=list)
    _broken: dict[tuple[int, int], str] = field(default_factory=dict)
    _pending: list[_TextRow] = field(default_factory=list)
    _header: dict[str, str] = field(default_factory=dict)
    _headings: list[_TextRow] = field(default_factory=list)
    _labels: tuple[tuple[str, ...], ...] = ()
    _words: str = ""
    _width: int = 0
    _gap: bool = False
    _cells: int = 0
    _text_rows: int = 0

    def numbers(self, line: int, values: list[float]) -> None:
        """A row that is all numbers."""
        if self._pending or self._gap:
            self._settle(len(values))
        width = len(values)
        if width != self._width:
            if width > self._width and self._rows and len(self._rows) < MIN_POINTS:
                self._close()
                # The headings were cut to the width of the rows that are dropped.
                self._labels = tuple(self._cut(row, width) for row in self._headings)
            if width > MAX_COLUMNS:
                raise Refusal(
                    f"the table has more than {MAX_COLUMNS} columns",
                    "Keep the columns of voltage and current and leave the others out",
                    line=line,
                )
            self._width = max(width, self._width)
        self._cells += width
        if self._cells > MAX_CELLS:
            raise Refusal(f"the file has more than {MAX_CELLS:,} cells", "Split it into smaller files", line=line)
        self._rows.append(values)
        self._lines.append(line)

    def blank(self) -> None:
        if self.heed_blanks:
            self._gap = True

    def mixed(self, line: int, raw: str, cells: Sequence[Cell], comment: bool = False) -> bool:
        """A row with something that is not a number; says whether it is a row of the table all the same."""
        if len(cells) > MAX_COLUMNS and not comment:
            cells = cells[: MAX_COLUMNS + 1]
        values: list[float] = []
        broken: list[tuple[int, str]] = []
        numeric = filled = markers = 0
        for column, cell in enumerate(cells):
            if cell is None or cell == "":
                values.append(math.nan)
                continue
            filled += 1
            if isinstance(cell, float):
                value: float | None = cell
            else:
                value = self.number(cell)
            if value is None:
                if _MARKERS.match(cell):
                    markers += 1
                    values.append(math.inf)
                else:
                    broken.append((column, cell[:MAX_WORDS]))
                    values.append(math.nan)
                continue
            numeric += 1
            values.append(math.inf if math.isnan(value) else value)
        if not filled:
            self.blank()
            return False
        if not comment and not is_entry(raw) and self._is_data(cells, numeric, filled, markers):
            while values and math.isnan(values[-1]) and not (broken and broken[-1][0] == len(values) - 1):
                values.pop()
            self.numbers(line, values)
            row = len(self._rows) - 1
            for column, text in broken:
                self._broken[row, column] = text
            return True
        self._text_rows += 1
        if self._text_rows > MAX_TEXT_LINES:
            raise Refusal(f"the file has more than {MAX_TEXT_LINES:,} lines of words", EXPORT_TEXT, line=line)
        words = tuple("" if c is None else str(c)[:MAX_WORDS] for c in cells)
        self._pending.append(_TextRow(line, raw, words, numeric > 0))
        return False

    def _is_data(self, cells: Sequence[Cell], numeric: int, filled: int, markers: int) -> bool:
        first = next((c for c in cells if c is not None and c != ""), "")
        named = isinstance(first, str) and bool(_KEY_START.match(first)) and not _MARKERS.match(first)
        if named and not self._rows:
            return numeric >= 2
        if numeric >= 2 or numeric == filled:
            return True
        if not self._rows:
            return False
        if numeric == 1:
            return not named
        return markers == filled and filled >= min(2, self._width)

    def _settle(self, width: int) -> None:
        """Decides, at a row of numbers, whether what came between starts another block."""
        if self._rows:
            telling = any(self._tells(row, width) for row in self._pending)
            if telling or (self._gap and len(self._rows) >= MIN_POINTS):
                self._close()
        if not self._rows:
            self._read_pending(width)
        else:
            self._pending.clear()  # a comment between rows
        self._gap = False

    def _tells(self, row: _TextRow, width: int) -> bool:
        if _is_title(row) and (direction_in(row.raw) is not None or light_in(row.raw) is not None):
            return True
        if _sum_of_labels(self.split(row.raw, width) if row.raw else row.cells) >= 2:
            return True
        return self._entry(row) is not None

    def _entry(self, row: _TextRow) -> tuple[str, str] | None:
        return key_value(row.raw, row.cells if self.divided else ())

    def _read_pending(self, width: int) -> None:
        """Sorts the text rows above a block into headings, header entries and loose words."""
        self._words = ""
        if not self._pending:
            return
        labels: list[tuple[str, ...]] = []
        headings: list[_TextRow] = []
        rows = list(self._pending)
        self._pending.clear()
        while rows and len(labels) < _LABEL_ROWS:
            row = rows[-1]
            cells = self._cut(row, width)
            known = _sum_of_labels(cells)
            # Above a heading, "Comment: voltage, current" is an entry of the header and no second heading.
            if row.has_number or (key_value(row.raw) is not None and (known < 2 or labels)):
                break
            if known >= 2 or (known and len(cells) == width) or (len(cells) >= 2 and not labels):
                labels.insert(0, cells)
                headings.insert(0, rows.pop())
            elif labels and len(cells) >= 3:
                labels.insert(0, cells)  # names of devices above the headings
                headings.insert(0, rows.pop())
                break
            else:
                break
        if labels:
            self._labels, self._headings = tuple(labels), headings
        loose = [row for row in rows if not self._take_entry(row)]
        self._words = " ".join(row.raw for row in loose[-3:] if _is_title(row))[:MAX_WORDS]

    def _cut(self, row: _TextRow, width: int) -> tuple[str, ...]:
        return tuple(self.split(row.raw, width)) if row.raw else row.cells

    def _take_entry(self, row: _TextRow) -> bool:
        """Keeps a row as a header entry if it is one."""
        entry = self._entry(row)
        if entry is not None and len(self._header) < MAX_HEADER:
            self._header[entry[0]] = entry[1]
        return entry is not None

    def _close(self) -> None:
        rows, lines, broken = self._rows, self._lines, self._broken
        self._rows, self._lines, self._broken = [], [], {}
        width, self._width = self._width, 0
        if len(rows) < MIN_POINTS:
            self.stray_numbers += len(rows)
            # Two rows of numbers under their own headings are a summary, not a sweep.
            return
        if len(rows) * width > MAX_CELLS:  # a few very wide rows among many narrow ones
            raise Refusal(
                f"the table has more than {MAX_CELLS:,} cells, counting empty ones",
                "Keep the columns of voltage and current and leave the others out",
                line=lines[0],
            )
        if all(len(row) == width for row in rows):
            values = np.array(rows, dtype=float)
        else:
            values = np.full((len(rows), width), np.nan)
            for index, row in enumerate(rows):
                values[index, : len(row)] = row
        with np.errstate(invalid="ignore"):
            values[np.abs(values) > _OVER_RANGE] = np.inf
        self.blocks.append(
            Block(values, np.array(lines), broken, self._labels, dict(self._header), self._words.strip())
        )

    def finish(self) -> list[Block]:
        """All blocks; what stands below the last one goes to every block that does not say otherwise."""
        self._close()
        self._header = {}
        for row in self._pending:
            self._take_entry(row)
        for block in self.blocks:
            block.header = {**self._header, **block.header}
        self._pending.clear()
        return self.blocks


def _is_title(row: _TextRow) -> bool:
    """'Reverse scan' is a title; 'measured in the dark after 10 min of light' is prose and tells nothing for sure."""
    return len(row.raw.split()) <= _TITLE_WORDS


def _sum_of_labels(cells: Sequence[str]) -> int:
    return sum(parse_label(c[:MAX_WORDS]).kind is not None for c in cells[:50] if c)
