/* The list of workspaces in the header. */
(() => {
  const bench = (window.sweepbench ??= {});
  let known = { here: null, there: [], deleted: [] };

  const sheet = () => document.querySelector(".workspaces");
  const errand = async (kind, more = {}) => {
    if (await bench.ready()) bench.setProps("errand", { data: { kind, ...more, at: Date.now() } });
  };
  const here = () => known.there.find((workspace) => workspace.id === known.here);

  bench.receiveWorkspaces = (data) => {
    if (!data) return;
    known = data;
    document.getElementById("workspace-name").textContent = `${here()?.name ?? "workspace"} ▾`;
    const list = document.getElementById("workspace-list");
    list.replaceChildren(
      ...known.there.map((workspace) => row(workspace, "open", workspace.id === known.here)),
      ...(known.deleted.length ? [Object.assign(document.createElement("p"), { className: "hint", textContent: "deleted" })] : []),
      ...known.deleted.map((workspace) => row(workspace, "restore", false)),
    );
  };

  function row(workspace, kind, current) {
    const button = document.createElement("button");
    button.className = current ? "here" : "";
    button.setAttribute("aria-current", String(current));
    const name = Object.assign(document.createElement("span"), { textContent: workspace.name });
    const count = Object.assign(document.createElement("span"), {
      className: "hint",
      textContent: kind === "restore" ? "bring back" : `${workspace.sweeps} ${workspace.sweeps === 1 ? "sweep" : "sweeps"}`,
    });
    button.append(name, count);
    button.addEventListener("click", () => {
      bench.toggleWorkspaces(false);
      errand(kind, { workspace: workspace.id });
    });
    return button;
  }

  bench.toggleWorkspaces = (open = sheet().hidden) => {
    sheet().hidden = !open;
    if (open) sheet().querySelector("button")?.focus();
  };

  /** Ask for a name in the list itself. */
  function ask(start, then) {
    const field = Object.assign(document.createElement("input"), { value: start, className: "rename" });
    field.setAttribute("aria-label", "Name of the workspace");
    field.addEventListener("keydown", (key) => {
      key.stopPropagation();
      if (key.key === "Escape") field.remove();
      if (key.key === "Enter" && field.value.trim()) {
        bench.toggleWorkspaces(false);
        then(field.value.trim());
        field.remove();
      }
    });
    document.getElementById("workspace-list").append(field);
    field.select();
    field.focus();
  }

  async function open(file) {
    const body = new FormData();
    body.append("files", file, encodeURIComponent(file.name));
    try {
      const answer = await (await bench.fetch("/files/import", { method: "POST", body })).json();
      if (answer.workspace) errand("open", { workspace: answer.workspace });
      else bench.say(answer.sentence);
    } catch {
      bench.say("The server does not answer, so the file was not opened.");
    }
  }

  bench.workspaceActs = {
    workspaces: () => bench.toggleWorkspaces(),
    "new-workspace": () => ask("", (name) => errand("new", { name })),
    "rename-workspace": () => ask(here()?.name ?? "", (name) => errand("rename", { workspace: known.here, name })),
    "duplicate-workspace": () => errand("duplicate", { workspace: known.here }),
    "delete-workspace": () => errand("delete", { workspace: known.here }),
    "export-workspace"() {
      const link = document.createElement("a");
      link.href = `/files/export/${encodeURIComponent(known.here)}`;
      link.download = "";
      link.click();
    },
    "import-workspace"() {
      const picker = Object.assign(document.createElement("input"), { type: "file", accept: ".zip" });
      picker.id = "workspace-picker";
      picker.hidden = true;
      picker.addEventListener("change", () => {
        if (picker.files[0]) open(picker.files[0]);
        picker.remove();
      });
      document.getElementById(picker.id)?.remove();
      document.body.append(picker);
      picker.click();
    },
  };

  document.addEventListener("click", (click) => {
    if (!sheet() || sheet().hidden || click.target.closest(".workspaces, #workspace-name")) return;
    bench.toggleWorkspaces(false);
  });
})();
