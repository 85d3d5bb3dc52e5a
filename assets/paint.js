/* Painting: what the server says of the bench is written onto the page, at rest and while a hand moves. */
(() => {
  const bench = (window.sweepbench ??= {});
  bench.scene = null;
  let settled = { key: null, revision: -1 }; // the lines last written into the plot's figure

  const text = (element, words) => {
    if (element && element.textContent !== words) element.textContent = words;
  };
  const byId = (id) => document.getElementById(id);

  /** Fields are made here, not by the page's framework, so that nothing resets what is written into them. */
  function fields() {
    if (document.querySelector(".conditions .value > *")) return;
    for (const row of document.querySelectorAll(".conditions .condition")) {
      const field = row.dataset.options ? choice(row.dataset.options.split("|")) : input({ type: "text", spellcheck: "false" });
      field.setAttribute("aria-label", row.dataset.title);
      row.querySelector(".value").append(field);
    }
  }
  function input(attributes) {
    const element = document.createElement("input");
    element.autocomplete = "off";
    for (const [key, value] of Object.entries(attributes)) element.setAttribute(key, value);
    return element;
  }
  function choice(options) {
    const element = document.createElement("select");
    for (const option of options) element.append(new Option(option, option));
    return element;
  }
  /* An answer to one change may come while the next is being typed: what stands in a field unsent is the user's. */
  document.addEventListener("input", (event) => event.target.matches?.("input:not([type=range])") && (event.target.dataset.typed = ""), { capture: true });
  for (const type of ["change", "focusout"]) {
    document.addEventListener(type, (event) => event.target.dataset && delete event.target.dataset.typed, { capture: true });
  }
  /** Show a value in a field, unless the user is typing there. */
  const write = (bench.write = (field, value) => {
    if (field && !("typed" in field.dataset) && field.value !== String(value)) field.value = value;
  });

  /** One row a parameter, in the order of the model; another model brings other rows. */
  function buildDials(dials) {
    const host = byId("dials");
    const wanted = Object.keys(dials);
    const present = [...host.children].map((row) => row.dataset.parameter);
    if (wanted.join() === present.join()) return;
    host.replaceChildren(
      ...wanted.map((parameter) => {
        const title = dials[parameter].title;
        const row = part("div", "dial");
        row.dataset.parameter = parameter;
        const number = part("span", "number");
        number.append(input({ type: "text", inputmode: "decimal", spellcheck: "false", "aria-label": `${title}, value` }));
        const hold = part("button", "hold");
        hold.setAttribute("role", "switch");
        hold.setAttribute("aria-label", `Hold ${title}`);
        const slider = part("span", "slider");
        slider.append(input({ type: "range", min: 0, max: 1, step: 0.001, "aria-label": title }));
        const [mark, symbol] = [part("span", "mark"), part("span", "symbol")];
        mark.title = symbol.title = title;
        row.append(mark, symbol, number, part("span", "unit"), part("span", "error"), hold, slider);
        return row;
      }),
    );
  }
  const part = (tag, className) => Object.assign(document.createElement(tag), { className });

  function paintDials(dials, force) {
    for (const [parameter, dial] of Object.entries(dials)) {
      const row = document.querySelector(`.dial[data-parameter=${parameter}]`);
      const slider = row?.querySelector("input[type=range]");
      if (!slider) continue;
      // The slider in the hand stays where the hand is, until the answer to the whole move is there.
      if (force || slider !== document.activeElement) slider.value = dial.fraction;
      slider.setAttribute("aria-valuetext", dial.text);
      slider.style.setProperty("--fill", `${100 * dial.fraction}%`);
      write(row.querySelector("input[type=text]"), dial.text);
      if (!("symbol" in dial)) continue;
      const symbol = row.querySelector(".symbol");
      symbol.replaceChildren(dial.symbol, Object.assign(document.createElement("sub"), { textContent: dial.index }));
      text(row.querySelector(".unit"), dial.unit);
      text(row.querySelector(".error"), dial.error);
      row.querySelector(".error").classList.toggle("words", !/\d/.test(dial.error)); // they may take two lines
      row.classList.toggle("held", dial.held);
      row.querySelector(".hold").setAttribute("aria-checked", String(dial.held));
      text(row.querySelector(".hold"), dial.held ? "held" : "hold");
    }
  }

  function paintMetrics(metrics) {
    for (const [name, cells] of Object.entries(metrics)) {
      const row = document.querySelector(`[data-metric=${name}]`);
      for (const [column, words] of Object.entries(cells)) {
        if (column === "reason") row.title = words;
        else text(row?.querySelector(`[data-column=${column}]`), words);
      }
    }
  }

  function paintConditions(conditions) {
    for (const [name, condition] of Object.entries(conditions)) {
      const row = document.querySelector(`[data-condition=${name}]`);
      row.hidden = !condition.shown;
      write(row.querySelector("input, select"), condition.text);
      row.querySelector(".assumed").hidden = !condition.assumed;
    }
  }

  function paintFindings(findings) {
    const host = byId("findings");
    host.replaceChildren(
      ...findings.map((finding) => {
        const row = document.createElement("details");
        row.className = `finding ${finding.severity}`;
        const head = document.createElement("summary");
        head.textContent = finding.what;
        row.append(head);
        for (const words of [finding.meaning, finding.remedy].filter(Boolean)) {
          row.append(Object.assign(document.createElement("p"), { textContent: words }));
        }
        row.classList.toggle("bare", row.childElementCount === 1);
        return row;
      }),
    );
  }

  /** The moving state: lines, grips, numbers. */
  bench.paintLive = (answer) => {
    bench.liveAnswer = answer;
    bench.drawLines(answer.curves);
    bench.drawGrips(answer.handles);
    paintDials(answer.dials, false);
    paintMetrics(answer.metrics);
    text(byId("edge-line"), answer.message);
  };

  /** The state at rest. */
  bench.paintScene = () => {
    const scene = bench.scene;
    if (!scene) return;
    fields();
    document.body.classList.toggle("empty", scene.entry === null);
    document.body.classList.toggle("dark-sweep", scene.lit === false);
    document.body.classList.toggle("fitted", Boolean(scene.fitted));
    if (scene.entry === null) return;
    bench.liveAnswer = null;
    text(byId("bench-title"), scene.title);
    text(byId("bench-subtitle"), scene.subtitle === scene.title ? "" : scene.subtitle);
    text(byId("fit-line"), scene.fit);
    text(byId("fit-caution"), scene.caution);
    text(byId("edge-line"), "");
    for (const letter of document.querySelectorAll(".metrics .letter")) text(letter, scene.letter);
    for (const button of document.querySelectorAll("[data-strip]")) {
      button.setAttribute("aria-checked", String(button.dataset.strip === scene.strip));
    }
    buildDials(scene.dials);
    paintDials(scene.dials, true);
    paintMetrics(scene.metrics);
    paintConditions(scene.conditions);
    paintFindings(scene.findings);
    bench.drawLines([]);
    bringUpToDate();
    bench.paintPanel(scene);
    bench.paintSelection?.();
  };

  /* Figure and scene come in one answer but not at one moment: each figure says which it is, and of which revision. */
  const held = () => bench.graph()?.layout?.meta ?? {};
  const figureIsThere = () => Boolean(bench.scene?.entry) && held().key === bench.scene.figure;

  /** Lines and grips of the scene, once the plot holds the figure that they belong to. */
  function bringUpToDate() {
    if (!figureIsThere()) return;
    const { key, revision } = held();
    const shown = settled.key === key ? Math.max(settled.revision, revision) : revision;
    if (shown !== bench.scene.revision) {
      settled = { key, revision: bench.scene.revision };
      settle(bench.scene.curves);
    }
    bench.drawGrips(bench.scene.handles);
  }

  /** Write the model's lines into the figure that stays: public API, no redraw of the rest. */
  function settle(curves) {
    const graph = bench.graph();
    if (!graph?.data) return;
    const traces = [];
    const data = [];
    for (const curve of curves) {
      const index = graph.data.findIndex((trace) => trace.uid === curve.uid);
      if (index < 0) continue;
      traces.push(index);
      data.push({ x: curve.x, y: curve.y });
    }
    if (!traces.length) return;
    window.Plotly.animate(
      graph,
      { data, traces },
      { mode: "immediate", transition: { duration: 0 }, frame: { duration: 0, redraw: false } },
    );
  }

  /** A new scene from the server. */
  bench.receiveScene = (scene) => {
    if (!scene) return;
    bench.scene = scene;
    if (!bench.handIsDown()) bench.paintScene(); // else when the hand is up again
  };

  /** The plot was drawn, zoomed or resized: everything above it goes back to its place. */
  bench.afterPlot = () => {
    if (!figureIsThere()) return;
    if (bench.liveAnswer) {
      bench.drawLines(bench.liveAnswer.curves);
      bench.drawGrips(bench.liveAnswer.handles);
    } else {
      bringUpToDate();
    }
  };

  let noticeTimer = null;
  let ofAnAnswer = false;
  /** One sentence for the user; it goes when it has been read, on a click, or if it answers a change, when the next one is made. */
  bench.say = (sentence, { answer = false } = {}) => {
    const line = byId("notice-line");
    if (!line) return;
    clearTimeout(noticeTimer);
    ofAnAnswer = answer;
    line.textContent = sentence ?? "";
    line.classList.toggle("shown", Boolean(sentence));
    if (sentence) noticeTimer = setTimeout(() => line.classList.remove("shown"), 4000 + 60 * sentence.length);
  };
  bench.sayNoMore = () => ofAnAnswer && bench.say("");
})();
