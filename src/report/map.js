// A map of one number a cell. On the screen a picture made pixel by pixel from a table "pixel -> cell", so
// that 100 000 cells redraw in milliseconds; on paper and in the saved file the same cells as vector shapes.
const layout = cellLayout();
const hatched = 1, blank = 2;
// z that starts at a surface 0 and grows is taken for a depth and drawn downwards; a button turns it.
let zDown = layout.up !== undefined && layout.up.axis === 2 && layout.up.levels[0] >= 0 &&
    layout.up.levels[0] <= 1.01 * (layout.up.levels[1] - layout.up.levels[0]);
const openMaps = [];
const isMap = layout.kind === "grid" || layout.kind === "discs";

/** Per parameter: 0 drawn, 1 hatched, 2 blank; the rule comes with the run and is told under every map. */
const thinCover = (() => {
  const state = new Uint8Array(parameters.count), hits = parameters.get("hits"),
        coverage = parameters.get("coverage");
  const rule = run.cover_rule;
  if (!hits || !rule) return state;
  for (let j = 0; j < state.length; j++) {
    if (hits[j] === 0)
      state[j] = blank;
    else if (hits[j] < rule.hits || (coverage && coverage[j] < rule.coverage))
      state[j] = hatched;
  }
  return state;
})();

function coverSentence() {
  const rule = run.cover_rule;
  if (!rule) return "";
  return ` Cells that no observation touches are blank; cells with fewer than ${
             rule.hits} hits, or a coverage below ` +
      `${plain(rule.share * 100, 2)} % of the median, are hatched: their colour says little.`;
}

/** Draws `values(j)` as colour steps of a scale. spec: {title, say, unit, name, cover (false: no hatching)}.
 *  Returns {update(step, scale, say)}; step: Uint8Array of colour steps a parameter, 255-based, with `known` beside. */
function buildMap(parent, spec) {
  const fig =
      figure(parent, {title: spec.title, say: spec.say, table: spec.table, wide: Boolean(layout.slice)});
  const map = {
    fig,
    spec,
    panels: [],
    colours: null,
    scale: null,
    page: 0,
    perPage: layout.slice ? 12 : 1,
    key: spec.key
  };
  const bar = element("div", {class: "map-bar"});
  fig.body.before(bar);
  fig.node.append(mapButtons(map));
  map.layOut = responsive(fig.body, width => {
    layPanels(map, width);
    paintMap(map);
  });
  openMaps.push(map);
  map.update = (colours, scale, say) => {
    map.colours = colours;
    const newScale = map.scale !== scale;
    map.scale = scale;
    if (say) fig.say(say);
    if (newScale) drawLegend(map);
    paintMap(map);
  };
  return map;
}

function mapButtons(map) {
  const row = element("p", {class: "map-buttons"});
  const pages = Math.ceil(layout.slices.length / map.perPage);
  if (pages > 1) {
    const which = element("span", {}, `slices 1 to ${map.perPage} of ${layout.slices.length} `);
    row.append(which,
        element("button", {
          type: "button",
          onclick: () => {
            map.page = (map.page + 1) % pages;
            which.textContent = `slices ${map.page * map.perPage + 1} to ${
                Math.min(layout.slices.length, (map.page + 1) * map.perPage)} of ${layout.slices.length} `;
            map.layOut();
          }
        },
            "Next slices"));
  }
  if (layout.up.axis === 2) {
    row.append(element("button", {
      type: "button",
      onclick: () => {
        zDown = !zDown;
        openMaps.forEach(m => m.layOut());
      }
    },
        "Turn z upside down"));
  }
  row.append(element("button", {type: "button", onclick: () => saveMap(map)}, "Save as SVG"));
  return row;
}

function layPanels(map, width) {
  const slices = layout.slices.slice(map.page * map.perPage, (map.page + 1) * map.perPage);
  const across = Math.max(1, Math.min(slices.length, Math.floor(width / 260)));
  const panelWidth = Math.min(layout.slice ? 420 : 620, Math.floor(width / across) - (across > 1 ? 8 : 0));
  map.fig.body.replaceChildren();
  map.panels = slices.map(slice => buildPanel(map, slice, panelWidth));
  map.legend = element("div", {class: "legend"});
  map.fig.body.append(map.legend);
  drawLegend(map);
}

function buildPanel(map, slice, width) {
  const [[x0, x1], [y0, y1]] = planeExtent(layout),
                        margin = {top: slice.at === null ? 8 : 24, right: 14, bottom: 40, left: 64};
  const inner = {width: width - margin.left - margin.right};
  const aspect = (y1 - y0) / (x1 - x0);
  inner.height = Math.round(inner.width * Math.max(0.25, Math.min(1.5, aspect)));
  const toScale = aspect >= 0.25 && aspect <= 1.5;
  const x = d3.scaleLinear().domain([x0, x1]).range([0, inner.width]);
  const y = d3.scaleLinear().domain([y0, y1]).range(
      zDown && layout.up.axis === 2 ? [0, inner.height] : [inner.height, 0]);
  const holder = element("div", {class: "map-panel", style: `width:${width}px`});
  map.fig.body.append(holder);
  const dense = Math.min(2, window.devicePixelRatio || 1),
        size = [Math.round(inner.width * dense), Math.round(inner.height * dense)];
  const canvas = element("canvas", {
    width: size[0],
    height: size[1],
    "aria-hidden": "true",
    style: `left:${margin.left}px;top:${margin.top}px;width:${inner.width}px;height:${inner.height}px`
  });
  holder.append(canvas);
  const height = inner.height + margin.top + margin.bottom;
  const frame = chartFrame(holder, {
    width,
    height,
    margin,
    label: `${map.spec.title} ${slice.at === null ? "" : `Slice ${layout.slice.name} = ${plain(slice.at)}.`}`,
    x: {scale: x.copy(), name: named(layout.across.name, run.units.coordinate)},
    y: {scale: y.copy(), name: named(layout.up.name, run.units.coordinate) + (toScale ? "" : ", stretched")}
  });
  frame.y.range(y.range());
  frame.g.select(".axis-y").remove();
  drawAxis(frame.g,
      {scale: frame.y, name: named(layout.up.name, run.units.coordinate) + (toScale ? "" : ", stretched")},
      inner, "y");
  frame.g.selectAll(".grid").remove();
  if (slice.at !== null) {
    frame.g.append("text")
        .attr("class", "panel-title")
        .attr("y", -8)
        .text(`${layout.slice.name} = ${withUnit(plain(slice.at, 5), run.units.coordinate)}`);
  }
  const px = d3.scaleLinear().domain([x0, x1]).range([0, size[0]]);
  const py = d3.scaleLinear().domain(y.domain()).range(y.range().map(v => v * size[1] / inner.height));
  const panel = {
    slice,
    canvas,
    frame,
    x: frame.x,
    y: frame.y,
    inner,
    size,
    pixels: pixelMap(layout, slice.members, size[0], size[1], px, py)
  };
  hoverPanel(map, panel);
  return panel;
}

function hoverPanel(map, panel) {
  const outline = panel.frame.g.append("g").attr("class", "cell-outline");
  const cellUnder = node => {
    const [mx, my] = d3.mouse(node);
    const p = Math.floor(mx * panel.size[0] / panel.inner.width),
          q = Math.floor(my * panel.size[1] / panel.inner.height);
    return p >= 0 && q >= 0 && p < panel.size[0] && q < panel.size[1] ? panel.pixels[p + panel.size[0] * q]
                                                                      : -1;
  };
  panel.frame.g.append("rect")
      .attr("class", "catch")
      .attr("width", panel.inner.width)
      .attr("height", panel.inner.height)
      .on("pointermove",
          function() {
            const j = cellUnder(this);
            outline.selectAll("*").remove();
            if (j < 0) {
              hideHover();
              return;
            }
            drawCell(outline.append("path"), panel, j);
            showHover(d3.event, map.spec.lines ? map.spec.lines(j) : cellLines(j, map.spec, selected));
          })
      .on("pointerleave",
          () => {
            hideHover();
            outline.selectAll("*").remove();
          })
      .on("click", function() {
        const j = cellUnder(this);
        if (j >= 0) pickCell(j);
      });
}

/** Number of the cell among layout.cells, found once for all. */
const placeOf = (() => {
  const place = new Int32Array(parameters.count).fill(-1);
  (layout.cells || []).forEach((j, i) => { place[j] = i; });
  return place;
})();

function cellPath(panel, i) {
  if (layout.kind === "grid") {
    const {across, up} = layout, a = across.level[i], b = up.level[i];
    const left = panel.x(across.edges[a]), right = panel.x(across.edges[a + 1]);
    const y0 = panel.y(up.edges[b]), y1 = panel.y(up.edges[b + 1]);
    return `M${left.toFixed(1)},${y0.toFixed(1)}H${right.toFixed(1)}V${y1.toFixed(1)}H${left.toFixed(1)}Z`;
  }
  const cx = panel.x(layout.across.value[i]), cy = panel.y(layout.up.value[i]);
  const rx = Math.max(2, Math.abs(panel.x(layout.radius) - panel.x(0))),
        ry = Math.max(2, Math.abs(panel.y(layout.radius) - panel.y(0)));
  return `M${(cx - rx).toFixed(1)},${cy.toFixed(1)}a${rx.toFixed(1)},${ry.toFixed(1)} 0 1 0 ${
      (2 * rx).toFixed(1)},0a${rx.toFixed(1)},${ry.toFixed(1)} 0 1 0 ${(-2 * rx).toFixed(1)},0Z`;
}

function drawCell(path, panel, j) { path.attr("d", cellPath(panel, placeOf[j])); }

function paintMap(map) {
  if (!map.colours) return;
  const {step, known} = map.colours, cover = map.spec.cover !== false;
  for (const panel of map.panels) {
    const context = panel.canvas.getContext("2d"),
          image = context.createImageData(panel.size[0], panel.size[1]);
    const out = new Uint32Array(image.data.buffer), width = panel.size[0], packed = map.scale.packed,
          pixels = panel.pixels;
    for (let p = 0; p < out.length; p++) {
      const j = pixels[p];
      if (j < 0 || !known[j]) continue;
      const state = cover ? thinCover[j] : 0;
      if (state === blank) continue;
      out[p] =
          state === hatched && (p % width + Math.floor(p / width)) % 7 < 2 ? 0xff808080 : packed[step[j]];
    }
    context.putImageData(image, 0, 0);
    panel.canvas.dataset.drawn = (Number(panel.canvas.dataset.drawn) || 0) + 1;
  }
}

function drawLegend(map) {
  if (!map.scale || !map.legend) return;
  map.legend.replaceChildren();
  const svg = d3.select(map.legend)
                  .append("svg")
                  .attr("class", "legend-bar")
                  .attr("width", 320)
                  .attr("height", 50)
                  .attr("viewBox", "0 0 320 50")
                  .attr("role", "img")
                  .attr("aria-label",
                      `Colours from ${plain(map.scale.low, 3)} to ${plain(map.scale.high, 3)} ${
                          map.spec.unit || ""}`);
  drawColourBar(svg, map.scale, {x: 64, y: 2, width: 240, label: named(map.spec.name, map.spec.unit)});
}
