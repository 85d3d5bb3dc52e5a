"""The console command: start the workbench, open the browser, stop on Ctrl+C."""

from __future__ import annotations

import argparse
import contextlib
import logging
import logging.handlers
import os
import platform
import signal
import sys
import threading
import time
import webbrowser
from collections.abc import Iterator, Sequence
from importlib import metadata
from pathlib import Path

import platformdirs

# Fits solve many small systems: threads of the linear algebra would only fight over the processors, with each other and
# with the workers. It is read when numpy is first imported, by this process and by its workers.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

from core.errors import SweepbenchError

from .folder import FolderInUse, Notice, read_notice
from .invitations import Invitations
from .serving import serve

PORT = 8417  # of our own choosing; registered to nobody that we know of

LARGEST_PORT = 65535

PATIENCE = 5.0  # [s] for another start on the same folder to say where it is reached


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the workbench until it is stopped; returns the exit status."""
    options = _parser().parse_args(arguments)
    try:
        return _run(options)
    except FolderInUse as in_use:
        return _join(options, in_use)
    except SweepbenchError as error:
        print(error, file=sys.stderr)
        return 2


def _run(options: argparse.Namespace) -> int:
    with (
        _stop_signal() as stop,
        serve(options.keep, options.port, network_address=options.serve_network) as running,
    ):
        _log_to(options.keep / "sweepbench.log")
        if options.port and running.door.port != options.port:
            print(f"Port {options.port} is taken, so Sweepbench uses {running.door.port}.")
        if running.was_killed:
            print("Sweepbench was ended abruptly last time; everything that it had confirmed is there.")
        print(f"Sweepbench runs at {running.url} and keeps its work in {options.keep}.")
        if running.network_url:
            _warn(running.network_url, running.write_page(for_network=True))
        _open(running.write_page(), options.browser)
        print("Press Ctrl+C to stop.", flush=True)
        while not stop.wait(0.5):  # with a timeout, because on Windows a plain wait does not hear Ctrl+C
            pass
        print("Stopping.", flush=True)
    print("Sweepbench has stopped; everything is kept.")
    return 0


@contextlib.contextmanager
def _stop_signal() -> Iterator[threading.Event]:
    """An event that Ctrl+C, or the system's request to end, sets."""
    stop = threading.Event()
    before = {name: signal.signal(name, lambda *_: stop.set()) for name in (signal.SIGINT, signal.SIGTERM)}
    try:
        yield stop
    finally:
        for name, handler in before.items():
            signal.signal(name, handler)


def _join(options: argparse.Namespace, in_use: FolderInUse) -> int:
    """Open the browser at the run that holds the folder."""
    notice = in_use.notice or _later_notice(options.keep)
    if notice is None or notice.machine != platform.node():
        print(in_use, file=sys.stderr)
        return 2
    invitations = Invitations(notice.key_secret, Path(notice.pages))
    try:
        page = invitations.write_page(notice.address)
        network_page = invitations.write_page(notice.network_address) if notice.network_address else None
    except OSError:
        print(in_use, file=sys.stderr)
        return 2
    print(f"Sweepbench is already running at {notice.address} on this folder.")
    if options.serve_network and not network_page:
        print("It does not serve other machines; stop it first to start it with --serve-network.")
    if network_page:
        _warn(notice.network_address, network_page)
    _open(page, options.browser)
    return 0


def _later_notice(folder: Path) -> Notice | None:
    """The notice of a run that has only just begun."""
    until = time.monotonic() + PATIENCE
    while (notice := read_notice(folder)) is None and time.monotonic() < until:
        time.sleep(0.1)
    return notice


def _open(page: Path, browser: bool) -> None:
    """Open the page in the user's browser; its path may be seen by all, what stands in it not."""
    # Without a screen, a browser that runs in the terminal would take it over.
    screen = os.name == "nt" or sys.platform == "darwin" or os.environ.keys() & {"DISPLAY", "WAYLAND_DISPLAY"}
    if browser and screen and webbrowser.open(page.as_uri()):
        print(f"Your browser should open now. If it does not, open this file in it: {page}")
    else:
        print(f"Open this file in your browser: {page}")


def _warn(address: str, page: Path) -> None:
    print(
        f"WARNING: other machines can reach this program at {address}. Whoever has a key can read and change "
        "everything, and nothing on the way is encrypted: use it only on a network that you trust. "
        f"A link for one other browser stands in {page}; it works once."
    )


def _log_to(path: Path) -> None:
    """Tracebacks go to a file that does not grow for ever; the console gets their sentences."""
    to_file = logging.handlers.RotatingFileHandler(path, maxBytes=10**6, backupCount=3, encoding="utf-8", delay=True)
    to_file.setFormatter(logging.Formatter("%(asctime)s %(levelname)s %(name)s: %(message)s"))
    to_console = logging.StreamHandler()
    to_console.setLevel(logging.ERROR)
    to_console.setFormatter(_SentencesOnly(path))
    logging.basicConfig(level=logging.INFO, handlers=[to_file, to_console], force=True)


class _SentencesOnly(logging.Formatter):
    def __init__(self, path: Path):
        super().__init__()
        self._path = path

    def format(self, record: logging.LogRecord) -> str:
        return f"{record.getMessage().splitlines()[0]} The details are in {self._path}."


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="sweepbench",
        description="A workbench for current–voltage sweeps of solar cells, in your browser, on your machine alone.",
    )
    parser.add_argument(
        "--keep",
        type=_folder,
        metavar="FOLDER",
        default=platformdirs.user_data_path("sweepbench", appauthor=False),
        help="folder that the work is kept in (%(default)s)",
    )
    parser.add_argument(
        "--port", type=_port, default=PORT, help="port to use, or the next free one (%(default)s; 0 for any)"
    )
    parser.add_argument("--no-browser", dest="browser", action="store_false", help="do not open the browser")
    parser.add_argument(
        "--serve-network",
        metavar="ADDRESS",
        help="let other machines in by this address of this machine; unencrypted, for trusted networks only",
    )
    parser.add_argument("--version", action="version", version=f"Sweepbench {_version()}")
    return parser


def _folder(text: str) -> Path:
    """The folder of ``--keep``; an unset variable of the shell arrives as an empty text and would mean the current folder."""
    if not text.strip():
        raise argparse.ArgumentTypeError("no folder is named. Give its path, or leave --keep out to use the usual one.")
    return Path(text).expanduser().absolute()


def _port(text: str) -> int:
    if not (text.isascii() and text.isdigit() and int(text) <= LARGEST_PORT):
        raise argparse.ArgumentTypeError(
            f"“{text}” is not a port. Give a whole number from 1 to {LARGEST_PORT}, or 0 for any free one."
        )
    return int(text)


def _version() -> str:
    try:
        return metadata.version("sweepbench")
    except metadata.PackageNotFoundError:
        return "(not installed)"
