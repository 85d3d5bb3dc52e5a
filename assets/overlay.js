/* The thin layer over the plot: the moving lines and the grips. It draws what it is given and computes nothing. */
(() => {
  const bench = (window.sweepbench ??= {});
  const SVG = "http://www.w3.org/2000/svg";
  const make = (name, attributes = {}, parent = null) => {
    const element = document.createElementNS(SVG, name);
    for (const [key, value] of Object.entries(attributes)) element.setAttribute(key, value);
    parent?.append(element);
    return element;
  };

  let layer = null; // {svg, clips, lines, grips}

  function layerOf() {
    const host = document.getElementById("overlay");
    if (!host) return null;
    if (layer && host.contains(layer.svg)) return layer;
    const svg = make("svg", { class: "overlay-svg" }, host);
    const defs = make("defs", {}, svg);
    const clips = {};
    for (const axis of ["y", "y2", "y3"]) {
      clips[axis] = make("rect", {}, make("clipPath", { id: `clip-${axis}` }, defs));
    }
    layer = { svg, clips, lines: make("g", { class: "lines" }, svg), grips: make("g", { class: "grips" }, svg) };
    return layer;
  }

  function pathOf(curve) {
    const x = bench.axis("x");
    const y = bench.axis(curve.axis);
    if (!x || !y) return "";
    let path = "";
    let pen = "M";
    for (let i = 0; i < curve.x.length; i += 1) {
      if (curve.x[i] === null || curve.y[i] === null) {
        pen = "M";
        continue;
      }
      const px = x.pixel(curve.x[i]);
      const py = y.pixel(curve.y[i]);
      if (!Number.isFinite(px) || !Number.isFinite(py)) {
        pen = "M";
        continue;
      }
      path += `${pen}${px.toFixed(1)} ${Math.max(-1e4, Math.min(1e4, py)).toFixed(1)}`;
      pen = "L";
    }
    return path;
  }

  function placeClips() {
    for (const [axis, rect] of Object.entries(layer.clips)) {
      const frame = bench.frame(axis);
      if (!frame) continue;
      for (const [key, value] of Object.entries({ x: frame.left, y: frame.top, width: frame.width, height: frame.height })) {
        rect.setAttribute(key, value);
      }
    }
  }

  /** Draw the moving lines; an empty list wipes them and brings the figure's own back to full ink. */
  bench.drawLines = (curves) => {
    if (!layerOf()) return;
    placeClips();
    document.querySelector(".plot-room")?.classList.toggle("live-on", curves.length > 0);
    const wanted = new Set(curves.map((curve) => curve.uid));
    for (const old of [...layer.lines.children]) if (!wanted.has(old.dataset.uid)) old.remove();
    for (const curve of curves) {
      let path = layer.lines.querySelector(`[data-uid="${curve.uid}"]`);
      if (!path) {
        path = make("path", { class: `line ${curve.uid}`, "clip-path": `url(#clip-${curve.axis})` }, layer.lines);
        path.dataset.uid = curve.uid;
      }
      path.setAttribute("d", pathOf(curve));
    }
  };

  function gripOf(handle) {
    let grip = layer.grips.querySelector(`[data-parameter="${handle.parameter}"]`);
    if (grip) return grip;
    grip = make("g", { class: "grip", tabindex: "0", role: "slider" }, layer.grips);
    grip.dataset.parameter = handle.parameter;
    make("circle", { class: "reach", r: 16 }, grip);
    make("circle", { class: "ring", r: 13 }, grip);
    make("path", { class: "shape", d: handle.shape, transform: "translate(-8 -8)" }, grip);
    make("path", { class: "lock", d: "M-3 0H3M0 -3V3" }, grip);
    return grip;
  }

  /** Put the grips where the answer says they are; one out of sight waits at the frame's edge. */
  bench.drawGrips = (handles) => {
    if (!layerOf()) return;
    const frame = bench.frame("y");
    const x = bench.axis("x");
    const y = bench.axis("y");
    const wanted = new Set(handles.map((handle) => handle.parameter));
    for (const old of [...layer.grips.children]) if (!wanted.has(old.dataset.parameter)) old.remove();
    if (!frame) return;
    for (const handle of handles) {
      const grip = gripOf(handle);
      const px = x.pixel(handle.x);
      const py = y.pixel(handle.y);
      const inX = Math.max(frame.left, Math.min(frame.left + frame.width, Number.isFinite(px) ? px : frame.left));
      const inY = Math.max(frame.top, Math.min(frame.top + frame.height, Number.isFinite(py) ? py : frame.top + frame.height));
      grip.classList.toggle("beyond", Math.abs(inX - px) > 1 || Math.abs(inY - py) > 1);
      grip.classList.toggle("locked", handle.locked);
      grip.dataset.motion = handle.motion;
      grip.setAttribute("transform", `translate(${inX.toFixed(2)} ${inY.toFixed(2)})`);
      grip.setAttribute("aria-label", handle.label);
      grip.setAttribute("aria-valuetext", handle.text);
      if (handle.value !== null) grip.setAttribute("aria-valuenow", handle.value);
      grip.setAttribute("aria-disabled", String(handle.locked));
    }
  };

  /** Where a grip stands now, in pixels of the plot. */
  bench.gripPlace = (parameter) => {
    const grip = layer?.grips.querySelector(`[data-parameter="${parameter}"]`);
    const match = grip?.getAttribute("transform").match(/translate\(([-\d.]+) ([-\d.]+)\)/);
    return match ? { x: Number(match[1]), y: Number(match[2]) } : null;
  };
})();
