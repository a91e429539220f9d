// Numbers as people read them. A result with its standard uncertainty is stated as the GUM (JCGM 100:2008,
// 7.2.6) asks: the uncertainty with two significant digits, the value to the same decimal place.
const unknown = "–";

function plain(value, digits = 4) {
  if (value === null || value === undefined || !Number.isFinite(value)) return unknown;
  if (value === 0) return "0";
  const size = Math.abs(value);
  const text = size >= 1e-4 && size < 1e7
      ? Number(value.toPrecision(digits)).toString()
      : value.toExponential(Math.max(0, digits - 1)).replace(/\.?0+e/, "e").replace("e+", "e");
  return text.replace("-", "−").replace("e-", "e−");
}

function orNaN(value) { return value === null || value === undefined ? NaN : value; }

function counted(count, word) { return `${whole(count)} ${word}${count === 1 ? "" : "s"}`; }

function whole(value) {
  return Number.isFinite(value) ? Math.round(value).toString().replace(/\B(?=(\d{3})+$)/g, "\u202f")
                                : unknown;
}

/** Decimals after the point that show `uncertainty` with two significant digits; negative: tens, hundreds. */
function decimalsFor(uncertainty) {
  if (!(uncertainty > 0) || !Number.isFinite(uncertainty)) return null;
  const decimals = 1 - Math.floor(Math.log10(uncertainty));
  const rounded = Number(uncertainty.toPrecision(2)); // 0.0996 becomes 0.10: one decimal less
  return rounded > 0 ? Math.min(decimals, 1 - Math.floor(Math.log10(rounded) + 1e-9)) : decimals;
}

function fixedTo(value, decimals) {
  if (!Number.isFinite(value)) return unknown;
  if (decimals === null) return plain(value, 6);
  if (decimals > 15) return plain(value, 6);
  if (decimals >= 0) return value.toFixed(decimals).replace("-", "−");
  const unit = Math.pow(10, -decimals);
  return (Math.round(value / unit) * unit).toFixed(0).replace("-", "−");
}

/** {value, u} as texts, rounded together. */
function stated(value, uncertainty) {
  const decimals = decimalsFor(uncertainty);
  if (decimals === null) return {value: plain(value, 7), u: uncertainty === 0 ? "0" : unknown};
  return {value: fixedTo(value, decimals), u: fixedTo(uncertainty, decimals)};
}

function withUnit(text, unit) { return unit ? `${text} ${unit}` : text; }

/** "name (unit)" for axes and table heads. */
function named(name, unit) { return unit ? `${name} (${unit})` : name; }

function percent(value) {
  if (!Number.isFinite(value)) return unknown;
  const nearlyAll = value > 0.99 && value < 1; // 99.98 %, not 100 %
  return `${
      plain(nearlyAll ? Math.floor(value * 1e6) / 1e4 : 100 * value,
          nearlyAll ? 4 + Math.min(3, Math.floor(-Math.log10(1 - value)) - 2) : 3)} %`;
}

function probabilityText(p) {
  if (!Number.isFinite(p)) return unknown;
  return p < 1e-4 ? "less than 0.0001" : p.toFixed(4);
}

function fileSize(bytes) { return `${whole(bytes)} bytes`; }

const valueUnit = run.units.value, parameterUnit = run.units.parameter;
