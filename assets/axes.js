/* The one place that maps data to pixels of the plot and back. Plotly offers no public function for it,
   so its internal axes are read here and nowhere else; a browser test checks them against the drawn frame. */
(() => {
  const bench = (window.sweepbench ??= {});
  const LAYOUT_NAMES = { x: "xaxis", y: "yaxis", y2: "yaxis2", y3: "yaxis3" };

  bench.graph = () => document.querySelector("#plot .js-plotly-plot");

  /** One axis of the plot, or null where the figure has none. */
  bench.axis = (name) => {
    const inner = bench.graph()?._fullLayout?.[LAYOUT_NAMES[name]];
    if (!inner || inner._length === undefined) return null;
    return {
      start: inner._offset,
      length: inner._length,
      pixel: (value) => inner._offset + inner.c2p(value),
      value: (pixel) => inner.p2c(pixel - inner._offset),
    };
  };

  /** The points of one trace, as numbers: what the server sent packed is unpacked here only. */
  bench.shownPoints = (uid) => {
    const trace = bench.graph()?._fullData?.find((one) => one.uid === uid);
    return { x: [...(trace?.x ?? [])], y: [...(trace?.y ?? [])] };
  };

  /** The frame of the axis pair (x, name) in pixels. */
  bench.frame = (name) => {
    const x = bench.axis("x");
    const y = bench.axis(name);
    return x && y ? { left: x.start, top: y.start, width: x.length, height: y.length } : null;
  };
})();
