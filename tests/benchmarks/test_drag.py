"""From a pointer's move to the drawn curve, in a real browser, as ratios measured in one run.

The rival is the same path with an answer that lies ready: the same page, request and route, and nothing computed.
Each move waits for its curve, so that a sample is one whole round trip; the clock is the page's own.
"""

import json
from collections.abc import Callable, Iterator
from itertools import cycle

import numpy as np
import pytest
from flask import Response

from app import live
from core import steps
from core.diode import OneDiode
from core.sweep import Conditions, Sweep
from tests.browser.tab import Tab

CELL = OneDiode(0.022, 1e-13, 1.6, 3.0, 2000.0)
SWEEPS, MOVES, ROUNDS = 10, 40, 8

# What the page needs to time itself: the last move of the pointer, and when its curve was drawn and laid out.
CLOCK = """() => {
  window.ages = [];
  let moved = null;
  document.addEventListener("pointermove", () => (moved = performance.now()), { capture: true });
  const paint = sweepbench.paintLive;
  sweepbench.paintLive = (answer) => {
    paint(answer);
    document.querySelector("#overlay .line.model").getBoundingClientRect();
    if (moved !== null) window.ages.push(performance.now() - moved);
    moved = null;
  };
}"""


def fill(store, workspace, points):
    """Ten devices with one sweep each, and a curve on the first."""
    random, voltage = np.random.default_rng(points), np.linspace(-0.05, 1.1, points)
    sweeps = [
        Sweep(
            voltage,
            CELL.current(voltage) * (1 + 0.01 * number) + 2e-5 * random.standard_normal(points),
            per_area=True,
            device=f"P{number}",
            name="forward",
            conditions=Conditions(area=0.1),
        )
        for number in range(SWEEPS)
    ]
    added = store.commit(workspace, steps.add_sweeps(store.current(workspace), sweeps), seen=0)
    first, *others = [entry.id for entry in added.in_tray_order()]
    store.commit(workspace, steps.set_model(added, first, CELL), seen=added.revision)
    return others


class Bench:
    """A tab with ten sweeps laid into one plot, and the times of moves in it."""

    def __init__(self, tab: Tab, others: list[str]):
        self.tab = tab
        tab.page.evaluate("(overlay) => sweepbench.changeView({ overlay })", others)
        tab.until("trace", f"overlay{len(others) - 1}")
        tab.settle()
        tab.page.evaluate(CLOCK)

    def times(self) -> np.ndarray:
        """From each of some moves of a handle to its curve [ms]; the drag is then given up."""
        tab = self.tab
        tab.page.bring_to_front()
        tab.page.evaluate("window.ages = []")
        start = tab.grip("photocurrent")
        tab.press(start)
        for move in range(MOVES):
            tab.move(start + (0, -4 - move % 12), steps=1)
            tab.until("followed")
        tab.page.keyboard.press("Escape")
        tab.release()
        ages = np.array(tab.page.evaluate("window.ages"))
        assert ages.size == MOVES
        return ages[5:]


@pytest.fixture
def benches(running, context, workspace) -> Iterator[Callable[[int], Bench]]:
    """Gives a bench with ten sweeps of so many points."""
    tabs = []

    def with_points(points: int) -> Bench:
        name = running.store.create(f"{points} points")
        others = fill(running.store, name, points)
        tabs.append(Tab(context.new_page(), running.store, name))
        tabs[-1].open(running.url)
        return Bench(tabs[-1], others)

    yield with_points
    for tab in tabs:
        tab.close()


def both(first: Callable[[], np.ndarray], second: Callable[[], np.ndarray]) -> tuple[np.ndarray, np.ndarray]:
    """Times of two ways, run in turns so that a busy machine slows both alike."""
    rounds = [(first(), second()) for _ in range(ROUNDS)]
    return np.concatenate([one for one, _ in rounds]), np.concatenate([other for _, other in rounds])


def ratios(ways: dict[str, np.ndarray]) -> list[float]:
    """Median and 95th percentile of the first way against the second, shown."""
    print()
    quantiles = {name: np.quantile(times, [0.5, 0.95]) for name, times in ways.items()}
    for name, (median, slow) in quantiles.items():
        print(f"  {name:<52} median {median:6.2f} ms   95th percentile {slow:6.2f} ms")
    first, second = quantiles.values()
    print(f"  {'ratio':<52} {first[0] / second[0]:13.2f} {first[1] / second[1]:24.2f}")
    return list(first / second)


def test_a_move_against_the_same_path_with_an_answer_that_lies_ready(benches, monkeypatch):
    bench = benches(100)
    real, as_json, answers = live.answer, live.jsonify, []
    with monkeypatch.context() as listening:
        listening.setattr(live, "answer", lambda workspace, event: answers.append(real(workspace, event)) or answers[-1])
        bench.times()
    ready = cycle([json.dumps(answer) for answer in answers])  # different ones, as drawing the same again costs less

    def prepared() -> np.ndarray:
        with monkeypatch.context() as lying_ready:
            lying_ready.setattr(live, "answer", lambda workspace, event: None)
            lying_ready.setattr(
                live,
                "jsonify",
                lambda given: as_json(given) if given else Response(next(ready), mimetype="application/json"),
            )
            return bench.times()

    computed, waiting = both(bench.times, prepared)
    median, slow = ratios({"ten sweeps of 100 points": computed, "the same path, answer prepared beforehand": waiting})
    assert median <= 1.3
    assert slow <= 1.3


def test_a_move_does_not_heed_how_many_points_are_loaded(benches):
    few, many = benches(100), benches(2000)
    with_many, with_few = both(many.times, few.times)
    median, slow = ratios({"ten sweeps of 2000 points": with_many, "ten sweeps of 100 points": with_few})
    assert median <= 1.3
    assert slow <= 1.3
