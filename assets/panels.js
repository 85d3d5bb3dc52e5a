/* The panels beside the numbers: fit settings, points left out, correlation, intervals and estimates. */
(() => {
  const bench = (window.sweepbench ??= {});
  const byId = (id) => document.getElementById(id);
  const make = (tag, words, className = "") => Object.assign(document.createElement(tag), { textContent: words, className });

  /** What the open panel shows, at rest. */
  bench.paintPanel = (scene) => {
    for (const button of document.querySelectorAll("[data-panel-choice]")) {
      button.setAttribute("aria-checked", String(button.dataset.panelChoice === scene.panel));
    }
    for (const panel of document.querySelectorAll(".panel")) panel.hidden = panel.dataset.panel !== scene.panel;
    if (scene.settings) paintSettings(scene.settings);
    if (scene.correlation) paintCorrelation(scene.correlation);
    if (scene.together) paintTogether(scene.together);
    if (scene.estimates) paintEstimates(scene.estimates);
    if (scene.stated) paintRecord(scene.stated);
  };

  function fieldOf(row) {
    const host = row.querySelector(".value");
    if (host.firstElementChild) return host.firstElementChild;
    const options = row.dataset.options ? row.dataset.options.split("|") : [];
    const field = document.createElement(options.length ? "select" : "input");
    for (const option of options) field.append(new Option(option, option));
    field.setAttribute("aria-label", row.dataset.title);
    field.autocomplete = "off";
    host.append(field);
    return field;
  }

  function paintSettings(settings) {
    for (const row of document.querySelectorAll("[data-setting]")) {
      const without = settings[`${row.dataset.setting}_without`] ?? [];
      for (const option of fieldOf(row).options ?? []) option.disabled = option.hidden = without.includes(option.value);
      bench.write(fieldOf(row), settings[row.dataset.setting]);
      const unit = settings[`${row.dataset.setting}_unit`];
      if (unit) row.querySelector(".unit").textContent = unit;
    }
    byId("left-out-line").textContent = settings.left_out;
  }

  /* What the user states of the whole workspace stands on two screens. */
  bench.paintStated = (texts) => {
    for (const row of document.querySelectorAll("[data-stated]")) bench.write(fieldOf(row), texts[row.dataset.stated]);
    for (const button of document.querySelectorAll("[data-stated-switch]")) {
      button.setAttribute("aria-checked", String(texts[button.dataset.statedSwitch] === "yes"));
    }
  };
  /** What the file of this sweep says itself stands where nothing is typed. */
  function paintRecord({ texts, files }) {
    bench.paintStated(texts);
    for (const row of document.querySelectorAll(".told[data-stated]")) {
      const said = files[row.dataset.stated] ?? "";
      fieldOf(row).placeholder = said;
      row.title = said ? `This sweep's file says “${said}”, which goes before what is typed here.` : "";
    }
  }
  const state = (name, text) => bench.send({ kind: "statement", name, text });

  /** Each cell's ink is the size of the correlation; its sign stands in the number. */
  function paintCorrelation({ names, values }) {
    byId("correlation-title").hidden = !names.length;
    const head = document.createElement("tr");
    head.append(document.createElement("th"), ...names.map((name) => make("th", name)));
    const rows = values.map((row, i) => {
      const line = document.createElement("tr");
      line.append(make("th", names[i]));
      row.forEach((value, j) => {
        const cell = make("td", value === null ? "–" : i === j ? "" : value.toFixed(2).replace("-", "−"));
        if (value !== null && i !== j) cell.style.setProperty("--size", `${(100 * value ** 2).toFixed(0)}%`);
        cell.classList.toggle("strong", value !== null && i !== j && Math.abs(value) > 0.8);
        line.append(cell);
      });
      return line;
    });
    byId("correlation").replaceChildren(...(names.length ? [head, ...rows] : []));
  }

  /** Which other sweeps of the device are refined along, and what they share. */
  function paintTogether({ sweeps, shared }) {
    const host = byId("together");
    if (!sweeps.length) return host.replaceChildren();
    const chips = (items, name, checked) =>
      items.map((item) => {
        const chip = make("button", "", "chip");
        chip.setAttribute("role", "switch");
        chip.setAttribute("aria-checked", String(checked(item)));
        chip.dataset[name] = item.entry ?? item.parameter;
        if (item.symbol) chip.append(item.symbol, make("sub", item.index));
        else chip.textContent = item.name;
        return chip;
      });
    const along = make("div", "", "chips");
    along.append(make("span", "with", "hint"), ...chips(sweeps, "along", () => false));
    const common = make("div", "", "chips");
    common.append(make("span", "one value for all", "hint"), ...chips(shared, "common", (item) => item.on));
    const go = make("button", "refine together", "plain");
    go.dataset.act = "together";
    host.replaceChildren(make("h3", "Refine together"), along, common, go);
  }
  bench.refineTogether = () => {
    const on = (selector) => [...document.querySelectorAll(selector)];
    const entries = on("[data-along][aria-checked=true]").map((chip) => chip.dataset.along);
    const shared = Object.fromEntries(on("[data-common]").map((chip) => [chip.dataset.common, chip.getAttribute("aria-checked") === "true"]));
    bench.send({ kind: "together", entry: bench.scene.entry, entries, shared });
  };

  function paintEstimates({ rows, plateau, derived }) {
    byId("plateau-line").textContent = plateau;
    byId("estimate-rows").replaceChildren(
      ...rows.flatMap((row) => {
        const line = document.createElement("tr");
        line.dataset.parameter = row.parameter;
        const name = make("th", "");
        name.append(make("span", "", "mark"), row.name);
        line.append(name, make("td", row.value), make("td", row.fit));
        const below = document.createElement("tr");
        const method = make("td", [row.method, row.note].filter(Boolean).join(" "), "method");
        method.colSpan = 3;
        below.append(method);
        return [line, below];
      }),
    );
    byId("derived-rows").replaceChildren(
      ...derived.map((row) => {
        const line = document.createElement("tr");
        line.title = row.note;
        line.append(make("th", row.name), make("td", row.value));
        return line;
      }),
    );
  }

  /** Intervals come after the scene: they take longer than a fit. */
  bench.receiveIntervals = (data) => {
    if (!data) return;
    byId("intervals-table").replaceChildren(
      ...(data.rows ?? []).map((row) => {
        const line = make("p", "");
        line.append(make("span", row.name, "label"), make("span", row.words));
        return line;
      }),
      ...(data.sentence ? [make("p", data.sentence, "hint")] : []),
    );
    byId("model-choice").textContent = data.choice ?? "";
  };

  document.addEventListener("change", (event) => {
    const name = event.target.closest?.("[data-setting]")?.dataset.setting;
    if (name) bench.send({ kind: "setting", entry: bench.scene.entry, name, text: event.target.value });
    const stated = event.target.closest?.("[data-stated]")?.dataset.stated;
    if (stated) state(stated, event.target.value);
  });
  document.addEventListener("click", (click) => {
    const panel = click.target.closest?.("[data-panel-choice]");
    const known = click.target.closest?.("[data-stated-switch]");
    if (known) state(known.dataset.statedSwitch, known.getAttribute("aria-checked") === "true" ? "" : "yes");
    const chip = click.target.closest?.(".chip");
    if (chip) chip.setAttribute("aria-checked", String(chip.getAttribute("aria-checked") !== "true"));
    if (panel) bench.changeView({ panel: panel.dataset.panelChoice });
  });

  /* A box over points leaves them out; a box over points that are all out takes them back. Keys go from point to point. */
  let armed = false;
  let box = null;
  bench.armLeaveOut = (on = !armed) => {
    armed = on && Boolean(bench.scene?.entry);
    byId("overlay").classList.toggle("armed", armed);
    document.querySelector("[data-act=leave-out]").setAttribute("aria-checked", String(armed));
    if (!armed) endBox();
    bench.showMarker(armed);
  };
  bench.useAll = () => bench.scene?.entry && bench.send({ kind: "use-all", entry: bench.scene.entry });

  function endBox() {
    box?.element.remove();
    box = null;
  }
  document.addEventListener("pointerdown", (pointer) => {
    const host = byId("overlay");
    if (!armed || pointer.target.closest?.(".grip") || !host.contains(pointer.target)) return;
    pointer.preventDefault();
    const at = bench.place(pointer);
    box = { from: at, to: at, element: make("div", "", "leave-out-box") };
    host.append(box.element);
    host.setPointerCapture(pointer.pointerId);
  });
  document.addEventListener("pointermove", (pointer) => {
    if (!box) return;
    box.to = bench.place(pointer);
    const [left, right] = [box.from.x, box.to.x].sort((p, q) => p - q);
    const [top, bottom] = [box.from.y, box.to.y].sort((p, q) => p - q);
    Object.assign(box.element.style, { left: `${left}px`, top: `${top}px`, width: `${right - left}px`, height: `${bottom - top}px` });
  });
  document.addEventListener("pointerup", () => {
    if (!box) return;
    const [x, y] = [bench.axis("x"), bench.axis("y")];
    const corners = [x.value(box.from.x), x.value(box.to.x), y.value(box.from.y), y.value(box.to.y)];
    endBox();
    bench.send({ kind: "leave-out", entry: bench.scene.entry, box: corners });
  });
})();
