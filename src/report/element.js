// Building the page. All text goes in as text, never as markup: an id may hold anything.
function element(tag, attributes = {}, ...children) {
  const node = document.createElement(tag);
  for (const [name, value] of Object.entries(attributes)) {
    if (value === null || value === undefined || value === false) continue;
    if (name.startsWith("on"))
      node.addEventListener(name.slice(2), value);
    else
      node.setAttribute(name, value === true ? "" : value);
  }
  node.append(...children.flat().filter(child => child !== null && child !== undefined));
  return node;
}

const page = document.getElementById("report");

/** A section with a heading, entered in the contents; cautions whose place is `key` stand right under the
 *  heading. */
function section(key, title, lead) {
  const node = element(
      "section", {id: key, "aria-labelledby": `${key}-title`}, element("h2", {id: `${key}-title`}, title));
  for (const text of cautionsFor(key)) node.append(cautionNote(text));
  if (lead) node.append(element("p", {class: "lead"}, lead));
  page.append(node);
  document.querySelector("#contents ol").append(element("li", {}, element("a", {href: `#${key}`}, title)));
  return node;
}

function cautionsFor(key) {
  return run.cautions.filter(caution => caution.where === key).map(caution => caution.text);
}

function cautionNote(text) {
  return element("p", {class: "caution", role: "note"}, element("strong", {}, "Caution. "), text);
}

/** A figure: heading, body for the drawing, sentence below, and a table that says the same in numbers.
 *  table: {columns, count} as tableOf takes it, or null. */
function figure(parent, {title, say, table, wide}) {
  const body = element("div", {class: "drawing"});
  const caption = element("figcaption", {}, element("span", {class: "figure-title"}, title), " ",
      element("span", {class: "figure-text"}, say || ""));
  const node = element("figure", {class: wide ? "wide" : null}, body, caption);
  if (table) {
    const details = element("details", {}, element("summary", {}, "Numbers of this chart"));
    details.addEventListener("toggle", () => {
      if (details.open && details.children.length === 1) details.append(tableOf(table));
    });
    node.append(details);
  }
  parent.append(node);
  return {
    node,
    body,
    text: caption.querySelector(".figure-text"),
    say(text) { this.text.textContent = text; }
  };
}

function definitionList(pairs) {
  const list = element("dl", {class: "facts"});
  for (const [term, value] of pairs) {
    if (value === null || value === undefined) continue;
    list.append(element("div", {}, element("dt", {}, term), element("dd", {}, value)));
  }
  return list;
}

/** Calls draw(width) now and whenever the width of `body` changes. */
function responsive(body, draw) {
  let last = 0;
  const redraw = () => {
    const width = Math.round(body.clientWidth);
    if (width > 0 && width !== last) {
      last = width;
      draw(width);
    }
  };
  redraw();
  if (window.ResizeObserver) new ResizeObserver(redraw).observe(body);
  return () => {
    last = 0;
    redraw();
  };
}
