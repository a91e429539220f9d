// Residuals of the answer: by order, by value, by group, and the largest ones.
function buildResiduals() {
  const node = section("residuals", "Residuals",
      `Residual = predicted − observed${
          curve ? `, at the damping of the answer, λ = ${plain(run.settings.damping, 4)}`
                : ""}. A pattern along the order, the value or a group ` +
          "is something that the equations or the standard deviations do not know of.");
  if (!curve && run.histogram)
    buildHistogram(node, run.histogram, run.histogram.counts[0], () => "Residuals against the normal curve.");
  const views = element("div", {class: "views"});
  node.append(views);
  for (const [key, title, name] of [
           ["order", "Residuals by order.", "observation, in the order of the files"],
           ["value", "Residuals by value.", named("observed value", valueUnit)]]) {
    if (run.binned)
      buildBinned(views, run.binned[key], title, name);
    else
      buildScatter(views, key, title, name);
  }
  buildGroups(node);
  buildLargest(node);
}

function buildScatter(parent, key, title, name) {
  const value = observations.get("value"), residual = observations.get("residual"),
        flag = observations.get("flag");
  const rows = d3.range(observations.count).filter(i => Number.isFinite(residual[i]));
  const at = key === "order" ? i => i + 1 : i => value[i];
  const fig = figure(parent, {
    title,
    say: residualSentence(rows.map(i => residual[i])),
    table: {
      caption: title,
      count: rows.length,
      first: 60,
      file: "residuals.csv",
      columns: [
        {name: "observation", left: true, text: r => observations.get("id")[rows[r]]},
        numberColumn("value", valueUnit, rows.map(i => value[i]), 7),
        numberColumn("residual", valueUnit, rows.map(i => residual[i]))
      ]
    }
  });
  responsive(fig.body, available => {
    const width = Math.min(available, 620);
    const frame = chartFrame(fig.body, {
      width,
      height: Math.round(Math.max(220, width * 0.48)),
      x: {scale: linearScale(...d3.extent(rows, at), 0.02), name},
      y: {scale: linearScale(...d3.extent(rows, i => residual[i])), name: named("residual", valueUnit)},
      label: title
    });
    zeroLine(frame);
    const points = rows.map(i => ({i, x: frame.x(at(i)), y: frame.y(residual[i])}));
    const suspect = p => flag && flag[p.i] & 12;
    dotPath(frame.g, points.filter(p => !suspect(p)), points.length > 2000 ? "fine" : "");
    dotPath(frame.g, points.filter(suspect), "suspect");
    frame.g.append("rect")
        .attr("class", "catch")
        .attr("width", frame.inner.width)
        .attr("height", frame.inner.height);
    hoverNearest(frame.g, points, 24, p => observationLines(p.i));
  });
}

function zeroLine({g, inner, y}) {
  g.append("line").attr("class", "zero").attr("x2", inner.width).attr("y1", y(0)).attr("y2", y(0));
}

function residualSentence(values) {
  const [low, high] = d3.extent(values);
  return `${whole(values.length)} residuals, from ${plain(low, 3)} to ${
             withUnit(plain(high, 3), valueUnit)}, mean ${withUnit(plain(d3.mean(values), 2), valueUnit)}.` +
      (observations.get("flag") && observations.get("flag").some(f => f & 12)
              ? " Large marks: suspects and readings set aside."
              : "");
}

/** Too many rows to draw each: per bin the range, mean and rms. */
function buildBinned(parent, bins, title, name) {
  const rows = d3.range(bins.count.length).filter(b => bins.count[b] > 0);
  const fig = figure(parent, {
    title,
    say: `Each upright line is the range of the residuals in one of ${
        rows.length} bins, the box their root mean square about zero, the dot their mean.`,
    table: {
      caption: title,
      count: rows.length,
      columns: [
        numberColumn("from", "", rows.map(b => bins.from[b]), 6),
        numberColumn("to", "", rows.map(b => bins.to[b]), 6),
        {name: "residuals", text: r => whole(bins.count[rows[r]])},
        numberColumn("smallest", valueUnit, rows.map(b => bins.low[b])),
        numberColumn("mean", valueUnit, rows.map(b => bins.mean[b])),
        numberColumn("rms", valueUnit, rows.map(b => bins.rms[b])),
        numberColumn("largest", valueUnit, rows.map(b => bins.high[b]))
      ]
    }
  });
  responsive(fig.body, available => {
    const width = Math.min(available, 620);
    const frame = chartFrame(fig.body, {
      width,
      height: Math.round(Math.max(220, width * 0.48)),
      x: {scale: linearScale(bins.from[rows[0]], bins.to[rows[rows.length - 1]], 0), name},
      y: {
        scale: linearScale(d3.min(rows, b => bins.low[b]), d3.max(rows, b => bins.high[b])),
        name: named("residual", valueUnit)
      },
      label: title
    });
    zeroLine(frame);
    const middle = b => frame.x((bins.from[b] + bins.to[b]) / 2);
    frame.g.append("path")
        .attr("class", "error-bars")
        .attr("d",
            rows.map(b => `M${middle(b).toFixed(1)},${frame.y(bins.low[b]).toFixed(1)}V${
                         frame.y(bins.high[b]).toFixed(1)}`)
                .join(""));
    frame.g.append("path")
        .attr("class", "rms-boxes")
        .attr("d",
            rows.map(b => {
                  const x0 = frame.x(bins.from[b]), x1 = frame.x(bins.to[b]);
                  return `M${x0.toFixed(1)},${frame.y(bins.rms[b]).toFixed(1)}H${x1.toFixed(1)}V${
                      frame.y(-bins.rms[b]).toFixed(1)}H${x0.toFixed(1)}Z`;
                })
                .join(""));
    const points = rows.map(b => ({b, x: middle(b), y: frame.y(bins.mean[b])}));
    dotPath(frame.g, points, "");
    frame.g.append("rect")
        .attr("class", "catch")
        .attr("width", frame.inner.width)
        .attr("height", frame.inner.height);
    hoverNearest(frame.g, points, 40,
        p => [`${plain(bins.from[p.b], 5)} to ${plain(bins.to[p.b], 5)}`,
            `${whole(bins.count[p.b])} residuals`, `mean ${withUnit(plain(bins.mean[p.b], 3), valueUnit)}`,
            `rms ${withUnit(plain(bins.rms[p.b], 3), valueUnit)}`]);
  });
}

function observationLines(i) {
  const at = name => {
    const values = observations.get(name);
    return values ? values[i] : NaN;
  };
  const unit = valueUnit;
  return [
    observations.get("id")[i], `observed ${withUnit(plain(at("value"), 8), unit)}`,
    `residual ${withUnit(plain(at("residual"), 3), unit)}`,
    Number.isFinite(at("sigma")) ? `sigma ${withUnit(plain(at("sigma"), 3), unit)}` : null,
    Number.isFinite(at("standardized")) ? `standardised ${fixedTo(at("standardized"), 2)}` : null,
    Number.isFinite(at("redundancy")) ? `redundancy ${at("redundancy").toFixed(3)}` : null,
    Number.isFinite(at("detectable"))
        ? `smallest detectable error ${withUnit(plain(at("detectable"), 2), unit)}`
        : null,
    at("flag") ? flagWords(at("flag")) : null
  ];
}

function buildGroups(node) {
  const groups = run.groups;
  if (!groups || !groups.length) return;
  const has = key => groups.some(g => g[key] !== null && g[key] !== undefined);
  const columns = [
    {name: "group", left: true, text: i => groups[i].name},
    {name: "observations", text: i => whole(groups[i].observations)},
    numberColumn("mean residual", valueUnit, groups.map(g => orNaN(g.mean)), 3),
    numberColumn("rms residual", valueUnit, groups.map(g => orNaN(g.rms)), 3),
    numberColumn("χ²", "", groups.map(g => orNaN(g.chi_square)))
  ];
  if (has("redundancy")) columns.push(numberColumn("redundancy", "", groups.map(g => orNaN(g.redundancy))));
  if (has("factor")) columns.push(numberColumn("variance factor", "", groups.map(g => orNaN(g.factor)), 3));
  if (has("component"))
    columns.push(numberColumn("variance component", "", groups.map(g => orNaN(g.component)), 3),
        numberColumn("its standard uncertainty", "", groups.map(g => orNaN(g.component_sigma)), 2));
  node.append(element("h3", {}, "By group"));
  if (groups.length > 1 || has("factor")) {
    node.append(element("p", {},
        "A group whose variance factor stands far above 1 has standard deviations that are too small," +
            " or a blunder; far below 1, " +
            "standard deviations that are too large."));
  }
  if (groups.length > 1 && groups.length <= 40) drawGroups(node, groups);
  node.append(tableOf({caption: "Residuals by group", count: groups.length, columns}));
}

function drawGroups(node, groups) {
  const measure = groups.every(g => g.factor !== null) ? "factor" : "normalised";
  const value = g => orNaN(measure === "factor" ? g.factor : g.chi_square / g.observations);
  const name = measure === "factor" ? "variance factor" : "χ² / observations";
  const fig = figure(node, {
    title: `${measure === "factor" ? "Variance factor" : "χ² per observation"} by group.`,
    say:
        "The upright line is 1, where residuals are as large as their standard deviations say. The " +
            "table below gives the numbers."
  });
  responsive(fig.body, available => {
    const width = Math.min(available, 620),
          scale = d3.scalePoint().domain(groups.map((g, i) => i)).padding(0.6);
    const frame = chartFrame(fig.body, {
      width,
      height: 60 + 24 * groups.length,
      margin: {left: 130, top: 6},
      x: {scale: linearScale(0, Math.max(1.1, d3.max(groups, value)), 0.02), name},
      y: {scale: scale, name: "", values: groups.map((g, i) => i), format: i => shorten(groups[i].name, 18)},
      label: `${name} of each group`
    });
    frame.y.range([0, frame.inner.height]);
    frame.g.select(".axis-y").remove();
    drawAxis(frame.g,
        {scale: frame.y, name: "", values: groups.map((g, i) => i), format: i => shorten(groups[i].name, 18)},
        frame.inner, "y");
    frame.g.append("line")
        .attr("class", "target")
        .attr("x1", frame.x(1))
        .attr("x2", frame.x(1))
        .attr("y2", frame.inner.height);
    hoverOn(frame.g.append("g")
                .selectAll("circle")
                .data(groups)
                .enter()
                .append("circle")
                .attr("class", "point")
                .attr("r", 5)
                .attr("cx", g => frame.x(value(g)))
                .attr("cy", (g, i) => frame.y(i)),
        g => [g.name, `${name} ${plain(value(g), 3)}`, `${whole(g.observations)} observations`]);
  });
}

function shorten(text, most) { return text.length > most ? `${text.slice(0, most - 1)}…` : text; }

function buildLargest(node) {
  const list = run.largest;
  if (!list || !list.length) return;
  node.append(element("h3", {}, "Largest standardised residuals"), element("p", {}, run.largest_by));
  node.append(tableOf({
    caption: "Largest standardised residuals",
    count: list.length,
    first: 25,
    columns: [
      {name: "observation", left: true, text: i => list[i].id},
      {name: "group", left: true, text: i => list[i].group || ""},
      numberColumn("value", valueUnit, list.map(r => r.value), 8),
      numberColumn("residual", valueUnit, list.map(r => r.residual), 3),
      numberColumn("sigma", valueUnit, list.map(r => orNaN(r.sigma)), 3),
      {name: "standardised", text: i => fixedTo(list[i].standardized, 2), sort: i => list[i].standardized}
    ],
    rowClass: i => Math.abs(list[i].standardized) > (run.fit.critical || 3.29) ? "suspect" : null
  }));
}
