"""The door: which requests the server answers at all.

The program listens on the user's own machine, where three others could knock: a web page of
somebody else in the user's browser, another user of the machine, and a name that a hostile
site points at the loopback address. Every request therefore needs the right Host, no foreign
Origin, a fetch from the program's own pages, and the session cookie that one single-use key
was answered with; whatever may change something needs the token of the session as well.

Cookies ignore ports, so both are named after the port. The session and its token are derived
from a secret: with the one kept in the workspace's folder a page that is open goes on after a
restart. The price is that the cookie stays good until that file is deleted; it reaches nobody
who could not read the folder, or the browser's own profile, anyway.
"""

from __future__ import annotations

import hashlib
import hmac
import html
import secrets
from collections.abc import Iterable
from typing import TYPE_CHECKING

import flask

from .answers import answer
from .invitations import Invitations, entry_link

if TYPE_CHECKING:
    import dash

CSRF_HEADER = "X-CSRFToken"

# Endpoints of the framework that the program does not use, switched on or not.
CLOSED = ("/_mcp", "/_reload-hash", "/_alive_", "/_dash_startup_route", "/_dash-ws", "/_dash-health")

_POLICY = {
    "default-src": "'none'",
    "script-src": "'self'",
    "style-src": "'self' 'unsafe-inline'",  # Plotly writes style attributes
    "img-src": "'self' data: blob:",
    "font-src": "'self' data:",
    "connect-src": "'self'",
    "worker-src": "'self' blob:",
    "base-uri": "'none'",
    "form-action": "'none'",
    "frame-ancestors": "'none'",
}

_HEADERS = {
    "X-Content-Type-Options": "nosniff",
    "X-Frame-Options": "DENY",
    "Referrer-Policy": "no-referrer",
    "Cross-Origin-Opener-Policy": "same-origin",
    "Cross-Origin-Resource-Policy": "same-origin",
    "Permissions-Policy": "camera=(), microphone=(), geolocation=()",
}

_PAGE = """<!doctype html>
<html lang="en"><head><meta charset="utf-8"><title>Sweepbench</title>{head}</head>
<body style="font-family: system-ui, sans-serif; max-width: 34em; margin: 4em auto"><p>{sentence}</p></body></html>
"""

_NO_KEY = (
    "This browser has not been let in yet. Start Sweepbench again, which opens a page that lets it in, "
    "or open the file that Sweepbench named when it started; the link in it works once."
)
_WRONG_HOST = "Sweepbench does not answer at this address. Open {address} instead."
_FOREIGN = (
    "This request came from another web page, so Sweepbench did not answer it. Open {address} in a tab of its own."
)
_NO_TOKEN = "This page is older than the program that it talks to. Reload the page and make the change again."


class Door:
    """Guards one server.

    Parameters
    ----------
    port : int
        The port that the server listens on.
    secret : bytes, optional
        What session and token are derived from; a fresh one unless given.
    invitations : Invitations, optional
        Keys that let a browser in.
    network_hosts : iterable of str
        Addresses besides the loopback ones by which other machines may reach the server.
    """

    def __init__(
        self,
        port: int,
        *,
        secret: bytes | None = None,
        invitations: Invitations | None = None,
        network_hosts: Iterable[str] = (),
    ):
        self.port = port
        self.address = f"http://127.0.0.1:{port}"
        self.invitations = invitations or Invitations()
        self.session_cookie = f"sweepbench_session_{port}"
        self.csrf_cookie = f"sweepbench_token_{port}"
        secret = secret or secrets.token_bytes(32)
        self.session = _derived(secret, f"session {port}")
        self.csrf_token = _derived(secret, f"token {port}")
        names = ["127.0.0.1", "localhost", "[::1]", *(_bracketed(host) for host in network_hosts)]
        self.hosts = frozenset(f"{name}:{port}" for name in names) | (frozenset(names) if port == 80 else frozenset())
        self._guarded: list[flask.Flask] = []
        self._script_hashes: tuple[str, ...] = ()

    def new_link(self) -> str:
        """A link that lets a browser in once."""
        return entry_link(self.address, self.invitations.new_key())

    def guard(self, server: flask.Flask) -> None:
        """Check every request to this server and mark every answer; a second call changes nothing."""
        if not any(known is server for known in self._guarded):
            self._guarded.append(server)
            # First in line: nothing of the application runs for a request that is refused.
            server.before_request_funcs.setdefault(None, []).insert(0, self._check)
            server.after_request(self._mark)

    def seal(self, app: dash.Dash) -> None:
        """Guard a Dash application and allow exactly its own inline scripts; call when all callbacks exist."""
        self.guard(app.server)
        self._script_hashes = tuple(app.csp_hashes())

    def _check(self) -> flask.Response | None:
        request = flask.request
        host = request.environ.get("HTTP_HOST", "").lower()
        if host not in self.hosts:
            return self._refuse(_WRONG_HOST)
        origin = request.headers.get("Origin")
        if origin is not None and origin.lower() != f"http://{host}":
            return self._refuse(_FOREIGN)
        if "Upgrade" in request.headers:
            return self._refuse("Sweepbench does not use web sockets.")
        if request.method == "GET" and request.path == "/enter":
            return self._enter()
        if request.headers.get("Sec-Fetch-Site", "none") not in ("same-origin", "none"):
            return self._refuse(_FOREIGN)
        if not self._let_in():
            return self._refuse(_NO_KEY)
        if request.method not in ("GET", "HEAD") and not _same(request.headers.get(CSRF_HEADER), self.csrf_token):
            return self._refuse(_NO_TOKEN)
        if request.path.startswith(CLOSED):
            return self._refuse("There is nothing here.", status=404)
        return None

    def _enter(self) -> flask.Response:
        """Exchange a key for the session cookie.

        The page that carries the key is a file, so the browser reports this one request as
        coming from elsewhere; the key speaks for it. For the same reason a redirect would not
        carry the strict cookie along: the answer is a page that goes on by itself.
        """
        as_page = flask.request.headers.get("Sec-Fetch-Dest", "document") == "document"
        entered = as_page and self.invitations.redeem(flask.request.args.get("key", ""))
        if not entered and not self._let_in():
            return self._refuse(_NO_KEY)
        page = _page("Opening Sweepbench.", head='<meta http-equiv="refresh" content="0;url=/">')
        page.set_cookie(self.session_cookie, self.session, httponly=True, samesite="Strict")
        return page

    def _let_in(self) -> bool:
        return _same(flask.request.cookies.get(self.session_cookie), self.session)

    def _refuse(self, sentence: str, status: int = 403) -> flask.Response:
        sentence = sentence.format(address=self.address)
        # A browser that opens a page names HTML; a page that fetches takes anything and wants the sentence.
        if "text/html" in flask.request.headers.get("Accept", ""):
            return _page(html.escape(sentence), status=status)
        return answer(sentence, status)

    def _mark(self, response: flask.Response) -> flask.Response:
        policy = _POLICY | {"script-src": " ".join((_POLICY["script-src"], *self._script_hashes))}
        response.headers["Content-Security-Policy"] = "; ".join(f"{name} {value}" for name, value in policy.items())
        response.headers.update(_HEADERS)
        # Measurements stay out of the browser's cache; the framework's own scripts may stay in.
        response.headers.setdefault("Cache-Control", "no-store")
        if response.status_code == 200 and response.mimetype == "text/html" and flask.request.method == "GET":
            # Readable by the page, which sends it back with every change.
            response.set_cookie(self.csrf_cookie, self.csrf_token, samesite="Strict")
        return response


def _page(sentence: str, *, head: str = "", status: int = 200) -> flask.Response:
    return flask.Response(_PAGE.format(sentence=sentence, head=head), status=status, mimetype="text/html")


def _derived(secret: bytes, purpose: str) -> str:
    return hmac.new(secret, purpose.encode(), hashlib.sha256).hexdigest()


def _same(given: str | None, expected: str) -> bool:
    return given is not None and hmac.compare_digest(given.encode(), expected.encode())


def _bracketed(host: str) -> str:
    return f"[{host}]" if ":" in host and not host.startswith("[") else host.lower()
