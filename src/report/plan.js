// The network as a plan: points, the lines between points that an observation joins, ellipses at a stated
// exaggeration.
const redundancyBands = [
  {below: 1e-6, name: "no redundancy", key: "none"},
  {below: 0.1, name: "below 0.1, uncontrolled", key: "weak"}, {below: 0.3, name: "0.1 to 0.3", key: "low"},
  {below: 0.7, name: "0.3 to 0.7", key: "good"}, {below: Infinity, name: "0.7 and more", key: "high"}
];

function buildPlan() {
  const plan = run.plan;
  if (!plan) return;
  const node = section("plan", "Network plan", null);
  const points = d3.zip(plan.name, column(plan.x), column(plan.y), column(plan.fixed))
                     .map(([name, x, y, fixed], i) => ({i, name, x, y, fixed}));
  const joins = joinsOf(plan, points), ellipses = regionsOf(plan, points);
  const flat = ellipses.filter(e => e.semi_major > 0), upright = ellipses.filter(e => e.vertical > 0);
  const fig = figure(node, {
    title: "Plan of the network.",
    wide: true,
    table: run.ellipses && run.ellipses.length ? ellipseTable() : null
  });
  const extent = [d3.extent(points, p => p.x), d3.extent(points, p => p.y)];
  const reach = Math.max(extent[0][1] - extent[0][0], extent[1][1] - extent[1][0]) || 1;
  const exaggeration = niceFactor(
      0.045 * reach / (d3.median(flat, e => e.semi_major) || d3.median(upright, e => e.vertical) || NaN));
  fig.say(planSentence(points, joins, flat, upright, exaggeration));
  responsive(fig.body,
      available => drawPlan(
          fig.body, Math.min(available, 860), {points, joins, flat, upright, extent, reach, exaggeration}));
  fig.body.after(planLegend(joins));
  if (run.ellipses && run.ellipses.length) node.append(tableOf(ellipseTable()));
}

/** Absolute ellipses of points on the plan; where there are none, the intervals of points with one
 *  parameter (heights) stand in. */
function regionsOf(plan, points) {
  const given = (run.ellipses || []).filter(e => e.to_point === null && points[e.plan] !== undefined);
  const sigma = parameters.get("sigma"), k = run.fit.multiplier || 1;
  if (given.length || !sigma) return given;
  return Array
      .from(column(plan.parameter), (j, i) => ({
        plan: i,
        point: points[i].name,
        to_point: null,
        semi_major: null,
        semi_minor: null,
        azimuth: null,
        vertical: j < 0 ? NaN : k * sigma[j],
        confidence: null,
        multiplier: k
      }))
      .filter(e => e.vertical > 0);
}

function joinsOf(plan, points) {
  const redundancy = observations.get("redundancy"), flag = observations.get("flag"), pairs = new Map();
  const a = column(plan.joins.a), b = column(plan.joins.b), row = column(plan.joins.observation);
  for (let k = 0; k < a.length; k++) {
    const key = a[k] < b[k] ? `${a[k]},${b[k]}` : `${b[k]},${a[k]}`;
    if (!pairs.has(key)) pairs.set(key, {a: points[a[k]], b: points[b[k]], rows: [], least: NaN, flag: 0});
    const pair = pairs.get(key), r = redundancy ? redundancy[row[k]] : NaN;
    pair.rows.push(row[k]);
    if (Number.isFinite(r)) pair.least = Number.isFinite(pair.least) ? Math.min(pair.least, r) : r;
    pair.flag |= flag ? flag[row[k]] : 0;
  }
  return [...pairs.values()].map(pair => Object.assign(pair, {
    band: pair.flag & 1               ? redundancyBands[0]
        : Number.isFinite(pair.least) ? redundancyBands.find(band => pair.least < band.below)
                                      : {name: "redundancy not known", key: "unknown"}
  }));
}

function niceFactor(wanted) {
  if (!Number.isFinite(wanted)) return 1;
  const power = Math.pow(10, Math.floor(Math.log10(wanted)));
  return power * [5, 2, 1].find(f => f * power <= wanted * 1.0001);
}

function planSentence(points, joins, flat, upright, exaggeration) {
  const suspects = d3.sum(joins, j => j.flag & 12 ? 1 : 0),
        none = joins.filter(j => j.band.key === "none").length;
  return `${counted(points.length, "point")}, ${
             counted(joins.length,
                 "line")}, each joining points that share an observation, drawn by the least redundancy on it. ` +
      (flat.length ? `Ellipses${confidenceWords(flat)}: ${exaggerationWords(exaggeration)}. ` : "") +
      (!flat.length && upright.length ? `Upright bars show the uncertainty of the points${
                                            confidenceWords(upright)}: ${exaggerationWords(exaggeration)}. `
                                      : "") +
      (none ? `Without redundancy, so that an error cannot be seen: ${counted(none, "line")} (dotted). `
            : "") +
      (suspects ? `With a suspect reading or one set aside: ${
                      counted(suspects, "line")} (cross in the middle). `
                : "");
}

/** Coordinates that are estimated have the unit of the uncertainties; others may not. */
function exaggerationWords(factor) {
  if (run.plan.same_unit) return `drawn ${plain(factor, 3)} times too large`;
  return `1 ${run.units.ellipse || "unit"} of uncertainty is drawn as long as ${
      factor >= 1 ? whole(factor) : plain(factor, 3)} units of the x axis`;
}

function confidenceWords(regions) {
  const words = new Set(regions.map(e => e.confidence !== null ? `${percent(e.confidence)} confidence`
          : e.multiplier > 1 ? `${plain(e.multiplier, 3)} standard deviations each way`
                             : "standard"));
  return ` (${[...words].join(" and ")})`;
}

function planLegend(joins) {
  const keys = new Set(joins.map(j => j.band.key));
  const list = element("ul", {class: "plan-legend"});
  for (const band of redundancyBands.concat({name: "redundancy not known", key: "unknown"})) {
    if (!keys.has(band.key)) continue;
    const item = element("li");
    d3.select(item)
        .append("svg")
        .attr("width", 34)
        .attr("height", 10)
        .attr("aria-hidden", "true")
        .append("line")
        .attr("class", `join ${band.key}`)
        .attr("x1", 1)
        .attr("x2", 33)
        .attr("y1", 5)
        .attr("y2", 5);
    item.append(band.name);
    list.append(item);
  }
  return list;
}

function drawPlan(body, width, {points, joins, flat, upright, extent, reach, exaggeration}) {
  const pad = 0.08 * reach;
  let [[x0, x1], [y0, y1]] = extent.map(([a, b]) => [a - pad, b + pad]);
  const margin = {top: 14, right: 18, bottom: 44, left: 74}, inner = width - margin.left - margin.right;
  const tall = Math.max(160, Math.min(inner * (y1 - y0) / (x1 - x0), 1.1 * inner));
  const perUnit = Math.min(inner / (x1 - x0), tall / (y1 - y0)), spare = inner / perUnit - (x1 - x0);
  // a long, narrow levelling line is stretched so that its lines can be told apart; never where ellipses have
  // a shape
  const narrow = !flat.length && y1 - y0 < 0.4 * (x1 - x0), stretched = narrow ? ", stretched" : "";
  if (narrow)
    [y0, y1] = d3.extent(points, p => p.y).map((v, i, [a, b]) => v + (i ? 0.35 : -0.35) * (b - a || 1));
  const height = narrow ? 260 : tall, spareUp = narrow ? 0 : height / perUnit - (y1 - y0);
  const frame = chartFrame(body, {
    width,
    height: height + margin.top + margin.bottom,
    margin,
    x: {
      scale: d3.scaleLinear().domain([x0 - spare / 2, x1 + spare / 2]),
      name: named(run.plan.x_name, run.units.coordinate)
    },
    y: {
      scale: d3.scaleLinear().domain([y0 - spareUp / 2, y1 + spareUp / 2]),
      name: named(run.plan.y_name, run.units.coordinate) + stretched
    },
    label:
        "Plan of the network: points, observations between them, and their error ellipses; the tables" +
            " give the numbers."
  });
  drawJoins(frame, joins);
  drawRegions(frame, points, flat, upright, exaggeration * perUnit);
  drawStations(frame, points, flat, upright);
}

function drawJoins({g, x, y}, joins) {
  const line = (selection, extra) => selection.attr("x1", j => x(j.a.x))
                                         .attr("y1", j => y(j.a.y))
                                         .attr("x2", j => x(j.b.x))
                                         .attr("y2", j => y(j.b.y))
                                         .attr("class", extra);
  line(g.append("g").selectAll("line").data(joins).enter().append("line"), j => `join ${j.band.key}`);
  hoverOn(line(g.append("g").selectAll("line").data(joins).enter().append("line"), "join-catch"),
      j => [`${j.a.name} – ${j.b.name}`,
          j.band.name.startsWith("red") || j.band.key === "none" ? j.band.name
                                                                 : `least redundancy ${plain(j.least, 3)}`,
          ...j.rows.slice(0, 8).map(i => `${observations.get("id")[i]}: residual ${
                                        withUnit(plain(observations.get("residual")[i], 3), valueUnit)}`)]);
  g.append("g")
      .selectAll("path")
      .data(joins.filter(j => j.flag & 12))
      .enter()
      .append("path")
      .attr("class", "suspect-cross")
      .attr("d", "M-5,-5L5,5M-5,5L5,-5")
      .attr("transform", j => `translate(${(x(j.a.x) + x(j.b.x)) / 2},${(y(j.a.y) + y(j.b.y)) / 2})`);
}

/** perUnit: pixels for one unit of uncertainty. */
function drawRegions({g, x, y, inner}, points, flat, upright, perUnit) {
  g.append("g")
      .selectAll("ellipse")
      .data(flat)
      .enter()
      .append("ellipse")
      .attr("class", "region")
      .attr("rx", e => e.semi_minor * perUnit)
      .attr("ry", e => e.semi_major * perUnit)
      .attr("transform",
          e => `translate(${x(points[e.plan].x)},${y(points[e.plan].y)}) rotate(${
              e.azimuth === null ? 0 : e.azimuth})`);
  if (!flat.length) {
    g.append("g")
        .selectAll("path")
        .data(upright)
        .enter()
        .append("path")
        .attr("class", "region")
        .attr("d",
            e => {
              const half = Math.max(1, e.vertical * perUnit);
              return `M-3,${- half}H3M0,${- half}V${half}M-3,${half}H3`;
            })
        .attr("transform", e => `translate(${x(points[e.plan].x)},${y(points[e.plan].y)})`);
  }
  if (flat.length || upright.length) drawUncertaintyBar(g, inner, perUnit);
}

function drawStations({g, x, y}, points, flat, upright) {
  const marks =
      g.append("g")
          .selectAll("path")
          .data(points)
          .enter()
          .append("path")
          .attr("class", p => p.fixed ? "station fixed" : "station")
          .attr("d",
              p => d3.symbol().type(p.fixed ? d3.symbolTriangle : d3.symbolCircle).size(p.fixed ? 90 : 42)())
          .attr("transform", p => `translate(${x(p.x)},${y(p.y)})`);
  const byPoint = d3.nest().key(e => e.plan).map(flat.concat(upright.filter(e => !(e.semi_major > 0))));
  hoverOn(marks, p => [p.name, p.fixed ? "held fixed" : null, ...(byPoint.get(p.i) || []).map(ellipseWords)]);
  if (points.length <= 120) {
    g.append("g")
        .selectAll("text")
        .data(points)
        .enter()
        .append("text")
        .attr("class", "station-name")
        .attr("x", p => x(p.x) + 7)
        .attr("y", p => y(p.y) - 6)
        .text(p => shorten(p.name, 16));
  }
}

/** How long a round uncertainty is on the plan. */
function drawUncertaintyBar(g, inner, perUnit) {
  const length = niceFactor(90 / perUnit), pixels = length * perUnit;
  const bar =
      g.append("g")
          .attr("class", "uncertainty-bar")
          .attr("transform",
              `translate(${inner.width - pixels / 2 - Math.max(pixels / 2, 70)},${inner.height - 12})`);
  bar.append("path").attr("d", `M0,-4V4M0,0H${pixels}M${pixels},-4V4`);
  bar.append("text")
      .attr("x", pixels / 2)
      .attr("y", -7)
      .attr("text-anchor", "middle")
      .text(`uncertainty ${withUnit(plain(length, 2), run.units.ellipse)}`);
}

function ellipseWords(e) {
  const unit = run.units.ellipse;
  return e.semi_major > 0
      ? `${withUnit(plain(e.semi_major, 2), unit)} by ${withUnit(plain(e.semi_minor, 2), unit)}${
            e.azimuth === null ? "" : `, azimuth ${e.azimuth.toFixed(0)}°`}`
                                    : `± ${withUnit(plain(e.vertical, 2), unit)}`;
}

function ellipseTable() {
  const list = run.ellipses, unit = run.units.ellipse;
  return {
    caption: "Confidence regions of points and between points",
    file: "ellipses.csv",
    count: list.length,
    first: 60,
    search: i => list[i].point,
    columns: [
      {name: "point", left: true, text: i => list[i].point},
      {name: "to", left: true, text: i => list[i].to_point || ""},
      numberColumn("semi-major", unit, list.map(e => orNaN(e.semi_major)), 2),
      numberColumn("semi-minor", unit, list.map(e => orNaN(e.semi_minor)), 2), {
        name: "azimuth",
        unit: "°",
        text: i => list[i].azimuth === null ? "" : list[i].azimuth.toFixed(0),
        sort: i => orNaN(list[i].azimuth)
      },
      numberColumn("vertical", unit, list.map(e => orNaN(e.vertical)), 2),
      {name: "confidence", text: i => list[i].confidence === null ? "standard" : percent(list[i].confidence)},
      numberColumn("multiplier", "", list.map(e => orNaN(e.multiplier)), 4)
    ]
  };
}
