// The global test, its numbers, and what to do about it; critical values of the single tests.
function buildTest() {
  const fit = run.fit;
  if (!run.settings.certainty) return;
  const node = section("test", "Does it fit?", null);
  for (const text of run.test_words) node.append(element("p", {}, text));
  const range = fit.applies && fit.lower !== null ? `${plain(fit.lower, 5)} to ${plain(fit.upper, 5)}` : null;
  node.append(definitionList([
    ["χ²", plain(fit.chi_square, 5)],
    ["degrees of freedom", plain(fit.degrees_of_freedom, 6)],
    [
      curve || run.settings.damping > 0 ? "variance factor (depends on the damping)" : "variance factor s₀²",
      plain(fit.variance_factor, 3)
    ],
    ["acceptance range of χ²", range],
    ["probability (two-sided)", fit.applies ? probabilityText(orNaN(fit.probability)) : null],
    ["level of the test", fit.applies && fit.alpha !== null ? plain(fit.alpha, 3) : null],
    ["critical value, single test", fit.critical !== null ? fit.critical.toFixed(2) : null],
    ["critical value, whole family", fit.family_critical !== null ? fit.family_critical.toFixed(2) : null],
    ["δ₀ of detectable errors", fit.delta0 !== null ? plain(fit.delta0, 4) : null],
  ]));
  if (range) drawTest(node, fit);
}

function drawTest(node, fit) {
  const fig = figure(node, {
    title: "χ² and its acceptance range.",
    say: `χ² = ${plain(fit.chi_square, 5)} ${fit.rejected ? "lies outside" : "lies inside"} the range from ` +
        `${plain(fit.lower, 5)} to ${plain(fit.upper, 5)} that ${
            percent(1 - fit.alpha)} of correct adjustments keep to.`
  });
  responsive(fig.body, available => {
    const width = Math.min(available, 620);
    const frame = chartFrame(fig.body, {
      width,
      height: 90,
      margin: {left: 24, top: 20},
      label: "chi-square and its acceptance range",
      x: {
        scale: linearScale(
            Math.min(fit.lower, fit.chi_square) * 0.8, Math.max(fit.upper, fit.chi_square) * 1.05, 0),
        name: "χ²"
      },
      y: {scale: d3.scaleLinear().domain([0, 1]), name: "", values: []}
    });
    frame.g.insert("rect", ":first-child")
        .attr("class", "range")
        .attr("x", frame.x(fit.lower))
        .attr("width", frame.x(fit.upper) - frame.x(fit.lower))
        .attr("height", frame.inner.height);
    frame.g.append("line")
        .attr("class", fit.rejected ? "chosen-rule alarm" : "chosen-rule")
        .attr("x1", frame.x(fit.chi_square))
        .attr("x2", frame.x(fit.chi_square))
        .attr("y1", -6)
        .attr("y2", frame.inner.height);
  });
}
