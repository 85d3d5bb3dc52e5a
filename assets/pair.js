/* The pair and losses screens: choices, numbers, and the hand on their sliders. What follows is computed in core. */
(() => {
  const bench = (window.sweepbench ??= {});
  bench.pair = null;
  bench.losses = null;
  let asked = null; // the two last chosen, until the answer is there
  let touched = {}; // targets that the hand has moved

  const byId = (id) => document.getElementById(id);
  const text = (element, words) => {
    if (element && element.textContent !== words) element.textContent = words ?? "";
  };
  const refuse = (id, sentence) => {
    text(byId(id), sentence);
    byId(id).hidden = !sentence;
  };
  const check = (attribute, value) => {
    for (const button of document.querySelectorAll(`[${attribute}]`)) {
      button.setAttribute("aria-checked", String(button.getAttribute(attribute) === value));
    }
  };

  function slider(host, title) {
    let field = host.querySelector("input");
    if (field) return field;
    field = document.createElement("input");
    Object.assign(field, { type: "range", min: 0, max: 1, step: 0.005, value: 0, autocomplete: "off" });
    field.setAttribute("aria-label", title);
    host.append(field);
    return field;
  }
  /** What mechanisms are called: a shunt is one only if the dark sweep says so. */
  const called = (rows, names) => {
    for (const row of document.querySelectorAll(rows)) text(row.querySelector(".what"), names?.[row.dataset.parameter] ?? row.dataset.title);
  };
  const turn = (field, fraction) => {
    field.value = fraction;
    field.style.setProperty("--fill", `${100 * fraction}%`);
  };

  /* Which sweeps are compared */
  function slot(name, chosen) {
    const host = document.querySelector(`[data-slot=${name}]`);
    const field = host.querySelector("select") ?? host.appendChild(document.createElement("select"));
    field.setAttribute("aria-label", host.dataset.title);
    const options = (bench.devices ?? []).flatMap((device) =>
      device.sweeps.filter((sweep) => sweep.direction !== "dark").map((sweep) => new Option(`${device.name} ${sweep.label}`, sweep.entry)),
    );
    field.replaceChildren(...options);
    field.value = chosen ?? "";
  }

  bench.receivePair = (data) => {
    if (!data) return;
    bench.pair = data;
    asked = null;
    slot("a", data.a);
    slot("b", data.b);
    check("data-pair-scale", data.normalised ? "normalised" : "absolute");
    refuse("pair-refusal", data.refusal);
    text(byId("pair-story"), data.story);
    text(byId("pair-sources"), data.sources);
    text(byId("pair-bars-note"), data.note);
    text(byId("what-if-line"), data.whatIf);
    called(".what-if:not(.target)", data.names);
    for (const [name, cells] of Object.entries(data.compared ?? {})) {
      const row = document.querySelector(`[data-compared=${name}]`);
      for (const column of ["a", "b", "difference", "verdict"]) text(row.querySelector(`[data-column=${column}]`), cells[column]);
      row.title = cells.reason;
    }
    for (const row of document.querySelectorAll(".what-if:not(.target)")) {
      const field = slider(row.querySelector(".slider"), `Move ${row.dataset.title} of A to B`);
      field.disabled = Boolean(data.refusal) || data.still;
      turn(field, 0);
    }
    bench.paintStated(data.stated);
    bench.paintSelection?.();
  };

  function whatIf() {
    const rows = [...document.querySelectorAll(".what-if:not(.target)")];
    const fractions = Object.fromEntries(rows.map((row) => [row.dataset.parameter, Number(row.querySelector("input").value)]));
    for (const row of rows) turn(row.querySelector("input"), fractions[row.dataset.parameter]);
    const { a, b, normalised } = bench.pair;
    bench.live.push({ kind: "what-if", a, b, normalised, fractions }, (answer, status) => {
      if (status !== 200) return bench.say(answer.sentence);
      text(byId("what-if-line"), answer.words);
      draw("#pair-plot .js-plotly-plot", "what-if", answer.x, answer.y);
    });
  }

  /** Put points into one trace of a figure that stays. */
  function draw(where, uid, x, y) {
    const graph = document.querySelector(where);
    const index = graph?.data?.findIndex((trace) => trace.uid === uid) ?? -1;
    if (index < 0) return;
    window.Plotly.animate(
      graph,
      { data: [{ x, y }], traces: [index] },
      { mode: "immediate", transition: { duration: 0 }, frame: { duration: 0, redraw: false } },
    );
  }

  /** The ladder is small and made of bars, which do not survive an animation: it is restyled. */
  function mark(x, y) {
    const graph = document.querySelector("#ladder .js-plotly-plot");
    const index = graph?.data?.findIndex((trace) => trace.uid === "target") ?? -1;
    if (index >= 0) window.Plotly.restyle(graph, { x: [x], y: [y] }, [index]);
  }

  /** The chart fills its room also where the room changes while the chart is being drawn, as for the projector. */
  function fill() {
    const graph = document.querySelector("#ladder .js-plotly-plot");
    if (!graph?._fullLayout) return;
    const { clientWidth: width, clientHeight: height } = graph;
    const drawn = graph._fullLayout;
    if (width && height && (Math.abs(width - drawn.width) > 1 || Math.abs(height - drawn.height) > 1)) window.Plotly.Plots.resize(graph);
    if (graph.dataset.filled) return;
    graph.dataset.filled = "yes";
    graph.on("plotly_afterplot", () => requestAnimationFrame(fill));
    new ResizeObserver(fill).observe(graph);
  }

  /* Losses */
  bench.receiveLosses = (data) => {
    if (!data) return;
    requestAnimationFrame(fill);
    bench.losses = data;
    touched = {};
    text(byId("losses-title"), data.title);
    text(byId("losses-subtitle"), data.subtitle);
    refuse("losses-refusal", data.refusal);
    check("data-ladder", data.ladder);
    byId("losses-story").replaceChildren(...(data.story ?? []).map((words) => Object.assign(document.createElement("p"), { textContent: words })));
    text(byId("losses-cautions"), data.cautions);
    const gap = document.querySelector("[data-condition=band_gap]");
    const field = gap.querySelector("input") ?? gap.querySelector(".value").appendChild(document.createElement("input"));
    field.setAttribute("aria-label", "band gap");
    bench.write(field, data.bandGap?.text ?? "");
    gap.querySelector(".assumed").hidden = !data.bandGap?.assumed;
    const emission = byId("emission-choice");
    const choice = emission.querySelector("select") ?? emission.appendChild(document.createElement("select"));
    choice.setAttribute("aria-label", "emission from");
    choice.replaceChildren(new Option("the front (mirror behind)", "front"), new Option("both faces", "both"));
    choice.value = data.emission;
    byId("losses-table").replaceChildren(...(data.rows ?? []).map(lossRow));
    called(".target", data.names);
    for (const row of document.querySelectorAll(".target")) {
      const place = data.targets?.[row.dataset.parameter];
      const handle = slider(row.querySelector(".slider"), `Target of the ${row.dataset.title}`);
      handle.disabled = !place;
      turn(handle, place?.fraction ?? 0);
      text(row.querySelector(".target-value"), place?.text ?? "");
    }
    text(byId("target-line"), data.targetWords);
    document.body.classList.toggle("projector", Boolean(data.projector));
  };

  function lossRow(row) {
    const line = document.createElement("tr");
    line.dataset.loss = row.parameter;
    const name = document.createElement("th");
    name.scope = "row";
    if (row.movable) {
      for (const [words, by, sign] of [["earlier", -1, "↑"], ["later", 1, "↓"]]) {
        const button = Object.assign(document.createElement("button"), { className: "quiet order", textContent: sign });
        button.setAttribute("aria-label", `${row.name}: ${words} in the ladder`);
        button.addEventListener("click", () => reorder(row.parameter, by));
        name.append(button);
      }
      line.draggable = true;
    }
    name.append(row.name);
    line.append(name, ...[row.loss, row.share].map((words) => Object.assign(document.createElement("td"), { textContent: words })));
    return line;
  }

  function reorder(parameter, by, before = null) {
    const order = bench.losses.order.filter((name) => name !== parameter);
    const old = bench.losses.order.indexOf(parameter);
    const at = before === null ? Math.max(0, Math.min(order.length, old + by)) : order.indexOf(before);
    order.splice(at, 0, parameter);
    bench.changeView({ order });
  }
  let carried = null;
  document.addEventListener("dragstart", (drag) => (carried = drag.target.closest?.("tr[data-loss]")?.dataset.loss ?? null));
  document.addEventListener("dragover", (drag) => carried && drag.target.closest?.("tr[data-loss]") && drag.preventDefault());
  document.addEventListener("drop", (drop) => {
    const onto = drop.target.closest?.("tr[data-loss]")?.dataset.loss;
    if (carried && onto && onto !== carried && bench.losses.order.includes(onto)) {
      drop.preventDefault();
      reorder(carried, 0, onto);
    }
    carried = null;
  });

  function target(field) {
    const row = field.closest("[data-parameter]");
    touched[row.dataset.parameter] = Number(field.value);
    turn(field, Number(field.value));
    const { entry, emission } = bench.losses;
    bench.live.push({ kind: "target", entry, emission, fractions: touched }, (answer, status) => {
      if (status !== 200) return bench.say(answer.sentence);
      text(byId("target-line"), answer.words);
      for (const [parameter, words] of Object.entries(answer.values)) {
        text(document.querySelector(`.target[data-parameter=${parameter}] .target-value`), words);
      }
      mark(answer.x, answer.y);
    });
  }

  document.addEventListener("input", (event) => {
    if (event.target.matches?.(".target input")) target(event.target);
    else if (event.target.matches?.(".what-if input")) whatIf();
  });
  document.addEventListener("change", (event) => {
    const name = event.target.closest?.("[data-slot]")?.dataset.slot;
    if (name) bench.choosePair({ ...bench.pairChoice(), [name]: event.target.value });
    if (event.target.closest?.("#emission-choice")) bench.changeView({ emission: event.target.value });
  });
  bench.pairChoice = () => asked ?? { a: bench.pair?.a ?? null, b: bench.pair?.b ?? null };
  bench.choosePair = (pair) => {
    asked = pair;
    bench.changeView({ pair });
  };
  /** What a picture of these screens is called: what it shows, of whom. */
  bench.pictureName = (graph) => {
    const [a, b] = ["a", "b"].map((name) => document.querySelector(`[data-slot=${name}] select`)?.selectedOptions[0]?.text ?? "");
    return graph === "ladder" ? `${bench.losses?.title} losses` : `${a} and ${b}${graph === "pair-bars" ? " difference" : ""}`;
  };
  bench.swap = () => {
    const { a, b } = bench.pairChoice();
    bench.choosePair({ a: b, b: a });
  };

  document.addEventListener("click", (click) => {
    const scale = click.target.closest?.("[data-pair-scale]");
    if (scale) bench.changeView({ normalised: scale.dataset.pairScale === "normalised" });
    const ladder = click.target.closest?.("[data-ladder]");
    if (ladder) bench.changeView({ ladder: ladder.dataset.ladder });
    if (click.target.closest?.("[data-act=swap]")) bench.swap();
    if (click.target.closest?.("[data-act=projector]")) bench.projector(true);
  });

  /* The projector: one chart, large type, the whole screen */
  bench.projector = async (on) => {
    bench.changeView({ projector: on });
    try {
      if (on && !document.fullscreenElement) await document.documentElement.requestFullscreen();
      if (!on && document.fullscreenElement) await document.exitFullscreen();
    } catch {
      // A browser that allows no full screen still shows the large chart.
    }
  };
  document.addEventListener("fullscreenchange", () => {
    if (!document.fullscreenElement && bench.view.projector) bench.changeView({ projector: false });
  });
  document.addEventListener("keydown", (key) => {
    if (key.target.matches?.("input, select, textarea") || key.ctrlKey || key.metaKey || key.altKey) return;
    const screen = document.body.dataset.screen;
    if (screen === "pair" && key.key.toLowerCase() === "x") bench.swap();
    if (screen !== "losses") return;
    if (key.key.toLowerCase() === "p") bench.projector(!bench.view.projector);
    if (!bench.view.projector) return;
    if (key.key === "Escape") bench.projector(false);
    if (["ArrowRight", "ArrowDown", "PageDown", " "].includes(key.key)) bench.nextDevice(1);
    if (["ArrowLeft", "ArrowUp", "PageUp"].includes(key.key)) bench.nextDevice(-1);
  });
})();
