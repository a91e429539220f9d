// The part that follows the slider: model, histogram, figures of merit and the command that solves at that
// damping.
function figuresAt(k) {
  const p = curve.points, m = curve.used;
  return [
    ["damping", "damping λ", withUnit(plain(p.damping[k], 5), run.units.damping)],
    ["misfit", "misfit", plain(p.misfit[k], 5)],
    ["size", "size", withUnit(plain(p.size[k], 5), run.units.size)],
    ["chi-square", "χ²/m", plain(p.chi_square[k] / m, 4)],
    ["rms", "RMS residual", withUnit(plain(p.rms[k], 4), valueUnit)],
    ["reduction", "variance reduction", percent(orNaN(p.variance_reduction[k]))],
    ["effective", "effective parameters", plain(p.effective_parameters[k], 5)],
    [
      "bound", "error bound of the model",
      p.error_bound[k] === 0 ? "direct solution" : plain(p.error_bound[k], 2)
    ],
  ];
}

/** A word for the shell, quoted where it needs it (the prefix comes quoted from the program). */
function commandAt(k) { return `${run.solve_prefix} --damping ${dampings[k]}`; }

function buildFigures(parent) {
  const list = element("dl", {class: "facts live", "aria-live": "polite"});
  const command = element("code", {id: "solve-command"});
  const warning = element("p", {class: "caution", role: "note", hidden: true});
  const copy =
      element("button", {type: "button", onclick: () => copyText(command.textContent, copy)}, "Copy");
  parent.append(
      list, warning, element("p", {class: "command"}, "Solve at this damping: ", command, " ", copy));
  const update = k => {
    list.replaceChildren(...figuresAt(k).map(([key, name,
      text]) => element("div", {}, element("dt", {}, name), element("dd", {id: `figure-${key}`}, text))));
    command.textContent = commandAt(k);
    warning.hidden = Boolean(curve.points.converged[k]);
    warning.textContent = warning.hidden
        ? ""
        : "At this damping the model is not converged at the wanted tolerance: treat map and figures as" +
            " a sketch.";
  };
  onSelect(update);
  update(selected);
}

function copyText(text, button) {
  const done = () => {
    button.textContent = "Copied";
    setTimeout(() => { button.textContent = "Copy"; }, 1500);
  };
  const area = element("textarea", {style: "position:fixed;opacity:0"});
  area.value = text;
  document.body.append(area);
  area.select();
  if (document.execCommand("copy")) done();
  area.remove();
}

/** The model of each damping, coloured by the range of the answer or by its own. */
function buildExplorer() {
  const node = section("explore", "The model at each damping",
      "Move the slider: map, histogram, figures and command follow. Structure that stays over a wide " +
          "range of dampings is asked for by the data.");
  const bar = element("div", {class: "sticky"});
  node.append(bar);
  buildSlider(bar);
  buildFigures(node);
  const views = element("div", {class: "views"});
  node.append(views);
  if (curve.models)
    buildModelView(views);
  else
    views.append(element("p", {},
        "The models at the other dampings were not kept, so only the answer is drawn, further below."));
  const side = element("div");
  views.append(side);
  if (curve.histogram) {
    const update = buildHistogram(
        side, curve.histogram, countsAt(selected), () => `Residuals at λ = ${plain(dampings[selected], 3)}.`);
    onSelect(k => update(countsAt(k)));
  } else
    side.append(element("p", {}, curve.histogram_missing));
  buildCurveInset(side);
}

function buildModelView(parent) {
  if (!isMap) {
    const update = buildEstimates(parent, {
      title: "Model.",
      follows: true,
      say: "Estimates at the damping of the slider; the bars belong to the answer only."
    });
    onSelect(k => update(k === chosenIndex ? parameters.get("estimate") : modelValues(modelAt(k)),
                 k === chosenIndex));
    return;
  }
  const answerScale = modelScale(modelValues(modelAt(selected)));
  let own = false;
  const map = buildMap(parent, {
    title: "Model.",
    key: "model",
    name: "estimate",
    unit: parameterUnit,
    follows: true,
    table: {
      caption: "The model at some dampings",
      count: parameters.count,
      first: 60,
      file: "models.csv",
      columns: [{name: "parameter", left: true, text: j => parameters.get("id")[j]}, ...someModels()]
    }
  });
  map.fig.node.querySelector(".map-bar")
      .append(element("label", {}, element("input", {
        type: "checkbox",
        onchange: event => {
          own = event.target.checked;
          update(selected);
        }
      }),
          " colours over the range of this damping (else of the answer)"));
  const update = k => {
    const model = modelAt(k), scale = own ? modelScale(modelValues(model)) : answerScale;
    map.fig.node.querySelector(".figure-title").textContent = `Model at λ = ${plain(dampings[k], 3)}.`;
    map.update(stepsOfModel(model, scale), scale, modelSentence(model) + coverSentence());
  };
  onSelect(update);
  update(selected);
}

/** Colour steps of a quantised model through a table of its 65536 values: no arithmetic a cell. */
const stepTable = new Uint8Array(65536);
function stepsOfModel(model, scale) {
  const step = new Uint8Array(model.stored.length), span = (colourSteps - 1) / (scale.high - scale.low);
  const a = (model.low - model.step - scale.low) * span + 0.5, b = model.step * span;
  for (let q = 0; q < 65536; q++) stepTable[q] = Math.max(0, Math.min(colourSteps - 1, a + b * q));
  for (let j = 0; j < step.length; j++) step[j] = stepTable[model.stored[j]];
  return {step, known: model.stored};
}

/** Columns of the model at five dampings over the range, this run's answer among them. */
function someModels() {
  const last = dampings.length - 1,
        picks = new Set(
            [0, Math.round(last / 4), Math.round(last / 2), Math.round(3 * last / 4), last, selected]);
  return [...picks].sort((a, b) => a - b).map(k => {
    const value = j => {
      const model = modelAt(k);
      return model.stored[j] ? model.low + model.step * (model.stored[j] - 1) : NaN;
    };
    return {
      name: `λ = ${plain(dampings[k], 3)}`,
      unit: parameterUnit,
      text: j => plain(value(j), 4),
      sort: value
    };
  });
}

function modelSentence(model) {
  let low = 65536, high = 0;
  for (const q of model.stored) {
    if (q && q < low) low = q;
    if (q > high) high = q;
  }
  const value = q => plain(model.low + model.step * (q - 1), 4);
  return high
      ? `Values from ${value(low)} to ${
            withUnit(value(high), parameterUnit)}; colours beyond the ends of the scale are cut at its ends.`
      : "No values.";
}
