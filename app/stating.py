"""What the user states of the whole workspace, as its fields show it, beside what a sweep's file says itself."""

from __future__ import annotations

from typing import Any

from core.protocol import said_by_file
from core.statements import STATEMENTS, SWITCHES, TEXTS, UNCERTAINTIES
from core.workspace import Workspace

from .wording import field


def statement_texts(workspace: Workspace) -> dict[str, str]:
    """Each statement as its field holds it: uncertainties in per cent, a switch as "yes", "" for what is not stated."""
    return {name: _text(workspace, name) for name in STATEMENTS}


def _text(workspace: Workspace, name: str) -> str:
    value = workspace.stated(name)
    if value is None:
        return ""
    if name in UNCERTAINTIES:
        return field(100 * value)
    return "yes" if name in SWITCHES else str(value)


def statement_rows(workspace: Workspace, entry: str) -> dict[str, Any]:
    """What the record panel shows: the statements, and what this sweep's file says, which goes before them."""
    reading = workspace.entry(entry).reading
    files = {name: words for name in TEXTS if (words := said_by_file(reading, name))}
    return {"texts": statement_texts(workspace), "files": files}
