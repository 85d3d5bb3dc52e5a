"""What the database keeps of workspaces: their records, the readings behind them, the original files.

Every function works on a connection whose transaction is its caller's.
"""

from __future__ import annotations

import hashlib
import json
import sqlite3
import time
from collections.abc import Iterable, Iterator, Mapping
from typing import Any, NamedTuple

from .applying import changed
from .errors import StoreFailed, SweepbenchError
from .records import canonical, id_of_text, reading_from_record, reading_text
from .tray_steps import clean_name, distinct_name, short_id
from .workspace import KINDS, Workspace

FIRST_NAME = "First workspace"
_DAY = 86_400 * 10**9  # [ns]
_KEEP_DELETED = 30 * _DAY
_KEEP_UNUSED_FILES = 7 * _DAY  # a file that was just dropped is not yet named by any step


class Row(NamedTuple):
    """A workspace's line: ``cursor`` is the position of its last step in the history."""

    name: str
    revision: int
    cursor: int


def find(database: sqlite3.Connection, workspace_id: str) -> Row:
    """Raises StoreFailed where there is no such workspace, or it was deleted."""
    row = database.execute(
        "SELECT name, revision, cursor FROM workspaces WHERE id = ? AND deleted IS NULL", (workspace_id,)
    ).fetchone()
    if row is None:
        raise StoreFailed("That workspace is not there; it may have been deleted. Choose another one.")
    return Row(*row)


def insert(database: sqlite3.Connection, name: str) -> str:
    """A new empty workspace with a distinct name; its id."""
    new = short_id()
    name = distinct_name(clean_name(name) or FIRST_NAME, names(database))
    database.execute(
        "INSERT INTO workspaces (id, name, revision, cursor, used) VALUES (?, ?, 0, 0, ?)", (new, name, now(database))
    )
    return new


def advance(database: sqlite3.Connection, after: Workspace, cursor: int) -> None:
    """Note revision and name of a workspace, and that it was used."""
    database.execute(
        "UPDATE workspaces SET name = ?, revision = ?, cursor = ?, used = ? WHERE id = ?",
        (after.name, after.revision, cursor, now(database), after.id),
    )


def names(database: sqlite3.Connection, but: str = "") -> set[str]:
    """Names of the workspaces that are not deleted."""
    return {
        name for (name,) in database.execute("SELECT name FROM workspaces WHERE deleted IS NULL AND id <> ?", (but,))
    }


def now(database: sqlite3.Connection) -> int:
    """Now [ns], but later than any use so far: the order of use survives a clock that is set back."""
    last = database.execute("SELECT max(used) FROM workspaces").fetchone()[0] or 0
    return max(time.time_ns(), last + 1)


def load(database: sqlite3.Connection, workspace_id: str, row: Row, old: Workspace | None) -> Workspace:
    """The workspace as written; readings that an older state of it holds are taken from there.

    Raises
    ------
    StoreFailed
        If a record or a reading is damaged.
    """
    put: dict[str, dict[str, Any]] = {kind: {} for kind in KINDS}
    try:
        for kind, name, text in database.execute(
            "SELECT kind, id, json FROM records WHERE workspace = ?", (workspace_id,)
        ):
            put[kind][name] = json.loads(text)
        wanted = {record["reading"] for record in put["entries"].values()}
        readings = {} if old is None else {name: sweep for name, sweep in old.readings().items() if name in wanted}
        for name, text in reading_texts(database, wanted - readings.keys()):
            readings[name] = reading_from_record(json.loads(text))
        # ``changed`` counts the step that it makes.
        return changed(Workspace(workspace_id, row.name, row.revision - 1), put, readings)
    except (SweepbenchError, ValueError, LookupError, TypeError, AttributeError, ArithmeticError) as problem:
        raise StoreFailed(
            f"The workspace “{row.name}” cannot be read: {problem} Its file was left as it is; "
            "put a copy from a backup in its place, or choose another workspace."
        ) from problem


def write(database: sqlite3.Connection, before: Workspace, after: Workspace, put: Mapping[str, Any]) -> bool:
    """Write those of the records put that really changed, and new readings; whether there were any."""
    written = False
    for kind in put.keys() & set(KINDS):
        for name in put[kind]:
            old, new = before.record(kind, name), after.record(kind, name)
            if old == new:
                continue
            written = True
            if new is None:
                database.execute(
                    "DELETE FROM records WHERE workspace = ? AND kind = ? AND id = ?", (after.id, kind, name)
                )
            else:
                write_record(database, after.id, kind, name, new)
    if written:
        for name, record in put.get("readings", {}).items():
            write_reading(database, name, reading_text(record))
    return written


def write_record(database: sqlite3.Connection, workspace_id: str, kind: str, name: str, record: Any) -> None:
    text = canonical(record)
    database.execute("INSERT OR REPLACE INTO records VALUES (?, ?, ?, ?)", (workspace_id, kind, name, text))


def write_reading(database: sqlite3.Connection, name: str, text: str) -> None:
    database.execute("INSERT OR IGNORE INTO readings VALUES (?, ?)", (name, text))


def reading_texts(database: sqlite3.Connection, wanted: Iterable[str]) -> Iterator[tuple[str, str]]:
    """Id and text of these readings. Raises StoreFailed if a text does not hash to its id."""
    for name, text in database.execute(
        "SELECT id, json FROM readings WHERE id IN (SELECT value FROM json_each(?))", (json.dumps(sorted(wanted)),)
    ):
        if id_of_text(text) != name:
            raise StoreFailed("The points of a sweep are damaged: their SHA-256 is not the one they were kept under.")
        yield name, text


def write_file(database: sqlite3.Connection, name: str, data: bytes) -> str:
    """Keep an original; its SHA-256."""
    sha256 = hashlib.sha256(data).hexdigest()
    database.execute(
        "INSERT INTO files (sha256, name, kept, data) VALUES (?, ?, ?, ?) "
        "ON CONFLICT (sha256) DO UPDATE SET kept = excluded.kept",
        (sha256, name, time.time_ns(), data),
    )
    return sha256


def read_file(database: sqlite3.Connection, sha256: str) -> tuple[str, bytes]:
    """Name and bytes of an original. Raises StoreFailed if it is not kept or does not hash to its id."""
    row = database.execute("SELECT name, data FROM files WHERE sha256 = ?", (sha256,)).fetchone()
    if row is None:
        raise StoreFailed("The original file is not kept in this store. Drop the file again.")
    if hashlib.sha256(row[1]).hexdigest() != sha256:
        raise StoreFailed(f"The kept original of “{row[0]}” is damaged: its SHA-256 is no longer that of the file.")
    return row


def tidy(database: sqlite3.Connection) -> None:
    """Forget what nothing names any more: workspaces deleted long ago, readings, files."""
    for table, column in (("records", "workspace"), ("history", "workspace"), ("workspaces", "id")):
        database.execute(
            f"DELETE FROM {table} WHERE {column} IN (SELECT id FROM workspaces WHERE deleted < ?)",
            (time.time_ns() - _KEEP_DELETED,),
        )
    (damaged,) = database.execute(
        "SELECT EXISTS (SELECT 1 FROM records WHERE NOT json_valid(json)) "
        "OR EXISTS (SELECT 1 FROM history WHERE NOT json_valid(needs))"
    ).fetchone()
    if damaged:
        return  # such a record no longer says what it needs; whoever repairs it will want it all
    needed = (
        "SELECT json_extract(json, '$.{0}') FROM records WHERE kind = 'entries' "
        "AND json_extract(json, '$.{0}') IS NOT NULL UNION SELECT value FROM history, json_each(history.needs)"
    )
    database.execute(f"DELETE FROM readings WHERE id NOT IN ({needed.format('reading')})")
    database.execute(
        f"DELETE FROM files WHERE kept < ? AND sha256 NOT IN ({needed.format('source')})",
        (time.time_ns() - _KEEP_UNUSED_FILES,),
    )
