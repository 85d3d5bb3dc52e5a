"""The database file of the workspaces: opened with care, brought up to date, its failures put into sentences.

Write-ahead log, and ``synchronous=FULL``: each step's transaction is flushed to the disk before it is
acknowledged. A killed process would lose nothing with the quicker NORMAL either; FULL also survives
a power cut, which lab computers see, for a few milliseconds a step.
"""

from __future__ import annotations

import contextlib
import sqlite3
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from .errors import StoreFailed

APPLICATION = 0x53775062  # marks the file as one of ours in SQLite's header
_WAIT_FOR_LOCK = 10.0  # [s]

# One entry a schema version: the statements that lead to it from the one before. Never edit a released entry.
MIGRATIONS: tuple[tuple[str, ...], ...] = (
    (
        """CREATE TABLE workspaces (
            id TEXT PRIMARY KEY, name TEXT NOT NULL, revision INTEGER NOT NULL, cursor INTEGER NOT NULL,
            used INTEGER NOT NULL, deleted INTEGER)""",
        """CREATE TABLE records (
            workspace TEXT NOT NULL, kind TEXT NOT NULL, id TEXT NOT NULL, json TEXT NOT NULL,
            PRIMARY KEY (workspace, kind, id))""",
        "CREATE TABLE readings (id TEXT PRIMARY KEY, json TEXT NOT NULL)",
        """CREATE TABLE history (
            workspace TEXT NOT NULL, position INTEGER NOT NULL, label TEXT NOT NULL, size INTEGER NOT NULL,
            needs TEXT NOT NULL, step TEXT NOT NULL, inverse TEXT NOT NULL, PRIMARY KEY (workspace, position))""",
        "CREATE INDEX history_size ON history (workspace, position, size)",
        """CREATE TABLE files (
            sha256 TEXT PRIMARY KEY, name TEXT NOT NULL, kept INTEGER NOT NULL, data BLOB NOT NULL)""",
    ),
)


def open_database(path: Path) -> sqlite3.Connection:
    """A connection to the database, made or brought up to this version's schema.

    Raises
    ------
    StoreFailed
        If the file is damaged, of a newer version, of another program, or cannot be read or written.
        It is then left as it was.
    """
    with failures_as_sentences(path):
        path.parent.mkdir(parents=True, exist_ok=True, mode=0o700)
        # A kill during the very first write leaves a journal, which only a writer can roll back.
        interrupted = Path(f"{path}-journal").exists()
        if path.exists() and path.stat().st_size > 0 and not interrupted:
            _inspect(path)
        database = connect(path)
        try:
            if interrupted:
                _refuse_foreign(database, path)
            _migrate(database, path)
            database.execute("PRAGMA journal_mode=WAL")
        except BaseException:
            database.close()
            raise
        return database


def connect(path: Path) -> sqlite3.Connection:
    """One more connection to a database that ``open_database`` has made ready; its user provides the lock."""
    with failures_as_sentences(path):
        # Transactions are begun and ended in so many words, never by the module behind one's back.
        database = sqlite3.connect(path, timeout=_WAIT_FOR_LOCK, isolation_level=None, check_same_thread=False)
        try:
            database.execute("PRAGMA synchronous=FULL")
        except BaseException:
            database.close()
            raise
        return database


@contextlib.contextmanager
def transaction(database: sqlite3.Connection, begin: str) -> Iterator[None]:
    """All or nothing: committed at the end, rolled back by any exception, that of the commit included."""
    database.execute(begin)
    try:
        yield
        database.execute("COMMIT")
    except BaseException:
        if database.in_transaction:
            database.execute("ROLLBACK")
        raise


@contextlib.contextmanager
def failures_as_sentences(path: Path) -> Iterator[None]:
    """Turn what SQLite and the system report into StoreFailed."""
    try:
        yield
    except sqlite3.Error as problem:
        raise StoreFailed(_sentence(problem, path)) from problem
    except OSError as problem:
        raise StoreFailed(
            f"The workspace folder {path.parent} cannot be used: {problem.strerror}. "
            "Choose a folder that you may write to."
        ) from problem


def _sentence(problem: sqlite3.Error, path: Path) -> str:
    code = getattr(problem, "sqlite_errorcode", sqlite3.SQLITE_ERROR) & 0xFF
    if code == sqlite3.SQLITE_FULL:
        return (
            f"The disk that holds {path.parent} is full, so the last change was not saved. Everything before it is "
            "safe. Free some space and make the change again."
        )
    if code in (sqlite3.SQLITE_READONLY, sqlite3.SQLITE_CANTOPEN, sqlite3.SQLITE_PERM, sqlite3.SQLITE_AUTH):
        return (
            f"The workspace folder {path.parent} cannot be written to, so nothing was changed. "
            "Give yourself the right to write there, or choose another folder."
        )
    if code in (sqlite3.SQLITE_CORRUPT, sqlite3.SQLITE_NOTADB):
        return (
            f"The workspace file {path} is damaged and was left as it is. Put a copy from a backup in its place, "
            "or choose another folder to start afresh."
        )
    if code in (sqlite3.SQLITE_BUSY, sqlite3.SQLITE_LOCKED):
        return (
            f"Another program holds the workspace file {path}, so the last change was not saved. "
            "Close the other program, or wait a moment, and make the change again."
        )
    if code == sqlite3.SQLITE_IOERR:
        return (
            f"The disk that holds {path.parent} reported an error, so the last change was not saved. Everything "
            "before it is safe. Check the disk (is it full, is it still connected?) and make the change again."
        )
    return f"The workspace file {path} could not be used ({problem}). The last change was not saved."


def _inspect(path: Path) -> None:
    """Refuse a file that is not ours to open, before anything could change it."""
    with path.open("rb") as file:
        header = file.read(100)
    if not header.startswith(b"SQLite format 3\0") or len(header) < 100:
        raise _damaged()
    _refuse_newer(int.from_bytes(header[60:64], "big"), path)
    uri = f"{path.absolute().as_uri()}?mode=ro"
    with contextlib.closing(sqlite3.connect(uri, uri=True, timeout=_WAIT_FOR_LOCK)) as database:
        _refuse_foreign(database, path)


def _refuse_foreign(database: sqlite3.Connection, path: Path) -> None:
    application = _fact(database, "PRAGMA application_id")
    tables = _fact(database, "SELECT count(*) FROM sqlite_master")
    if application != APPLICATION and (application or tables):
        raise StoreFailed(f"The file {path} is a database of another program. Choose another folder.")
    _refuse_newer(_fact(database, "PRAGMA user_version"), path)
    if _fact(database, "PRAGMA quick_check(1)") != "ok":
        raise _damaged()


def _migrate(database: sqlite3.Connection, path: Path) -> None:
    if _fact(database, "PRAGMA user_version") == len(MIGRATIONS):
        return
    with transaction(database, "BEGIN IMMEDIATE"):
        version = _fact(database, "PRAGMA user_version")  # another process may have been quicker
        _refuse_newer(version, path)
        for statement in (statement for step in MIGRATIONS[version:] for statement in step):
            database.execute(statement)
        database.execute(f"PRAGMA application_id={APPLICATION}")
        database.execute(f"PRAGMA user_version={len(MIGRATIONS)}")


def _refuse_newer(version: int, path: Path) -> None:
    if version > len(MIGRATIONS):
        raise StoreFailed(
            f"The workspace file {path} was written by a newer version of Sweepbench (format {version}; this "
            f"version reads up to {len(MIGRATIONS)}). It was left as it is. Install the newer version, or choose "
            "another folder."
        )


def _fact(database: sqlite3.Connection, query: str) -> Any:
    return database.execute(query).fetchone()[0]


def _damaged() -> sqlite3.DatabaseError:
    problem = sqlite3.DatabaseError("damaged")
    problem.sqlite_errorcode = sqlite3.SQLITE_CORRUPT
    return problem
