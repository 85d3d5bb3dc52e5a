"""The program, killed with kill -9 while a page works with it, loses nothing that it had acknowledged.

A script of drags, dials, holds, names, conditions, undo and redo goes over HTTP as a page would send it, and is
followed step by step by the pure functions of core alone. At a random moment the program is killed and started
again. What it then hands out must be the last acknowledged state, or that with the change in flight; and
sent again as the outbox does, that change must have been made once.
"""

import http.client
import json
import os
import random
import signal
import threading
import uuid
from contextlib import closing
from dataclasses import dataclass, field

import pytest

from app.hand import step_for
from app.places import SAMPLE_SWEEPS
from core import steps
from core.errors import SweepbenchError
from core.workspace import Workspace
from tests.app.test_main import Command, link_in
from tests.app.visitor import Event, Visitor

FILES = ("K07_rev.csv", "K07_fwd.csv", "K11.csv")


@dataclass
class Mirror:
    """The workspace as it must stand, kept without a store."""

    workspace: Workspace
    done: list = field(default_factory=list)
    undone: list = field(default_factory=list)

    def after(self, change: Event | str) -> Workspace:
        """The workspace after a change; the same where there is nothing to change."""
        return self._changed(change)[0]

    def make(self, change: Event | str) -> None:
        self.workspace, self.done, self.undone = self._changed(change)

    def _changed(self, change: Event | str) -> tuple[Workspace, list, list]:
        before, done, undone = self.workspace, self.done, self.undone
        if isinstance(change, str):
            source = done if change == "undo" else undone
            if not source:
                return before, done, undone
            back = steps.inverse(before, source[-1])
            after = steps.apply(before, source[-1])
            return (after, done[:-1], [*undone, back]) if change == "undo" else (after, [*done, back], undone[:-1])
        try:
            step, _ = step_for(before, change)
        except SweepbenchError:
            return before, done, undone
        after = before if step is None else steps.apply(before, step)
        if after.records() == before.records():
            return before, done, undone
        return after, [*done, steps.inverse(before, step)], []


def scripted(mirror: Mirror, chance: random.Random) -> Event | str:
    """What the page's user does next; never takes the drop of the files back."""
    entry = chance.choice(mirror.workspace.in_tray_order()).id
    parameter = chance.choice(("photocurrent", "saturation_current", "ideality", "series_resistance", "shunt_resistance"))
    here = {"entry": entry, "parameter": parameter}
    match chance.randrange(10):
        case 0 | 1:
            return chance.choice(("undo", "undo", "redo")) if mirror.done else "redo"
        case 2:
            return {"kind": "hold", **here, "on": chance.random() < 0.3}
        case 3:
            return {"kind": "dial", **here, "fraction": chance.random(), "keep": chance.random() < 0.5}
        case 4:
            return {"kind": "rename-sweep", "entry": entry, "text": f"sweep {chance.randrange(1000)}"}
        case 5:
            return {"kind": "condition", "entry": entry, "name": "temperature", "text": f"{chance.uniform(10, 40):.3f}"}
        case 6:
            return {"kind": "field", **here, "text": f"{chance.uniform(0.5, 30):.4g}", "keep": False}
        case _:
            return {"kind": "drag", **here, "x": chance.uniform(0, 1.1), "y": chance.uniform(0, 23)}


def link_after_start(program: Command) -> str:
    program.until("Press Ctrl+C")
    return link_in(program.page)


def send(visitor: Visitor, workspace: Workspace, change: Event | str) -> dict:
    if isinstance(change, str):
        return visitor.travel(change, workspace.id, workspace.revision)
    return visitor.hand(change)


def trial(folder, kills: int, seed: int, *, longest: float = 1.5, say=lambda *_: None) -> int:
    """So many kills; the number of changes that were acknowledged in all."""
    chance = random.Random(seed)
    acknowledged, in_flight, mirror, port = 0, None, None, "0"
    for kill in range(kills + 1):
        with Command(folder, "--port", port) as program, closing(Visitor(link_after_start(program))) as visitor:
            port = program.url.rpartition(":")[2]
            if mirror is None:
                workspace_id = visitor.first()
                answer = visitor.drop(workspace_id, {name: (SAMPLE_SWEEPS / name).read_bytes() for name in FILES})
                assert answer["refused"] == []
                mirror = Mirror(visitor.kept(workspace_id))
            standing = visitor.kept(mirror.workspace.id)
            before, after = mirror.workspace, mirror.workspace if in_flight is None else mirror.after(in_flight)
            found = (standing.revision, standing.records())
            assert found in ((before.revision, before.records()), (after.revision, after.records())), in_flight
            if isinstance(in_flight, dict):
                again = visitor.hand({**in_flight, "tries": 2})
                assert again["revision"] == after.revision, (in_flight, again)
                if after is not before:
                    assert again["sentence"] == "" or "elsewhere" not in again["sentence"]
                standing = visitor.kept(mirror.workspace.id)
                assert (standing.revision, standing.records()) == (after.revision, after.records())
            if standing.revision == after.revision and in_flight is not None:
                mirror.make(in_flight)
            say(f"kill {kill} survived at revision {standing.revision} after {acknowledged} acknowledged changes")
            if kill == kills:
                assert program.end(signal.SIGTERM)[0] == 0
                break
            killer = threading.Timer(chance.uniform(0, longest), program.process.kill)
            killer.start()
            try:
                while True:
                    in_flight = scripted(mirror, chance)
                    if isinstance(in_flight, dict):
                        stamp = {"workspace": mirror.workspace.id, "revision": mirror.workspace.revision}
                        in_flight |= {**stamp, "event": uuid.UUID(int=chance.getrandbits(128)).hex}
                    answer = send(visitor, mirror.workspace, in_flight)
                    mirror.make(in_flight)
                    assert answer["revision"] == mirror.workspace.revision, (in_flight, answer)
                    acknowledged += 1
            except (OSError, http.client.HTTPException, json.JSONDecodeError):
                pass
            finally:
                killer.join()
    return acknowledged


@pytest.mark.skipif(os.name == "nt", reason="Windows knows no kill -9")
def test_a_killed_program_stands_at_its_last_acknowledged_state_and_makes_a_repeated_change_once(tmp_path):
    assert trial(tmp_path, kills=2, seed=7, longest=0.8) > 0
