/* The hand: pointer and keys on grips, sliders and fields. It says where the hand is; core says what follows. */
(() => {
  const bench = (window.sweepbench ??= {});
  const STEP = 2; // pixels an arrow key moves a grip
  const REST = 400; // ms after the last key until the move counts as one step
  let drag = null; // {event, x, y, offsetX, offsetY, moved, timer}
  let slide = null; // {event}

  bench.handIsDown = () => drag !== null || slide !== null;

  function show(answer, status) {
    if (status === 409) {
      giveUp();
      bench.say(answer.sentence, { answer: true });
      bench.setProps("revision", { data: { ...bench.stamp(), revision: answer.revision } });
      return;
    }
    if (status !== 200) {
      bench.say(answer.sentence ?? "The server could not follow the hand.", { answer: true });
      return;
    }
    bench.paintLive(answer);
  }

  function follow(event) {
    bench.live.push({ ...event, strip: bench.scene?.strip }, show);
  }

  function commit(event) {
    bench.live.drop();
    bench.send(event);
  }

  function giveUp() {
    if (!bench.handIsDown()) return;
    clearTimeout(drag?.timer);
    drag = null;
    slide = null;
    bench.live.drop();
    bench.paintScene();
  }

  /* Grips, by pointer */
  const place = (bench.place = (pointer) => {
    const box = document.getElementById("overlay").getBoundingClientRect();
    // A page that is zoomed by CSS has a box of another size than its layout.
    const scale = box.width / document.getElementById("overlay").offsetWidth || 1;
    return { x: (pointer.clientX - box.left) / scale, y: (pointer.clientY - box.top) / scale };
  });

  function positionEvent() {
    return {
      kind: "drag",
      entry: bench.scene.entry,
      parameter: drag.parameter,
      x: bench.axis("x").value(drag.x),
      y: bench.axis("y").value(drag.y),
    };
  }

  function locked(grip) {
    if (!grip.classList.contains("locked")) return false;
    bench.say(grip.getAttribute("aria-label"));
    return true;
  }

  document.addEventListener("pointerdown", (pointer) => {
    const grip = pointer.target.closest?.(".grip");
    if (!grip || pointer.button !== 0) return;
    grip.focus({ preventScroll: true });
    pointer.preventDefault();
    if (locked(grip)) return;
    finishKeys();
    const at = place(pointer);
    const grab = bench.gripPlace(grip.dataset.parameter);
    drag = { parameter: grip.dataset.parameter, x: grab.x, y: grab.y, offsetX: grab.x - at.x, offsetY: grab.y - at.y, moved: false };
    grip.setPointerCapture(pointer.pointerId);
  });
  document.addEventListener("pointermove", (pointer) => {
    if (!drag || drag.timer || !pointer.target.closest?.(".grip")) return;
    const at = place(pointer);
    drag.x = at.x + drag.offsetX;
    drag.y = at.y + drag.offsetY;
    drag.moved = true;
    follow(positionEvent());
  });
  document.addEventListener("pointerup", () => {
    if (!drag || drag.timer) return;
    const event = drag.moved ? positionEvent() : null;
    drag = null;
    if (event) commit(event);
    else bench.paintScene(); // a scene may have come meanwhile
  });
  document.addEventListener("pointercancel", () => drag && !drag.timer && giveUp());
  // Chromium ignores touch-action on parts of an SVG; without this a touch drag ends after a few pixels.
  document.addEventListener("touchstart", (touch) => touch.target.closest?.(".grip") && touch.preventDefault(), { passive: false });
  // The wheel over a grip zooms the plot beneath it.
  document.addEventListener(
    "wheel",
    (wheel) => {
      if (!wheel.target.closest?.(".grip")) return;
      wheel.preventDefault();
      document.querySelector("#plot .nsewdrag")?.dispatchEvent(new WheelEvent("wheel", wheel));
    },
    { passive: false },
  );

  /* Grips, by keys */
  const ARROWS = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, -1], ArrowDown: [0, 1], PageUp: [0, -10], PageDown: [0, 10] };
  document.addEventListener("keydown", (key) => {
    if (key.key === "Escape") giveUp();
    const grip = key.target.closest?.(".grip");
    const arrow = ARROWS[key.key];
    if (!grip || !arrow || key.ctrlKey || key.metaKey || key.altKey) return;
    key.preventDefault();
    if (locked(grip)) return;
    const parameter = grip.dataset.parameter;
    if (drag && drag.parameter !== parameter) finishKeys();
    drag ??= { parameter, ...bench.gripPlace(parameter) };
    const far = STEP * (key.shiftKey ? 10 : 1);
    // On the ray, up and right both lead outwards.
    drag.x += far * arrow[0];
    drag.y += far * arrow[1];
    clearTimeout(drag.timer);
    drag.timer = setTimeout(finishKeys, REST);
    follow(positionEvent());
  });
  document.addEventListener("focusout", (leave) => leave.target.closest?.(".grip") && finishKeys());

  /** What keys have moved becomes a step now, because something else is to be done on it. */
  function finishKeys() {
    if (!drag?.timer) return;
    clearTimeout(drag.timer);
    const event = positionEvent();
    drag = null;
    commit(event);
  }
  bench.finishKeys = finishKeys;

  /* Dials */
  let shift = false; // with it, a slider keeps Jsc and Voc
  let shiftEnter = false; // with both, so does a number; Shift with Tab only leaves the field
  for (const type of ["keydown", "keyup", "pointerdown", "pointermove"]) {
    document.addEventListener(type, (event) => (shift = event.shiftKey), { capture: true });
  }
  const dialEvent = (input) => ({
    kind: "dial",
    entry: bench.scene.entry,
    parameter: input.closest("[data-parameter]").dataset.parameter,
    fraction: Number(input.value),
    keep: slide?.event.keep ?? shift,
  });
  document.addEventListener("input", (event) => {
    if (!event.target.matches?.(".dial input[type=range]")) return;
    slide = { event: dialEvent(event.target) };
    follow(slide.event);
  });
  document.addEventListener("change", (event) => {
    const input = event.target;
    if (input.matches?.(".dial input[type=range]")) {
      const last = dialEvent(input);
      slide = null;
      commit(last);
    } else if (input.matches?.(".dial input[type=text]")) {
      const parameter = input.closest("[data-parameter]").dataset.parameter;
      commit({ kind: "field", entry: bench.scene.entry, parameter, text: input.value, keep: shiftEnter });
    } else if (input.matches?.(".condition input, .condition select")) {
      const name = input.closest("[data-condition]")?.dataset.condition;
      if (name === "band_gap") commit({ kind: "band-gap", entry: bench.losses.entry, text: input.value });
      else if (name) commit({ kind: "condition", entry: bench.scene.entry, name, text: input.value });
    }
  });
  document.addEventListener("keydown", (event) => {
    if (event.key !== "Enter" || !event.target.matches?.(".dial input, .condition input")) return;
    shiftEnter = event.shiftKey;
    event.target.blur(); // which commits it
    shiftEnter = false;
  });

  document.addEventListener("click", (click) => {
    const hold = click.target.closest?.(".hold");
    if (hold) bench.toggleHold(hold.closest("[data-parameter]").dataset.parameter);
    const assumed = click.target.closest?.(".assumed");
    const confirmed = assumed?.closest("[data-condition]").dataset.condition;
    if (confirmed === "band_gap") commit({ kind: "band-gap", entry: bench.losses.entry, text: bench.losses.bandGap.text });
    else if (assumed) commit({ kind: "confirm", entry: bench.scene.entry, names: [assumed.closest("[data-condition]").dataset.condition] });
  });

  bench.toggleHold = (parameter) => {
    if (!bench.scene?.entry) return;
    commit({ kind: "hold", entry: bench.scene.entry, parameter, on: !bench.scene.dials[parameter].held });
  };
})();
