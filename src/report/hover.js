// One box that follows the pointer and shows what lies under it. It is for the eye only: the same numbers
// stand in the table or sentence of each figure.
const hoverBox = element("div", {id: "hover", "aria-hidden": "true", hidden: true});
document.body.append(hoverBox);

function showHover(event, lines) {
  hoverBox.replaceChildren(...lines.filter(Boolean).map(
      (line, i) => element("div", {class: i === 0 ? "hover-head" : null}, line)));
  hoverBox.hidden = false;
  const box = hoverBox.getBoundingClientRect(), gap = 14;
  let left = event.clientX + gap, top = event.clientY + gap;
  if (left + box.width > window.innerWidth - 4) left = event.clientX - gap - box.width;
  if (top + box.height > window.innerHeight - 4) top = event.clientY - gap - box.height;
  hoverBox.style.left = `${Math.max(4, left)}px`;
  hoverBox.style.top = `${Math.max(4, top)}px`;
}

function hideHover() { hoverBox.hidden = true; }

/** Hover for the marks of a d3 selection: lines(datum) gives the text. */
function hoverOn(selection, lines) {
  selection.on("pointermove.hover", function(d) { showHover(d3.event, lines(d)); })
      .on("pointerleave.hover", hideHover);
  return selection;
}

/** Hover and click for many points drawn as one path: the nearest within `reach` pixels. points: [{x, y,
 *  ...}]. */
function hoverNearest(svg, points, reach, lines, click) {
  const tree = d3.quadtree(points, p => p.x, p => p.y);
  const at = node => {
    const [x, y] = d3.mouse(node);
    return tree.find(x, y, reach);
  };
  svg.on("pointermove.hover", function() {
       const found = at(this);
       if (found)
         showHover(d3.event, lines(found));
       else
         hideHover();
     }).on("pointerleave.hover", hideHover);
  if (click)
    svg.on("click.pick", function() {
      const found = at(this);
      if (found) click(found);
    });
}
