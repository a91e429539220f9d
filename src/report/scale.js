// Colour scales that are perceptually uniform and safe for colour-blind readers: viridis and cividis for
// amounts, and a diverging blue-orange, computed here, for values on both sides of a reference.

/** t in [-1, 1]: hue 250 (blue) below, 60 (orange) above; lightness falls and chroma grows linearly with
 *  |t| in CIE LCh. */
function blueOrange(t) {
  const s = Math.min(1, Math.abs(t));
  return d3.hcl(t < 0 ? 250 : 60, 4 + 54 * s, 95 - 50 * s).toString();
}

const colourSteps = 256;

/** A scale from `low` to `high`. kind: "amount" (viridis), "count" (cividis), "diverging" (about `middle`).
 *  colours[k], k = 0..255, as text; packed[k] as one pixel. */
function colourScale(kind, low, high, middle = 0) {
  if (!(low < high)) {
    const pad = Math.abs(low) * 0.01 || 1;
    low -= pad;
    high += pad;
  }
  if (kind === "diverging") {
    const reach = Math.max(high - middle, middle - low);
    low = middle - reach;
    high = middle + reach;
  }
  const colours = d3.range(colourSteps).map(k => {
    const t = k / (colourSteps - 1);
    return kind === "diverging" ? blueOrange(2 * t - 1)
        : kind === "count"      ? d3.interpolateCividis(t)
                                : d3.interpolateViridis(t);
  });
  const packed = Uint32Array.from(colours, text => {
    const c = d3.rgb(text);
    return (255 << 24 | Math.round(c.b) << 16 | Math.round(c.g) << 8 | Math.round(c.r)) >>> 0;
  });
  const step = v =>
      Math.max(0, Math.min(colourSteps - 1, Math.round((v - low) / (high - low) * (colourSteps - 1))));
  return {kind, low, high, colours, packed, step, colour: v => colours[step(v)]};
}

/** Range that leaves out the outermost half percent on each side when there are many values. */
function sturdyRange(values) {
  const sorted = Float64Array.from(values.filter ? values.filter(Number.isFinite) : values).sort();
  if (sorted.length === 0) return [0, 1];
  const cut = sorted.length > 200 ? Math.floor(sorted.length * 0.005) : 0;
  return [sorted[cut], sorted[sorted.length - 1 - cut]];
}

/** Scale for model values: diverging when they lie on both sides of zero, else by amount. */
function modelScale(values) {
  const [low, high] = sturdyRange(values);
  const bothSides = low < 0 && high > 0 && Math.min(-low, high) > 0.1 * Math.max(-low, high);
  return colourScale(bothSides ? "diverging" : "amount", low, high);
}

/** A bar with the colours and a numbered axis, as SVG inside `parent` (d3 selection), at (x, y). */
function drawColourBar(parent, scale, {x, y, width, label}) {
  const g = parent.append("g").attr("class", "colour-bar").attr("transform", `translate(${x},${y})`);
  const cells = 64;
  for (let k = 0; k < cells; k++) {
    g.append("rect")
        .attr("x", k * width / cells)
        .attr("width", width / cells + 0.6)
        .attr("height", 10)
        .attr("fill", scale.colours[Math.round(k * (colourSteps - 1) / (cells - 1))]);
  }
  const axis = d3.scaleLinear().domain([scale.low, scale.high]).range([0, width]);
  g.append("g")
      .attr("transform", "translate(0,10)")
      .attr("class", "axis")
      .call(d3.axisBottom(axis)
                .ticks(Math.max(2, Math.floor(width / 75)))
                .tickFormat(v => plain(v, 3))
                .tickSizeOuter(0));
  g.append("text")
      .attr("class", "axis-name")
      .attr("x", width / 2)
      .attr("y", 42)
      .attr("text-anchor", "middle")
      .text(label);
  return g;
}
