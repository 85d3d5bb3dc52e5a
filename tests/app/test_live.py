"""The live route: what it draws is what a release commits, and it never writes."""

import contextlib
import json
from dataclasses import replace

import flask
import pytest

from app import live, scene
from app.curves import STRIPS
from app.hand import step_for
from core import steps
from core.diode import PARAMETERS
from core.errors import StepRefused
from core.store import History, Store
from tests.app.benches import AMPERES, CELL, IN_THE_DARK, LIT, bench, sweep_of

BENCHES = {
    "lit": (LIT, CELL),
    "dark": (IN_THE_DARK, replace(CELL, photocurrent=0.0)),
    "amperes": (AMPERES, CELL.scaled(0.1)),
}


@pytest.fixture
def store(tmp_path):
    with contextlib.closing(Store(tmp_path)) as store:
        yield store


@pytest.fixture
def client(store):
    server = flask.Flask(__name__)
    live.register(server, store)
    return server.test_client()


@pytest.fixture
def on_disk(store):
    """A stored workspace with one fitted sweep, and the beginning of every event on it."""
    name = store.first()
    workspace = store.commit(name, steps.add_sweeps(store.current(name), [LIT]), 0)
    (entry,) = workspace.entries
    workspace = store.commit(name, steps.set_model(workspace, entry, CELL), 1)
    return {"workspace": name, "revision": 2, "entry": entry, "strip": "residuals"}


def dragged(x, y, parameter="ideality"):
    return {"kind": "drag", "parameter": parameter, "x": x, "y": y}


MOVES = [
    *(dragged(0.5, 12.0, parameter) for parameter in PARAMETERS),
    dragged(-1e300, 1e300),
    {"kind": "dial", "parameter": "series_resistance", "fraction": 0.9},
    {"kind": "dial", "parameter": "ideality", "fraction": 0.7, "keep": True},
    {"kind": "dial", "parameter": "photocurrent", "fraction": 0.0},
    {"kind": "dial", "parameter": "shunt_resistance", "fraction": 1.0},
    {"kind": "field", "parameter": "saturation_current", "text": "1e-7"},
]


@pytest.mark.parametrize("move", MOVES, ids=str)
@pytest.mark.parametrize("kind", BENCHES)
def test_what_was_drawn_last_is_what_is_kept(kind, move):
    sweep, model = BENCHES[kind]
    workspace, (entry,) = bench(sweep, models=(model,))
    for strip in STRIPS:
        event = {"entry": entry, "strip": strip, **move}
        drawn = json.loads(json.dumps(live.answer(workspace, event), allow_nan=False))
        step, sentence = step_for(workspace, event)
        kept = workspace if step is None else steps.apply(workspace, step)
        rest = json.loads(json.dumps(scene.scene(kept, {"active": entry, "strip": strip}, History(None, None))))
        assert drawn["message"] == sentence
        assert drawn["curves"] == rest["curves"]
        moved_beside = [mark for mark in drawn["handles"] if mark["parameter"] != move["parameter"]]
        assert moved_beside == [mark for mark in rest["handles"] if mark["parameter"] != move["parameter"]]
        for parameter, dial in drawn["dials"].items():
            assert dial.items() <= rest["dials"][parameter].items()
        for name, cells in drawn["metrics"].items():
            assert cells.items() <= rest["metrics"][name].items()
        assert bool(drawn["metrics"]) == sweep.lit


def test_the_grip_in_the_hand_lies_on_the_moved_curve():
    workspace, (entry,) = bench(LIT, models=(CELL,))
    answer = live.answer(workspace, {"entry": entry, "strip": "log", **dragged(0.0, 18.0, "photocurrent")})
    (grip,) = (mark for mark in answer["handles"] if mark["parameter"] == "photocurrent")
    assert (grip["x"], grip["y"]) == (0.0, pytest.approx(18.0))


def test_a_held_handle_stays_and_the_answer_says_why():
    workspace, (entry,) = bench(LIT, models=(CELL,))
    held = steps.apply(workspace, steps.set_hold(workspace, entry, "ideality", True))
    before = scene.scene(held, {"active": entry}, History(None, None))
    answer = live.answer(held, {"entry": entry, "strip": "residuals", **dragged(0.5, 12.0)})
    assert answer["message"] == "n is held."
    assert answer["curves"] == before["curves"] and answer["handles"] == before["handles"]


@pytest.mark.parametrize("event", [{}, {"kind": "hold"}, {"kind": "fly"}], ids=str)
def test_what_nothing_follows_is_refused(event):
    workspace, (entry,) = bench(LIT, models=(CELL,))
    with pytest.raises(StepRefused, match=r"Reload the page\.$"):
        live.answer(workspace, {"entry": entry, "strip": "residuals", **event})


def test_a_strip_that_is_unknown_falls_back_to_the_first():
    workspace, (entry,) = bench(LIT, models=(CELL,))
    answers = [live.answer(workspace, {"entry": entry, **dragged(0.5, 12.0), **s}) for s in ({}, {"strip": STRIPS[0]})]
    assert answers[0] == answers[1]


def test_an_answer_is_no_longer_for_a_sweep_of_many_points():
    def length(points):
        workspace, (entry,) = bench(sweep_of(CELL, points=points), models=(CELL,))
        return len(json.dumps(live.answer(workspace, {"entry": entry, "strip": "residuals", **dragged(0.5, 12.0)})))

    assert length(20_000) < 1.1 * length(300) < 50_000


def test_the_route_answers_without_writing(client, store, on_disk):
    before = store.current(on_disk["workspace"])
    answer = client.post("/live", json={**on_disk, **dragged(0.5, 12.0)})
    assert answer.status_code == 200
    assert {line["uid"] for line in answer.json["curves"]} == dict(scene.LINES).keys()
    assert answer.json["metrics"]["voc"]["model"] == "0.8550"  # the ideality handle keeps Voc
    assert store.current(on_disk["workspace"]) is before
    assert store.history(on_disk["workspace"]).undo == "change model"


@pytest.mark.parametrize("revision", [1, 3, -1])
def test_a_stale_page_is_told_to_read_again(client, on_disk, revision):
    answer = client.post("/live", json={**on_disk, "revision": revision, **dragged(0.5, 12.0)})
    assert answer.status_code == 409
    assert answer.json["revision"] == 2 and answer.json["sentence"].endswith(".")


@pytest.mark.parametrize(
    "wrong",
    [
        {"entry": "gone"},
        {"parameter": "charm"},
        {"x": None},
        {"kind": "field", "text": "much"},
    ],
    ids=str,
)
def test_what_cannot_be_followed_is_told_in_a_sentence(client, on_disk, wrong):
    answer = client.post("/live", json={**on_disk, **dragged(0.5, 12.0), **wrong})
    assert answer.status_code == 422
    assert set(answer.json) == {"sentence"} and answer.json["sentence"].endswith(".")


def test_a_workspace_that_is_gone_is_told_in_a_sentence(client, on_disk):
    answer = client.post("/live", json={**on_disk, "workspace": "gone", **dragged(0.5, 12.0)})
    assert answer.status_code == 422 and answer.json["sentence"].endswith(".")


def test_a_tab_learns_which_revision_stands(client, store, on_disk):
    path = f"/live/{on_disk['workspace']}"
    assert client.get(path).json == {"revision": 2}
    store.undo(on_disk["workspace"], 2)
    assert client.get(path).json == {"revision": 3}
    gone = client.get("/live/gone")
    assert gone.status_code == 404 and gone.json["sentence"].endswith(".")


def test_in_the_dark_the_grip_in_the_hand_keeps_its_voltage():
    model = replace(CELL, photocurrent=0.0)
    workspace, (entry,) = bench(IN_THE_DARK, models=(model,))
    (start,) = (h for h in scene.scene(workspace, {}, History(None, None))["handles"] if h["parameter"] == "ideality")
    event = {"entry": entry, "strip": "residuals", **dragged(start["x"], 3 * start["y"])}
    (grip,) = (mark for mark in live.answer(workspace, event)["handles"] if mark["parameter"] == "ideality")
    assert grip["x"] == start["x"] and grip["y"] == pytest.approx(3 * start["y"], rel=1e-6)
