/* Builds the parts of the page that the framework need not know, as soon as it has made the rest. */
(() => {
  function built(part) {
    if (typeof part === "string") return part;
    const [tag, attributes, children] = part;
    const element = document.createElement(tag);
    for (const [name, value] of Object.entries(attributes)) element.setAttribute(name, value);
    element.append(...children.map(built));
    return element;
  }

  const watch = new MutationObserver(() => {
    const hosts = document.querySelectorAll("[data-still]");
    if (!hosts.length) return;
    watch.disconnect();
    for (const host of hosts) {
      host.append(...JSON.parse(host.dataset.still).map(built));
      delete host.dataset.still;
    }
  });
  watch.observe(document.documentElement, { childList: true, subtree: true });
})();
