/* The page: what arrives from the server's callbacks, shortcuts, theme, and the plot's own events. */
(() => {
  const bench = (window.sweepbench ??= {});
  bench.view = {};
  let arrived = false; // the first revision is the server's choice, not the user's
  let seen = { workspace: null, revision: null };

  bench.setProps = (id, props) => window.dash_clientside.set_props(id, props);
  /** The workspace and revision that this tab has seen. */
  bench.stamp = () => ({ workspace: seen.workspace, revision: seen.revision });
  bench.changeView = (changes) => {
    // At once, because the next change may come before this one has gone round.
    bench.view = { ...bench.view, ...changes };
    bench.setProps("view", { data: bench.view });
  };

  window.Plotly?.setPlotConfig?.({ showSendToCloud: false, displaylogo: false, plotlyServerURL: "" });

  /** A reloaded tab goes back to the workspace that it was on; what it remembers and what the server chose come in any order. */
  let wentBack = false;
  function goBack() {
    if (wentBack || !bench.view.workspace || !seen.workspace) return;
    wentBack = true;
    if (bench.view.workspace === seen.workspace) return;
    bench.setProps("errand", { data: { kind: "open", workspace: bench.view.workspace, at: Date.now() } });
  }

  /** What an answer says of the event that it answers; a change that was made ends what was said of one that was not. */
  function hear(data) {
    if (!data.event) return data.sentence && bench.say(data.sentence);
    const givenUp = bench.acknowledge(data);
    if (givenUp === null) return;
    if (!bench.unsent()) for (const button of document.querySelectorAll("button[aria-busy]")) button.removeAttribute("aria-busy");
    const those = givenUp > 1 ? `${givenUp} changes that built on it were` : "One change that built on it was";
    const sentence = givenUp ? `${data.sentence} ${those} not made either.` : data.sentence;
    if (sentence) bench.say(sentence, { answer: true });
    else bench.sayNoMore();
  }

  window.dash_clientside = window.dash_clientside ?? {};
  window.dash_clientside.sweepbench = {
    revision(data) {
      if (!data) return;
      const overtaken = data.workspace === seen.workspace && data.revision < seen.revision;
      if (!overtaken) {
        if (data.workspace !== seen.workspace || data.revision !== seen.revision) bench.live.drop();
        seen = { workspace: data.workspace, revision: data.revision };
        goBack();
        if (bench.view.workspace !== seen.workspace && data.revision !== null && arrived) bench.changeView({ workspace: seen.workspace });
        arrived = true;
      }
      hear(data);
      bench.live.kick();
    },
    view(data) {
      const first = !document.body.dataset.screen;
      bench.view = data ?? {};
      if (first) showScreen(location.pathname, false);
      goBack();
    },
    scene: (data) => bench.receiveScene(data),
    tray: (data) => bench.receiveTray(data),
    trayRead: (data) => bench.receiveReadings(data),
    intervals: (data) => bench.receiveIntervals(data),
    pair: (data) => bench.receivePair(data),
    losses: (data) => bench.receiveLosses(data),
    workspaces: (data) => bench.receiveWorkspaces(data),
    notice: (data) => data && bench.say(data.sentence),
    samples: (clicks) => clicks && bench.openSamples(),
  };

  function afterPlot() {
    bench.afterPlot();
    bench.placeMarker();
  }

  /* The plot's events; the element is made by the framework some time after the page. */
  function hookPlot() {
    const graph = bench.graph();
    if (!graph?.on || graph.dataset.hooked) return;
    graph.dataset.hooked = "yes";
    for (const event of ["plotly_afterplot", "plotly_relayouting", "plotly_autosize"]) graph.on(event, afterPlot);
    graph.on("plotly_doubleclick", bench.wholeView);
    new ResizeObserver(afterPlot).observe(graph);
    bench.afterPlot();
  }
  new MutationObserver(hookPlot).observe(document.documentElement, { childList: true, subtree: true });

  /* Theme: the system's until the user chooses. */
  const root = document.documentElement;
  const dark = window.matchMedia("(prefers-color-scheme: dark)");
  const applyTheme = () => (root.dataset.theme = localStorage.getItem("sweepbench-theme") ?? (dark.matches ? "dark" : "light"));
  dark.addEventListener("change", applyTheme);
  applyTheme();

  /* Screens: the address chooses; nothing is loaded anew. */
  function showScreen(address, remember) {
    const links = [...document.querySelectorAll("nav [data-screen]")];
    const link = links.find((each) => each.getAttribute("href") === address) ?? links[0];
    if (!link) return;
    if (remember) history.pushState(null, "", link.getAttribute("href"));
    document.body.dataset.screen = link.dataset.screen;
    for (const each of links) each.removeAttribute("aria-current");
    link.setAttribute("aria-current", "page");
    // A fresh tab is on the bench; to say so would draw everything twice.
    if ((bench.view.screen ?? "bench") !== link.dataset.screen) bench.changeView({ screen: link.dataset.screen });
  }
  window.addEventListener("popstate", () => showScreen(location.pathname, false));
  document.addEventListener("click", (click) => {
    const link = click.target.closest?.("nav [data-screen]");
    if (!link || click.ctrlKey || click.metaKey || click.shiftKey) return;
    click.preventDefault();
    showScreen(link.getAttribute("href"), true);
  });

  // An SVG fills the width of a two-column page (17 cm), a PNG a slide of 16 to 9 at twice its pixels.
  const SIZES = { svg: { width: 643, height: 450 }, png: { width: 1600, height: 900, scale: 2 } };

  async function savePicture(format, graph = bench.graph(), title = `${bench.scene.title} ${bench.scene.subtitle}`) {
    const name = title.replace(/[^\p{L}\p{N}._-]+/gu, "-");
    await window.Plotly.downloadImage(graph, { format, filename: name, ...SIZES[format] });
  }

  /** Hand a file out; what is asked for stands in the address. */
  function download(path, query = {}) {
    const link = document.createElement("a");
    link.href = `/files/${path}?${new URLSearchParams(query)}`;
    link.download = "";
    link.click();
  }
  const here = () => encodeURIComponent(bench.stamp().workspace);

  /** What the screen shows and how it tells it, as an address asks for it. */
  function shown() {
    const { screen } = document.body.dataset;
    const { a, b } = screen === "pair" ? bench.pairChoice() : {};
    const pair = a && b ? `${a},${b}` : "";
    const laid = (bench.view.overlay ?? []).filter((entry) => document.getElementById(`sweep-${entry}`));
    const losses = screen === "losses" ? bench.losses?.entry : null;
    const { emission, order } = bench.view;
    const told = { pair, emission, order: order?.join(",") };
    return {
      entries: pair || losses || [bench.scene?.entry, ...laid].filter(Boolean).join(","),
      ...Object.fromEntries(Object.entries(told).filter(([, choice]) => choice)),
    };
  }
  const saveReport = () => shown().entries && download(`report/${here()}`, shown());
  const saveTable = (kind, table) => shown().entries && download(`table/${here()}.${kind}`, { ...shown(), ...(table && { table }) });

  /** A change of the sweep that was chosen last, on what the hand has left. */
  function fit(kind) {
    bench.finishKeys();
    if (bench.lastUnsent(kind)) return;
    bench.send({ kind, entry: bench.activeEntry() });
    document.getElementById(kind).setAttribute("aria-busy", "true");
  }
  function travel(kind) {
    const button = document.getElementById(kind);
    bench.finishKeys();
    if (button.disabled && !bench.unsent()) bench.say(`${button.title}.`);
    else bench.send({ kind });
  }
  function refineAll() {
    bench.finishKeys();
    if (!bench.lastUnsent("refine-all")) bench.send({ kind: "refine-all" });
  }

  const acts = {
    undo: () => travel("undo"),
    redo: () => travel("redo"),
    "first-guess": () => fit("first-guess"),
    refine: () => fit("refine"),
    "refine-all": refineAll,
    theme() {
      localStorage.setItem("sweepbench-theme", root.dataset.theme === "dark" ? "light" : "dark");
      applyTheme();
    },
    help() {
      const sheet = document.querySelector(".help");
      sheet.hidden = !sheet.hidden;
      if (!sheet.hidden) sheet.querySelector("button").focus();
    },
    "leave-out": () => bench.armLeaveOut(),
    "use-all": () => bench.useAll(),
    repeats: () => bench.send({ kind: "repeats", entry: bench.scene.entry }),
    together: () => bench.refineTogether(),
    "pick-files": () => bench.pick(false),
    "pick-folder": () => bench.pick(true),
    "save-svg": () => savePicture("svg"),
    "save-png": () => savePicture("png"),
    "save-report": saveReport,
    "save-csv": () => download(`table/${here()}.csv`),
    "save-pair": () => saveTable("csv", "pair"),
    "save-shares": () => saveTable("csv", "shares"),
    "save-losses": () => saveTable("csv", "losses"),
    "save-shown": () => saveTable("xlsx"),
    "save-json": () => download(`parameters/${here()}.json`),
    "save-xlsx": () => download(`table/${here()}.xlsx`),
  };
  document.addEventListener("click", (click) => {
    const act = click.target.closest?.("[data-act]")?.dataset.act;
    if (act) (acts[act] ?? bench.workspaceActs[act])?.();
    const save = click.target.closest?.("[data-save]")?.dataset;
    if (save) savePicture(save.save, document.querySelector(`#${save.graph} .js-plotly-plot`), bench.pictureName(save.graph));
    const strip = click.target.closest?.("[data-strip]");
    if (strip) bench.changeView({ strip: strip.dataset.strip });
    if (click.target.id === "notice-line") bench.say("");
  });

  const strips = { 1: "residuals", 2: "log", 3: "ideality" };
  document.addEventListener("keydown", (key) => {
    const typing = key.target.matches?.("input:not([type=range]), textarea, select");
    const letter = key.key.toLowerCase();
    if ((key.ctrlKey || key.metaKey) && !key.altKey && letter === "z" && !typing) {
      key.preventDefault();
      travel(key.shiftKey ? "redo" : "undo");
    }
    if (typing || key.ctrlKey || key.metaKey || key.altKey) return;
    if (letter === "e") bench.armLeaveOut();
    if (letter === "g") fit("first-guess");
    if (letter === "r") fit("refine");
    if (letter === "h") {
      const parameter = key.target.closest?.("[data-parameter]")?.dataset.parameter;
      if (parameter) bench.toggleHold(parameter);
    }
    if (strips[key.key] && bench.scene?.entry) bench.changeView({ strip: strips[key.key] });
    if (key.key === "Escape") {
      document.querySelector(".help").hidden = true;
      bench.toggleWorkspaces(false);
      bench.armLeaveOut(false);
    }
  });
})();
