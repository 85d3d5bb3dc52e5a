"""The folder that one run of the program keeps to itself: its lock, its notice, its secret.

The lock is the operating system's, so it ends with the process, however that ends. The notice
beside it says where the program is reached; a notice without a lock is left over from a run
that was killed. Notice and secret are readable by their owner alone.
"""

from __future__ import annotations

import contextlib
import errno
import json
import os
import platform
import secrets
import shutil
from collections.abc import Iterator
from dataclasses import asdict, dataclass
from pathlib import Path

from core.errors import StoreFailed

if os.name == "nt":
    import msvcrt
else:
    import fcntl

_NOTICE = "running.json"


@dataclass(frozen=True, slots=True)
class Notice:
    """Where a running program is reached, and what its keys are signed with."""

    address: str
    process: int
    machine: str
    pages: str
    key_secret: str
    network_address: str | None = None


class FolderInUse(StoreFailed):
    """Another run holds the folder; ``notice`` says where, if it can be read."""

    def __init__(self, folder: Path, notice: Notice | None):
        where = f" (process {notice.process} on {notice.machine})" if notice else ""
        super().__init__(
            f"The folder {folder} is in use by another Sweepbench{where}. "
            "Close that one, or choose another folder with --keep."
        )
        self.notice = notice


class Folder:
    """Holds the folder from construction to ``release``.

    Raises
    ------
    FolderInUse
        Another run holds it.
    StoreFailed
        It cannot be made or written.
    """

    def __init__(self, path: Path):
        self.path = path
        self._notice = path / _NOTICE
        with _told(path):
            path.mkdir(parents=True, exist_ok=True)
            self._lock = os.open(path / "running.lock", os.O_RDWR | os.O_CREAT, 0o600)
            if not _lock(self._lock):
                os.close(self._lock)
                raise FolderInUse(path, read_notice(path))
        left_over = read_notice(path)
        #: Whether the last run here was killed.
        self.was_killed = left_over is not None
        if left_over is not None:
            _remove_pages(left_over)

    def secret(self) -> bytes:
        """The secret that sessions are derived from; made at the first call.

        One that others could read is replaced.
        """
        path = self.path / "session.secret"
        with _told(self.path):
            if path.exists():
                private = os.name == "nt" or not path.stat().st_mode & 0o077
                kept = path.read_bytes()
                if private and len(kept) == 32:
                    return kept
            fresh = secrets.token_bytes(32)
            _write_private(path, fresh)
            return fresh

    def announce(self, notice: Notice) -> None:
        """Tell later starts where this one is reached."""
        with _told(self.path):
            _write_private(self._notice, json.dumps(asdict(notice)).encode())

    def release(self) -> None:
        """Let others have the folder; a second call changes nothing."""
        if self._lock >= 0:
            with contextlib.suppress(OSError):
                self._notice.unlink(missing_ok=True)
            os.close(self._lock)
            self._lock = -1


def read_notice(folder: Path) -> Notice | None:
    """The notice in a folder; None if there is none, or it is half written or not ours to read."""
    try:
        return Notice(**json.loads((folder / _NOTICE).read_text(encoding="utf-8")))
    except (OSError, ValueError, TypeError):
        return None


@contextlib.contextmanager
def _told(folder: Path) -> Iterator[None]:
    """Turn the operating system's refusals into a sentence."""
    try:
        yield
    except OSError as error:
        raise StoreFailed(f"Sweepbench cannot keep its work in {folder}: {_obstacle(folder, error)}") from error


def _obstacle(folder: Path, error: OSError) -> str:
    """What is wrong, and what to do about it."""
    # Asked through os.path, which answers where a path itself is refused.
    there = next((part for part in (folder, *folder.parents) if os.path.exists(part)), folder)
    if os.path.exists(there) and not os.path.isdir(there):
        return f"{there} is a file and not a folder. Choose another folder with --keep."
    if error.errno in (errno.ENOSPC, errno.EDQUOT):
        return "the disk is full. Free some space, or choose a folder on another disk with --keep."
    if error.errno in (errno.EACCES, errno.EPERM, errno.EROFS):
        return f"you may not write in {there}. Mend its rights, or choose another folder with --keep."
    if error.errno in (errno.ENAMETOOLONG, errno.EINVAL):
        return "the system allows no folder of that name. Choose another one with --keep."
    return f"the system says “{error.strerror or error}”. Choose another folder with --keep."


def _lock(handle: int) -> bool:
    """Lock an open file for this process; False if another has it."""
    if os.name == "nt":
        try:
            msvcrt.locking(handle, msvcrt.LK_NBLCK, 1)
        except PermissionError:
            return False
        return True
    try:
        fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except BlockingIOError:
        return False
    return True


def _write_private(path: Path, data: bytes) -> None:
    """Write a file that only its owner can read, whole or not at all."""
    beside = path.with_name(f"{path.name}.{secrets.token_hex(4)}")
    try:
        with open(os.open(beside, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600), "wb") as file:
            file.write(data)
        os.replace(beside, path)
    except OSError:
        beside.unlink(missing_ok=True)
        raise


def _remove_pages(notice: Notice) -> None:
    """Remove the pages that a killed run left; only where they certainly are its own."""
    pages = Path(notice.pages)
    if notice.machine == platform.node() and pages.name.startswith("sweepbench-"):
        shutil.rmtree(pages, ignore_errors=True)
