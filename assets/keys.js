/* Keys for what the pointer does on the plot: zoom, pan, whole view, and points left out one by one. */
(() => {
  const bench = (window.sweepbench ??= {});
  const ZOOM = 0.8; // of the range that one key leaves in sight
  const PAN = 0.1; // of the range that one key moves
  const TOGETHER = ["xaxis", "yaxis", "yaxis2"]; // as under the wheel: current and power keep their places beside each other
  const room = () => document.querySelector(".plot-room");

  /** Give each axis the range that ``change`` makes of its ends; on a logarithmic axis the ends are powers of ten. */
  function setRanges(change) {
    const { layout } = bench.graph();
    const ranges = {};
    for (const name of TOGETHER) {
      const range = layout[name]?.range;
      if (range) ranges[`${name}.range`] = change(name, range[0], range[1]);
    }
    window.Plotly.relayout(bench.graph(), ranges);
  }

  /** The part of the plot that a zoom keeps in its place: the marked point, the focused grip, or the middle. */
  function centre() {
    const frame = bench.frame("y");
    const grip = document.activeElement?.closest?.(".grip");
    const at = marker ?? (grip && bench.gripPlace(grip.dataset.parameter));
    if (!at) return { x: 0.5, y: 0.5 };
    const within = (share) => Math.max(0, Math.min(1, share));
    return { x: within((at.x - frame.left) / frame.width), y: 1 - within((at.y - frame.top) / frame.height) };
  }

  function zoom(factor) {
    const { x, y } = centre();
    setRanges((name, low, high) => {
      const fixed = low + (name === "xaxis" ? x : y) * (high - low);
      return [fixed + (low - fixed) * factor, fixed + (high - fixed) * factor];
    });
  }

  function pan(right, up) {
    setRanges((name, low, high) => {
      const by = PAN * (high - low) * (name === "xaxis" ? right : up);
      return [low + by, high + by];
    });
  }

  bench.wholeView = () => window.Plotly.relayout(bench.graph(), bench.graph().layout.meta?.whole ?? {});

  const ZOOMS = { "+": () => zoom(ZOOM), "=": () => zoom(ZOOM), "-": () => zoom(1 / ZOOM), "−": () => zoom(1 / ZOOM), 0: () => bench.wholeView() };
  const PANS = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, 1], ArrowDown: [0, -1] };

  /* The marker: where among the points the keys are, while points are being left out */
  let marker = null; // {index, voltage, x, y}: place in pixels of the plot
  let from = null; // voltage where Space was pressed last

  /** The points as they are shown, by voltage, and whether each is left out. */
  function points() {
    const found = [];
    for (const uid of ["points", "left-out"]) {
      const { x, y } = bench.shownPoints(uid);
      for (let i = 0; i < x.length; i += 1) {
        if (Number.isFinite(y[i])) found.push({ voltage: x[i], current: y[i], out: uid === "left-out" });
      }
    }
    return found.sort((one, other) => one.voltage - other.voltage);
  }

  function nearest(all, voltage) {
    let best = 0;
    all.forEach((point, index) => {
      if (Math.abs(point.voltage - voltage) < Math.abs(all[best].voltage - voltage)) best = index;
    });
    return best;
  }

  function element() {
    const host = document.getElementById("overlay");
    let mark = host.querySelector(".point-marker");
    if (mark) return mark;
    mark = Object.assign(document.createElement("div"), { className: "point-marker" });
    const words = document.createElement("span");
    words.setAttribute("role", "status");
    mark.append(words);
    host.append(mark);
    return mark;
  }

  /** Put the marker on its point, as the figure now shows it; also after a zoom or a new figure. */
  bench.placeMarker = (index = null) => {
    if (!marker) return;
    const all = points();
    if (!all.length) return bench.showMarker(false);
    const at = index === null ? nearest(all, marker.voltage) : Math.max(0, Math.min(all.length - 1, index));
    const { voltage, current, out } = all[at];
    marker = { index: at, voltage, x: bench.axis("x").pixel(voltage), y: bench.axis("y").pixel(current) };
    const mark = element();
    mark.style.transform = `translate(${marker.x}px, ${marker.y}px)`;
    const unit = bench.scene?.dials?.photocurrent?.unit ?? "";
    const place = `${at + 1} of ${all.length}: ${voltage.toFixed(4)} V, ${current.toPrecision(4)} ${unit}`;
    const words = `${place}, ${out ? "left out" : "used"}`.replaceAll("-", "−");
    const label = mark.querySelector("span");
    if (label.textContent !== words) label.textContent = words;
  };

  bench.showMarker = (on) => {
    if (!on) {
      document.querySelector(".point-marker")?.remove();
      marker = from = null;
      return;
    }
    room().focus({ preventScroll: true });
    marker ??= { index: 0, voltage: -Infinity, x: 0, y: 0 };
    bench.placeMarker(0);
  };

  /** Leave out, or take back, the marked point; or all from where that was done last. */
  function leaveOut(wholeStretch) {
    const here = points()[marker.index];
    const hair = (value) => 1e-9 * Math.max(Math.abs(value), 1e-6);
    const around = (low, high) => [low - hair(low), high + hair(high)];
    const stretch = wholeStretch && from !== null;
    const voltages = stretch ? around(Math.min(from, here.voltage), Math.max(from, here.voltage)) : around(here.voltage, here.voltage);
    const currents = stretch ? [-Number.MAX_VALUE, Number.MAX_VALUE] : around(here.current, here.current);
    from = here.voltage;
    bench.send({ kind: "leave-out", entry: bench.scene.entry, box: [...voltages, ...currents] });
  }

  const STEPS = { ArrowLeft: -1, ArrowDown: -1, ArrowRight: 1, ArrowUp: 1, PageDown: -10, PageUp: 10, Home: -Infinity, End: Infinity };

  document.addEventListener("keydown", (key) => {
    if (document.body.dataset.screen !== "bench" || !bench.scene?.entry || key.ctrlKey || key.metaKey || key.altKey) return;
    if (key.target.matches?.("input:not([type=range]), textarea, select")) return;
    if (ZOOMS[key.key]) {
      key.preventDefault();
      ZOOMS[key.key]();
      return;
    }
    if (key.target !== room()) return;
    if (key.shiftKey && PANS[key.key]) pan(...PANS[key.key]);
    else if (marker && key.key === " ") leaveOut(key.shiftKey);
    else if (marker && STEPS[key.key]) bench.placeMarker(marker.index + STEPS[key.key]);
    else return;
    key.preventDefault();
  });
})();
