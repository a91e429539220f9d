// Which damping is looked at. Everything that follows it registers with onSelect; slider, clicks and arrow
// keys call select.
const curve = run.curve;
const dampings = curve ? curve.points.damping : [];
const followers = [];
const chosenIndex = curve ? curve.chosen : 0; // -1: no damping was picked
let selected = chosenIndex >= 0 ? chosenIndex : Math.floor(dampings.length / 2);
let sliderInput = null;

function onSelect(follow) { followers.push(follow); }

function select(index) {
  const next = Math.max(0, Math.min(dampings.length - 1, index));
  if (next === selected) return;
  selected = next;
  const start = performance.now();
  for (const follow of followers) follow(selected);
  document.documentElement.dataset.redraw = (performance.now() - start).toFixed(2);
  document.documentElement.dataset.selected = selected;
}

/** Choices that stand on damping k of the grid (nearest one). */
function choicesAt(k) {
  return curve.choices.filter(choice => choice.index === k).map(choice => choice.criterion);
}

function dampingWords(k) {
  const words = choicesAt(k);
  const here = k === chosenIndex ? ", the damping of this run's answer" : "";
  return `${plain(dampings[k], 4)}${words.length ? ` (${words.join(", ")})` : ""}${here}`;
}

function buildSlider(parent) {
  sliderInput = element("input", {
    type: "range",
    id: "damping-slider",
    min: 0,
    max: dampings.length - 1,
    step: 1,
    value: selected,
    "aria-label": "damping",
    oninput: event => select(Number(event.target.value)),
  });
  const output = element("output", { id: "damping-value", for: "damping-slider", "aria-live": "polite" });
  const back = chosenIndex < 0
      ? null
      : element("button", {type: "button", onclick: () => select(chosenIndex)}, "Back to the answer");
  const update = () => {
    sliderInput.value = selected;
    sliderInput.setAttribute("aria-valuetext", dampingWords(selected));
    output.textContent = `λ = ${dampingWords(selected)}`;
    if (back) back.disabled = selected === chosenIndex;
  };
  const marks = element("div", {class: "slider-marks", "aria-hidden": "true"},
      curve.choices.filter(c => c.index >= 0).map(c => element("span", {
        style: `left:${100 * c.index / Math.max(1, dampings.length - 1)}%`,
        title: c.criterion
      })));
  parent.append(element("div", {class: "slider"}, element("label", {for: "damping-slider"
  }, "Damping"), element("div", {class: "slider-track"}, sliderInput, marks), output, back || ""));
  onSelect(update);
  update();
  document.documentElement.dataset.selected = selected;
}

/** Left and right move the damping wherever the reader is, except while typing or in a control that uses
 *  the arrows. */
function listenToKeys() {
  document.addEventListener("keydown", event => {
    if (event.altKey || event.ctrlKey || event.metaKey || event.defaultPrevented) return;
    if (event.target.closest && event.target.closest("input, select, textarea, .scroll")) return;
    const move = {ArrowLeft: -1, ArrowRight: 1}[event.key];
    if (!move) return;
    event.preventDefault();
    select(selected + move);
  });
}
