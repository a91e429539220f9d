// Tables: columns with a head, a unit and a way to print a cell; sorted by a click on the head, searched by
// text, a first part shown until all is asked for.
//   {caption, count, columns: [{name, unit, text(i), sort(i), left}], first, search(i), rowClass(i)}
function tableOf(spec) {
  const wrapper = element("div", {class: "table"});
  const head = element("tr"), body = element("tbody");
  const first = spec.first || 200;
  const state = {by: null, down: false, all: false, words: ""};
  const status = element("p", {class: "table-status", "aria-live": "polite"});
  const more = element("button", {
    type: "button",
    onclick: () => {
      state.all = true;
      fill();
    }
  },
      "Show all rows");

  const heads = spec.columns.map((col, c) => {
    const button = element("button", {
      type: "button",
      class: "sort",
      onclick: () => {
        state.down = state.by === c ? !state.down : false;
        state.by = c;
        fill();
      }
    },
        named(col.name, col.unit));
    const cell = element("th", {scope: "col", class: cellClass(col)}, button);
    head.append(cell);
    return cell;
  });

  function order() {
    let rows = d3.range(spec.count);
    if (state.words && spec.search)
      rows = rows.filter(i => spec.search(i).toLowerCase().includes(state.words));
    if (state.by !== null) {
      const col = spec.columns[state.by], value = col.sort || col.text;
      rows.sort((a, b) => compareCells(value(a), value(b)) * (state.down ? -1 : 1) || a - b);
    }
    return rows;
  }

  function fill() {
    const rows = order(), shown = state.all ? rows : rows.slice(0, first);
    body.replaceChildren(...shown.map(i => {
      const cells =
          spec.columns.map((col, c) => element(c === 0 ? "th" : "td",
                               {class: cellClass(col), scope: c === 0 ? "row" : null}, col.text(i)));
      return element("tr", {class: spec.rowClass ? spec.rowClass(i) : null}, cells);
    }));
    heads.forEach((cell, c) => cell.setAttribute(
                      "aria-sort", state.by === c ? (state.down ? "descending" : "ascending") : "none"));
    more.hidden = shown.length === rows.length;
    status.textContent = shown.length < spec.count
        ? `${whole(shown.length)} of ${whole(spec.count)} rows shown.` +
            (spec.file ? ` All stand in ${spec.file}.` : "")
                       : "";
  }

  if (spec.search && spec.count > 30) {
    wrapper.append(element("label", {class: "search"}, "Find ", element("input", {
      type: "search",
      oninput: event => {
        state.words = event.target.value.toLowerCase();
        fill();
      }
    })));
  }
  wrapper.append(
      element("div", {class: "scroll", tabindex: "0", role: "region", "aria-label": spec.caption || "table"},
          element("table", {}, spec.caption ? element("caption", {}, spec.caption) : null,
              element("thead", {}, head), body)),
      status, more);
  fill();
  return wrapper;
}

function cellClass(col) { return col.left ? col.wide ? "left wide" : "left" : null; }

function compareCells(a, b) {
  if (typeof a === "number" && typeof b === "number") {
    if (Number.isNaN(a)) return Number.isNaN(b) ? 0 : 1;
    return Number.isNaN(b) ? -1 : a - b;
  }
  return String(a).localeCompare(String(b), "en", {numeric: true});
}

/** Column of numbers from an array. Values of one kind of size get the same decimals, so that they stand
 *  under each other. */
function numberColumn(name, unit, values, digits = 4) {
  const decimals = commonDecimals(values, digits);
  return {
    name,
    unit,
    text: i => decimals === null ? plain(values[i], digits) : fixedTo(orNaN(values[i]), decimals),
    sort: i => orNaN(values[i])
  };
}

/** Decimals that give the largest value `digits` digits; null where sizes differ too much for one number of
 *  decimals. */
function commonDecimals(values, digits) {
  const sizes =
      Float64Array.from(values, v => Math.abs(orNaN(v))).filter(v => v > 0 && Number.isFinite(v)).sort();
  if (!sizes.length || sizes.length > 50000) return null;
  const largest = sizes[sizes.length - 1], middle = sizes[sizes.length >> 1];
  if (largest > 1e3 * middle || largest >= 1e7) return null;
  const decimals = digits - 1 - Math.floor(Math.log10(largest));
  const needed = d3.max(sizes, v => {
    const [, after = ""] = Number(v.toPrecision(digits)).toFixed(12).replace(/0+$/, "").split(".");
    return after.length;
  });
  return decimals > 9 ? null : Math.max(0, Math.min(decimals, needed));
}
