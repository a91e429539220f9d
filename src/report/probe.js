// Recovery tests: what was put in and what came out, side by side on one colour scale; the spread of noise
// trials.
//   run.probe: {amplitude, noisy, trials, bootstrap, spread, patterns: [{name, size, overall_amplitude,
// overall_correlation,
//               input, recovered, amplitude, correlation (columns)}]}
function buildProbe() {
  const probe = run.probe;
  if (!probe) return;
  const node = section("probe", "What can these data resolve?",
      "A known pattern is put through the same observations, weights and damping. Where it does not " +
          "come back, the data cannot see structure of that " +
          "size. That small pieces come back does not mean that large ones do, and the test says " +
              "nothing of errors in the equations themselves.");
  if (probe.patterns.length) {
    node.append(element("p", {},
        probe.noisy ? "Noise of the stated standard deviations was added to the data of the patterns."
                    : "No noise was added to the data of the patterns: what comes back is the best case."));
    node.append(tableOf({
      caption: "Patterns",
      count: probe.patterns.length,
      columns: [
        {name: "pattern", left: true, text: i => probe.patterns[i].name},
        {name: "size", text: i => plain(probe.patterns[i].size, 3)},
        {name: "amplitude that came back", text: i => percent(orNaN(probe.patterns[i].overall_amplitude))},
        {name: "correlation", text: i => fixedTo(orNaN(probe.patterns[i].overall_correlation), 2)}
      ]
    }));
  }
  for (const pattern of probe.patterns) buildPattern(node, pattern);
  if (probe.spread) buildSpread(node, probe);
}

function buildPattern(node, pattern) {
  const input = column(pattern.input), recovered = column(pattern.recovered),
        amplitude = column(pattern.amplitude);
  const correlation = column(pattern.correlation);
  node.append(element("h3", {}, pattern.name));
  const table = probeTable(input, recovered, amplitude, correlation);
  if (!isMap) {
    node.append(tableOf(table));
    return;
  }
  const views = element("div", {class: "views"}), scale = modelScale(input);
  node.append(views);
  const lines = j => [parameters.get("id")[j], `put in ${withUnit(plain(input[j], 3), parameterUnit)}`,
      `came out ${withUnit(plain(recovered[j], 3), parameterUnit)}`,
      amplitude ? `amplitude ${percent(amplitude[j])}` : null,
      correlation ? `correlation ${fixedTo(correlation[j], 2)}` : null];
  for (const [title, values, cover] of [["Put in.", input, false], ["Came out.", recovered, true]]) {
    const map =
        buildMap(views, {title, key: "probe", name: "pattern", unit: parameterUnit, cover, lines, table});
    map.update(stepsOfValues(values, scale), scale,
        cover ? `Same colours as the pattern put in.${coverSentence()}` : "The true pattern of the test.");
  }
  if (amplitude) {
    const map = buildMap(views, {
      title: "Amplitude that came back.",
      key: "amplitude",
      name: "share that came back",
      unit: "",
      lines,
      table
    });
    const share = colourScale("count", 0, 1);
    map.update(stepsOfValues(amplitude, share), share,
        `Over the neighbourhood of each cell; 1: all of it came back.${coverSentence()}`);
  }
}

function buildSpread(node, probe) {
  const spread = column(probe.spread), sorted = Float64Array.from(spread.filter(Number.isFinite)).sort();
  const told = `From ${probe.trials} trials with ${
                   probe.bootstrap
                       ? "resampled residuals"
                       : "drawn noise"}; relative error about ${percent(1 / Math.sqrt(2 * probe.trials))}. ` +
      `Median ${withUnit(plain(d3.quantile(sorted, 0.5), 2), parameterUnit)}, largest ${
          withUnit(plain(sorted[sorted.length - 1], 2), parameterUnit)}. ` +
      "It is the noise carried through the damped solution, without the bias of the damping.";
  const table = {
    caption: "Spread of the trials",
    count: parameters.count,
    first: 60,
    file: "spread.csv",
    columns: [
      {name: "parameter", left: true, text: j => parameters.get("id")[j]},
      numberColumn("spread", parameterUnit, spread, 2)
    ]
  };
  node.append(element("h3", {}, "Noise trials"));
  if (!isMap) {
    node.append(element("p", {}, told), tableOf(table));
    return;
  }
  const scale = amount(spread);
  const map = buildMap(node, {
    title: "Spread of the trials.",
    key: "spread",
    name: "spread",
    unit: parameterUnit,
    table,
    lines: j => [parameters.get("id")[j], `spread ${withUnit(plain(spread[j], 2), parameterUnit)}`]
  });
  map.update(stepsOfValues(spread, scale), scale, told + coverSentence());
}

function probeTable(input, recovered, amplitude, correlation) {
  const columns = [
    {name: "parameter", left: true, text: j => parameters.get("id")[j]},
    numberColumn("put in", parameterUnit, input), numberColumn("came out", parameterUnit, recovered)
  ];
  if (amplitude) columns.push(numberColumn("amplitude", "", amplitude, 3));
  if (correlation) columns.push(numberColumn("correlation", "", correlation, 3));
  return {caption: "Put in and came out", count: parameters.count, first: 60, file: "recovery.csv", columns};
}
