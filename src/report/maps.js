// The answer as maps: estimate, standard deviation, resolution; hits and coverage.
function buildModel() {
  const node = section("model", curve ? "The answer" : "Estimates", answerLead());
  const box = element("div", {class: "picked", hidden: true});
  if (isMap) {
    if (layout.without)
      node.append(element(
          "p", {}, `${whole(layout.without)} parameters have no coordinates and stand only in the table.`));
    const views = element("div", {class: "views"});
    node.append(views);
    buildValueMap(views, "estimate",
        {title: "Estimate.", name: "estimate", unit: parameterUnit, key: "estimate"}, modelScale);
    buildValueMap(views, "sigma", {
      title: "Standard deviation.",
      name: "standard deviation",
      unit: parameterUnit,
      key: "sigma",
      more: run.settings.damping > 0
          ? "Small values in places with few hits mean that the damping decides there, not that the data do."
          : ""
    },
        amount);
    buildValueMap(views, "resolution",
        {title: "Resolution (diagonal).", name: "resolution", unit: "", key: "resolution"},
        values => colourScale("count", 0, Math.min(1, Math.ceil(10 * sturdyRange(values)[1]) / 10)));
  } else if (parameters.count) {
    const sigma = parameters.get("sigma"), [low, high] = d3.extent(parameters.get("estimate"));
    const visible = !sigma || d3.max(sigma.filter(Number.isFinite)) > 0.004 * (high - low);
    const k = run.fit.multiplier;
    if (visible)
      buildEstimates(node, {
        title: "Estimates with error bars.",
        say: sigma ? `The bars are the intervals of parameters.csv (${
                         plain(k || 1, 4)} standard deviations each way).`
                   : "No standard deviations were computed."
      });
    else
      buildSigmas(node);
  }
  node.append(box);
  picked.box = box;
  buildEstimateTable(node);
}

function answerLead() {
  const fit = run.fit, parts = [];
  if (Number.isFinite(fit.multiplier)) {
    parts.push(`Intervals are estimate ± k u with k = ${plain(fit.multiplier, 4)}` +
        (Number.isFinite(fit.degrees_of_freedom) && fit.degrees_of_freedom !== null
                ? `, ${plain(fit.degrees_of_freedom, 5)} degrees of freedom`
                : "") +
        `, variance factor ${run.settings.variance}${
            run.settings.variance === "estimated"
                ? ` (standard uncertainties multiplied by s₀ = ${plain(Math.sqrt(fit.variance_factor), 3)})`
                : " (1)"}.`);
  }
  if (run.parameters && run.parameters.sigma)
    parts.push(
        "Standard uncertainties are given with two significant digits, estimates to the same place; " +
            "full digits stand in parameters.csv.");
  if (run.settings.sigma_meaning) parts.push(run.settings.sigma_meaning);
  return parts.join(" ");
}

function amount(values) { return colourScale("amount", ...sturdyRange(values)); }

function count(values) { return colourScale("count", 0, sturdyRange(values)[1]); }

function buildValueMap(parent, key, spec, scaleOf) {
  const values = parameters.get(key);
  if (!values || !values.some(Number.isFinite)) return;
  const scale = scaleOf(values), [low, high] = d3.extent(values.filter(Number.isFinite));
  const map = buildMap(parent,
      Object.assign({
        table: {
          caption: spec.title,
          count: parameters.count,
          first: 60,
          file: "parameters.csv",
          columns: [
            {name: "parameter", left: true, text: j => parameters.get("id")[j]},
            numberColumn(spec.name, spec.unit, values, 6)
          ]
        }
      },
          spec));
  map.update(stepsOfValues(values, scale), scale,
      `From ${plain(low, 3)} to ${withUnit(plain(high, 3), spec.unit)}.` +
          (spec.more ? ` ${spec.more}` : "") + (spec.cover === false ? "" : coverSentence()));
}

function buildCover() {
  const hits = parameters.get("hits");
  if (!hits) return;
  const node = section("coverage", "Hits and coverage",
      "Hits count the observations that touch a parameter; coverage is the sum of their absolute " +
          "coefficients, for rays their length in the cell.");
  const sorted = Float64Array.from(hits).sort();
  const thin = state => whole(thinCover.filter(s => s === state).length);
  node.append(element("p", {},
      `Hits: smallest ${whole(sorted[0])}, median ${whole(d3.quantile(sorted, 0.5))}, largest ${
          whole(sorted[sorted.length - 1])}.` +
          (run.cover_rule ? ` ${thin(blank)} parameters are touched by no observation, ${
                                thin(hatched)} by too few to say much.`
                          : "")));
  if (isMap) {
    const views = element("div", {class: "views"});
    node.append(views);
    buildValueMap(
        views, "hits", {title: "Hits.", name: "hits (count)", unit: "", cover: false, key: "hits"}, count);
    buildValueMap(views, "coverage",
        {title: "Coverage.", name: "coverage", unit: run.units.coverage, cover: false, key: "coverage"},
        count);
  }
  const weakest =
      d3.range(parameters.count)
          .sort((a, b) => hits[a] - hits[b] || parameters.get("coverage")[a] - parameters.get("coverage")[b])
          .slice(0, 10);
  node.append(tableOf({
    caption: "The ten with the fewest hits",
    count: weakest.length,
    columns: [
      {name: "parameter", left: true, text: i => parameters.get("id")[weakest[i]]},
      {name: "hits", text: i => whole(hits[weakest[i]])}, {
        name: "coverage",
        unit: run.units.coverage,
        text: i => plain(parameters.get("coverage")[weakest[i]], 4)
      }
    ]
  }));
}
