"""The workspaces on disk: every step is one transaction, written before it is acknowledged.

A store may be used from any number of threads, and several stores (processes) may use one folder: a step
names the revision that it was made on, and is refused if that is no longer the current one. A store must
not be carried into a forked process.
"""

from __future__ import annotations

import contextlib
import sqlite3
import threading
import time
from collections.abc import Callable, Iterator
from dataclasses import replace
from pathlib import Path
from typing import NamedTuple

from . import archive, history, tables
from .applying import Step, apply, inverse
from .database import connect, failures_as_sentences, open_database, transaction
from .errors import StaleRevision, StepRefused, StoreFailed
from .history import History
from .tables import FIRST_NAME
from .tray_steps import clean_name, distinct_name
from .workspace import Workspace

__all__ = ["DATABASE", "History", "Store", "WorkspaceInfo"]

DATABASE = "workspaces.sqlite"
_CACHED_WORKSPACES = 8


class WorkspaceInfo(NamedTuple):
    """One line of the list of workspaces. ``used`` is the time of last use [s since 1970]."""

    id: str
    name: str
    revision: int
    sweeps: int
    used: float


class Store:
    """The workspaces in one folder.

    Parameters
    ----------
    folder : Path
        Made if it is not there.
    limits : history.Limits
        How much undo history a workspace keeps.

    Raises
    ------
    StoreFailed
        By every method: if the disk is full or fails, the folder cannot be written to, the file is
        damaged or newer than this version, or the workspace is not there. Nothing acknowledged is lost,
        and the step at hand has changed nothing.
    """

    def __init__(self, folder: Path, *, limits: history.Limits = history.Limits()):
        self.folder = Path(folder)
        self._path = self.folder / DATABASE
        self._limits = limits
        # Two connections: whoever reads never waits for a write to reach the disk.
        self._writer, self._write_lock = open_database(self._path), threading.Lock()
        self._reader, self._read_lock = connect(self._path), threading.Lock()
        self._cache: dict[str, tuple[int | None, Workspace]] = {}  # id → data version when last checked, workspace
        self._file = self._identity()
        try:
            with self._writing() as database:
                tables.tidy(database)
        except BaseException:
            self.close()
            raise

    def close(self) -> None:
        """Let go of the database; the store cannot be used afterwards."""
        with self._write_lock, self._read_lock:
            self._reader.close()
            self._writer.close()

    # Reading

    def current(self, workspace_id: str) -> Workspace:
        """The workspace as it now stands, also when another process changed it."""
        with self._reading() as database:
            (version,) = database.execute("PRAGMA data_version").fetchone()  # another one after any other's commit
            checked, workspace = self._cache.get(workspace_id, (None, None))
            if workspace is not None and checked == version:
                return workspace
            with transaction(database, "BEGIN"):
                row = tables.find(database, workspace_id)
                if workspace is None or workspace.revision != row.revision:
                    workspace = tables.load(database, workspace_id, row, workspace)
            self._keep(workspace, version)
            return workspace

    def workspaces(self) -> list[WorkspaceInfo]:
        """All workspaces but the deleted ones, the last used first."""
        return self._list("deleted IS NULL")

    def deleted(self) -> list[WorkspaceInfo]:
        """Workspaces that ``restore`` can still bring back."""
        return self._list("deleted IS NOT NULL")

    def first(self) -> str:
        """Id of the workspace used last, or of a new empty one."""
        there = self.workspaces()
        return there[0].id if there else self.create(FIRST_NAME)

    def history(self, workspace_id: str) -> History:
        """What undo and redo would take back or make again."""
        with self._reading() as database:
            return history.labels(database, workspace_id)

    def made(self, workspace_id: str, event: str) -> bool:
        """Whether this event made, took back or made again a step: a page that never heard the answer asks again."""
        with self._reading() as database:
            return history.made(database, workspace_id, event)

    # Changing

    def commit(self, workspace_id: str, step: Step, seen: int) -> Workspace:
        """Make a step that was built on revision ``seen``; returns when it is on disk.

        A step that changes nothing is no step: the workspace stays at its revision.

        Raises
        ------
        StaleRevision
            If the workspace has moved on.
        StepRefused
            If the step cannot be made.
        """
        with self._writing() as database:
            row, before = self._seen(database, workspace_id, seen)
            after = apply(before, step)
            if not tables.write(database, before, after, step["put"]):
                return before
            position = row.cursor + 1
            history.push(database, workspace_id, position, step, inverse(before, step), self._limits)
            tables.advance(database, after, position)
        self._remember(after)
        return after

    def undo(self, workspace_id: str, seen: int, *, event: str | None = None) -> Workspace:
        """Take the last step back. Raises as ``commit``; StepRefused if there is none.

        The event that asked for it is noted for ``made``.
        """
        return self._travel(workspace_id, seen, history.taken_back, "taken_back_by", event, at=0, move=-1)

    def redo(self, workspace_id: str, seen: int, *, event: str | None = None) -> Workspace:
        """Make the step that was taken back again. Raises and notes as ``undo``."""
        return self._travel(workspace_id, seen, history.made_again, "made_again_by", event, at=1, move=1)

    # Original files

    def keep_file(self, data: bytes, name: str) -> str:
        """Keep an original file byte for byte; returns its SHA-256."""
        with self._writing() as database:
            return tables.write_file(database, name, data)

    def file(self, sha256: str) -> bytes:
        """An original file, verified against its SHA-256."""
        with self._reading() as database:
            return tables.read_file(database, sha256)[1]

    # Workspaces

    def create(self, name: str) -> str:
        """A new empty workspace; its id."""
        with self._writing() as database:
            return tables.insert(database, name)

    def opened(self, workspace_id: str) -> None:
        """Note that the user turned to this workspace: it is now the last used."""
        with self._writing() as database:
            tables.find(database, workspace_id)
            database.execute("UPDATE workspaces SET used = ? WHERE id = ?", (tables.now(database), workspace_id))

    def rename(self, workspace_id: str, name: str) -> Workspace:
        """Give a workspace another name; not a step, but raises the revision so that every tab sees it."""
        name = clean_name(name)
        if not name:
            raise StepRefused("A workspace must have a name of at least one character.")
        with self._writing() as database:
            row = tables.find(database, workspace_id)
            if name in tables.names(database, but=workspace_id):
                raise StepRefused(f"Another workspace is called “{name}” already. Choose another name.")
            workspace = replace(self._held(database, workspace_id, row), name=name, revision=row.revision + 1)
            tables.advance(database, workspace, row.cursor)
        self._remember(workspace)
        return workspace

    def duplicate(self, workspace_id: str, name: str | None = None) -> str:
        """A copy with a history of its own; its id."""
        with self._writing() as database:
            row = tables.find(database, workspace_id)
            copy = tables.insert(database, name or f"{row.name} copy")
            database.execute(
                "INSERT INTO records SELECT ?, kind, id, json FROM records WHERE workspace = ?", (copy, workspace_id)
            )
        return copy

    def delete(self, workspace_id: str) -> None:
        """Take a workspace off the list; ``restore`` brings it back within 30 days."""
        with self._writing() as database:
            tables.find(database, workspace_id)
            database.execute("UPDATE workspaces SET deleted = ? WHERE id = ?", (time.time_ns(), workspace_id))
        with self._read_lock:
            self._cache.pop(workspace_id, None)

    def restore(self, workspace_id: str) -> None:
        """Undo ``delete``, history included; where its name was given away meanwhile it gets a number."""
        with self._writing() as database:
            row = database.execute(
                "SELECT name FROM workspaces WHERE id = ? AND deleted IS NOT NULL", (workspace_id,)
            ).fetchone()
            if row is None:
                raise StoreFailed("That workspace cannot be brought back: it is not among the deleted ones.")
            database.execute(
                "UPDATE workspaces SET deleted = NULL, revision = revision + 1, name = ?, used = ? WHERE id = ?",
                (distinct_name(row[0], tables.names(database)), tables.now(database), workspace_id),
            )

    # One file that holds everything

    def export(self, workspace_id: str) -> bytes:
        """The workspace with its original files as one zip (``core.archive``)."""
        workspace = self.current(workspace_id)
        sources = {entry.source for entry in workspace.entries.values() if entry.source is not None}
        with self._reading() as database:
            readings = dict(tables.reading_texts(database, workspace.readings()))
            files = {name: tables.read_file(database, name) for name in sources}
        return archive.pack(archive.Contents(workspace, readings, files))

    def import_archive(self, data: bytes) -> str:
        """A new workspace from such a zip; its id. Raises StoreFailed for anything else, and changes nothing."""
        workspace, readings, files = archive.unpack(data)
        with self._writing() as database:
            new = tables.insert(database, workspace.name)
            for name, content in files.values():
                tables.write_file(database, name, content)
            for reading_id, text in readings.items():
                tables.write_reading(database, reading_id, text)
            for kind, records in workspace.records().items():
                for record_id, record in records.items():
                    tables.write_record(database, new, kind, record_id, record)
        return new

    # Within

    @contextlib.contextmanager
    def _reading(self) -> Iterator[sqlite3.Connection]:
        with self._read_lock, failures_as_sentences(self._path):
            yield self._reader

    @contextlib.contextmanager
    def _writing(self) -> Iterator[sqlite3.Connection]:
        with self._write_lock, failures_as_sentences(self._path):
            if self._identity() != self._file:
                # What is written to a file that is no longer in its place would be lost.
                raise StoreFailed(
                    f"The workspace file {self._path} was moved or replaced while Sweepbench was running, so the last "
                    "change was not saved. Put the file back and start Sweepbench again."
                )
            with transaction(self._writer, "BEGIN IMMEDIATE"):
                yield self._writer

    def _identity(self) -> tuple[int, int] | None:
        try:
            status = self._path.stat()
        except OSError:
            return None
        return status.st_dev, status.st_ino

    def _seen(self, database: sqlite3.Connection, workspace_id: str, seen: int) -> tuple[tables.Row, Workspace]:
        row = tables.find(database, workspace_id)
        if seen != row.revision:
            raise StaleRevision(seen, row.revision)
        return row, self._held(database, workspace_id, row)

    def _held(self, database: sqlite3.Connection, workspace_id: str, row: tables.Row) -> Workspace:
        _, workspace = self._cache.get(workspace_id, (None, None))
        if workspace is not None and workspace.revision == row.revision:
            return workspace
        return tables.load(database, workspace_id, row, workspace)

    def _travel(
        self,
        workspace_id: str,
        seen: int,
        fetch: Callable[[sqlite3.Connection, str, int], Step],
        travel: str,
        event: str | None,
        *,
        at: int,
        move: int,
    ) -> Workspace:
        with self._writing() as database:
            row, before = self._seen(database, workspace_id, seen)
            step = fetch(database, workspace_id, row.cursor + at)
            after = apply(before, step)
            tables.write(database, before, after, step["put"])
            tables.advance(database, after, row.cursor + move)
            if event is not None:
                history.note(database, workspace_id, row.cursor + at, travel, event)
        self._remember(after)
        return after

    def _remember(self, workspace: Workspace) -> None:
        """Cache what was just written, unless a quicker thread has written more since."""
        with self._read_lock:
            _, held = self._cache.get(workspace.id, (None, None))
            if held is None or held.revision < workspace.revision:
                self._keep(workspace, None)

    def _keep(self, workspace: Workspace, version: int | None) -> None:
        self._cache.pop(workspace.id, None)  # to the end of the order
        self._cache[workspace.id] = (version, workspace)
        if len(self._cache) > _CACHED_WORKSPACES:
            self._cache.pop(next(iter(self._cache)))

    def _list(self, which: str) -> list[WorkspaceInfo]:
        with self._reading() as database:
            rows = database.execute(
                "SELECT id, name, revision, (SELECT count(*) FROM records WHERE workspace = workspaces.id "
                f"AND kind = 'entries'), used FROM workspaces WHERE {which} ORDER BY used DESC"
            ).fetchall()
        return [WorkspaceInfo(*row[:4], used=row[4] / 1e9) for row in rows]
