"""Reads the files that benches write: delimited text and spreadsheets."""

from __future__ import annotations

import re
from collections.abc import Iterable
from dataclasses import replace

from ..constants import ONE_SUN
from ..errors import UnreadableFile
from ..sweep import Sweep
from .build import Origin, named, sweeps_of
from .columns import pairs_of
from .decoding import decode
from .header import Recorded, recognise
from .kinds import kind_of
from .limits import MAX_SWEEPS
from .refusal import Refusal
from .spreadsheet import read_sheets
from .table import Block
from .text import read_text
from .words import device_in, device_of_sheet, from_file_name, suns_in

__all__ = ["read_sweeps"]


def read_sweeps(data: bytes, filename: str) -> list[Sweep]:
    """Every sweep in a file, in the order it holds them.

    Parameters
    ----------
    data : bytes
        The file as it stands on disk.
    filename : str
        Its name; tells the device, direction and light where the file itself does not.

    Raises
    ------
    UnreadableFile
        If the file holds no sweep; the text says what is wrong, where, and what to do.
    """
    shown = _shown(filename)
    try:
        if kind_of(data) == "spreadsheet":
            sweeps = _from_sheets(data, _stem(shown))
        else:
            sweeps = _from_blocks(read_text(decode(data)), _stem(shown), row_word="line")
    except Refusal as refusal:
        raise UnreadableFile(refusal.problem, file=shown, line=refusal.line, remedy=refusal.remedy) from refusal
    return named(sweeps)


def _shown(filename: str) -> str:
    """The file's name without folders and without characters that do not print."""
    name = re.split(r"[/\\]", filename)[-1]
    return "".join(c for c in name if c.isprintable())[:200].strip() or "file"


def _stem(name: str) -> str:
    return re.sub(r"\.[A-Za-z0-9]{1,5}$", "", name) or name


def _from_sheets(data: bytes, stem: str) -> list[Sweep]:
    sweeps: list[Sweep] = []
    notes: list[str] = []
    first: Refusal | None = None
    sheets = read_sheets(data)
    for sheet in sheets:
        if not sheet.blocks and sheet.refusal is None:
            notes.append(sheet.skipped)
            continue
        try:
            if sheet.refusal is not None:
                raise sheet.refusal
            found = _from_blocks(sheet.blocks, stem, row_word="row", sheet=sheet.name)
        except Refusal as refusal:
            row = "" if refusal.line is None else f", row {refusal.line}"
            first = first or Refusal(f"sheet “{sheet.name}”{row}: {refusal.problem}", refusal.remedy)
            notes.append(f"Sheet “{sheet.name}” was skipped: {refusal.problem}.")
            continue
        sweeps += found
        _bound(sweeps)
    if not sweeps:
        raise first or Refusal(
            "no sheet has a table of numbers", "A sweep needs a column of voltage and one of current"
        )
    return [replace(s, notes=(*s.notes, *notes)) for s in sweeps] if notes else sweeps


def _from_blocks(blocks: Iterable[Block], stem: str, *, row_word: str, sheet: str = "") -> list[Sweep]:
    """Sweeps of all blocks; a block that holds none is left out as long as another does."""
    sweeps: list[Sweep] = []
    notes: list[str] = []
    first: Refusal | None = None
    blocks = list(blocks)
    headers = [recognise(block.header) for block in blocks]
    # A direction said once, for a file with several tables, says nothing of each of them.
    told = len(blocks) == 1 or len({header.direction for header in headers}) > 1
    for block, recorded in zip(blocks, headers, strict=True):
        try:
            pairs = pairs_of(block)
            origin = _origin(recorded, block, stem, row_word, sheet)
            if len(blocks) > 1 or len(pairs) > 1:
                own = recorded.direction if told and len(pairs) == 1 else None
                origin = replace(origin, direction=own)
            found = [s for pair in pairs for s in sweeps_of(block, pair, origin)]
        except Refusal as refusal:
            first = first or refusal
            notes.append(
                f"The numbers from {row_word} {int(block.lines[0])} on were left out: {refusal.problem}."
            )
            continue
        sweeps += found
        _bound(sweeps)
    if not sweeps:
        assert first is not None  # there is at least one block, and it gave no sweep
        raise first
    return [replace(s, notes=(*s.notes, *notes)) for s in sweeps] if notes else sweeps


def _bound(sweeps: list[Sweep]) -> None:
    if len(sweeps) > MAX_SWEEPS:
        raise Refusal(f"the file has more than {MAX_SWEEPS} sweeps", "Split it into smaller files")


def _origin(recorded: Recorded, block: Block, stem: str, row_word: str, sheet: str) -> Origin:
    direction, lit = from_file_name(stem)
    sheet_direction, sheet_lit = from_file_name(sheet) if sheet else (None, None)
    device = recorded.device or (device_of_sheet(sheet, device_in(stem) or stem) if sheet else device_in(stem) or stem)
    if recorded.pixel:
        pixel = recorded.pixel if not recorded.pixel[0].isdigit() else f"pixel {recorded.pixel}"
        device = f"{device} {pixel}" if pixel.lower() not in device.lower() else device
    return Origin(
        device=device,
        recorded=recorded,
        header=block.header,
        direction=recorded.direction or sheet_direction or direction,
        lit=next((v for v in (sheet_lit, lit) if v is not None), None),
        irradiance=_irradiance_in(sheet) or _irradiance_in(stem),
        row_word=row_word,
    )


def _irradiance_in(name: str) -> float | None:
    """Irradiance [W cm⁻²] that a name states in suns."""
    suns = suns_in(name)
    return None if suns is None else suns * ONE_SUN
