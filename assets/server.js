/* Ways to the server: the gate of the live route, and the outbox of events that must not get lost. */
(() => {
  const bench = (window.sweepbench ??= {});
  const PATIENCE = 5000; // ms for one live answer
  const RESEND = 3000; // ms until an event that was not acknowledged is sent again; longer with each try
  const LOOK = 400; // ms between questions whether the server is there, while an event waits for its answer
  const SHORT_PATIENCE = 500; // ms for the answer to that question

  function cookie(name) {
    const found = document.cookie.split("; ").find((part) => part.startsWith(`${name}=`));
    return found ? decodeURIComponent(found.slice(name.length + 1)) : "";
  }

  /** fetch with the token that the server asks for. */
  bench.fetch = (path, options = {}) => {
    const name = document.querySelector("[data-token-cookie]")?.dataset.tokenCookie ?? "";
    return fetch(path, { ...options, headers: { "X-CSRFToken": cookie(name), ...(options.headers ?? {}) } });
  };

  /* The gate: one request in flight, and one waiting place in which the latest position replaces the one before. */
  const gate = { busy: false, next: null, round: 0 };
  bench.live = {
    get busy() {
      return gate.busy || gate.next !== null;
    },
    push(event, answered) {
      gate.next = { event, answered, round: gate.round };
      run();
    },
    /** Forget what is under way: its answer will not be drawn. */
    drop() {
      gate.next = null;
      gate.round += 1;
    },
    kick: () => run(),
  };

  async function run() {
    if (gate.busy || !gate.next || outbox.length) return; // a step on its way changes what the hand starts from
    const { event, answered, round } = gate.next;
    gate.next = null;
    gate.busy = true;
    try {
      const response = await bench.fetch("/live", {
        method: "POST",
        headers: { "Content-Type": "application/json" },
        body: JSON.stringify({ ...event, ...bench.stamp() }),
        signal: AbortSignal.timeout(PATIENCE),
      });
      const answer = await response.json();
      if (round === gate.round) answered(answer, response.status);
      bench.reachable(true);
    } catch {
      bench.reachable(false);
    } finally {
      gate.busy = false;
      pump();
      run();
    }
  }

  /* The outbox: events go one after another, each on the revision that the one before it left. */
  const outbox = [];
  let waiting = null; // {tries, timer}: the first of the outbox was sent and its answer is not here yet
  let away = false; // whether the server did not answer since that was sent
  let looking = null;

  bench.send = (event) => {
    const travel = event.kind === "undo" || event.kind === "redo";
    const about = travel ? { about: onItsWay(event.kind) } : {};
    outbox.push({ ...event, ...about, event: crypto.randomUUID(), workspace: bench.stamp().workspace });
    // What is on its way can be taken back, whatever the history said so far.
    if (event.kind !== "refine-all") bench.setProps(event.kind === "undo" ? "redo" : "undo", { disabled: false });
    pump();
    looking ??= setTimeout(look, LOOK);
  };
  bench.unsent = () => outbox.length;
  /** Whether the last of what is not yet acknowledged is of this kind: to ask twice for one fit makes no second one. */
  bench.lastUnsent = (kind) => outbox.at(-1)?.kind === kind;

  /** The event in the outbox that an undo or redo would take back or make again; null where that is long made. */
  function onItsWay(kind) {
    const made = [];
    const takenBack = [];
    for (const one of outbox) {
      if (one.kind === "undo") takenBack.push(made.pop() ?? null);
      else if (one.kind === "redo") made.push(takenBack.pop() ?? null);
      else if (one.kind !== "refine-all") {
        made.push(one.event);
        takenBack.length = 0;
      }
    }
    return (kind === "undo" ? made : takenBack).at(-1) ?? null;
  }

  function pump() {
    // The live request under way speaks of the revision before this step, so its answer comes first.
    if (waiting || !outbox.length || gate.busy) return;
    post();
  }

  function post() {
    clearTimeout(waiting?.timer);
    const tries = (waiting?.tries ?? 0) + 1;
    away = false;
    // The revision of the first try: what was built on one state must not be made on another.
    outbox[0].revision ??= bench.stamp().revision;
    bench.setProps("hand", { data: { ...outbox[0], tries } });
    waiting = { tries, timer: setTimeout(post, tries * RESEND) };
  }

  /** While something is unsaved: a server that does not answer is told of soon, and one that is back hears of it at once. */
  async function look() {
    const there = outbox.length > 0 && (await bench.answers());
    if (outbox.length && !there) {
      away = true;
      bench.reachable(false);
    } else if (waiting && away) {
      post();
    }
    looking = outbox.length ? setTimeout(look, LOOK) : null;
  }

  bench.answers = async () => {
    try {
      const signal = AbortSignal.timeout(SHORT_PATIENCE);
      await bench.fetch(`/live/${encodeURIComponent(bench.stamp().workspace)}`, { signal });
      return true;
    } catch {
      return false;
    }
  };

  /** For what cannot wait in the outbox: resolves when all before it is saved, to false and a sentence if the server is away. */
  bench.ready = async () => {
    for (;;) {
      if (!(await bench.answers())) {
        bench.reachable(false);
        bench.say("The server does not answer, so this was not done. Is Sweepbench still running? Try again when it is back.");
        return false;
      }
      if (!outbox.length) return true;
      await new Promise((next) => setTimeout(next, LOOK / 4));
    }
  };

  /** The server has answered an event. Returns how many that built on it are given up; null if nobody waits for the answer. */
  bench.acknowledge = ({ event, outcome, workspace, revision }) => {
    if (!outbox.length || outbox[0].event !== event) return null;
    clearTimeout(waiting?.timer);
    waiting = null;
    const sent = outbox.shift();
    // What was done on a state that is not the one that stands was meant for another.
    const givenUp = outcome === "stale" || workspace !== sent.workspace ? outbox.splice(0).length : 0;
    if (revision === sent.revision) {
      // It made nothing, so there is nothing of it to take back, and what was there before must not go in its place.
      const kept = outbox.filter((one) => one.about !== sent.event);
      outbox.splice(0, outbox.length, ...kept);
    }
    if (!outbox.length) bench.reachable(true);
    pump();
    run();
    return givenUp;
  };

  bench.reachable = (yes) => {
    const line = document.getElementById("saved-line");
    if (!line) return;
    line.textContent = yes ? "" : outbox.length ? "not saved: the server does not answer, trying again" : "the server does not answer";
    line.classList.toggle("alarm", !yes);
  };

  window.addEventListener("beforeunload", (event) => {
    if (outbox.length) event.preventDefault();
  });

  /* Another tab may have changed the workspace; and a server that was away may be back. */
  setInterval(async () => {
    const { workspace, revision } = bench.stamp();
    if (!workspace || document.hidden || gate.busy || outbox.length || bench.handIsDown()) return;
    try {
      const response = await bench.fetch(`/live/${encodeURIComponent(workspace)}`, { signal: AbortSignal.timeout(PATIENCE) });
      const answer = await response.json();
      bench.reachable(true);
      if (response.ok && answer.revision !== revision && bench.stamp().revision === revision && !outbox.length) {
        bench.setProps("revision", { data: { workspace, revision: answer.revision } });
      }
    } catch {
      bench.reachable(false);
    }
  }, 2000);
})();
