"""The undo history on disk: each step with its inverse, and a cursor at the last one made.

Undo applies the inverse at the cursor and moves it back, redo applies the step after it and moves on; a new
step drops what could be redone. Points of readings are not kept here: the table of readings has them, and
a step says which it needs. The history of a workspace is bounded in steps and in bytes; the oldest steps go
first, the newest always stays.
"""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, NamedTuple

from .applying import Step
from .errors import StepRefused
from .records import canonical
from .tables import reading_texts

_TRAVELS = ("taken_back_by", "made_again_by")  # notes beside a kept step: the events that last undid and redid it


class Limits(NamedTuple):
    """How much history one workspace keeps."""

    steps: int = 5000
    size: int = 32 * 2**20  # bytes of steps and inverses


@dataclass(frozen=True, slots=True)
class History:
    """Labels of the steps that undo and redo would take; None where there is none."""

    undo: str | None
    redo: str | None


def labels(database: sqlite3.Connection, workspace_id: str) -> History:
    found = dict(
        database.execute(
            "SELECT position - cursor, label FROM history JOIN workspaces ON workspace = workspaces.id "
            "WHERE workspace = ? AND position IN (cursor, cursor + 1)",
            (workspace_id,),
        )
    )
    return History(undo=found.get(0), redo=found.get(1))


def made(database: sqlite3.Connection, workspace_id: str, event: str) -> bool:
    """Whether this event made, took back or made again a step that the history still holds."""
    return bool(
        database.execute(
            "SELECT EXISTS (SELECT 1 FROM history WHERE workspace = ? AND ? IN "
            "(json_extract(step, '$.event'), json_extract(step, ?), json_extract(step, ?)))",
            (workspace_id, event, *(f"$.{travel}" for travel in _TRAVELS)),
        ).fetchone()[0]
    )


def note(database: sqlite3.Connection, workspace_id: str, position: int, travel: str, event: str) -> None:
    """Note beside a step which event took it back or made it again: "taken_back_by" or "made_again_by"."""
    database.execute(
        "UPDATE history SET step = json_set(step, ?, ?) WHERE workspace = ? AND position = ?",
        (f"$.{travel}", event, workspace_id, position),
    )


def push(
    database: sqlite3.Connection, workspace_id: str, position: int, step: Step, inverse: Step, limits: Limits
) -> None:
    """Write a step at this position; what was at it and after it can no longer be redone."""
    database.execute("DELETE FROM history WHERE workspace = ? AND position >= ?", (workspace_id, position))
    texts = [canonical(_without_points(one)) for one in (step, inverse)]
    database.execute(
        "INSERT INTO history (workspace, position, label, size, needs, step, inverse) VALUES (?, ?, ?, ?, ?, ?, ?)",
        (workspace_id, position, step["label"], sum(map(len, texts)), canonical(_needs(step, inverse)), *texts),
    )
    _trim(database, workspace_id, position, limits)


def taken_back(database: sqlite3.Connection, workspace_id: str, position: int) -> Step:
    """The inverse of the step at this position. Raises StepRefused if there is none."""
    return _fetch(database, "inverse", workspace_id, position, "There is nothing to undo.")


def made_again(database: sqlite3.Connection, workspace_id: str, position: int) -> Step:
    """The step at this position. Raises StepRefused if there is none."""
    return _fetch(database, "step", workspace_id, position, "There is nothing to redo.")


def _fetch(database: sqlite3.Connection, column: str, workspace_id: str, position: int, nothing: str) -> Step:
    found = database.execute(
        f"SELECT {column} FROM history WHERE workspace = ? AND position = ?", (workspace_id, position)
    ).fetchone()
    if found is None:
        raise StepRefused(nothing)
    step = {name: value for name, value in json.loads(found[0]).items() if name not in _TRAVELS}
    texts = reading_texts(database, step["put"].get("readings", {}))
    step["put"]["readings"] = {name: json.loads(text) for name, text in texts}
    return step


def _trim(database: sqlite3.Connection, workspace_id: str, newest: int, limits: Limits) -> None:
    too_old = newest - limits.steps
    too_much = database.execute(
        "SELECT position FROM (SELECT position, SUM(size) OVER (ORDER BY position DESC) AS total "
        "FROM history WHERE workspace = ?) WHERE total > ? ORDER BY position DESC LIMIT 1",
        (workspace_id, limits.size),
    ).fetchone()
    if too_much is not None:
        too_old = max(too_old, too_much[0])
    database.execute(
        "DELETE FROM history WHERE workspace = ? AND position <= ?", (workspace_id, min(too_old, newest - 1))
    )


def _without_points(step: Mapping[str, Any]) -> dict[str, Any]:
    put = {kind: dict.fromkeys(records) if kind == "readings" else records for kind, records in step["put"].items()}
    return {**step, "put": put}


def _needs(*steps: Mapping[str, Any]) -> list[str]:
    """Readings and files that these steps name, so that neither is forgotten while the steps can be taken."""
    entries = [record for step in steps for record in step["put"].get("entries", {}).values() if record is not None]
    return sorted({entry["reading"] for entry in entries} | {e["source"] for e in entries if e.get("source")})
