"""Keys that let a browser in once, and the files that carry them there.

A key on a command line could be read by every user of the machine, so a browser is started
with the path of a small page that only its owner can read; the page leads on with the key.

A key is a random text with its signature. Whoever can read the run's secret can write one, so
a second start of the program on the same folder can invite a browser into the first without
asking it for anything. Used keys are remembered, and a new run has a new secret.
"""

from __future__ import annotations

import contextlib
import hashlib
import hmac
import html
import os
import secrets
import shutil
import sys
import tempfile
import threading
from pathlib import Path

_PAGE = """<!doctype html>
<html lang="en"><head><meta charset="utf-8"><title>Opening Sweepbench</title>
<meta name="referrer" content="no-referrer">
<meta http-equiv="Content-Security-Policy" content="default-src 'none'">
<meta http-equiv="refresh" content="0;url={link}"></head>
<body><p>Opening Sweepbench. If nothing happens, follow <a href="{link}">this link</a>; it works once.</p></body></html>
"""


class Invitations:
    """Writes and redeems the keys of one run.

    Parameters
    ----------
    secret : str, optional
        What keys are signed with; a fresh one unless given.
    directory : Path, optional
        Folder for the pages; made at the first page, with owner-only rights, unless given.
    """

    def __init__(self, secret: str | None = None, directory: Path | None = None):
        self.secret = secret or secrets.token_urlsafe(32)
        self._directory = directory
        self._used: set[str] = set()
        self._lock = threading.Lock()

    @property
    def directory(self) -> Path:
        with self._lock:
            if self._directory is None:
                self._directory = _owner_only_directory()
            return self._directory

    def new_key(self) -> str:
        """A key that works once."""
        nonce = secrets.token_urlsafe(32)
        return f"{nonce}.{self._signature(nonce)}"

    def redeem(self, key: str) -> bool:
        """Whether the key is good; from now on it is not, and its page is gone."""
        nonce, _, signature = key.partition(".")
        # Bytes, because compare_digest refuses text beyond ASCII.
        if not hmac.compare_digest(signature.encode(), self._signature(nonce).encode()):
            return False
        with self._lock:
            if nonce in self._used:
                return False
            self._used.add(nonce)
        if self._directory is not None:
            with contextlib.suppress(OSError):  # a page that cannot be removed leads nowhere any more
                (self._directory / _page_name(key)).unlink(missing_ok=True)
        return True

    def write_page(self, address: str) -> Path:
        """A page, readable by its owner alone, that leads a browser into ``address`` once."""
        key = self.new_key()
        page = self.directory / _page_name(key)
        handle = os.open(page, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600)
        with open(handle, "w", encoding="utf-8") as file:
            file.write(_PAGE.format(link=html.escape(entry_link(address, key))))
        return page

    def remove_pages(self) -> None:
        """Remove the folder of pages, used or not."""
        with self._lock:
            if self._directory is not None:
                shutil.rmtree(self._directory, ignore_errors=True)

    def _signature(self, nonce: str) -> str:
        return hmac.new(self.secret.encode(), nonce.encode(), hashlib.sha256).hexdigest()


def entry_link(address: str, key: str) -> str:
    """The link that lets a browser into the program at an address such as http://127.0.0.1:8417."""
    return f"{address}/enter?key={key}"


def _page_name(key: str) -> str:
    # Named after a digest, so that redeeming finds the page and its path tells nothing.
    return f"open-sweepbench-{hashlib.sha256(key.encode()).hexdigest()[:16]}.html"


def _owner_only_directory() -> Path:
    # Browsers packed as snaps see neither /tmp nor hidden folders, so they get a plain folder at home.
    # On Windows the folder for temporary files lies in the user's own profile.
    at_home = sys.platform.startswith("linux") and Path("/snap").is_dir()
    for parent in (Path.home() if at_home else None, None):
        with contextlib.suppress(OSError):
            return Path(tempfile.mkdtemp(prefix="sweepbench-", dir=parent))
    return Path(tempfile.mkdtemp(prefix="sweepbench-"))
