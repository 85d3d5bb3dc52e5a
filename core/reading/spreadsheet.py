"""Spreadsheets, all sheets, as the same blocks of numbers that text gives."""

from __future__ import annotations

import json
import subprocess
import sys
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from .limits import MAX_CELLS, MAX_SECONDS
from .refusal import Refusal
from .table import Block, Cell, Gatherer
from .text import number_in
from .thousands import OTHER, Marks, looks_numeric, marks_of

_SAVE_AGAIN = "Open it in a spreadsheet program, save it as XLSX or CSV and drop that file"
_WORKER = Path(__file__).with_name("sheet_worker.py")


@dataclass(frozen=True, slots=True)
class Sheet:
    """One sheet: its name and either its blocks or why it has none, or why it cannot be read."""

    name: str
    blocks: tuple[Block, ...]
    skipped: str = ""
    refusal: Refusal | None = None


def read_sheets(data: bytes) -> list[Sheet]:
    """Every sheet of a workbook.

    Raises
    ------
    Refusal
        If the workbook cannot be opened or holds too much.
    """
    sheets = []
    for sheet in _opened(data):
        if sheet["rows"] is None:
            raise Refusal(
                f"the spreadsheet has more than {MAX_CELLS:,} cells, counting empty ones between filled ones",
                "Copy the columns with the sweep into a new sheet and save that",
            )
        try:
            marks = _marks(sheet["rows"], sheet["first_row"])
        except Refusal as refusal:
            sheets.append(Sheet(sheet["name"], (), refusal=refusal))
            continue
        gatherer = Gatherer(split=_heading, number=lambda cell, marks=marks: _number(cell, marks))
        _feed(sheet["rows"], sheet["first_row"], gatherer)
        blocks = tuple(gatherer.finish())
        for block in blocks:
            block.doubt, block.note = marks.doubt, marks.note
        skipped = "" if blocks else f"Sheet “{sheet['name']}” has no table of numbers and was skipped."
        sheets.append(Sheet(sheet["name"], blocks, skipped))
    return sheets


def _opened(data: bytes) -> list[dict[str, Any]]:
    """Names and rows of all sheets, read in a process of its own."""
    try:
        done = subprocess.run(
            [sys.executable, "-P", str(_WORKER), str(MAX_CELLS)],
            input=data,
            capture_output=True,
            timeout=MAX_SECONDS,
            creationflags=getattr(subprocess, "CREATE_NO_WINDOW", 0),  # Windows would open a console
        )
    except subprocess.TimeoutExpired as error:
        raise Refusal(f"the spreadsheet could not be opened within {MAX_SECONDS} s", _SAVE_AGAIN) from error
    except OSError as error:
        raise Refusal(f"the spreadsheet could not be opened on this computer ({error.strerror})", _SAVE_AGAIN) from error
    if done.returncode == 0:
        return json.loads(done.stdout)
    if b"assword" in done.stderr:
        raise Refusal("the spreadsheet is protected with a password", "Remove the password, save it and drop it again")
    raise Refusal("the spreadsheet is damaged, or of a kind or size that cannot be opened", _SAVE_AGAIN)


def _feed(rows: list[list[Cell]], first_row: int, gatherer: Gatherer) -> None:
    for line, cells in enumerate(rows, first_row):
        while cells and cells[-1] == "":
            cells.pop()
        filled = [c for c in cells if c != ""]
        if not filled:
            gatherer.blank()
        else:
            # A row of one cell is a sentence, like a line of text; the others are read cell by cell.
            raw = filled[0] if len(filled) == 1 and isinstance(filled[0], str) else ""
            gatherer.mixed(line, raw, cells, comment=raw.startswith(("#", "%")))


def _marks(rows: list[list[Cell]], first_row: int) -> Marks:
    """How numbers that a sheet keeps as text are written."""
    texts = (
        (line, [cell if isinstance(cell, str) and looks_numeric(cell) else "" for cell in cells])
        for line, cells in enumerate(rows, first_row)
    )
    return marks_of(((line, cells) for line, cells in texts if any(cells)), ".")


def _number(cell: str, marks: Marks) -> float | None:
    """Numbers that a sheet keeps as text."""
    number = number_in(cell, marks.decimal, grouped=marks.grouped)
    # Where nothing is grouped, some cells may have a decimal comma beside others with a point.
    return number if number is not None or marks.grouped else number_in(cell, OTHER[marks.decimal])


def _heading(line: str, width: int) -> list[str]:
    return line.split("\t")
