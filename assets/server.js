/* Ways to the server: the gate of the live route, and the outbox of events that must not get lost. */
(() => {
  const bench = (window.sweepbench ??= {});
  const PATIENCE = 5000; // ms for one live answer
  const RESEND = 3000; // ms until an event that was not acknowledged is sent again

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
  let waiting = null;

  bench.send = (event) => {
    outbox.push({ ...event, event: crypto.randomUUID(), workspace: bench.stamp().workspace });
    pump();
  };
  bench.unsent = () => outbox.length;

  function pump() {
    // The live request under way speaks of the revision before this step, so its answer comes first.
    if (waiting || !outbox.length || gate.busy) return;
    const post = () => {
      // The revision of the first try: what was built on one state must not be made on another.
      outbox[0].revision ??= bench.stamp().revision;
      bench.setProps("hand", { data: { ...outbox[0], tries: (waiting?.tries ?? 0) + 1 } });
      waiting = { tries: (waiting?.tries ?? 0) + 1, timer: setTimeout(again, RESEND) };
    };
    const again = () => {
      bench.reachable(false);
      post();
    };
    post();
  }

  /** The server has answered an event. */
  bench.acknowledge = (event) => {
    if (!outbox.length || outbox[0].event !== event) return;
    clearTimeout(waiting?.timer);
    waiting = null;
    outbox.shift();
    bench.reachable(true);
    pump();
    run();
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
