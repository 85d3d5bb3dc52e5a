"""What a test can wait for, looked at inside the page."""

# Every wait is for a condition, looked at once a frame, inside the page.
_UNTIL = """async ([condition, argument, patience]) => {
  const holds = { CONDITIONS };
  const end = performance.now() + patience;
  for (;;) {
    if (holds[condition](argument)) return true;
    if (performance.now() > end) return false;
    await new Promise((next) => setTimeout(next, 8));
  }
}"""

_CONDITIONS = """
  painted: () => Boolean(window.sweepbench?.scene && document.querySelector("#tray-list") && sweepbench.graph()?._fullLayout),
  followed: () => !sweepbench.live.busy,
  atRest: () => !sweepbench.live.busy && !sweepbench.unsent() && !sweepbench.handIsDown()
      && sweepbench.scene.revision === sweepbench.stamp().revision && FIGURE,
  moved: (before) => sweepbench.stamp().revision > before,
  painted_revision: (revision) => sweepbench.scene.revision === revision,
  active: (entry) => sweepbench.scene.entry === entry,
  row_named: (name) => [...document.querySelectorAll("#tray-list .sweep-name")].some((one) => one.textContent === name),
  trace: (uid) => sweepbench.graph()._fullData.some((one) => one.uid === uid),
  ranges: (wanted) => wanted === JSON.stringify(RANGES(sweepbench.graph().layout)) && wanted === JSON.stringify(RANGES(sweepbench.graph()._fullLayout)),
  ranged: (before) => {
    const [public_, inner] = [sweepbench.graph().layout, sweepbench.graph()._fullLayout].map((one) => JSON.stringify(RANGES(one)));
    return public_ !== before && public_ === inner;
  },
  frame_is_not: (width) => Math.abs(document.querySelector("#plot .draglayer .xy .nsewdrag").getBoundingClientRect().width - width) > 20
      && sweepbench.axis("x").length !== width,
  grip_at: ([parameter, x, y]) => {
    const box = document.querySelector(`#overlay .grip[data-parameter=${parameter}] .reach`).getBoundingClientRect();
    return Math.hypot(box.x + box.width / 2 - x, box.y + box.height / 2 - y) < 1;
  },
  strip: (strip) => sweepbench.scene.strip === strip,
  rows: (count) => document.querySelectorAll("#tray-list .sweep").length === count
      && !document.querySelector("#arrivals .busy, #tray-list .spark path:not([d])"),
  screen: (name) => (sweepbench.view.screen ?? "bench") === name && document.body.dataset.screen === name
      && [...document.querySelectorAll(`.view[data-view=${name}] .dash-graph`)].every((one) => one.querySelector(".js-plotly-plot")?._fullLayout),
  saved_line: (words) => document.querySelector("#saved-line").textContent.startsWith(words),
  progress: () => /\\d+ of \\d+/.test(document.querySelector("#job-line").textContent),
  says: (words) => document.querySelector("#notice-line.shown")?.textContent.includes(words),
"""

# The figure has arrived when its model trace holds the line that the scene names, fills its room, and the
# grips stand on their places.
_FIGURE = """(() => {
    const { scene } = sweepbench;
    if (scene.entry === null) return true;
    const line = scene.curves.find((curve) => curve.uid === "model");
    const trace = sweepbench.graph()?._fullData?.find((one) => one.uid === "model");
    if (!trace || (trace.x ?? []).length !== line.x.length) return false;
    if (Math.abs(sweepbench.graph()._fullLayout.height - sweepbench.graph().getBoundingClientRect().height) > 0.6) return false;
    const size = Math.max(...line.y.map(Math.abs), 1e-300);
    const alike = line.y.every((y, i) => Math.abs(trace.x[i] - line.x[i]) < 1e-5
      && (y === null ? !Number.isFinite(trace.y[i] ?? NaN) : Math.abs(trace.y[i] - y) <= 2e-6 * size));
    const [x, y] = [sweepbench.axis("x"), sweepbench.axis("y")];
    return alike && scene.handles.every((handle) => {
      const grip = sweepbench.gripPlace(handle.parameter);
      const beyond = document.querySelector(`#overlay .grip.beyond[data-parameter=${handle.parameter}]`);
      return grip && (beyond || Math.hypot(grip.x - x.pixel(handle.x), grip.y - y.pixel(handle.y)) < 0.1);
    });
  })()"""

UNTIL = _UNTIL.replace("CONDITIONS", _CONDITIONS.replace("FIGURE", _FIGURE).replace("RANGES", "((one) => [one.xaxis.range, one.yaxis.range])"))
