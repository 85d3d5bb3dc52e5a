"""Load: twenty tabs that drag at once, and the history of a working day. ``pytest -s`` shows the figures for the README.

``SWEEPBENCH_SECONDS`` sets how long the tabs drag (30).
"""

import math
import os
import sys
import threading
import time
from contextlib import closing
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from app.folder import read_notice
from app.invitations import Invitations, entry_link
from app.places import SAMPLE_SWEEPS
from core import steps
from core.diode import OneDiode
from core.reading import read_sweeps
from core.refine import refine
from core.store import DATABASE, Store
from tests.app.test_main import Command
from tests.app.visitor import Visitor

TABS = 20
SECONDS = float(os.environ.get("SWEEPBENCH_SECONDS", "30"))
FRAME = 1 / 60  # [s]; a pointer moves once a frame
DRAG = 60  # positions in one drag, after which a step commits it
PARAMETERS = ("photocurrent", "saturation_current", "ideality", "series_resistance", "shunt_resistance")


def resident(process: int) -> float:
    """Memory of a process [MB]."""
    for line in Path(f"/proc/{process}/status").read_text().splitlines():
        if line.startswith("VmRSS"):
            return int(line.split()[1]) / 1024
    raise AssertionError("the server has ended")


class Dragging(threading.Thread):
    """A tab with a workspace of its own: it drags one handle after another, one live request in flight at a time."""

    def __init__(self, link: str, number: int, until: float):
        super().__init__(daemon=True)
        self.visitor, self.until, self.number = Visitor(link), until, number
        self.workspace = self.visitor.new_workspace(self.visitor.first(), f"tab {number}")
        drop = self.visitor.drop(self.workspace, {"K07_rev.csv": (SAMPLE_SWEEPS / "K07_rev.csv").read_bytes()})
        self.entry, self.revision = drop["added"][0]["entries"][0], drop["revision"]
        self.updates: list[tuple[float, float]] = []  # when asked, how long the answer took
        self.commits: list[float] = []
        self.errors: list = []

    def run(self) -> None:
        position = self.number
        while time.monotonic() < self.until and not self.errors:
            position += 1
            began = time.monotonic()
            event = {
                "kind": "drag", "entry": self.entry, "parameter": PARAMETERS[position // DRAG % 5],
                "x": 0.62 + 0.3 * math.sin(position / 40), "y": 14 + 8 * math.cos(position / 40),
                "workspace": self.workspace, "revision": self.revision,
            }  # fmt: skip
            try:
                status, answer = self.visitor.post("/live", event)
                self.updates.append((began, time.monotonic() - began))
                if status != 200 or not answer["curves"]:
                    self.errors.append((status, answer))
                if position % DRAG == DRAG - 1:
                    began = time.monotonic()
                    answer = self.visitor.hand(event)
                    self.commits.append(time.monotonic() - began)
                    if "elsewhere" in answer["sentence"] or "wrong" in answer["sentence"]:
                        self.errors.append(answer)
                    self.revision = answer["revision"]
            except Exception as error:  # a thread's own errors would go unheard
                self.errors.append(error)
            time.sleep(max(0.0, FRAME - (time.monotonic() - began)))
        self.visitor.close()


def drag(program: Command, links: list[str], seconds: float) -> list[Dragging]:
    tabs = [Dragging(link, number, 0.0) for number, link in enumerate(links)]
    until = time.monotonic() + seconds
    for tab in tabs:
        tab.until = until
    for tab in tabs:
        tab.start()
    for tab in tabs:
        tab.join()
    assert [tab.errors for tab in tabs] == [[]] * len(tabs)
    return tabs


@pytest.mark.skipif(not sys.platform.startswith("linux"), reason="reads memory from /proc")
def test_twenty_tabs_that_drag_at_once(tmp_path):
    with Command(tmp_path, "--port", "0") as program:
        program.until("Press Ctrl+C")
        invitations = Invitations(read_notice(tmp_path).key_secret)  # as a second start on the folder would
        links = [entry_link(program.url, invitations.new_key()) for _ in range(TABS + 1)]
        (alone,) = drag(program, links[:1], min(5.0, SECONDS))
        warm = resident(program.process.pid)
        tabs = drag(program, links[1:], SECONDS)
        grown = resident(program.process.pid)
        size = sum(path.stat().st_size for path in tmp_path.glob(f"{DATABASE}*")) / 2**20
        assert program.end(2)[0] == 0
    took = np.array([one for tab in tabs for _, one in tab.updates]) * 1e3
    lone = np.array([one for _, one in alone.updates]) * 1e3
    commits = np.array([one for tab in tabs for one in tab.commits]) * 1e3
    begin = min(when for tab in tabs for when, _ in tab.updates)
    early = np.median([one for tab in tabs for when, one in tab.updates if when - begin < SECONDS / 3]) * 1e3
    late = np.median([one for tab in tabs for when, one in tab.updates if when - begin > 2 * SECONDS / 3]) * 1e3
    fewest = min(len(tab.updates) for tab in tabs) / SECONDS
    print()
    print(f"  one tab: {len(lone) / min(5.0, SECONDS):.0f} updates a second, median {np.median(lone):.1f} ms, p95 {np.quantile(lone, 0.95):.1f} ms")
    print(
        f"  {TABS} tabs, {SECONDS:.0f} s: {len(took)} updates ({len(took) / SECONDS:.0f} a second), median {np.median(took):.0f} ms, "
        f"p95 {np.quantile(took, 0.95):.0f} ms, longest {took.max():.0f} ms; no error"
    )
    print(f"  {len(commits)} steps committed meanwhile, median {np.median(commits):.0f} ms, p95 {np.quantile(commits, 0.95):.0f} ms")
    print(f"  memory of the server: {warm:.0f} MB after one tab, {grown:.0f} MB at the end ({grown - warm:+.0f} MB); on disk {size:.1f} MB")
    print(f"  last third against first third, median: {late / early:.2f}; the slowest tab had {fewest:.1f} updates a second")
    # All share one interpreter, and the tabs themselves compute on the same machine.
    assert len(took) / SECONDS > 0.25 * 1e3 / np.median(lone)
    assert np.quantile(took, 0.95) < 4 * np.median(took)  # and none is starved
    assert late / early < 1.5
    assert grown - warm < 60


def test_the_history_of_a_working_day(tmp_path):
    """Eight hours with a step every five seconds: drags, with a refine, a condition and a hold in between."""
    count = 8 * 3600 // 5
    random = np.random.default_rng(8)
    with closing(Store(tmp_path)) as store:
        workspace = store.current(store.first())
        for name in ("K07_rev.csv", "K07_fwd.csv", "K11.csv", "K15.txt"):
            data = (SAMPLE_SWEEPS / name).read_bytes()
            source = store.keep_file(data, name)
            step = steps.add_sweeps(workspace, read_sweeps(data, name), source=source, source_name=name)
            workspace = store.commit(workspace.id, step, workspace.revision)
        entries = [entry.id for entry in workspace.in_tray_order()]
        found = {entry: refine(workspace.sweep(entry)) for entry in entries}
        begin = time.perf_counter()
        for number in range(count):
            entry = entries[number % len(entries)]
            if number % 10 == 9:
                rmse = found[entry].rmse * random.uniform(1, 2)
                step = steps.record_refinement(workspace, entry, replace(found[entry], rmse=rmse))
            elif number % 50 == 3:
                step = steps.set_conditions(workspace, entry, irradiance=0.1 * random.uniform(0.9, 1.1))
            elif number % 50 == 7:
                step = steps.set_hold(workspace, entry, "ideality", number % 100 == 7)
            else:
                model = OneDiode(0.022 * random.uniform(0.9, 1.1), 2e-13, 1.6, random.uniform(1, 5), random.uniform(1e3, 5e3))
                step = steps.set_model(workspace, entry, model)
            workspace = store.commit(workspace.id, {**step, "event": f"{number:036d}"}, workspace.revision)
        took = (time.perf_counter() - begin) / count
        held = sum(row[0] for row in store._reader.execute("SELECT length(step) + length(inverse) FROM history"))
        kept = store._reader.execute("SELECT count(*) FROM history").fetchone()[0]
        undone = 0
        while undone < 200:
            workspace = store.undo(workspace.id, workspace.revision)
            undone += 1
    size = sum(path.stat().st_size for path in tmp_path.glob(f"{DATABASE}*"))
    begin = time.perf_counter()
    with closing(Store(tmp_path)) as again:
        again.current(again.first())
    opened = time.perf_counter() - begin
    print()
    print(f"  {count} steps, {took * 1e3:.1f} ms each: history of {kept} steps {held / 2**20:.1f} MB, database {size / 2**20:.1f} MB")
    print(f"  opened again in {opened * 1e3:.0f} ms")
    assert kept >= 5000
    assert size < 64 * 2**20
