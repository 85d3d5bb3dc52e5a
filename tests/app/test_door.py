"""Who is let in, and who is not."""

import base64
import hashlib
import os
import re
import stat

import dash
import flask
import pytest
from dash import dcc, html

from app.door import Door
from app.invitations import Invitations

PORT = 8417
HOME = f"127.0.0.1:{PORT}"


@pytest.fixture
def door():
    return Door(PORT)


@pytest.fixture
def server(door):
    server = flask.Flask(__name__)
    server.add_url_rule("/", "page", lambda: "<!doctype html><p>the workbench</p>")
    server.add_url_rule("/change", "change", lambda: {"changed": True}, methods=["POST", "PUT", "DELETE", "PATCH"])
    door.guard(server)
    return server


class Browser:
    """A test client that behaves like a browser at the door."""

    def __init__(self, server, door):
        self.client = server.test_client()
        self.door = door

    def ask(self, path="/", method="GET", **headers):
        headers = {name.replace("_", "-"): value for name, value in ({"Host": HOME} | headers).items() if value}
        host = {"HTTP_HOST": headers.get("Host", "")}
        return self.client.open(path, method=method, headers=headers, environ_overrides=host)

    def enter(self, **headers):
        return self.ask(_path(self.door.new_link()), Sec_Fetch_Site="cross-site", Sec_Fetch_Dest="document", **headers)

    def cookie(self, name):
        return self.client.get_cookie(name, domain="127.0.0.1") or self.client.get_cookie(name, domain="localhost")


def _path(link):
    return link.removeprefix(f"http://{HOME}")


@pytest.fixture
def stranger(server, door):
    return Browser(server, door)


@pytest.fixture
def guest(server, door):
    browser = Browser(server, door)
    assert browser.enter().status_code == 200
    return browser


def test_a_key_lets_in_once_and_with_a_strict_cookie_that_scripts_cannot_read(server, door):
    link = _path(door.new_link())
    first, second = Browser(server, door), Browser(server, door)
    answer = first.ask(link)
    assert answer.status_code == 200
    session = next(c for c in answer.headers.getlist("Set-Cookie") if c.startswith(door.session_cookie))
    assert "HttpOnly" in session and "SameSite=Strict" in session and "Domain" not in session
    assert str(PORT) in door.session_cookie and str(PORT) in door.csrf_cookie
    assert first.ask("/").status_code == 200
    assert second.ask(link).status_code == 403
    assert second.ask("/").status_code == 403


def test_the_way_in_goes_on_from_a_page_of_its_own(stranger):
    """A redirect would count as coming from elsewhere, and a strict cookie would stay at home."""
    answer = stranger.enter()
    assert answer.status_code == 200 and 'content="0;url=/"' in answer.text


def test_a_change_needs_the_token_that_the_page_was_given(guest, door):
    assert guest.ask("/").status_code == 200
    token = guest.cookie(door.csrf_cookie).value
    assert guest.ask("/change", "POST", X_CSRFToken=token, Origin=f"http://{HOME}").json == {"changed": True}


# What is asked, by whom, and with which headers. Each differs from a good request in one thing.
REFUSED = [
    ("a name that somebody pointed here", "guest", "GET", "/", {"Host": f"evil.example:{PORT}"}),
    ("the right name at another port", "guest", "GET", "/", {"Host": "127.0.0.1:80"}),
    ("no port", "guest", "GET", "/", {"Host": "127.0.0.1"}),
    ("no name", "guest", "GET", "/", {"Host": ""}),
    ("a name that only begins well", "guest", "GET", "/", {"Host": f"127.0.0.1.evil.example:{PORT}"}),
    ("a user before the name", "guest", "GET", "/", {"Host": f"127.0.0.1:{PORT}@evil.example"}),
    ("every address", "guest", "GET", "/", {"Host": f"0.0.0.0:{PORT}"}),
    ("a wrong name with a good key", "stranger", "GET", "KEY", {"Host": f"evil.example:{PORT}"}),
    ("another web page's origin", "guest", "GET", "/", {"Origin": "https://evil.example"}),
    ("an origin that hides", "guest", "GET", "/", {"Origin": "null"}),
    ("another program's origin on this machine", "guest", "GET", "/", {"Origin": "http://127.0.0.1:9999"}),
    ("the origin of another name of this machine", "guest", "GET", "/", {"Origin": f"http://localhost:{PORT}"}),
    ("an empty origin", "guest", "POST", "/change", {"X_CSRFToken": "TOKEN", "Origin": " "}),
    ("another site", "guest", "GET", "/", {"Sec_Fetch_Site": "cross-site"}),
    ("another port of the same site", "guest", "GET", "/", {"Sec_Fetch_Site": "same-site"}),
    ("an unknown kind of site", "guest", "GET", "/", {"Sec_Fetch_Site": "anything"}),
    ("no cookie", "stranger", "GET", "/", {}),
    ("no cookie, asset", "stranger", "GET", "/assets/live.js", {}),
    ("no cookie, nothing there", "stranger", "GET", "/nowhere", {}),
    ("no cookie, only looking", "stranger", "HEAD", "/", {}),
    ("a cookie of one's own making", "stranger", "GET", "/", {"Cookie": f"sweepbench_session_{PORT}=guess"}),
    ("a cookie beyond ASCII", "stranger", "GET", "/", {"Cookie": f"sweepbench_session_{PORT}=\xe9"}),
    ("no key", "stranger", "GET", "/enter", {}),
    ("an empty key", "stranger", "GET", "/enter?key=", {}),
    ("a key of one's own making", "stranger", "GET", "/enter?key=guess.guess", {}),
    ("a key beyond ASCII", "stranger", "GET", "/enter?key=%E9.%C3%A9", {}),
    ("a key that was used", "stranger", "GET", "OLD KEY", {}),
    ("a key of another run", "stranger", "GET", "OTHER KEY", {}),
    ("a good key in a picture's address", "stranger", "GET", "KEY", {"Sec_Fetch_Dest": "image"}),
    ("a good key in a frame", "stranger", "GET", "KEY", {"Sec_Fetch_Dest": "iframe"}),
    ("a good key, posted", "stranger", "POST", "KEY", {}),
    ("a good key, only looked at", "stranger", "HEAD", "KEY", {}),
    ("no token", "guest", "POST", "/change", {}),
    ("a wrong token", "guest", "POST", "/change", {"X_CSRFToken": "guess"}),
    ("a token without the cookie", "stranger", "POST", "/change", {"X_CSRFToken": "TOKEN"}),
    ("no token, other ways to change", "guest", "PUT", "/change", {}),
    ("no token, deleting", "guest", "DELETE", "/change", {}),
    ("no token, mending", "guest", "PATCH", "/change", {}),
    ("asking what is allowed", "guest", "OPTIONS", "/change", {}),
    ("a form from another site", "guest", "POST", "/change", {"X_CSRFToken": "TOKEN", "Sec_Fetch_Site": "cross-site"}),
    ("a page that knows the token", "guest", "POST", "/change", {"X_CSRFToken": "TOKEN", "Origin": "http://a.eu"}),
    ("a web socket", "guest", "GET", "/_dash-ws-callback", {"Upgrade": "websocket", "Connection": "Upgrade"}),
    ("a web socket anywhere", "guest", "GET", "/", {"Upgrade": "websocket", "Connection": "Upgrade"}),
    ("a tool's endpoint without a token", "guest", "POST", "/_mcp", {}),
]


@pytest.mark.parametrize(("what", "who", "method", "path", "headers"), REFUSED, ids=[case[0] for case in REFUSED])
def test_refused(what, who, method, path, headers, door, request):
    browser = request.getfixturevalue(who)
    if path == "OLD KEY":
        path = _path(door.new_link())
        assert Browser(browser.client.application, door).ask(path).status_code == 200
    path = {"KEY": _path(door.new_link()), "OTHER KEY": _path(Door(PORT).new_link())}.get(path, path)
    headers = {name: door.csrf_token if value == "TOKEN" else value for name, value in headers.items()}
    answer = browser.ask(path, method, **headers)
    assert answer.status_code == 403
    assert not any(door.session in cookie for cookie in answer.headers.getlist("Set-Cookie"))
    assert door.csrf_token not in str(answer.headers)
    assert "the workbench" not in answer.text


@pytest.mark.parametrize("path", ["/_mcp", "/_reload-hash", "/_alive_1", "/_dash_startup_route/x"])
def test_endpoints_of_the_framework_that_are_not_used_are_closed_to_guests_too(guest, door, path):
    assert guest.ask(path).status_code == 404
    assert guest.ask(path, "POST", X_CSRFToken=door.csrf_token).status_code == 404


@pytest.mark.parametrize("host", [HOME, f"localhost:{PORT}", f"LOCALHOST:{PORT}", f"[::1]:{PORT}"])
def test_this_machine_may_be_called_by_each_of_its_names(server, door, host):
    assert Browser(server, door).enter(Host=host).status_code == 200


def test_a_refusal_says_how_to_get_in(stranger):
    page = stranger.ask("/", Accept="text/html")
    assert page.mimetype == "text/html" and "Start Sweepbench again" in page.text
    assert "Start Sweepbench again" in stranger.ask("/change", "POST", Accept="*/*").json["sentence"]


@pytest.mark.parametrize("who", ["guest", "stranger"])
def test_every_answer_carries_the_protective_headers(who, request):
    headers = request.getfixturevalue(who).ask("/").headers
    assert headers["X-Content-Type-Options"] == "nosniff"
    assert headers["Referrer-Policy"] == "no-referrer"
    assert headers["Cross-Origin-Opener-Policy"] == headers["Cross-Origin-Resource-Policy"] == "same-origin"
    assert headers["Cache-Control"] == "no-store"
    policy = headers["Content-Security-Policy"]
    assert policy.startswith("default-src 'none'; script-src 'self';")
    assert "frame-ancestors 'none'" in policy and "http" not in policy


def test_an_open_page_goes_on_after_a_restart_on_the_same_folder(server):
    secret = b"s" * 32
    before, after, elsewhere = (Door(port, secret=secret) for port in (PORT, PORT, PORT + 1))
    assert (before.session, before.csrf_token) == (after.session, after.csrf_token)
    assert before.session != before.csrf_token
    assert elsewhere.session != before.session


def test_a_network_address_is_let_in_only_where_it_was_asked_for():
    assert "192.0.2.7:8417" in Door(PORT, network_hosts=["192.0.2.7"]).hosts
    assert "[2001:db8::7]:8417" in Door(PORT, network_hosts=["2001:db8::7"]).hosts
    assert len(Door(PORT).hosts) == 3


def test_guarding_twice_checks_once(server, door):
    before = len(server.before_request_funcs[None])
    door.guard(server)
    assert len(server.before_request_funcs[None]) == before


# The real framework


@pytest.fixture
def dash_app(door):
    app = dash.Dash("guarded", csrf_token_name=door.csrf_cookie, enable_mcp=False)
    app.layout = html.Div([dcc.Input(id="here"), html.Div(id="there"), html.Div(id="beside")])
    app.callback(dash.Output("there", "children"), dash.Input("here", "value"))(lambda value: f"heard {value}")
    app.clientside_callback("function (v) {return v}", dash.Output("beside", "children"), dash.Input("here", "value"))
    door.seal(app)
    return app


UPDATE = {
    "output": "there.children",
    "outputs": {"id": "there", "property": "children"},
    "inputs": [{"id": "here", "property": "value", "value": "knock"}],
    "changedPropIds": ["here.value"],
}


def test_a_callback_of_dash_runs_for_the_page_and_for_nobody_else(dash_app, door):
    browser = Browser(dash_app.server, door)

    def call(**headers):
        headers = {"Host": HOME} | {name.replace("_", "-"): value for name, value in headers.items()}
        return browser.client.post("/_dash-update-component", json=UPDATE, headers=headers)

    assert call(X_CSRFToken=door.csrf_token).status_code == 403
    assert browser.enter().status_code == 200
    assert call().status_code == 403
    assert call(X_CSRFToken=door.csrf_token, Origin="http://evil.example").status_code == 403
    good = call(X_CSRFToken=door.csrf_token, Origin=f"http://{HOME}", Sec_Fetch_Site="same-origin")
    assert good.status_code == 200 and "heard knock" in good.text


def test_dash_is_told_which_cookie_carries_the_token(dash_app, door):
    browser = Browser(dash_app.server, door)
    browser.enter()
    assert f'"csrf_token_name":"{door.csrf_cookie}"' in browser.ask("/").text


def test_the_policy_allows_each_inline_script_of_dash_and_no_other(dash_app, door):
    browser = Browser(dash_app.server, door)
    browser.enter()
    page = browser.ask("/")
    html_alone = re.sub(r"<!--.*?-->", "", page.text, flags=re.DOTALL)  # Dash talks to very old browsers in a comment
    scripts = re.findall(r"<script(?![^>]*\bsrc=)[^>]*>(.*?)</script>", html_alone, re.DOTALL)
    runnable = [script for script in scripts if not script.lstrip().startswith("{")]  # the rest is data
    assert len(runnable) >= 2
    policy = page.headers["Content-Security-Policy"]
    allowed = set(re.findall(r"'sha256-([^']+)'", policy))
    assert allowed == {base64.b64encode(hashlib.sha256(script.encode()).digest()).decode() for script in runnable}
    assert "unsafe-inline" not in policy.split("script-src")[1].split(";")[0]


# Invitations


def test_the_page_with_the_key_is_its_owner_s_alone_and_gone_after_use(tmp_path):
    invitations = Invitations(directory=tmp_path)
    door = Door(PORT, invitations=invitations)
    server = flask.Flask(__name__)
    door.guard(server)
    page = invitations.write_page(door.address)
    link = re.search(r'href="([^"]+)"', page.read_text(encoding="utf-8"))[1]
    key = link.partition("key=")[2]
    assert key and key not in page.as_uri()
    if os.name == "posix":
        assert stat.S_IMODE(page.stat().st_mode) == 0o600
    assert Browser(server, door).ask(_path(link)).status_code == 200
    assert not page.exists()


def test_the_folder_of_pages_is_its_owner_s_alone_and_goes_with_the_run():
    invitations = Invitations()
    invitations.write_page("http://127.0.0.1:1")
    if os.name == "posix":
        assert stat.S_IMODE(invitations.directory.stat().st_mode) == 0o700
    invitations.remove_pages()
    assert not invitations.directory.exists()


def test_a_second_start_can_invite_into_the_first(tmp_path):
    first = Invitations(directory=tmp_path)
    second = Invitations(first.secret, first.directory)
    page = second.write_page("http://127.0.0.1:1")
    key = re.search(r'key=([^"]+)"', page.read_text(encoding="utf-8"))[1]
    assert first.redeem(key) and not first.redeem(key)
    assert not page.exists()
