// Where the cells lie. Centres that fill a grid (of any spacing) give cells at their size, their edges
// halfway between neighbouring centres; other centres are drawn as discs. Three varying coordinates give
// slices.
const axisNames = ["x", "y", "z"];

/** Distinct values with a tolerance of a millionth of the range, and the number of each value among them. */
function distinct(values) {
  const sorted = Float64Array.from(values).sort(), tolerance = 1e-6 * (sorted[sorted.length - 1] - sorted[0]);
  const levels = [];
  for (const v of sorted)
    if (!levels.length || v - levels[levels.length - 1] > tolerance) levels.push(v);
  const level = Int32Array.from(values, v => {
    const right = d3.bisectLeft(levels, v), left = right - 1;
    if (right >= levels.length) return left;
    return left >= 0 && v - levels[left] < levels[right] - v ? left : right;
  });
  return {levels, level};
}

function edgesOf(levels) {
  if (levels.length === 1) return [levels[0] - 0.5, levels[0] + 0.5];
  const edges = levels.slice(1).map((v, i) => (v + levels[i]) / 2);
  return [2 * levels[0] - edges[0], ...edges, 2 * levels[levels.length - 1] - edges[edges.length - 1]];
}

/** {kind: "grid" | "discs" | "line" | "none", across, up, slice, cells: parameter numbers, slices: [{at, cells}]}.
 *  Parameters without all coordinates are left out (`without` says how many). */
function cellLayout() {
  if (run.map === "network") return {kind: "none"};
  const given = axisNames.map(name => parameters.get(name));
  const present = given.map((values, a) => values ? a : -1).filter(a => a >= 0);
  if (!present.length) return {kind: "none"};
  const cells = d3.range(parameters.count).filter(j => present.every(a => Number.isFinite(given[a][j])));
  if (cells.length < 2) return {kind: "none"};
  const varying =
      present.map(a => Object.assign({axis: a, name: axisNames[a]}, distinct(cells.map(j => given[a][j]))))
          .filter(d => d.levels.length > 1);
  const layout = {cells, without: parameters.count - cells.length};
  if (varying.length === 0) return {kind: "none"};
  if (varying.length === 1)
    return Object.assign(
        layout, {kind: "line", across: varying[0], values: cells.map(j => given[varying[0].axis][j])});
  let slice = null, plane = varying;
  if (varying.length === 3) {
    slice = varying.reduce((best, d) => d.levels.length < best.levels.length ||
                (d.levels.length === best.levels.length && d.axis === 2)
            ? d
            : best);
    plane = varying.filter(d => d !== slice);
  }
  const [across, up] = plane,
                 places = across.levels.length * up.levels.length * (slice ? slice.levels.length : 1);
  Object.assign(layout, {kind: places <= 8 * cells.length + 64 ? "grid" : "discs", across, up, slice});
  if (layout.kind === "discs" && slice && slice.levels.length > 64) layout.kind = "none";
  for (const d of plane) {
    d.value = cells.map(j => given[d.axis][j]);
    d.edges = edgesOf(d.levels);
  }
  layout.slices = slice
      ? slice.levels.map((at, s) => ({at, members: d3.range(cells.length).filter(i => slice.level[i] === s)}))
      : [{at: null, members: d3.range(cells.length)}];
  if (layout.kind === "discs") layout.radius = discRadius(layout);
  return layout;
}

/** Half the median distance to the nearest neighbour within the plane. */
function discRadius({across, up, slices}) {
  const members = slices[0].members, distances = [];
  const tree = d3.quadtree(members, i => across.value[i], i => up.value[i]);
  const step = Math.max(1, Math.floor(members.length / 400));
  for (let n = 0; n < members.length; n += step) {
    const i = members[n];
    tree.remove(i);
    const other = tree.find(across.value[i], up.value[i]);
    tree.add(i);
    if (other !== undefined)
      distances.push(Math.hypot(across.value[i] - across.value[other], up.value[i] - up.value[other]));
  }
  return (d3.median(distances) || 1) / 2;
}

function planeExtent(layout) {
  if (layout.kind === "grid") return [d3.extent(layout.across.edges), d3.extent(layout.up.edges)];
  const pad = 1.5 * layout.radius;
  return [layout.across, layout.up].map(d => {
    const [a, b] = d3.extent(d.value);
    return [a - pad, b + pad];
  });
}

/** For every pixel of a width x height picture the number of the parameter that it shows, -1 none. */
function pixelMap(layout, members, width, height, x, y) {
  const map = new Int32Array(width * height).fill(-1), {across, up, cells} = layout;
  if (layout.kind === "grid") {
    const nx = across.levels.length, at = new Int32Array(nx * up.levels.length).fill(-1);
    for (const i of members) at[across.level[i] + nx * up.level[i]] = cells[i];
    const columnAt = d3.range(width).map(p => d3.bisectRight(across.edges, x.invert(p + 0.5)) - 1);
    for (let q = 0; q < height; q++) {
      const row = d3.bisectRight(up.edges, y.invert(q + 0.5)) - 1;
      if (row < 0 || row >= up.levels.length) continue;
      for (let p = 0; p < width; p++) {
        if (columnAt[p] >= 0 && columnAt[p] < nx) map[p + width * q] = at[columnAt[p] + nx * row];
      }
    }
    return map;
  }
  const rx = Math.max(2, Math.abs(x(layout.radius) - x(0))),
        ry = Math.max(2, Math.abs(y(layout.radius) - y(0)));
  for (const i of members) {
    const cx = x(across.value[i]), cy = y(up.value[i]);
    for (let q = Math.max(0, Math.floor(cy - ry)); q <= Math.min(height - 1, cy + ry); q++) {
      for (let p = Math.max(0, Math.floor(cx - rx)); p <= Math.min(width - 1, cx + rx); p++) {
        if (((p + 0.5 - cx) / rx) ** 2 + ((q + 0.5 - cy) / ry) ** 2 <= 1) map[p + width * q] = cells[i];
      }
    }
  }
  return map;
}
