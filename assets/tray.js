/* The tray: the list of devices and sweeps, and the way files come in. */
(() => {
  const bench = (window.sweepbench ??= {});
  const FILES_A_BATCH = 100;
  const BYTES_A_BATCH = 4e6;
  const ROWS_A_REQUEST = 200; // an answer carries as many of them as the server reads in a moment
  const REREAD = 10000; // ms until lines that did not come are asked for again
  let devices = [];
  let blocks = new Map(); // device id → {words, block}: what stands in the list
  let rereading = null;

  const element = (tag, className, words) => Object.assign(document.createElement(tag), { className, textContent: words ?? "" });
  const list = () => document.getElementById("tray-list");
  const rows = () => [...document.querySelectorAll("#tray-list .sweep")];
  /** What was chosen last, even before the server has answered: the next key may come before that. */
  const active = () => {
    const chosen = bench.view?.active;
    const present = chosen && devices.some((device) => device.sweeps.some((sweep) => sweep.entry === chosen));
    return present ? chosen : (bench.scene?.entry ?? null);
  };
  bench.activeEntry = active;
  const overlay = () => bench.view?.overlay ?? [];

  /** Only what differs is built anew: a tray may hold thousands of lines. */
  bench.receiveTray = (data) => {
    devices = data ?? [];
    bench.devices = devices;
    const before = blocks;
    blocks = new Map();
    for (const device of devices) {
      const words = JSON.stringify(device);
      const old = before.get(device.device);
      blocks.set(device.device, old?.words === words ? old : { words, block: deviceBlock(device) });
    }
    const host = list();
    const wanted = new Set([...blocks.values()].map(({ block }) => block));
    for (const old of [...host.children]) if (!wanted.has(old)) old.remove();
    let place = host.firstChild;
    for (const block of wanted) {
      if (block === place) place = place.nextSibling;
      else host.insertBefore(block, place);
    }
    bench.paintSelection();
    readOn();
  };

  /** Lines that were not read yet when the tray was sent. */
  bench.receiveReadings = (readings) => {
    for (const device of devices) {
      for (const sweep of device.sweeps) {
        const reading = readings?.[sweep.entry];
        if (!reading || sweep.read) continue;
        Object.assign(sweep, reading);
        const row = rowOf(sweep.entry);
        if (row) fill(row, sweep);
      }
    }
    readOn();
  };

  function readOn() {
    clearTimeout(rereading);
    const entries = [];
    for (const device of devices) {
      for (const sweep of device.sweeps) if (!sweep.read && entries.length < ROWS_A_REQUEST) entries.push(sweep.entry);
    }
    if (!entries.length) return;
    bench.setProps("tray-unread", { data: { workspace: bench.stamp().workspace, entries, at: Date.now() } });
    rereading = setTimeout(readOn, REREAD);
  }

  const rowOf = (entry) => (entry ? document.getElementById(`sweep-${entry}`) : null);

  function deviceBlock(device) {
    const block = element("div", "device");
    block.setAttribute("role", "group");
    block.setAttribute("aria-label", device.name);
    const head = element("div", "device-head");
    const name = element("span", "device-name", device.name);
    name.dataset.device = device.device;
    name.title = "Double click to rename the device";
    head.append(name, element("span", "group", device.group));
    block.append(head, ...device.sweeps.map(sweepRow));
    return block;
  }

  function sweepRow(sweep) {
    const row = element("div", "sweep");
    row.setAttribute("role", "option");
    row.id = `sweep-${sweep.entry}`;
    row.dataset.entry = sweep.entry;
    row.setAttribute("aria-selected", "false");
    const spark = document.createElementNS("http://www.w3.org/2000/svg", "svg");
    spark.setAttribute("class", "spark");
    spark.setAttribute("viewBox", "0 0 56 18");
    spark.setAttribute("aria-hidden", "true");
    spark.append(document.createElementNS("http://www.w3.org/2000/svg", "path"));
    const beside = element("button", "beside quiet", "+");
    beside.title = "Lay this sweep beside the active one (Space)";
    beside.tabIndex = -1;
    const remove = element("button", "remove quiet", "×");
    remove.title = "Remove from the tray (Delete); undo brings it back";
    remove.tabIndex = -1;
    row.append(spark, nameOf(sweep), element("span", "value"), element("span", "flag"), beside, remove);
    if (sweep.read) fill(row, sweep);
    return row;
  }

  /** What was read off the points. */
  function fill(row, sweep) {
    row.title = sweep.flags;
    row.querySelector(".spark path").setAttribute("d", sweep.spark);
    row.querySelector(".value").textContent = sweep.value;
    const flag = row.querySelector(".flag");
    flag.className = `flag ${sweep.flag}`;
    flag.textContent = sweep.flag ? "!" : "";
    if (sweep.flag) flag.setAttribute("aria-label", sweep.flags);
  }

  function nameOf(sweep) {
    const name = element("span", "sweep-name", sweep.label);
    name.dataset.fullName = sweep.name;
    return name;
  }

  bench.paintSelection = () => {
    select(active());
    for (const row of document.querySelectorAll("#tray-list .sweep.laid")) row.classList.remove("laid");
    for (const row of document.querySelectorAll("#tray-list .sweep[data-slotted]")) delete row.dataset.slotted;
    for (const entry of overlay()) rowOf(entry)?.classList.add("laid");
    const { a, b } = bench.pairChoice();
    for (const [entry, slot] of [[b, "B"], [a, "A"]]) {
      const row = rowOf(entry);
      if (row) row.dataset.slotted = slot;
    }
  };

  function select(entry) {
    for (const row of document.querySelectorAll('#tray-list .sweep[aria-selected="true"]')) row.setAttribute("aria-selected", "false");
    const row = rowOf(entry);
    if (!row) return null;
    row.setAttribute("aria-selected", "true");
    list().setAttribute("aria-activedescendant", row.id);
    return row;
  }

  function choose(entry) {
    bench.changeView({ active: entry });
    select(entry)?.scrollIntoView({ block: "nearest" });
  }
  /** On the pair screen a click fills B, with Shift A; a click on one of the two swaps them. */
  function fillSlot(entry, first) {
    const { a, b } = bench.pairChoice();
    if (entry === a || entry === b) return bench.swap();
    bench.choosePair(first ? { a: entry, b } : { a, b: entry });
  }

  /** The next device of the tray that has a lit sweep. */
  bench.nextDevice = (by) => {
    const lit = devices.map((device) => device.sweeps.find((sweep) => sweep.direction !== "dark")?.entry).filter(Boolean);
    const here = devices.findIndex((device) => device.sweeps.some((sweep) => sweep.entry === active()));
    const at = lit.indexOf(devices[here]?.sweeps.find((sweep) => sweep.direction !== "dark")?.entry);
    const next = lit[(at + by + lit.length) % lit.length];
    if (next) choose(next);
  };

  function layBeside(entry) {
    const laid = overlay();
    bench.changeView({ overlay: laid.includes(entry) ? laid.filter((other) => other !== entry) : [...laid, entry] });
    bench.paintSelection();
  }
  function remove(entry) {
    const order = rows().map((row) => row.dataset.entry);
    const at = order.indexOf(entry);
    const name = document.querySelector(`#sweep-${CSS.escape(entry)} .sweep-name`)?.dataset.fullName ?? "The sweep";
    if (entry === active() && order.length > 1) choose(order[at + 1] ?? order[at - 1]);
    bench.send({ kind: "remove", entries: [entry] });
    bench.say(`${name} was removed from the tray. Undo brings it back.`);
  }
  function rename(host, event) {
    const before = host.textContent;
    const full = host.dataset.fullName ?? before;
    const field = Object.assign(document.createElement("input"), { className: "rename", value: full });
    field.setAttribute("aria-label", "New name");
    let open = true;
    const close = (keep) => {
      if (!open) return;
      open = false;
      const wanted = field.value.trim();
      host.textContent = before;
      if (keep && wanted && wanted !== full) bench.send({ ...event, text: wanted });
      list().focus();
    };
    field.addEventListener("keydown", (key) => {
      key.stopPropagation();
      if (key.key === "Enter") close(true);
      if (key.key === "Escape") close(false);
    });
    field.addEventListener("blur", () => close(true));
    host.replaceChildren(field);
    field.select();
    field.focus();
  }
  const renameSweep = (entry) =>
    rename(document.querySelector(`#sweep-${CSS.escape(entry)} .sweep-name`), { kind: "rename-sweep", entry });
  const renameDevice = (host) => rename(host, { kind: "rename-device", device: host.dataset.device });
  const deviceOf = (entry) => devices.find((device) => device.sweeps.some((sweep) => sweep.entry === entry))?.device;

  document.addEventListener("click", (click) => {
    const row = click.target.closest?.("#tray-list .sweep");
    if (!row || click.target.matches("input")) return;
    const entry = row.dataset.entry;
    if (document.body.dataset.screen === "pair" && !click.target.matches("button")) return fillSlot(entry, click.shiftKey);
    if (click.target.matches(".beside") || click.ctrlKey || click.metaKey) layBeside(entry);
    else if (click.target.matches(".remove")) remove(entry);
    else choose(entry);
  });
  document.addEventListener("dblclick", (click) => {
    const name = click.target.closest?.("#tray-list .sweep-name");
    if (name && !name.querySelector("input")) renameSweep(name.closest(".sweep").dataset.entry);
    const device = click.target.closest?.("#tray-list .device-name");
    if (device && !device.querySelector("input")) renameDevice(device);
  });
  document.addEventListener("keydown", (key) => {
    if (key.target !== list()) return;
    const order = rows().map((row) => row.dataset.entry);
    const at = order.indexOf(active());
    const acts = {
      ArrowDown: () => choose(order[Math.min(order.length - 1, at + 1)]),
      ArrowUp: () => choose(order[Math.max(0, at - 1)]),
      Home: () => choose(order[0]),
      End: () => choose(order.at(-1)),
      Delete: () => remove(active()),
      F2: () => (key.shiftKey ? renameDevice(list().querySelector(`.device-name[data-device="${deviceOf(active())}"]`)) : renameSweep(active())),
      " ": () => layBeside(active()),
    };
    if (!acts[key.key] || !order.length) return;
    key.preventDefault();
    if (key.key === " " && !key.shiftKey) return layBeside(active());
    acts[key.key]();
  });

  /* Files in */
  bench.pick = (folder) => {
    const picker = document.createElement("input");
    picker.type = "file";
    picker.multiple = true;
    if (folder) picker.webkitdirectory = true;
    picker.id = folder ? "folder-picker" : "file-picker";
    picker.hidden = true;
    document.getElementById(picker.id)?.remove();
    picker.addEventListener("change", () => {
      upload([...picker.files].map((file) => ({ file, path: file.webkitRelativePath || file.name })));
      picker.remove();
    });
    document.body.append(picker);
    picker.click();
  };

  const carriesFiles = (drop) => [...(drop.dataTransfer?.types ?? [])].includes("Files");
  let depth = 0;
  const veil = (on) => document.body.classList.toggle("dropping", on);
  document.addEventListener("dragenter", (drop) => {
    if (!carriesFiles(drop)) return;
    drop.preventDefault();
    depth += 1;
    veil(true);
  });
  document.addEventListener("dragover", (drop) => carriesFiles(drop) && drop.preventDefault());
  document.addEventListener("dragleave", () => {
    depth = Math.max(0, depth - 1);
    if (!depth) veil(false);
  });
  document.addEventListener("drop", async (drop) => {
    if (!carriesFiles(drop)) return;
    drop.preventDefault();
    depth = 0;
    veil(false);
    // All entries must be taken before the first wait: the list is emptied then.
    const entries = [...drop.dataTransfer.items].map((item) => item.webkitGetAsEntry?.()).filter(Boolean);
    const files = [];
    for (const entry of entries) await walk(entry, files);
    upload(files);
  });

  async function walk(entry, files) {
    if (entry.isFile) {
      try {
        const file = await new Promise((resolve, reject) => entry.file(resolve, reject));
        files.push({ file, path: entry.fullPath.replace(/^\//, "") });
      } catch {
        report([{ file: entry.name, sentence: "The browser could not read this file. Is it still there?" }]);
      }
      return;
    }
    const reader = entry.createReader();
    for (;;) {
      const some = await new Promise((resolve, reject) => reader.readEntries(resolve, reject)); // at most 100 a call
      if (!some.length) return;
      for (const child of some) await walk(child, files);
    }
  }

  function batches(files) {
    const all = [];
    let batch = [];
    let bytes = 0;
    for (const item of files) {
      if (batch.length && (batch.length >= FILES_A_BATCH || bytes + item.file.size > BYTES_A_BATCH)) {
        all.push(batch);
        batch = [];
        bytes = 0;
      }
      batch.push(item);
      bytes += item.file.size;
    }
    if (batch.length) all.push(batch);
    return all;
  }

  async function upload(files) {
    const visible = files.filter(({ file }) => !file.name.startsWith("."));
    if (!visible.length) return;
    let done = 0;
    let first = null;
    document.getElementById("arrivals").replaceChildren();
    for (const batch of batches(visible)) {
      progress(`reading ${done + 1}–${done + batch.length} of ${visible.length} files`);
      const body = new FormData();
      for (const { file, path } of batch) body.append("files", file, encodeURIComponent(path));
      try {
        const response = await bench.fetch(`/files/${encodeURIComponent(bench.stamp().workspace)}`, { method: "POST", body });
        first ??= receive(await response.json());
      } catch {
        report(batch.map(({ path }) => ({ file: path, sentence: "Not loaded: the server does not answer. Drop it again when it is back." })));
      }
      done += batch.length;
    }
    progress("");
    if (first) choose(first);
  }

  /** An answer of the files route: the new revision, and a sentence for each file that was not taken. */
  function receive(answer) {
    if (answer.revision !== undefined) bench.setProps("revision", { data: { ...bench.stamp(), revision: answer.revision } });
    report(answer.refused ?? (answer.sentence ? [{ file: "", sentence: answer.sentence }] : []));
    for (const file of answer.already ?? []) report([{ file, sentence: `${file} is in the tray already.` }], "note");
    return answer.show ?? null;
  }

  bench.openSamples = async () => {
    progress("reading the sample sweeps");
    try {
      const response = await bench.fetch(`/files/samples/${encodeURIComponent(bench.stamp().workspace)}`, { method: "POST" });
      const first = receive(await response.json());
      if (first) choose(first);
    } catch {
      report([{ file: "", sentence: "The server does not answer. Is Sweepbench still running?" }]);
    }
    progress("");
  };

  function progress(words) {
    let line = document.querySelector("#arrivals .busy");
    if (!words) return line?.remove();
    if (!line) {
      line = element("p", "busy");
      document.getElementById("arrivals").prepend(line);
    }
    line.textContent = words;
  }

  function report(refused, kind = "refused") {
    for (const { sentence } of refused) {
      const line = element("p", kind, sentence);
      const close = element("button", "quiet", "×");
      close.setAttribute("aria-label", "Dismiss");
      close.addEventListener("click", () => line.remove());
      line.append(close);
      document.getElementById("arrivals").append(line);
    }
  }
})();
