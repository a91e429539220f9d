// Estimates as a chart: against the one coordinate, or in the order of the file, with error bars of k
// standard deviations.
const mostBars = 3000;

/** {x(j), name}: what the estimates are drawn against. */
function estimateAxis() {
  if (layout.kind !== "line")
    return {
      name: "parameter, in the order of the files",
      at: d3.range(parameters.count),
      rows: d3.range(parameters.count)
    };
  return {name: named(layout.across.name, run.units.coordinate), at: layout.values, rows: layout.cells};
}

/** Returns update(values, withBars). */
function buildEstimates(parent, {title, say, follows}) {
  const sigma = parameters.get("sigma"), k = run.fit.multiplier || 1, axis = estimateAxis();
  const fig = figure(parent, {title, say, wide: true});
  let current = parameters.get("estimate"), bars = true, last = 0;
  const draw = width => {
    last = width;
    const half = axis.rows.map(j => bars && sigma && Number.isFinite(sigma[j]) ? k * sigma[j] : 0);
    const low = d3.min(axis.rows, (j, i) => current[j] - half[i]),
          high = d3.max(axis.rows, (j, i) => current[j] + half[i]);
    const frame = chartFrame(fig.body, {
      width: Math.min(width, 900),
      height: Math.round(Math.max(220, Math.min(340, width * 0.42))),
      x: {scale: linearScale(...d3.extent(axis.at), 0.03), name: axis.name},
      y: {scale: linearScale(low, high), name: named("estimate", parameterUnit)},
      label: `${title} The numbers stand in the table of estimates.`
    });
    const points =
        axis.rows.map((j, i) => ({j, x: frame.x(axis.at[i]), y: frame.y(current[j]), half: half[i]}))
            .filter(p => Number.isFinite(p.y));
    if (layout.kind === "line") {
      frame.g.append("path")
          .attr("class", "line thin")
          .attr("d", d3.line().x(p => p.x).y(p => p.y)(points.slice().sort((a, b) => a.x - b.x)));
    }
    if (points.length <= mostBars) {
      frame.g.append("path")
          .attr("class", "error-bars")
          .attr("d",
              points.filter(p => p.half > 0)
                  .map(p => {
                    const up = frame.y(current[p.j] + p.half), down = frame.y(current[p.j] - p.half);
                    return `M${p.x.toFixed(1)},${up.toFixed(1)}V${down.toFixed(1)}`;
                  })
                  .join(""));
    }
    dotPath(frame.g, points, points.length > 2000 ? "fine" : "");
    frame.g.append("rect")
        .attr("class", "catch")
        .attr("width", frame.inner.width)
        .attr("height", frame.inner.height);
    hoverNearest(frame.g, points, 20, p => cellLines(p.j, {follows}, selected), p => pickCell(p.j));
  };
  responsive(fig.body, draw);
  return (values, withBars) => {
    current = values;
    bars = withBars;
    if (last) draw(last);
  };
}

/** Standard deviations alone, for estimates beside which they are too small to be seen. */
function buildSigmas(parent) {
  const sigma = parameters.get("sigma");
  const rows = d3.range(parameters.count).filter(j => Number.isFinite(sigma[j]));
  if (!rows.length) return;
  const fig = figure(parent, {
    title: "Standard deviations of the estimates.",
    wide: true,
    say:
        "The standard deviations are small beside the spread of the estimates, so they are drawn on " +
            "their own axis, in the order of the files. " +
        `Largest: ${plain(d3.max(rows, j => sigma[j]), 2)} ${parameterUnit}.`
  });
  responsive(fig.body, width => {
    const frame = chartFrame(fig.body, {
      width: Math.min(width, 900),
      height: 220,
      x: {scale: linearScale(0, parameters.count - 1, 0.03), name: "parameter, in the order of the files"},
      y: {
        scale: linearScale(0, d3.max(rows, j => sigma[j]), 0).nice(),
        name: named("standard deviation", parameterUnit)
      },
      label: "Standard deviation of each parameter; the numbers stand in the table of estimates."
    });
    const points = rows.map(j => ({j, x: frame.x(j), y: frame.y(sigma[j])}));
    if (points.length <= mostBars) {
      frame.g.append("path")
          .attr("class", "stems")
          .attr("d", points.map(p => `M${p.x.toFixed(1)},${frame.inner.height}V${p.y.toFixed(1)}`).join(""));
    }
    dotPath(frame.g, points, points.length > 2000 ? "fine" : "");
    frame.g.append("rect")
        .attr("class", "catch")
        .attr("width", frame.inner.width)
        .attr("height", frame.inner.height);
    hoverNearest(frame.g, points, 20, p => cellLines(p.j, {}, selected));
  });
}

/** The statement of a result: value, standard uncertainty, expanded interval with its coverage factor. */
function buildEstimateTable(parent) {
  const get = name => parameters.get(name), estimate = get("estimate"), sigma = get("sigma"),
        prior = get("prior");
  const low = get("low"), high = get("high"), kind = get("kind"), unit = parameterUnit;
  const columns = [
    {name: "parameter", left: true, text: j => get("id")[j]},
    {
      name: "estimate",
      unit,
      text: j => stated(estimate[j], sigma ? sigma[j] : NaN).value,
      sort: j => estimate[j]
    },
  ];
  if (sigma) {
    columns.push({
      name: "standard uncertainty u",
      unit,
      text: j => stated(estimate[j], sigma[j]).u,
      sort: j => sigma[j]
    },
        {name: "kind", left: true, text: j => sigmaKinds[kind[j]]});
    if (low) {
      const at = (values, j) => fixedTo(values[j], decimalsFor(sigma[j]));
      columns.push({name: "interval from", unit, text: j => at(low, j), sort: j => low[j]},
          {name: "to", unit, text: j => at(high, j), sort: j => high[j]});
    }
  }
  if (prior && !curve)
    columns.push({
      name: "estimate − prior",
      unit,
      text: j => fixedTo(estimate[j] - prior[j], decimalsFor(sigma ? sigma[j] : NaN)),
      sort: j => estimate[j] - prior[j]
    });
  for (const [name, key, digits] of [
           ["resolution", "resolution", 3], ["hits", "hits", 6], ["coverage", "coverage", 4]]) {
    if (get(key)) columns.push(numberColumn(name, "", get(key), digits));
  }
  const bound = get("bound");
  if (bound && bound.some(b => b !== 1))
    columns.push({name: "at bound", left: true, text: j => ["lower", "", "upper"][bound[j]]});
  parent.append(tableOf({
    caption: "Estimates, in the order of the files",
    file: "parameters.csv",
    count: parameters.count,
    columns,
    first: 60,
    search: j => get("id")[j]
  }));
}
