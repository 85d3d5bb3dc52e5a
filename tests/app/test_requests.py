"""The whole workbench at the door: every route that there is, and who is turned away from it.

The routes are those of the running application, so a new one cannot be forgotten.
"""

import contextlib
import re

import pytest

from app.answers import MOST_BYTES_A_REQUEST, speak_plainly
from app.door import CLOSED, Door
from app.invitations import entry_link
from app.jobs import Jobs
from app.server import create_app
from app.serving import AddressRefused, listen
from core.store import Store
from tests.app.benches import LIT, bench

PORT = 8417
HOME = f"127.0.0.1:{PORT}"
DOOR = Door(PORT)
OTHER_RUN = Door(PORT)

# Who asks, and what differs from a good request. Each must be refused on every route, by every method.
STRANGERS = {
    "a wrong host": {"Host": f"evil.example:{PORT}"},
    "this machine under another port": {"Host": "127.0.0.1:80"},
    "a page of another site": {"Origin": "https://evil.example"},
    "a page without an origin": {"Origin": "null"},
    "another program on this machine": {"Origin": "http://127.0.0.1:5000"},
    "a link on another site": {"Sec-Fetch-Site": "cross-site"},
    "another port of this machine": {"Sec-Fetch-Site": "same-site"},
    "a browser without a key": {"Cookie": ""},
    "a browser with a guessed cookie": {"Cookie": f"{DOOR.session_cookie}={'0' * 64}"},
    "a browser of another run": {"Cookie": f"{DOOR.session_cookie}={OTHER_RUN.session}"},
    "a browser of another port": {"Cookie": f"sweepbench_session_80={DOOR.session}"},
    "a web socket": {"Upgrade": "websocket", "Connection": "Upgrade"},
}
# These may look, but not change.
WITHOUT_TOKEN = {
    "no token": {"X-CSRFToken": None},
    "a guessed token": {"X-CSRFToken": "0" * 64},
    "the session in place of the token": {"X-CSRFToken": DOOR.session},
    "the token of another run": {"X-CSRFToken": OTHER_RUN.csrf_token},
}
GOOD = {
    "Host": HOME,
    "Origin": f"http://{HOME}",
    "Sec-Fetch-Site": "same-origin",
    "X-CSRFToken": DOOR.csrf_token,
    "Cookie": f"{DOOR.session_cookie}={DOOR.session}",
}
METHODS = ("GET", "POST", "OPTIONS", "DELETE")
HEADERS = {
    "X-Content-Type-Options": "nosniff",
    "X-Frame-Options": "DENY",
    "Referrer-Policy": "no-referrer",
    "Cross-Origin-Opener-Policy": "same-origin",
    "Cross-Origin-Resource-Policy": "same-origin",
}


@pytest.fixture(scope="module")
def store(tmp_path_factory):
    with contextlib.closing(Store(tmp_path_factory.mktemp("kept"))) as store:
        yield store


@pytest.fixture(scope="module")
def server(store):
    with contextlib.closing(Jobs()) as jobs:
        app = create_app(store, DOOR, jobs)
        app.server.config["MAX_CONTENT_LENGTH"] = MOST_BYTES_A_REQUEST
        speak_plainly(app.server)
        DOOR.seal(app)
        yield app.server


def addresses(server):
    """An address for each route of the application."""
    found = {re.sub(r"<(?:[^:<>]+:)?([^<>]+)>", "x", rule.rule) for rule in server.url_map.iter_rules()}
    assert {"/live", "/_dash-update-component", "/files/x", "/files/import", "/files/export/x", "/"} <= found
    return sorted(found | {"/enter", "/nowhere", *(f"{path}x" for path in CLOSED)})


def ask(server, path, method="GET", **changed):
    headers = {name: value for name, value in {**GOOD, **changed}.items() if value is not None}
    host = {"HTTP_HOST": headers.get("Host", "")}
    return server.test_client(use_cookies=False).open(path, method=method, headers=headers, environ_overrides=host)


def assert_protected(answer):
    for name, value in HEADERS.items():
        assert answer.headers[name] == value
    policy = answer.headers["Content-Security-Policy"]
    assert policy.startswith("default-src 'none'; script-src 'self'") and "http" not in policy
    assert "frame-ancestors 'none'" in policy and "form-action 'none'" in policy and "unsafe-eval" not in policy


@pytest.mark.parametrize("who", STRANGERS)
def test_strangers_are_refused_on_every_route_by_every_method(server, store, who):
    before = [info.revision for info in store.workspaces()]
    for path in addresses(server):
        for method in METHODS:
            answer = ask(server, path, method, **STRANGERS[who])
            if path == "/enter" and method == "GET" and who in ("a link on another site", "another port of this machine"):
                continue  # the page that carries the key counts as another site; it shows nothing but the way on
            assert answer.status_code == 403, (who, method, path)
            assert_protected(answer)
            assert not answer.headers.getlist("Set-Cookie") and DOOR.csrf_token.encode() not in answer.data
            assert b"Traceback" not in answer.data
    assert [info.revision for info in store.workspaces()] == before


@pytest.mark.parametrize("who", WITHOUT_TOKEN)
def test_nothing_changes_without_the_token(server, store, who):
    before = store.workspaces()
    for path in addresses(server):
        for method in METHODS:
            if method in ("GET", "HEAD"):
                continue
            answer = ask(server, path, method, **WITHOUT_TOKEN[who])
            assert answer.status_code == 403, (who, method, path)
            assert_protected(answer)
    assert store.workspaces() == before


def test_every_answer_to_the_page_itself_carries_the_headers_too(server):
    seen = set()
    for path in addresses(server):
        for method in METHODS:
            answer = ask(server, path, method)
            seen.add(answer.status_code)
            assert answer.status_code != 403 and b"Traceback" not in answer.data, (method, path)
            assert_protected(answer)
            if not path.startswith(("/_dash-component-suites", "/assets")):
                assert answer.headers["Cache-Control"] == "no-store", (method, path)
            if answer.status_code >= 400 and method != "HEAD" and answer.is_json:
                assert answer.json["sentence"].endswith((".", "!")), (method, path)
    assert {200, 404, 405} <= seen


def test_a_key_that_was_used_or_belongs_to_another_run_opens_nothing(server):
    key = DOOR.invitations.new_key()
    way = entry_link("", key)
    assert ask(server, way, Cookie="").status_code == 200
    for old in (way, entry_link("", OTHER_RUN.invitations.new_key()), entry_link("", f"{key}x"), "/enter"):
        refused = ask(server, old, Cookie="")
        assert refused.status_code == 403
        assert not refused.headers.getlist("Set-Cookie")


def test_endpoints_of_the_framework_that_are_not_used_are_closed(server):
    for path in CLOSED:
        for method in METHODS:
            assert ask(server, path, method).status_code == 404


def test_no_get_changes_anything(server, store):
    workspace = store.create("looked at")
    (entry,) = _with_sweep(store, workspace)
    before = store.current(workspace)
    for path in addresses(server):
        for here in (path.replace("/x", f"/{workspace}"), f"{path.replace('/x', f'/{workspace}')}?entries={entry}"):
            ask(server, here)
    assert store.current(workspace) is before


def _with_sweep(store, workspace):
    filled, entries = bench(LIT)
    records = filled.records()
    readings = {name: sweep.to_dict() for name, sweep in filled.readings().items()}
    store.commit(workspace, {"label": "add", "put": {**records, "readings": readings}}, 0)
    return entries


def test_only_loopback_is_listened_on_by_default():
    for sock in listen(0):
        with sock:
            assert sock.getsockname()[0] == "127.0.0.1"
    for everything in ("0.0.0.0", "::"):
        with pytest.raises(AddressRefused):
            listen(0, everything)
