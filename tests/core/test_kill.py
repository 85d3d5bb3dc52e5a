"""Killed without warning, the store loses nothing that it acknowledged.

A child process commits scripted steps and prints every acknowledged revision. It is killed at a random
moment; what is then on disk must be the state after the last acknowledged step, or after the one that was
in flight, to the last digit. SWEEPBENCH_KILLS sets the number of kills (8; a full trial is 50).
"""

import hashlib
import os
import random
import subprocess
import sys
from contextlib import closing
from pathlib import Path

import pytest

from core import steps
from core.errors import StaleRevision, StepRefused
from core.records import canonical
from core.store import Store
from core.workspace import Workspace
from tests.core.workspaces import MODEL, invented_sweep

KILLS = int(os.environ.get("SWEEPBENCH_KILLS", "8"))


def scripted_change(workspace, number):
    """What the script does as its ``number``-th change: "undo", "redo" or a step. The same every time."""
    chance = random.Random(number)
    tray = workspace.in_tray_order()
    kind = chance.randrange(10) if tray else 0
    if kind == 0:
        sweep = invented_sweep(f"device {chance.randrange(3)}", points=300, offset=number * 1e-9)
        ids = (f"{number}-{count}" for count in range(9))
        return steps.add_sweeps(workspace, [sweep], source="a" * 64, new_id=lambda: next(ids))
    if kind in (1, 2):
        return "undo" if number % 2 else "redo"
    entry = chance.choice(tray).id
    if kind == 3 and len(tray) > 2:
        return steps.remove_entries(workspace, [entry])
    if kind == 4:
        return steps.set_conditions(workspace, entry, area=chance.uniform(0.05, 0.5))
    if kind == 5:
        return steps.set_group(workspace, [workspace.entries[entry].device], f"group {number}")
    return steps.set_model(workspace, entry, MODEL.scaled(chance.uniform(0.5, 2)))


def perform(workspace, number, done, undone):
    """The script without a store: the same change by the pure functions alone."""
    change = scripted_change(workspace, number)
    if change == "undo" or change == "redo":
        source, target = (done, undone) if change == "undo" else (undone, done)
        if not source:
            return workspace
        step = source.pop()
        target.append(steps.inverse(workspace, step))
        return steps.apply(workspace, step)
    after = steps.apply(workspace, change)
    if after.records() == workspace.records():
        return workspace
    done.append(steps.inverse(workspace, change))
    undone.clear()
    return after


def digest(workspace):
    readings = {name: sweep.to_dict() for name, sweep in workspace.readings().items()}
    return hashlib.sha256(canonical([workspace.records(), readings]).encode()).hexdigest()


def child(folder, start):
    """Go on with the script from change number ``start`` until killed."""
    print("ready", flush=True)
    store = Store(Path(folder))
    workspace_id = store.first()
    workspace = store.current(workspace_id)
    number = start
    while True:
        change = scripted_change(workspace, number)
        try:
            if change == "undo":
                workspace = store.undo(workspace_id, workspace.revision)
            elif change == "redo":
                workspace = store.redo(workspace_id, workspace.revision)
            else:
                workspace = store.commit(workspace_id, change, workspace.revision)
        except StaleRevision:
            raise
        except StepRefused:
            pass  # nothing to undo or redo
        print(number, workspace.revision, flush=True)
        number += 1


@pytest.mark.skipif(os.name == "nt", reason="Windows knows no kill -9")
def test_a_killed_store_stands_at_its_last_acknowledged_step(tmp_path):
    chance = random.Random(20)
    number, mirror, done, undone = 0, None, [], []
    for kill in range(KILLS):
        command = [sys.executable, __file__, str(tmp_path), str(number)]
        process = subprocess.Popen(command, stdout=subprocess.PIPE, text=True)
        try:
            assert process.stdout.readline() == "ready\n"
            acknowledged = number  # changes made, as far as we know
            revision = 0 if mirror is None else mirror.revision
            for _ in range(0 if kill == 0 else chance.randrange(60)):
                acknowledged, revision = (int(word) for word in process.stdout.readline().split())
                acknowledged += 1
            with pytest.raises(subprocess.TimeoutExpired):
                process.wait(chance.uniform(0, 0.03))
        finally:
            process.kill()
        rest = process.communicate()[0].splitlines(keepends=True)
        for line in rest:
            if line.endswith("\n"):
                acknowledged, revision = (int(word) for word in line.split())
                acknowledged += 1
        with closing(Store(tmp_path)) as store:
            current = store.current(store.first())
            mirror = mirror or Workspace(current.id, current.name)
            while number < acknowledged:
                mirror = perform(mirror, number, done, undone)
                number += 1
            assert mirror.revision == revision
            if current.revision != revision:  # the step in flight reached the disk, its acknowledgement not us
                mirror = perform(mirror, number, done, undone)
                number += 1
            assert (current.revision, digest(current)) == (mirror.revision, digest(mirror))
            assert (store.history(current.id).undo is None) == (not done)
            assert (store.history(current.id).redo is None) == (not undone)
    assert number > KILLS  # the script did get somewhere


if __name__ == "__main__":
    child(sys.argv[1], int(sys.argv[2]))
