// The same maps as vector shapes: laid over the pictures while the page is printed, and in files that are
// saved.
function addVectorCells(map) {
  if (!map.colours) return;
  const {step, known} = map.colours, cover = map.spec.cover !== false;
  for (const panel of map.panels) {
    const plainCells = new Map(), thin = [];
    for (const i of panel.slice.members) {
      const j = layout.cells[i], state = cover ? thinCover[j] : 0;
      if (!known[j] || state === blank) continue;
      const path = cellPath(panel, i);
      if (!plainCells.has(step[j])) plainCells.set(step[j], []);
      plainCells.get(step[j]).push(path);
      if (state === hatched) thin.push(path);
    }
    const g = panel.frame.g.insert("g", ":first-child").attr("class", "vector-cells");
    for (const [k, paths] of plainCells) {
      g.append("path")
          .attr("fill", map.scale.colours[k])
          .attr("stroke", map.scale.colours[k])
          .attr("stroke-width", 0.5)
          .attr("shape-rendering", "crispEdges")
          .attr("d", paths.join(""));
    }
    if (thin.length)
      g.append("path").attr("fill", `url(#${hatchPattern(panel.frame.svg)})`).attr("d", thin.join(""));
  }
}

let patterns = 0;
function hatchPattern(svg) {
  const id = `hatch-${patterns++}`;
  const pattern = svg.append("defs")
                      .attr("class", "vector-cells")
                      .append("pattern")
                      .attr("id", id)
                      .attr("width", 5)
                      .attr("height", 5)
                      .attr("patternUnits", "userSpaceOnUse")
                      .attr("patternTransform", "rotate(45)");
  pattern.append("rect").attr("width", 2).attr("height", 5).attr("fill", "#808080");
  return id;
}

function removeVectorCells() { document.querySelectorAll(".vector-cells").forEach(node => node.remove()); }

window.addEventListener("beforeprint", () => {
  removeVectorCells();
  openMaps.forEach(addVectorCells);
});
window.addEventListener("afterprint", removeVectorCells);

const savedStyle =
    "text{font:11px sans-serif;fill:#222}.axis path,.axis line{stroke:#222;fill:none}.axis " +
        ".grid{display:none}" +
    ".catch{fill:none}.axis-name{font-size:12px}";

/** One SVG file with all panels of the map, one under another, and the legend. */
function saveMap(map) {
  addVectorCells(map);
  const parts = [...map.fig.body.querySelectorAll("svg")];
  const space = "http://www.w3.org/2000/svg", out = document.createElementNS(space, "svg");
  let height = 0, width = 0;
  const style = document.createElementNS(space, "style");
  style.textContent = savedStyle;
  out.append(style);
  for (const part of parts) {
    const copy = part.cloneNode(true), w = Number(part.getAttribute("width")),
          h = Number(part.getAttribute("height"));
    copy.setAttribute("y", height);
    out.append(copy);
    height += h + 8;
    width = Math.max(width, w);
  }
  removeVectorCells();
  out.setAttribute("xmlns", space);
  out.setAttribute("viewBox", `0 0 ${width} ${height}`);
  out.setAttribute("width", width);
  out.setAttribute("height", height);
  const url =
      URL.createObjectURL(new Blob([new XMLSerializer().serializeToString(out)], {type: "image/svg+xml"}));
  const link = element("a", {href: url, download: `${map.key || "map"}.svg`});
  link.click();
  setTimeout(() => URL.revokeObjectURL(url), 1000);
}
