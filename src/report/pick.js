// One cell looked at: what is known of it, how its value changes with the damping, and its row of the
// resolution matrix.
const picked = {
  box: null,
  cell: -1
};

/** Lines of the hover box over a cell; k: the damping that the map shows. */
function cellLines(j, spec, k) {
  const at = name => {
    const values = parameters.get(name);
    return values ? values[j] : NaN;
  };
  const model = spec.follows && k !== chosenIndex ? modelAt(k) : null;
  const value =
      model ? (model.stored[j] ? model.low + model.step * (model.stored[j] - 1) : NaN) : at("estimate");
  const lines = [parameters.get("id")[j]];
  const place =
      axisNames
          .map((name, a) =>
                   parameters.get(name) ? `${axisNames[a]} ${plain(parameters.get(name)[j], 6)}` : null)
          .filter(Boolean);
  if (place.length) lines.push(withUnit(place.join(", "), run.units.coordinate));
  lines.push(`estimate ${withUnit(plain(value, 5), parameterUnit)}${
      spec.follows && curve ? ` at λ = ${plain(dampings[k], 3)}` : ""}`);
  if (Number.isFinite(at("sigma")))
    lines.push(`standard deviation ${withUnit(plain(at("sigma"), 2), parameterUnit)} (${
        sigmaKinds[parameters.get("kind")[j]]})`);
  if (Number.isFinite(at("resolution"))) lines.push(`resolution ${plain(at("resolution"), 3)}`);
  if (Number.isFinite(at("hits")))
    lines.push(`${whole(at("hits"))} hits, coverage ${plain(at("coverage"), 3)}`);
  const bound = parameters.get("bound");
  if (bound && bound[j] !== 1) lines.push(bound[j] === 0 ? "at its lower bound" : "at its upper bound");
  if (thinCover[j] === hatched) lines.push("little coverage");
  return lines;
}

function pickCell(j) {
  if (!picked.box) return;
  picked.cell = j;
  picked.box.hidden = false;
  picked.box.replaceChildren(element("h3", {}, `Picked: ${parameters.get("id")[j]}`),
      element("p", {"aria-live": "polite"}, cellLines(j, {follows: false}, selected).slice(1).join("; ")));
  if (curve && curve.models) drawCellHistory(j);
  drawResolutionRow(j);
}

function drawCellHistory(j) {
  const values = d3.range(dampings.length).map(k => {
    const model = modelAt(k);
    return model && model.stored[j] ? model.low + model.step * (model.stored[j] - 1) : NaN;
  });
  const fig = figure(picked.box, {
    title: "Its estimate against the damping.",
    say: "Where the line is level the data decide; where it moves with the damping, the damping does.",
    table: {
      count: dampings.length,
      columns: [numberColumn("damping λ", "", dampings), numberColumn("estimate", parameterUnit, values)]
    }
  });
  responsive(fig.body, available => {
    const frame = chartFrame(fig.body, {
      width: Math.min(available, 520),
      height: 200,
      x: {scale: logScale(dampings, 0.02), name: named("damping λ", run.units.damping), log: true},
      y: {
        scale: linearScale(...d3.extent(values.filter(Number.isFinite))),
        name: named("estimate", parameterUnit)
      },
      label: `Estimate of ${parameters.get("id")[j]} against damping`
    });
    frame.g.append("path")
        .attr("class", "line")
        .attr("d",
            d3.line().defined(Number.isFinite).x((v, k) => frame.x(dampings[k])).y(v => frame.y(v))(values));
    frame.g.append("line")
        .attr("class", "rule")
        .attr("y2", frame.inner.height)
        .attr("x1", frame.x(dampings[selected]))
        .attr("x2", frame.x(dampings[selected]));
  });
}

function drawResolutionRow(j) {
  const rows = run.resolution_rows;
  const r = rows ? rows.of.indexOf(j) : -1;
  if (r < 0 || !isMap) return;
  const values = column(rows.rows[r]);
  const map = buildMap(picked.box, {
    title: "Its row of the resolution matrix.",
    key: "resolution-row",
    name: "resolution",
    unit: "",
    cover: false,
    say:
        "How much each cell of the ground adds to this estimate; one sharp spot at the picked cell " +
            "would be perfect.",
    lines: i => [parameters.get("id")[i], `resolution ${plain(values[i], 3)}`]
  });
  const scale = modelScale(values);
  map.update(stepsOfValues(values, scale), scale);
}

/** Colour steps and knownness of plain values. */
function stepsOfValues(values, scale) {
  const step = new Uint8Array(values.length), known = new Uint8Array(values.length);
  for (let j = 0; j < values.length; j++) {
    known[j] = Number.isFinite(values[j]) ? 1 : 0;
    if (known[j]) step[j] = scale.step(values[j]);
  }
  return {step, known};
}
