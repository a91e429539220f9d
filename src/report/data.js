// The run as the program wrote it: JSON, with long columns of numbers packed as base64.
//   {kind: "f64" | "f32" | "i32" | "u8", offset, data}   value = offset + stored
//   {kind: "u16", low, step, data}                       value = low + step (stored - 1); stored 0: unknown
const run = JSON.parse(document.getElementById("run-data").textContent);

function bytesOf(base64) {
  const text = atob(base64), bytes = new Uint8Array(text.length);
  for (let i = 0; i < text.length; i++) bytes[i] = text.charCodeAt(i);
  return bytes.buffer;
}

const columnTypes = {
  f64: Float64Array,
  f32: Float32Array,
  i32: Int32Array,
  u8: Uint8Array,
  u16: Uint16Array
};

/** A column as a typed array of numbers; null where the run has none. */
function column(packed) {
  if (!packed) return null;
  const stored = new columnTypes[packed.kind](bytesOf(packed.data));
  if (packed.kind === "u16")
    return Float64Array.from(stored, q => q ? packed.low + packed.step * (q - 1) : NaN);
  if (packed.offset) return Float64Array.from(stored, v => v + packed.offset);
  return stored;
}

/** All columns of a table, decoded when first asked for: columnsOf(run.parameters).get("sigma"). */
function columnsOf(table) {
  const ready = new Map();
  return {
    count: table ? table.count : 0,
    get(name) {
      if (!table) return null;
      if (!ready.has(name)) ready.set(name, Array.isArray(table[name]) ? table[name] : column(table[name]));
      return ready.get(name);
    },
  };
}

const parameters = columnsOf(run.parameters);
const observations = columnsOf(run.observations);
const sigmaKinds = ["none", "exact", "sampled", "upper bound", "fixed"];
const flagBits = [[1, "no redundancy"], [2, "weak"], [4, "suspect"], [8, "set aside"], [16, "inseparable"]];

function flagWords(bits) { return flagBits.filter(([bit]) => bits & bit).map(([, word]) => word).join("; "); }

/** The quantised model at damping k: {low, step, stored}; decoded once. Without a sweep the estimate is the
 *  only model. */
const modelCache = new Map();
function modelAt(k) {
  const packed = run.curve && run.curve.models ? run.curve.models[k] : null;
  if (!packed) return null;
  if (!modelCache.has(k)) {
    modelCache.set(k, {low: packed.low, step: packed.step, stored: new Uint16Array(bytesOf(packed.data))});
  }
  return modelCache.get(k);
}

/** Values of a quantised model, for charts that want numbers. */
function modelValues(model) {
  return Float64Array.from(model.stored, q => q ? model.low + model.step * (q - 1) : NaN);
}

/** The estimate as if it were a quantised model, so that one map draws both. */
function quantise(values) {
  let low = Infinity, high = -Infinity;
  for (const v of values)
    if (Number.isFinite(v)) {
      low = Math.min(low, v);
      high = Math.max(high, v);
    }
  if (!(low <= high)) {
    low = 0;
    high = 0;
  }
  const step = high > low ? (high - low) / 65534 : 0, stored = new Uint16Array(values.length);
  for (let i = 0; i < values.length; i++) {
    if (Number.isFinite(values[i])) stored[i] = 1 + (step ? Math.round((values[i] - low) / step) : 0);
  }
  return {low, step, stored};
}
