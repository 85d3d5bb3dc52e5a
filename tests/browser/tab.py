"""One tab of the workbench, worked as a person works it, and read where a person looks."""

from __future__ import annotations

import math
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit

import numpy as np
from playwright.sync_api import ConsoleMessage, Locator, Page, Request, Route

from core.dials import dial_ranges
from core.diode import PARAMETERS, OneDiode
from core.handles import handles
from core.store import Store
from core.sweep import Sweep
from core.workspace import Workspace
from tests.browser.conditions import UNTIL
from tests.browser.places import Frame, Place, distance_to_line

PATIENCE = 15_000  # ms


class Tab:
    def __init__(self, page: Page, store: Store, workspace_id: str):
        self.page, self.store, self.workspace_id = page, store, workspace_id
        self.troubles: list[str] = []
        self.forgiven: list[str] = []  # parts of messages that the test provokes on purpose
        self.requests: list[str] = []
        page.set_default_timeout(PATIENCE)
        page.on("console", self._heard)
        page.on("pageerror", lambda error: self.troubles.append(f"page error: {error}"))
        page.on("request", self._asked)
        page.on("crash", lambda _: self.troubles.append("the tab crashed"))

    def _heard(self, message: ConsoleMessage) -> None:
        if message.type == "error" and not any(part in message.text for part in self.forgiven):
            self.troubles.append(f"console: {message.text}")

    def _asked(self, request: Request) -> None:
        self.requests.append(request.url)
        address = urlsplit(request.url)
        if address.scheme not in ("data", "blob") and address.hostname != "127.0.0.1":
            self.troubles.append(f"asked another host: {request.url}")

    # Coming and going

    def open(self, url: str) -> None:
        """The workbench at its address, or by the link that lets a browser in once."""
        self.page.goto(url)
        self.page.wait_for_url("http://127.0.0.1:*/")
        self.until("painted")
        self.settle()

    def reload(self) -> None:
        self.page.reload()
        self.until("painted")
        self.settle()

    def close(self) -> None:
        if not self.page.is_closed():
            self.page.evaluate("localStorage.clear()")
            self.page.close()

    # Waiting

    def until(self, condition: str, argument: Any = None, patience: float = PATIENCE) -> None:
        """Wait for one of the named conditions."""
        held = self.page.evaluate(UNTIL, [condition, argument, patience])
        assert held, f"waited in vain: {condition} {argument if argument is not None else ''}; {self._state()}"

    def _state(self) -> Any:
        return self.page.evaluate(
            "() => ({busy: sweepbench.live.busy, unsent: sweepbench.unsent(), down: sweepbench.handIsDown(),"
            " seen: sweepbench.stamp().revision, painted: sweepbench.scene?.revision, said: document.querySelector('#notice-line').textContent})"
        ) | {"stored": self.stored.revision}

    def settle(self) -> None:
        """Wait until hand, outbox, scene and figure are at rest, on the state that is stored."""
        self.until("atRest")

    @contextmanager
    def one_change(self) -> Iterator[None]:
        """What is done inside makes the workspace move on, and the page follows."""
        before = self.stored.revision
        yield
        self.until("moved", before)
        self.settle()
        assert self.stored.revision == before + 1

    @contextmanager
    def answers_held(self) -> Iterator[None]:
        """What is done inside is done before the server's callbacks answer."""
        held: list[Route] = []
        self.page.route("**/_dash-update-component", lambda route: held.append(route))
        yield
        self.page.unroute("**/_dash-update-component")
        for route in held:
            route.continue_()

    # What is stored

    @property
    def stored(self) -> Workspace:
        return self.store.current(self.workspace_id)

    @property
    def entry(self) -> str:
        """The sweep on the bench."""
        return self.page.evaluate("sweepbench.scene.entry")

    @property
    def sweep(self) -> Sweep:
        return self.stored.sweep(self.entry)

    @property
    def model(self) -> OneDiode:
        model = self.stored.fit(self.entry).model
        assert model is not None
        return model

    # What is shown

    def find(self, selector: str) -> Locator:
        return self.page.locator(selector)

    def button(self, name: str) -> Locator:
        return self.page.get_by_role("button", name=name, exact=True)

    def text(self, selector: str) -> str:
        return self.page.locator(selector).first.inner_text()

    def dial(self, parameter: str) -> Locator:
        return self.page.locator(f".dial[data-parameter={parameter}]")

    def number(self, parameter: str) -> float:
        """What the number field of a dial holds, in core's units."""
        shown = self.dial(parameter).locator("input[type=text]").input_value()
        per_area, large = self.sweep.per_area, parameter in ("photocurrent", "saturation_current")
        value = math.inf if shown == "∞" else float(shown)
        return value / (1e3 if per_area and large else 1.0)

    def metric(self, name: str, column: str = "model") -> str:
        return self.page.locator(f"[data-metric={name}] [data-column={column}]").inner_text()

    def trace(self, uid: str) -> tuple[np.ndarray, np.ndarray]:
        """A line of the figure as Plotly holds it."""
        x, y = self.page.evaluate(
            "(uid) => { const t = sweepbench.graph()._fullData.find((one) => one.uid === uid);"
            " return [Array.from(t.x), Array.from(t.y)]; }",
            uid,
        )
        return np.array(x, dtype=float), np.array(y, dtype=float)

    def sentences(self) -> list[str]:
        """What the tray says of the files that came."""
        return self.page.locator("#arrivals p").evaluate_all("(all) => all.map((p) => p.firstChild.textContent)")

    def rows(self) -> list[str]:
        return self.page.locator("#tray-list .sweep .sweep-name").all_text_contents()

    # Pixels, without the page's own mapping: the drawn frame and the public ranges

    def frame(self) -> Frame:
        """The plot's frame and ranges, as they are at rest."""
        return Frame(
            *self.page.evaluate(
                """() => {
                  const box = document.querySelector("#plot .draglayer .xy .nsewdrag").getBoundingClientRect();
                  const { xaxis, yaxis } = sweepbench.graph().layout;
                  return [box.left, box.top, box.width, box.height, xaxis.range, yaxis.range, yaxis.type === "log"];
                }"""
            )
        )

    def pixel(self, x: float, y: float) -> Place:
        """Where a voltage and a current in screen units lie in the window."""
        return self.frame().place(x, y)

    def factor(self) -> float:
        return 1e3 if self.sweep.per_area else 1.0

    def places_of_handles(self) -> dict[str, Place]:
        """Where core puts the handles of the stored model."""
        sweep = self.sweep
        hold = self.stored.fit(self.entry).settings.hold
        span = (float(sweep.voltage.min()), float(sweep.voltage.max()))
        frame, factor = self.frame(), self.factor()
        found = handles(self.model, lit=sweep.lit, hold=hold, span=span)
        return {handle.parameter: frame.place(handle.x, handle.y * factor) for handle in found}

    def grip_locator(self, parameter: str) -> Locator:
        return self.page.locator(f"#overlay .grip[data-parameter={parameter}]")

    def grips_in_sight(self) -> dict[str, Place]:
        """Where the grips are drawn, without those that wait at the edge of the plot."""
        found = self.find("#overlay .grip:not(.beyond)").evaluate_all(
            """(all) => all.map((grip) => {
              const box = grip.querySelector(".reach").getBoundingClientRect();
              return [grip.dataset.parameter, box.x + box.width / 2, box.y + box.height / 2];
            })"""
        )
        return {parameter: Place(x, y) for parameter, x, y in found}

    def grip(self, parameter: str) -> Place:
        """Where the grip is drawn."""
        box = self.grip_locator(parameter).locator(".reach").bounding_box()
        assert box is not None
        return Place(box["x"] + box["width"] / 2, box["y"] + box["height"] / 2)

    # The hand

    def press(self, place: Place) -> None:
        self.page.mouse.move(place.x, place.y)
        self.page.mouse.down()

    def move(self, place: Place, steps: int = 5) -> None:
        self.page.mouse.move(place.x, place.y, steps=steps)

    def release(self) -> None:
        self.page.mouse.up()

    def pull(self, parameter: str, by: tuple[float, float], steps: int = 5) -> None:
        """A whole drag of a grip, without waiting for anything."""
        start = self.grip(parameter)
        self.press(start)
        self.move(start + by, steps)
        self.release()

    def choose(self, entry: str) -> None:
        self.page.locator(f"#sweep-{entry} .sweep-name").click()
        self.until("active", entry)
        self.settle()

    def drop(self, *paths: Path) -> None:
        """Files and folders dragged from the desktop onto the page, as the browser itself reports them."""
        session = self.page.context.new_cdp_session(self.page)
        data = {"items": [], "files": [str(path) for path in paths], "dragOperationsMask": 1}
        for kind in ("dragEnter", "dragOver", "drop"):
            session.send("Input.dispatchDragEvent", {"type": kind, "x": 640, "y": 360, "data": data})
        session.detach()

    def touch(self, *places: Place) -> None:
        """One finger along these places."""
        session = self.page.context.new_cdp_session(self.page)
        for number, place in enumerate(places):
            kind = "touchMove" if number else "touchStart"
            session.send("Input.dispatchTouchEvent", {"type": kind, "touchPoints": [{"x": place.x, "y": place.y}]})
        self.until("followed")
        session.send("Input.dispatchTouchEvent", {"type": "touchEnd", "touchPoints": []})
        session.detach()

    # Agreement

    def assert_agreement(self) -> None:
        """Stored model, figure, drawn line, dials and grips say the same."""
        assert self.page.evaluate("sweepbench.stamp().revision") == self.stored.revision
        model, sweep = self.model, self.sweep
        voltage, shown = self.trace("model")
        assert len(voltage) > 100
        # Lines are sent with six digits, voltages too.
        expected, beside = (self._on_axis(model, sweep, v) for v in (voltage, voltage + 1e-6))
        slack = np.abs(beside - expected) + 1e-5 * (np.abs(expected).max() if sweep.lit else np.abs(expected))
        assert (np.abs(shown - expected) <= slack).all()
        self._assert_drawn_line(model, sweep)
        ranges = dial_ranges(sweep)
        for parameter in PARAMETERS:
            value = getattr(model, parameter)
            assert math.isclose(self.number(parameter), value, rel_tol=1e-4), parameter
            fraction = float(self.dial(parameter).locator("input[type=range]").input_value())
            assert abs(fraction - ranges[parameter].containing(value).fraction(value)) <= 0.00051, parameter
        places = self.places_of_handles()
        for parameter, place in self.grips_in_sight().items():
            assert place.distance(places[parameter]) < 0.5, parameter
        assert self.page.locator("#overlay .line").count() == 0

    def _on_axis(self, model: OneDiode, sweep: Sweep, voltage: np.ndarray) -> np.ndarray:
        """The model's current as the axis shows it; a dark sweep by its size."""
        current = model.current(voltage) * self.factor()
        return current if sweep.lit else np.abs(current)

    def _assert_drawn_line(self, model: OneDiode, sweep: Sweep) -> None:
        """The line on the screen lies on the model's curve, all along its length."""
        points = self.page.evaluate(
            """() => {
              const path = document.querySelector("#plot .scatterlayer .tracemodel path.js-line");
              const matrix = path.getScreenCTM();
              const box = document.querySelector("#plot .draglayer .xy .nsewdrag").getBoundingClientRect();
              const length = path.getTotalLength();
              return Array.from({ length: 40 }, (_, i) => path.getPointAtLength((length * (i + 0.5)) / 40).matrixTransform(matrix))
                .filter((p) => p.x > box.left && p.x < box.right && p.y > box.top && p.y < box.bottom).map((p) => [p.x, p.y]);
            }"""
        )
        assert len(points) >= 5
        voltage, _ = self.trace("model")
        current = self._on_axis(model, sweep, voltage)
        keep = current > 0 if self.frame().logarithmic else np.isfinite(current)
        frame = self.frame()
        line = [frame.place(v, c) for v, c in zip(voltage[keep], current[keep], strict=True)]
        for x, y in points:
            assert distance_to_line(Place(x, y), line) < 1.0
