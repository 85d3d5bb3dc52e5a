"""One running server on one folder: everything made, wired together and taken down again."""

from __future__ import annotations

import contextlib
import ipaddress
import os
import platform
import socket
import threading
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING

import waitress
from waitress import wasyncore
from waitress.channel import HTTPChannel

from core.errors import SweepbenchError
from core.store import Store

from .answers import MOST_BYTES_A_REQUEST, speak_plainly
from .door import Door
from .folder import Folder, Notice
from .invitations import Invitations
from .jobs import Jobs

THREADS = 8
PORTS_TO_TRY = 20

if TYPE_CHECKING:
    import dash

    MakeApp = Callable[[Store, Door, Jobs], dash.Dash]


class AddressRefused(SweepbenchError):
    """The server cannot listen at the address that was asked for."""


class Running:
    """A server that answers until it is closed.

    Attributes
    ----------
    url : str
        Where it is reached on this machine, without a key.
    network_url : str or None
        Where other machines reach it.
    store, door, jobs
        What it works with.
    was_killed : bool
        Whether the run before this one on the same folder did not end by itself.
    """

    def __init__(self, folder: Path, port: int, network_address: str | None, make_app: MakeApp | None):
        with contextlib.ExitStack() as undo:
            held = Folder(folder)
            undo.callback(held.release)
            self.was_killed = held.was_killed
            self.store = Store(folder)
            undo.callback(self.store.close)
            sockets = listen(port, network_address)
            for listening in sockets:
                undo.callback(listening.close)
            bound = sockets[0].getsockname()[1]
            invitations = Invitations()
            undo.callback(invitations.remove_pages)
            self.door = Door(
                bound,
                # On a network, where a cookie can be overheard, it must not outlive the run.
                secret=None if network_address else held.secret(),
                invitations=invitations,
                network_hosts=_names(network_address),
            )
            self.url = self.door.address
            self.network_url = _url(network_address, bound) if network_address else None
            self.jobs = Jobs()
            undo.callback(self.jobs.close)
            if make_app is None:
                # Here, because the screens take a while to import; a start that only joins needs none of them.
                from .server import create_app as make_app
            app = make_app(self.store, self.door, self.jobs)
            app.server.config["MAX_CONTENT_LENGTH"] = MOST_BYTES_A_REQUEST
            speak_plainly(app.server)
            self.door.seal(app)
            server = _Server(app.server, sockets)
            undo.callback(server.stop)
            held.announce(
                Notice(
                    self.url,
                    os.getpid(),
                    platform.node(),
                    str(invitations.directory),
                    invitations.secret,
                    self.network_url,
                )
            )
            self._undo = undo.pop_all()

    @property
    def entry_url(self) -> str:
        """A link that lets a browser in; it works once, so each reading gives another."""
        return self.door.new_link()

    def write_page(self, *, for_network: bool = False) -> Path:
        """A page that only its owner can read and that lets a browser in once."""
        return self.door.invitations.write_page((for_network and self.network_url) or self.url)

    def close(self) -> None:
        """Finish what is being answered and let the folder go; a second call changes nothing."""
        self._undo.close()

    def __enter__(self) -> Running:
        return self

    def __exit__(self, *_error) -> None:
        self.close()


def serve(
    folder: Path, port: int = 0, *, network_address: str | None = None, make_app: MakeApp | None = None
) -> Running:
    """Start a server in threads of its own and come back at once.

    Parameters
    ----------
    folder : Path
        Where the work is kept; one server at a time.
    port : int
        Port to listen on, or the next free one; 0 for any.
    network_address : str, optional
        Address of this machine by which others may reach the server too.
    make_app : callable, optional
        Makes the application from store, door and jobs; the workbench unless given.

    Raises
    ------
    StoreFailed
        The folder cannot be used, or another run holds it.
    AddressRefused
        Nothing can listen at the address or port.
    """
    return Running(Path(folder), port, network_address, make_app)


def listen(port: int, network_address: str | None = None) -> list[socket.socket]:
    """Sockets bound to loopback, and to the network address if one is given, at one port.

    A port that is taken gives way to the next free one.
    """
    addresses = ["127.0.0.1"]
    if network_address is not None:
        addresses += [found for found in _names(network_address, numeric=True) if found != "127.0.0.1"]
    following = range(port + 1, min(port + PORTS_TO_TRY, 65536)) if port else range(PORTS_TO_TRY)
    for candidate in (port, *(following if port else (0 for _ in following))):
        try:
            return _bound(addresses, candidate)
        except PermissionError as error:
            raise AddressRefused(f"This user may not listen on port {candidate}. Choose one above 1023.") from error
        except OSError:
            continue
    raise AddressRefused(
        f"No port from {port} on is free at {' and '.join(addresses)}. Choose another one with --port."
        if port
        else f"Nothing can listen at {' and '.join(addresses)}. Give an address of this machine."
    )


def _bound(addresses: list[str], port: int) -> list[socket.socket]:
    with contextlib.ExitStack() as undo:
        sockets = []
        for address in addresses:
            family = socket.AF_INET6 if ":" in address else socket.AF_INET
            listening = undo.enter_context(socket.socket(family, socket.SOCK_STREAM))
            if os.name == "nt":  # there, SO_REUSEADDR would share the port with another program
                listening.setsockopt(socket.SOL_SOCKET, socket.SO_EXCLUSIVEADDRUSE, 1)
            else:
                listening.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
            listening.bind((address, port))
            listening.listen()  # only this tells that another program listens on the port
            port = listening.getsockname()[1]
            sockets.append(listening)
        undo.pop_all()
        return sockets


def _names(address: str | None, *, numeric: bool = False) -> list[str]:
    """What a browser may call an address: as given, and what the name stands for."""
    if address is None:
        return []
    try:
        found = {entry[4][0] for entry in socket.getaddrinfo(address, None, type=socket.SOCK_STREAM)}
    except (OSError, UnicodeError) as error:
        raise AddressRefused(f"The address {address} is not known. Give one of this machine's addresses.") from error
    if any(ipaddress.ip_address(name.partition("%")[0]).is_unspecified for name in found):
        raise AddressRefused(
            f"{address} stands for every address at once. Give the one address by which others reach this machine, "
            "so that requests under any other name can be refused."
        )
    return sorted(found) if numeric else sorted({address, *found})


def _url(address: str, port: int) -> str:
    return f"http://[{address}]:{port}" if ":" in address else f"http://{address}:{port}"


class _Server:
    """The WSGI server in a thread of its own."""

    def __init__(self, application, sockets: list[socket.socket]):
        self._map: dict = {}
        self._stopping = threading.Event()
        self._server = waitress.create_server(
            application,
            map=self._map,
            sockets=sockets,
            threads=THREADS,
            max_request_body_size=MOST_BYTES_A_REQUEST + 1024**2,  # the application says it in words before
            ident=None,
        )
        self._thread = threading.Thread(target=self._run, name="sweepbench server", daemon=True)
        self._thread.start()

    def stop(self) -> None:
        self._stopping.set()
        self._thread.join()

    def _run(self) -> None:
        while not self._stopping.is_set():
            # In short turns, so that stopping needs no signal; a request wakes it at once.
            wasyncore.loop(timeout=0.2, use_poll=True, map=self._map, count=1)
        self._server.task_dispatcher.shutdown()  # waits for what is being answered
        wasyncore.loop(timeout=0, use_poll=True, map=self._map, count=10)  # and sends it
        for channel in list(self._map.values()):
            if isinstance(channel, HTTPChannel):
                channel.handle_close()  # lets go of a long answer's file too, which close_all would leave open
        wasyncore.close_all(self._map)
