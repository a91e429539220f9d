// The trade-off curve: size against misfit, both logarithmic, every damping a point, the choices named where
// they lie.
function curvePoints() {
  const p = curve.points;
  return d3.range(dampings.length)
      .map(k => ({k, damping: p.damping[k], misfit: p.misfit[k], size: p.size[k], converged: p.converged[k]}))
      .filter(d => d.misfit > 0 && d.size > 0);
}

function curveTable() {
  const p = curve.points;
  return {
    caption: "Every damping of the sweep",
    file: "tradeoff.csv",
    count: dampings.length,
    first: 100,
    columns: [
      numberColumn("damping λ", run.units.damping, p.damping),
      {name: "named by", left: true, text: k => choicesAt(k).join(", ")},
      numberColumn("misfit", "", p.misfit),
      numberColumn("size", run.units.size, p.size),
      numberColumn("χ²/m", "", p.chi_square.map(v => v === null ? NaN : v / curve.used)),
      numberColumn("effective parameters", "", p.effective_parameters.map(orNaN)),
      numberColumn("gcv", "", p.gcv.map(orNaN)),
      numberColumn("risk", "", p.risk.map(orNaN)),
      numberColumn("curvature", "", p.curvature.map(orNaN)),
      numberColumn("error bound", "", p.error_bound.map(orNaN), 2),
      {name: "converged", text: k => p.converged[k] ? "yes" : "no"},
    ],
    rowClass: k => choicesAt(k).length ? "marked" : null,
  };
}

/** Choices that picked a damping, merged where they picked the same point. */
function namedChoices() {
  const merged =
      d3.nest().key(c => c.damping.toPrecision(6)).entries(curve.choices.filter(c => c.damping !== null));
  return merged
      .map(({values}) => ({
        names: values.map(c => c.criterion),
        damping: values[0].damping,
        misfit: values[0].misfit,
        size: values[0].size,
        index: values[0].index
      }))
      .filter(c => c.misfit > 0 && c.size > 0);
}

function buildCurve(parent) {
  const points = curvePoints();
  const picks = namedChoices();
  const fig = figure(parent, {title: "Trade-off between misfit and size.", table: curveTable()});
  const first = points[0], last = points[points.length - 1];
  const words = picks.map(c => `${c.names.join(" and ")} at λ = ${plain(c.damping, 4)}`).join("; ");
  fig.say(`Each point is one damping, from λ = ${
              plain(first && first.damping, 3)} (largest model, smallest misfit) to ` +
      `${plain(last && last.damping, 3)} (smallest model, largest misfit). ${
          words ? `Choices: ${words}.` : "No criterion picked a damping."}` +
      (points.some(d => !d.converged) ? " Hollow points are not converged at the wanted tolerance." : "") +
      " Click a point, or use the left and right arrow keys, to look at its model.");
  responsive(fig.body, width => drawCurve(fig.body, Math.min(width, 760), points, picks));
}

/** The same curve, small, beside the model. */
function buildCurveInset(parent) {
  const fig = figure(parent,
      {title: "Where this damping lies.", say: "The trade-off curve again, with the damping of the slider."});
  responsive(fig.body, width => drawCurve(fig.body, Math.min(width, 560), curvePoints(), namedChoices()));
}

function drawCurve(body, width, points, picks) {
  const frame = chartFrame(body, {
    width,
    height: Math.round(Math.max(260, Math.min(430, width * 0.6))),
    x: {scale: logScale(points.map(d => d.misfit)), name: "misfit ‖A x − b‖, whitened (no unit)", log: true},
    y: {
      scale: logScale(points.map(d => d.size)),
      name: run.units.size ? `size ‖L(x − x0)‖ (${run.units.size})` : "size ‖L(x − x0)‖",
      log: true
    },
    label:
        "Trade-off curve: size of the model against misfit of the data; the table below gives the numbers.",
  });
  const {g, x, y} = frame;
  g.append("path").attr("class", "line").attr("d", d3.line().x(d => x(d.misfit)).y(d => y(d.size))(points));
  const marker = g.append("g").attr("class", "marker");
  marker.append("line").attr("class", "marker-x").attr("y1", 0).attr("y2", frame.inner.height);
  marker.append("line").attr("class", "marker-y").attr("x1", 0).attr("x2", frame.inner.width);
  marker.append("circle").attr("r", 9);
  const dots = g.append("g")
                   .selectAll("circle")
                   .data(points)
                   .enter()
                   .append("circle")
                   .attr("class", "point")
                   .classed("hollow", d => !d.converged)
                   .attr("r", 4)
                   .attr("cx", d => x(d.misfit))
                   .attr("cy", d => y(d.size))
                   .attr("data-k", d => d.k)
                   .on("click", d => select(d.k));
  hoverOn(dots,
      d => [`λ = ${dampingWords(d.k)}`, `misfit ${plain(d.misfit)}`,
          `size ${withUnit(plain(d.size), run.units.size)}`, d.converged ? null : "not converged"]);
  nameChoices(g, frame, picks);
  const move = k => {
    const d = points.find(p => p.k === k);
    marker.attr("display", d ? null : "none");
    if (!d) return;
    marker.select(".marker-x").attr("x1", x(d.misfit)).attr("x2", x(d.misfit));
    marker.select(".marker-y").attr("y1", y(d.size)).attr("y2", y(d.size));
    marker.select("circle").attr("cx", x(d.misfit)).attr("cy", y(d.size));
  };
  move(selected);
  body.moveMarker = move;
  if (!body.follows) {
    body.follows = true;
    onSelect(k => body.moveMarker(k));
  }
}

/** Names beside the points, pushed apart so that they do not cover each other, each with a thin leader. */
function nameChoices(g, {inner, x, y}, picks) {
  const labels =
      picks.map(c => ({text: c.names.join(", "), px: x(c.misfit), py: y(c.size), ly: y(c.size) - 18}))
          .sort((a, b) => a.py - b.py);
  for (let i = 1; i < labels.length; i++) labels[i].ly = Math.max(labels[i].ly, labels[i - 1].ly + 16);
  let floor = inner.height - 6;
  for (let i = labels.length - 1; i >= 0; i--) {
    labels[i].ly = Math.max(10, Math.min(labels[i].ly, floor));
    floor = labels[i].ly - 16;
  }
  for (const label of labels) {
    const right = label.px < inner.width - 150, lx = label.px + (right ? 26 : -26);
    const node = g.append("g").attr("class", "choice");
    node.append("line").attr("x1", label.px).attr("y1", label.py).attr("x2", lx).attr("y2", label.ly - 4);
    node.append("path")
        .attr("d", d3.symbol().type(d3.symbolDiamond).size(90)())
        .attr("transform", `translate(${label.px},${label.py})`);
    node.append("text")
        .attr("x", lx + (right ? 4 : -4))
        .attr("y", label.ly)
        .attr("text-anchor", right ? "start" : "end")
        .text(label.text);
  }
}
