// Every reading with its redundancy, standardised residual and smallest detectable error; what was set aside
// and why.
function buildReliability() {
  const redundancy = observations.get("redundancy");
  if (redundancy && redundancy.some(Number.isFinite)) {
    const node = section("reliability", "Readings and how well each is controlled",
        "Redundancy 0: an error in this reading cannot be seen at all; 1: it is fully controlled by " +
            "the others. Below 0.1 a reading is practically uncontrolled. " +
            "Detectable is the smallest error that the test finds with its power; bias ratio is how " +
                "far such an error, unseen, moves the results against their standard deviation.");
    node.append(redundancySentence(redundancy));
    const get = name => observations.get(name), unit = valueUnit;
    const columns = [
      {name: "observation", left: true, text: i => get("id")[i]},
      numberColumn("value", unit, get("value"), 9), numberColumn("sigma", unit, get("sigma") || [], 3),
      numberColumn("residual", unit, get("residual"), 4), {
        name: "redundancy",
        text: i => Number.isFinite(redundancy[i]) ? redundancy[i].toFixed(3) : unknown,
        sort: i => redundancy[i]
      },
      {
        name: run.settings.variance === "estimated" ? "standardised (τ)" : "standardised (w)",
        text: i => two(get("standardized"), i),
        sort: i => get("standardized")[i]
      },
      numberColumn("detectable", unit, get("detectable") || [], 3),
      {name: "bias ratio", text: i => two(get("bias_ratio"), i), sort: i => get("bias_ratio")[i]},
      {name: "flag", left: true, text: i => flagWords(get("flag") ? get("flag")[i] : 0)}
    ];
    node.append(tableOf({
      caption: "Readings",
      file: "residuals.csv",
      count: observations.count,
      first: 100,
      search: i => get("id")[i],
      columns: get("sigma") ? columns : columns.filter(c => c.name !== "sigma"),
      rowClass: i => {
        const f = get("flag") ? get("flag")[i] : 0;
        return f & 12 ? "suspect" : f & 1 ? "uncontrolled" : null;
      }
    }));
  }
  buildOutliers();
}

function two(values, i) { return values && Number.isFinite(values[i]) ? fixedTo(values[i], 2) : unknown; }

function redundancySentence(redundancy) {
  const known = redundancy.filter(Number.isFinite), n = test => whole(known.filter(test).length);
  return element("p", {},
      `Of ${whole(known.length)} readings ${n(r => r < 1e-6)} have no redundancy, ${
          n(r => r >= 1e-6 && r < 0.1)} less than 0.1, ` +
          `${n(r => r >= 0.1 && r < 0.3)} from 0.1 to 0.3, ${
              n(r => r >= 0.3 && r < 0.7)} from 0.3 to 0.7 and ${n(r => r >= 0.7)} more.`);
}

function buildOutliers() {
  const steps = run.outliers;
  if (!steps) return;
  const node = section("outliers", "Search for outliers",
      "The reading with the largest standardised residual is set aside, the rest is solved again, and" +
          " so on; at the end each one is tried again.");
  if (!steps.length) {
    node.append(element("p", {}, "No reading was above the critical value; none was set aside."));
    return;
  }
  node.append(tableOf({
    caption: "Log of the search",
    file: "outliers.csv",
    count: steps.length,
    columns: [
      {name: "step", text: i => String(steps[i].step), sort: i => steps[i].step},
      {name: "observation", left: true, text: i => steps[i].observation},
      {name: "action", left: true, text: i => steps[i].action},
      numberColumn("statistic", "", steps.map(s => orNaN(s.statistic)), 4),
      numberColumn("critical", "", steps.map(s => orNaN(s.critical)), 4),
      {name: "reason", left: true, text: i => steps[i].reason}
    ]
  }));
}
