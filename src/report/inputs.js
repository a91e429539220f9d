// How the solution was reached, what went in, and what to keep in mind.
function buildConvergence() {
  const engine = run.engine, node = section("convergence", "How the solution was reached", null);
  node.append(element("p", {}, engine.stop_words), definitionList([
    ["engine", engine.name],
    ["why this one", engine.why || null],
    ["steps", engine.steps === null ? null : whole(engine.steps)],
    ["rank", engine.rank === null ? null : whole(engine.rank)],
    [
      "error bound of the model",
      engine.error_bound === null    ? null
          : engine.error_bound === 0 ? "none needed (direct)"
                                     : plain(engine.error_bound, 2)
    ],
    ["wanted tolerance", engine.tolerance === null ? null : plain(engine.tolerance, 2)],
    ["reciprocal condition", engine.rcond === null ? null : plain(engine.rcond, 2)],
    ["last refinement correction", engine.refined_to === null ? null : plain(engine.refined_to, 2)],
    [
      "relative error of the standard deviations",
      engine.sigma_error === null    ? null
          : engine.sigma_error === 0 ? "rounding only"
                                     : plain(engine.sigma_error, 2)
    ],
    ["random samples for standard deviations", engine.samples ? whole(engine.samples) : null],
  ]));
  if (curve && curve.points.error_bound.some(b => b > 0)) drawBounds(node, engine);
}

function drawBounds(node, engine) {
  const fig = figure(node, {
    title: "Error bound against damping.",
    say: "An upper bound of the relative error of the model at each damping; " +
        "points above the dashed line are not converged at the wanted tolerance. The numbers stand in" +
            " the table of the trade-off curve."
  });
  const bounds = curve.points.error_bound.map(orNaN),
        tolerance = engine.tolerance > 0 ? engine.tolerance : null;
  responsive(fig.body, available => {
    const frame = chartFrame(fig.body, {
      width: Math.min(available, 620),
      height: 240,
      label: "Error bound of the model against damping",
      x: {scale: logScale(dampings, 0.02), name: named("damping λ", run.units.damping), log: true},
      y: {
        scale: logScale(tolerance ? bounds.concat(tolerance) : bounds),
        name: "error bound (relative)",
        log: true
      }
    });
    if (tolerance)
      frame.g.append("line")
          .attr("class", "target")
          .attr("x2", frame.inner.width)
          .attr("y1", frame.y(tolerance))
          .attr("y2", frame.y(tolerance));
    const points = d3.range(dampings.length).filter(k => bounds[k] > 0);
    hoverOn(frame.g.append("g")
                .selectAll("circle")
                .data(points)
                .enter()
                .append("circle")
                .attr("class", "point")
                .classed("hollow", k => !curve.points.converged[k])
                .attr("r", 3.5)
                .attr("cx", k => frame.x(dampings[k]))
                .attr("cy", k => frame.y(bounds[k]))
                .on("click", k => select(k)),
        k => [`λ = ${dampingWords(k)}`, `error bound ${plain(bounds[k], 2)}`]);
  });
}

function buildInputs() {
  const node = section("inputs", "What went in", null), p = run.problem, s = run.settings;
  node.append(definitionList([
    ["command", element("code", {}, run.command_line || "")],
    ["problem folder", p.folder],
    ["observations", whole(p.observations)],
    ["parameters", whole(p.parameters)],
    ["nonzero coefficients", whole(p.nonzeros)],
    ["held fixed", p.fixed ? whole(p.fixed) : null],
    ["weighted priors", p.priors ? whole(p.priors) : null],
    ["exact conditions", p.conditions ? whole(p.conditions) : null],
    ["objective", element("code", {}, run.objective)],
    ["sign convention", "residual = predicted − observed"],
    ["unit of the values", valueUnit || "not stated"],
    ["unit of the parameters", parameterUnit || "not stated"],
    ["unit of the damping λ", run.units.damping || "not stated"],
    ["damping", `${plain(s.damping, 8)} (chosen by: ${s.chosen_by})`],
    ["penalty prefers", s.damping > 0 ? `the ${s.prefer} model` : null],
    [
      "standard deviations of the readings",
      p.sigma_given ? `as given${p.correlated ? ", with covariances" : ""}` : "not given: all weights 1"
    ],
    ["variance factor", s.variance],
    ["seed of random numbers", run.seed],
    ["version", `leastwise ${run.version}`],
  ]));
  node.append(tableOf({
    caption: "Files read",
    count: run.inputs.length,
    columns: [
      {name: "file", left: true, text: i => run.inputs[i].file},
      {name: "size", text: i => fileSize(run.inputs[i].bytes), sort: i => run.inputs[i].bytes}, {
        name: "SHA-256",
        left: true,
        wide: true,
        text: i => element("code", {class: "digest"}, run.inputs[i].sha256),
        sort: i => run.inputs[i].sha256
      }
    ]
  }));
  const t = run.seconds;
  node.append(element("p", {class: "small"},
      `Time: reading ${plain(t.read, 3)} s, solving ${plain(t.solve, 3)} s, certainty ${
          plain(t.certainty, 3)} s.`));
}

function buildCautions() {
  const node = section("cautions", "Cautions", null), list = element("ul");
  for (const caution of run.cautions) list.append(element("li", {}, caution.text));
  for (const text of run.standing_cautions) list.append(element("li", {}, text));
  node.append(list);
}
