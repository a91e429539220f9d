// What each criterion says along the dampings: one small panel a criterion over a common axis, its choice
// marked, the range within five percent of its optimum shaded.
function criteriaPanels() {
  const p = curve.points, m = curve.used;
  const panels = [
    {key: "corner", name: "curvature", values: p.curvature, log: false, aim: "largest"},
    {key: "gcv", name: "gcv", values: p.gcv, log: true, aim: "smallest"},
    {
      key: "discrepancy",
      name: "χ²/m",
      values: p.chi_square.map(v => v === null ? null : v / m),
      log: true,
      aim: "target"
    },
    {key: "risk", name: "risk", values: p.risk, log: false, aim: "smallest"},
    {key: "effective", name: "eff. param.", values: p.effective_parameters, log: false, aim: null},
  ];
  return panels.filter(panel => panel.values.some(v => v !== null)).map(panel => Object.assign(panel, {
    choice: curve.choices.find(c => c.criterion === panel.key)
  }));
}

function buildCriteria() {
  const node = section("criteria", "Criteria against damping",
      "Each criterion picks a damping in its own way. Where they agree the choice is easy; where they" +
          " differ by more than a " +
          "factor of a few, the data alone do not settle it.");
  if (curve.comparison) node.append(element("p", {}, curve.comparison));
  for (const choice of curve.choices) {
    if (choice.warning) node.append(cautionNote(`${choice.criterion}: ${choice.warning}`));
  }
  node.append(tableOf({
    caption: "What each criterion picks",
    count: curve.choices.length,
    columns: [
      {name: "criterion", left: true, text: i => curve.choices[i].criterion},
      {name: "damping λ", unit: run.units.damping, text: i => plain(curve.choices[i].damping, 4)},
      {name: "from", text: i => plain(curve.choices[i].from, 3)},
      {name: "to", text: i => plain(curve.choices[i].to, 3)},
      {name: "value there", text: i => plain(curve.choices[i].value, 4)},
      {name: "misfit", text: i => plain(curve.choices[i].misfit, 4)},
      {name: "size", unit: run.units.size, text: i => plain(curve.choices[i].size, 4)},
    ],
  }));
  const panels = criteriaPanels();
  const fig = figure(node, {
    title: "Criteria against damping.",
    say:
        "Corner looks for the largest curvature of the trade-off curve, gcv and risk for the smallest" +
            " value, discrepancy for χ² at its " +
        "target. The shaded range is within 5 % of the optimum; the upright line is the damping of " +
            "the slider.",
  });
  responsive(fig.body, width => drawCriteria(fig.body, Math.min(width, 760), panels));
}

function drawCriteria(body, width, panels) {
  body.replaceChildren();
  const x0 = logScale(dampings, 0.02), rules = [];
  panels.forEach((panel, i) => {
    const last = i === panels.length - 1, holder = element("div");
    body.append(holder);
    const values = panel.values.map(orNaN);
    const target = panel.aim === "target" && panel.choice && panel.choice.value !== null
        ? panel.choice.value / curve.used
        : null;
    const wanted = target === null ? values : values.concat(target);
    const logarithmic = panel.log && wanted.every(v => !(v <= 0));
    const frame = chartFrame(holder, {
      width,
      height: last ? 148 : 116,
      margin: {top: 8, bottom: last ? 44 : 12},
      x: {scale: x0.copy(), name: last ? named("damping λ", run.units.damping) : "", log: true},
      y: {
        scale: logarithmic ? logScale(wanted) : linearScale(...sturdyRange(wanted.filter(Number.isFinite))),
        name: panel.name,
        log: logarithmic
      },
      label: `${panel.name} against damping; the numbers stand in the table of the trade-off curve`,
    });
    if (!last) frame.g.select(".axis-x").selectAll(".tick text").remove();
    rules.push(drawPanel(frame, panel, values, target));
  });
  const move = k => rules.forEach(rule => rule(k));
  move(selected);
  body.moveMarker = move;
  if (!body.follows) {
    body.follows = true;
    onSelect(k => body.moveMarker(k));
  }
}

function drawPanel({g, inner, x, y}, panel, values, target) {
  const clip = v => Math.max(-20, Math.min(inner.height + 20, y(v)));
  const choice = panel.choice;
  if (choice && choice.from > 0 && choice.to > 0) {
    g.insert("rect", ":first-child")
        .attr("class", "range")
        .attr("x", x(choice.from))
        .attr("width", Math.max(1, x(choice.to) - x(choice.from)))
        .attr("height", inner.height);
  }
  if (target !== null)
    g.append("line")
        .attr("class", "target")
        .attr("x2", inner.width)
        .attr("y1", y(target))
        .attr("y2", y(target));
  const points = d3.range(dampings.length)
                     .filter(k => Number.isFinite(values[k]))
                     .map(k => ({k, x: x(dampings[k]), y: clip(values[k])}));
  g.append("path").attr("class", "line").attr("d", d3.line().x(p => p.x).y(p => p.y)(points));
  const dots = g.append("g")
                   .selectAll("circle")
                   .data(points)
                   .enter()
                   .append("circle")
                   .attr("class", "point small")
                   .classed("hollow", p => !curve.points.converged[p.k])
                   .attr("r", 2.5)
                   .attr("cx", p => p.x)
                   .attr("cy", p => p.y)
                   .on("click", p => select(p.k));
  hoverOn(dots, p => [`λ = ${dampingWords(p.k)}`, `${panel.name} ${plain(values[p.k], 5)}`]);
  if (choice && choice.damping !== null) {
    g.append("line")
        .attr("class", "chosen-rule")
        .attr("x1", x(choice.damping))
        .attr("x2", x(choice.damping))
        .attr("y2", inner.height);
    const right = x(choice.damping) < inner.width - 80;
    g.append("text")
        .attr("class", "choice-name")
        .attr("x", x(choice.damping) + (right ? 4 : -4))
        .attr("y", 10)
        .attr("text-anchor", right ? "start" : "end")
        .text(choice.criterion);
  }
  const rule = g.append("line").attr("class", "rule").attr("y2", inner.height);
  return k => rule.attr("x1", x(dampings[k])).attr("x2", x(dampings[k]));
}
