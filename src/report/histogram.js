// Standardised residuals against the normal curve: how many fall into each bin, and how many should.
function normalDensity(x) { return Math.exp(-x * x / 2) / Math.sqrt(2 * Math.PI); }

function histogramSentence(h, counts) {
  const total = d3.sum(counts);
  let within = 0, beyond = 0;
  counts.forEach((count, b) => {
    const low = h.low + (b - 1) * h.width, high = low + h.width;
    if (b > 0 && b < counts.length - 1 && low >= -1 - 1e-9 && high <= 1 + 1e-9) within += count;
    if (b === 0 || b === counts.length - 1 || low >= 3 - 1e-9 || high <= -3 + 1e-9) beyond += count;
  });
  return `Of ${whole(total)} residuals, ${percent(within / total)} lie within 1 ${
             h.of} (normal: 68.3 %) and ${whole(beyond)} beyond 3 ` +
      `(normal: ${plain(total * 0.0027, 2)}). The line is what a normal distribution would give.`;
}

/** The bins as a table under the figure, made when it is opened; returns what brings it up to date. */
function tableOfBins(fig, h, counts) {
  const holder = element("div");
  const details = element("details", {}, element("summary", {}, "Numbers of this chart"), holder);
  fig.node.append(details);
  const edge = b => plain(h.low + (b - 1) * h.width);
  const tabulate = () => {
    if (!details.open) return;
    const current = counts(), last = current.length - 1;
    holder.replaceChildren(tableOf({
      count: current.length,
      caption: "Residuals by bin",
      columns: [
        {
          name: "bin",
          unit: h.of,
          left: true,
          text: b => b === 0 ? `below ${edge(1)}` : b === last ? `above ${edge(last)}` : `${edge(b)} to ${edge(b + 1)}`
        },
        {name: "residuals", text: b => whole(current[b]), sort: b => current[b]},
      ]
    }));
  };
  details.addEventListener("toggle", tabulate);
  return tabulate;
}

/** A histogram that can be redrawn: returns update(counts). h: {low, width, of, counts}; the first and last count are the
 *  residuals outside the bins. */
function buildHistogram(parent, h, counts, titleFor) {
  const fig = figure(parent, {title: titleFor()});
  let frame = null, bars = null, normal = null, current = counts;
  const bins = counts.length - 2;
  const tabulate = tableOfBins(fig, h, () => current);
  const paint = () => {
    const total = d3.sum(current), expected = x => total * h.width * normalDensity(x);
    const shown = current.slice(1, -1);
    frame.y.domain([0, Math.max(d3.max(shown), expected(0)) * 1.06 || 1]);
    frame.g.select(".axis-y").remove();
    drawAxis(frame.g, {scale: frame.y, name: "residuals (count)"}, frame.inner, "y");
    bars.data(shown).attr("y", d => frame.y(d)).attr("height", d => frame.inner.height - frame.y(d));
    normal.attr("d",
        d3.line()
            .x(v => frame.x(v))
            .y(v => frame.y(expected(v)))(d3.range(h.low, h.low + bins * h.width + 0.01, 0.1)));
    const out = current[0] + current[current.length - 1];
    frame.g.select(".outside").text(out ? `${whole(out)} outside` : "");
    fig.node.querySelector(".figure-title").textContent = titleFor();
    fig.say(histogramSentence(h, current));
    tabulate();
  };
  responsive(fig.body, available => {
    const width = Math.min(available, 560);
    frame = chartFrame(fig.body, {
      width,
      height: Math.round(Math.max(220, width * 0.5)),
      x: {
        scale: d3.scaleLinear().domain([h.low, h.low + bins * h.width]),
        name: `standardised residual (${h.of})`
      },
      y: {scale: d3.scaleLinear().domain([0, 1]), name: "residuals (count)"},
      label: "Histogram of standardised residuals against the normal curve; described in the sentence below.",
    });
    bars = frame.g.append("g")
               .attr("class", "bars")
               .selectAll("rect")
               .data(current.slice(1, -1))
               .enter()
               .append("rect")
               .attr("x", (d, b) => frame.x(h.low + b * h.width) + 0.5)
               .attr("width", Math.max(1, frame.x(h.width) - frame.x(0) - 1));
    hoverOn(bars, null);
    bars.on("pointermove.hover", (d, b) => showHover(d3.event, [
      `${plain(h.low + b * h.width)} to ${plain(h.low + (b + 1) * h.width)}`,
      `${whole(current[b + 1])} residuals`,
      `normal: ${plain(d3.sum(current) * h.width * normalDensity(h.low + (b + 0.5) * h.width), 3)}`
    ]));
    normal = frame.g.append("path").attr("class", "normal");
    frame.g.append("text")
        .attr("class", "outside")
        .attr("x", frame.inner.width)
        .attr("y", 8)
        .attr("text-anchor", "end");
    paint();
  });
  return next => {
    current = next;
    if (frame) paint();
  };
}

/** Counts at damping k, or null when the sweep kept none. */
function countsAt(k) {
  const h = curve ? curve.histogram : run.histogram;
  if (!h) return null;
  return curve ? h.counts[k] : h.counts[0];
}
