// A frame with named axes: what every chart has in common.
//   {width, height, x: {scale, name, log}, y: {...}, label}   label: the sentence for screen readers
function chartFrame(body, {width, height, x, y, label, margin}) {
  const m = Object.assign({top: 14, right: 18, bottom: 44, left: 74}, margin);
  d3.select(body).selectAll("svg.chart").remove();
  const svg = d3.select(body)
                  .append("svg")
                  .attr("class", "chart")
                  .attr("role", "img")
                  .attr("aria-label", label)
                  .attr("viewBox", `0 0 ${width} ${height}`)
                  .attr("width", width)
                  .attr("height", height);
  const inner = {width: width - m.left - m.right, height: height - m.top - m.bottom};
  const g = svg.append("g").attr("transform", `translate(${m.left},${m.top})`);
  x.scale.range([0, inner.width]);
  y.scale.range([inner.height, 0]);
  drawAxis(g, x, inner, "x");
  drawAxis(g, y, inner, "y");
  return {svg, g, inner, margin: m, x: x.scale, y: y.scale};
}

function drawAxis(g, axis, inner, side) {
  const room = side === "x" ? inner.width / 70 : inner.height / 40;
  const d3axis = (side === "x" ? d3.axisBottom : d3.axisLeft)(axis.scale).tickSizeOuter(0);
  if (axis.values)
    d3axis.tickValues(axis.values).tickFormat(axis.format || (v => v));
  else if (axis.log)
    logTicks(d3axis, axis.scale, Math.max(2, room));
  else
    d3axis.ticks(Math.max(2, room)).tickFormat(axis.format || (v => plain(v, 6)));
  const node = g.append("g").attr("class", `axis axis-${side}`).call(d3axis);
  node.attr("transform", side === "x" ? `translate(0,${inner.height})` : null);
  node.selectAll(".tick")
      .append("line")
      .attr("class", "grid")
      .attr(side === "x" ? "y2" : "x2", side === "x" ? -inner.height : inner.width);
  const name = node.append("text").attr("class", "axis-name").attr("text-anchor", "middle").text(axis.name);
  if (side === "x")
    name.attr("x", inner.width / 2).attr("y", 36);
  else {
    let longest = 0;
    node.selectAll(".tick text").each(function() { longest = Math.max(longest, this.textContent.length); });
    name.attr(
        "transform", `translate(${- Math.min(62, 22 + 6.4 * longest)},${inner.height / 2}) rotate(-90)`);
  }
}

/** Decades where there are enough of them, else 1-2-5 steps, else whatever distinguishes the ends. */
function logTicks(axis, scale, most) {
  const [a, b] = scale.domain().map(Math.log10);
  const decades = d3.range(Math.ceil(Math.min(a, b) - 1e-9), Math.floor(Math.max(a, b) + 1e-9) + 1);
  let ticks = decades.map(k => Math.pow(10, k));
  if (decades.length > most)
    ticks = ticks.filter((t, i) => i % Math.ceil(decades.length / most) === 0);
  else if (decades.length < 3) {
    const steps = [1, 2, 3, 5];
    ticks = d3.merge(d3.range(decades.length ? decades[0] - 1 : Math.floor(Math.min(a, b)),
                           Math.ceil(Math.max(a, b)) + 1)
                         .map(k => steps.map(s => s * Math.pow(10, k))))
                .filter(t => Math.log10(t) >= Math.min(a, b) && Math.log10(t) <= Math.max(a, b));
    if (ticks.length < 2) ticks = d3.scaleLinear().domain(scale.domain()).ticks(Math.min(4, most));
  }
  axis.tickValues(ticks).tickFormat(v => plain(v, 3));
}

/** Logarithmic scale over the positive values, with a little room at both ends. */
function logScale(values, room = 0.06) {
  let [low, high] = d3.extent(values.filter(v => v > 0 && Number.isFinite(v)));
  if (low === undefined) {
    low = 0.1;
    high = 10;
  }
  if (!(high > low * 1.0001)) {
    low /= 2;
    high *= 2;
  }
  const pad = Math.pow(high / low, room);
  return d3.scaleLog().domain([low / pad, high * pad]);
}

function linearScale(low, high, room = 0.05) {
  if (!Number.isFinite(low) || !Number.isFinite(high)) {
    low = 0;
    high = 1;
  }
  if (!(high > low)) {
    const pad = Math.abs(low) * 0.1 || 1;
    low -= pad;
    high += pad;
  }
  return d3.scaleLinear().domain([low - room * (high - low), high + room * (high - low)]);
}

/** Many dots as one path: light to draw and a vector on paper. */
function dotPath(g, points, className) {
  return g.append("path")
      .attr("class", `dots ${className}`)
      .attr("d", points.map(p => `M${p.x.toFixed(1)},${p.y.toFixed(1)}h0`).join(""));
}
