"""The page, its callbacks and its scripts name the same things, and the page carries no script of its own."""

import base64
import contextlib
import hashlib
import http.client
import os
import re
import threading
import time
from concurrent.futures import ThreadPoolExecutor
from html.parser import HTMLParser
from pathlib import Path
from urllib.parse import urlsplit

import pytest
from dash.development.base_component import Component

from app.callbacks.arrivals import RECEIVERS
from app.curves import STRIPS
from app.door import Door
from app.ids import Id
from app.jobs import Jobs
from app.layout.bench import STRIP_LABELS
from app.layout.dials import CONDITION_LABELS, METRIC_LABELS
from app.layout.page import page as whole_page
from app.places import ASSETS
from app.readout import METRIC_ROWS, condition_rows
from app.server import create_app
from app.serving import serve
from core.store import Store
from tests.app.benches import LIT, bench

SCRIPTS = {path.name: path.read_text(encoding="utf-8") for path in sorted(Path(ASSETS).glob("*.js"))}
STYLES = {path.name: path.read_text(encoding="utf-8") for path in sorted(Path(ASSETS).glob("*.css"))}
DOOR = Door(8417)
ALL_SCRIPTS = "\n".join(SCRIPTS.values())


@pytest.fixture(scope="module")
def app(tmp_path_factory):
    with contextlib.closing(Store(tmp_path_factory.mktemp("kept"))) as store, contextlib.closing(Jobs()) as jobs:
        yield create_app(store, DOOR, jobs)


@pytest.fixture(scope="module")
def page(app):
    return whole_page("workspace", 0, token_cookie=DOOR.csrf_cookie)


def components(page):
    yield page
    yield from page._traverse()


def properties(page, name):
    """All values of one property on the page."""
    found = (getattr(component, name, None) for component in components(page) if isinstance(component, Component))
    return [value for value in found if value is not None]


def test_every_id_a_callback_names_is_in_the_layout(app, page):
    wired = {part["id"] for callback in app.callback_map.values() for part in callback["inputs"] + callback["state"]}
    for callback in app.callback_map.values():
        output = callback["output"]
        outputs = output if isinstance(output, list | tuple) else [output] if output is not None else []
        wired |= {part.component_id for part in outputs}
    assert wired and wired <= set(page)  # iterating a layout yields its ids


def test_every_id_is_used_once_and_none_is_forgotten(page):
    on_page = list(page)
    assert len(on_page) == len(set(on_page))
    assert {str(name) for name in Id} <= {str(name) for name in on_page}


def test_no_callback_is_exempt_from_the_check(app):
    assert app.config.suppress_callback_exceptions is False


def test_every_id_the_scripts_look_up_is_on_the_page(page):
    looked_up = set(re.findall(r"""(?:getElementById|byId|press)\(["']([\w-]+)["']\)""", ALL_SCRIPTS))
    assert len(looked_up) > 5 and looked_up <= {str(name) for name in page}


def test_every_property_the_scripts_set_belongs_to_a_component_of_the_page(page):
    written = set(re.findall(r"""setProps\(["']([\w-]+)["']""", ALL_SCRIPTS))
    assert written and written <= {str(name) for name in Id}


def test_every_arrival_has_its_receiver_in_the_scripts(app):
    receivers = re.search(r"dash_clientside\.sweepbench = \{\n(.*?)^  \};", SCRIPTS["page.js"], re.S | re.M)[1]
    assert set(RECEIVERS) == set(re.findall(r"^ {4}(\w+)[(:]", receivers, re.M))


def test_every_act_of_the_page_is_known_to_the_scripts(page):
    acts = set(properties(page, "data-act"))
    assert acts
    known = {act for act in acts if re.search(rf"""["']?\b{act}["']?(?:\(\)|:)""", ALL_SCRIPTS)}
    assert known == acts


def test_strips_metrics_and_conditions_of_the_page_are_those_that_are_filled(page):
    assert list(STRIP_LABELS) == list(STRIPS) == properties(page, "data-strip")
    assert list(METRIC_LABELS) == list(METRIC_ROWS) == properties(page, "data-metric")
    workspace, (entry,) = bench(LIT)
    filled = condition_rows(workspace, entry, workspace.sweep(entry))
    (conditions,) = (part for part in components(page) if getattr(part, "className", "") == "conditions")
    assert list(CONDITION_LABELS) == list(filled) == properties(conditions, "data-condition")


class Tags(HTMLParser):
    def __init__(self, text):
        super().__init__()
        self.scripts, self.attributes, self.links, self._inline = [], [], [], False
        self.feed(text)

    def handle_starttag(self, tag, attributes):
        self.attributes += [name for name, _ in attributes]
        self.links += [value for name, value in attributes if name in ("src", "href")]
        runs = tag == "script" and "src" not in dict(attributes) and dict(attributes).get("type") != "application/json"
        self._inline = runs

    def handle_data(self, data):
        if self._inline and data.strip():
            self.scripts.append(data)


@pytest.fixture(scope="module")
def index(app):
    """The page as a browser gets it that was let in."""
    client = app.server.test_client()
    client.set_cookie(DOOR.session_cookie, DOOR.session, domain="127.0.0.1")
    answer = client.get("/", base_url=DOOR.address)
    assert answer.status_code == 200
    return answer.text


def test_the_page_has_no_inline_script_but_the_frameworks_own(app, index):
    scripts = Tags(index).scripts
    hashes = {f"'sha256-{base64.b64encode(hashlib.sha256(s.encode()).digest()).decode()}'" for s in scripts}
    assert scripts and hashes <= set(app.csp_hashes())


def test_nothing_on_the_page_is_an_event_attribute_or_comes_from_another_host(index):
    tags = Tags(index)
    assert not [name for name in tags.attributes if name.startswith("on")]
    assert tags.links and not [link for link in tags.links if re.match(r"(\w+:)?//", link)]


def test_the_scripts_and_styles_are_all_linked_from_the_page(index):
    for name in (*SCRIPTS, *STYLES):
        assert f"assets/{name}" in index


@pytest.mark.parametrize("name", [*SCRIPTS, *STYLES])
def test_no_asset_names_another_host_or_evaluates_text(name):
    text = {**SCRIPTS, **STYLES}[name]
    hosts = set(re.findall(r"https?://[^\s\"'`)]+", text))
    assert hosts <= {"http://www.w3.org/2000/svg"}  # a name, not an address
    assert not re.search(r"\beval\(|new Function\(|innerHTML|outerHTML|insertAdjacentHTML|document\.write|@import", text)


def test_two_applications_live_side_by_side(app, tmp_path):
    with contextlib.closing(Store(tmp_path)) as store, contextlib.closing(Jobs()) as jobs:
        other = create_app(store, Door(8418), jobs)
        assert other.callback_map.keys() == app.callback_map.keys()
        assert other.server is not app.server


def test_the_first_requests_get_the_whole_page_even_when_they_come_at_once(tmp_path, monkeypatch):
    """A browser asks for a page and its icon together, and a disk may be slow."""

    def slowly(*where, walk=os.walk, **how):
        time.sleep(0.3)
        return walk(*where, **how)

    monkeypatch.setattr("os.walk", slowly)
    with serve(tmp_path) as running:
        link = urlsplit(running.entry_url)
        with contextlib.closing(http.client.HTTPConnection(link.netloc)) as entrance:
            entrance.request("GET", f"{link.path}?{link.query}")
            answer = entrance.getresponse()
        cookie = "; ".join(value.partition(";")[0] for value in answer.headers.get_all("Set-Cookie"))
        ready = threading.Barrier(6)

        def page_at_once(_):
            with contextlib.closing(http.client.HTTPConnection(link.netloc)) as connection:
                connection.connect()
                ready.wait()
                connection.request("GET", "/", headers={"Cookie": cookie})
                return connection.getresponse().read().decode()

        with ThreadPoolExecutor(6) as pool:
            pages = list(pool.map(page_at_once, range(6)))
    assert [page.count("/assets/") for page in pages] == [len(SCRIPTS) + len(STYLES)] * 6
