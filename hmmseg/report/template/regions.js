"use strict";
// The regions, and their table: only the rows in sight are in the document.
async function openRegions(records) {
  const { data, element, format } = Carried;
  const columns = data.columns;
  const raw = (await Carried.text("regions-data")).split("\x1e").map((c) => (c ? c.split("\n") : []));
  const at = new Map(columns.map((c, i) => [c.name, i]));
  const values = columns.map((c, i) => (c.number ? Float64Array.from(raw[i], (t) => (t === "NA" ? NaN : +t)) : raw[i]));
  const count = raw[0].length;
  const start = values[at.get("start")], end = values[at.get("end")], length = values[at.get("length")];
  const record = Uint32Array.from(raw[at.get("record")], Number);
  const state = raw[at.get("state")];
  // Rows of each record stand together.
  const first = new Map(), last = new Map();
  for (let i = 0; i < count; i++) {
    if (!first.has(record[i])) first.set(record[i], i);
    last.set(record[i], i + 1);
  }

  const ROW = 28;
  const grid = element("table"), shown = element("shown");
  let order = Uint32Array.from({ length: count }, (_, i) => i);
  let sorted = null, down = false, chosen = -1, onChoose = () => {};

  const text = (i, c) => (columns[c].name === "record" ? records.names[record[i]] : raw[c][i]);
  const shownText = (i, c) => (columns[c].whole ? format(values[c][i]) : text(i, c));

  const head = document.createElement("div");
  head.className = "head";
  head.setAttribute("role", "row");
  const body = document.createElement("div");
  body.className = "rows";
  body.setAttribute("role", "rowgroup");
  const heads = columns.map((column, c) => {
    const button = document.createElement("button");
    button.type = "button";
    button.textContent = column.label;
    button.title = "Sort by " + column.label;
    button.setAttribute("role", "columnheader");
    button.style.width = column.width + "px";
    button.style.flex = "none";
    if (column.number) button.style.textAlign = "right";
    button.addEventListener("click", () => sortBy(c));
    head.append(button);
    return button;
  });
  const width = columns.reduce((sum, c) => sum + c.width, 0);
  head.style.width = body.style.width = width + "px";
  grid.append(head, body);
  grid.setAttribute("aria-colcount", columns.length);

  function sortBy(c) {
    down = sorted === c ? !down : false;
    sorted = c;
    heads.forEach((h, i) => {
      if (i === c) h.setAttribute("aria-sort", down ? "descending" : "ascending");
      else h.removeAttribute("aria-sort");
      h.textContent = columns[i].label + (i === c ? (down ? " ▼" : " ▲") : "");
    });
    arrange();
    draw();
  }

  function arrange() {
    if (sorted === null) { order.sort(); return; }
    const sign = down ? -1 : 1, key = columns[sorted].number ? values[sorted] : null;
    const words = key ? null : Array.from({ length: count }, (_, i) => text(i, sorted));
    // What is not known comes last either way; equals keep their places.
    const compare = key
      ? (a, b) => {
          const x = key[a], y = key[b];
          if (x !== x || y !== y) return (x !== x) - (y !== y) || a - b;
          return sign * (x - y) || a - b;
        }
      : (a, b) => (words[a] < words[b] ? -sign : words[a] > words[b] ? sign : a - b);
    order.sort(compare);
  }

  const filters = ["text", "state", "length", "q"].map((name) => element("filter-" + name));
  function filter() {
    const [words, wanted, least, most] = filters.map((f) => f.value.trim());
    const needle = words.toLowerCase(), q = at.has("q_value") ? values[at.get("q_value")] : null;
    const ids = raw[at.get("region_id")], kept = [];
    for (let i = 0; i < count; i++) {
      if (wanted && state[i] !== wanted) continue;
      if (least && length[i] < +least) continue;
      if (most && q && !(q[i] <= +most)) continue;
      if (needle && !ids[i].toLowerCase().includes(needle)
        && !records.names[record[i]].toLowerCase().includes(needle)) continue;
      kept.push(i);
    }
    order = Uint32Array.from(kept);
    arrange();
    grid.scrollTop = 0;
    draw();
  }
  for (const f of filters) f.addEventListener("input", filter);
  const states = element("filter-state");
  for (const s of data.states) {
    const option = document.createElement("option");
    option.value = option.textContent = s.name;
    states.append(option);
  }
  if (at.has("q_value")) element("filter-q-label").hidden = false;

  function draw() {
    body.style.height = order.length * ROW + "px";
    const from = Math.max(0, Math.floor(grid.scrollTop / ROW) - 6);
    const to = Math.min(order.length, from + Math.ceil(grid.clientHeight / ROW) + 12);
    const rows = [];
    for (let k = from; k < to; k++) rows.push(rowOf(k));
    body.replaceChildren(...rows);
    const all = order.length === count;
    const of = data.left_out ? ` of the ${format(count + data.left_out)} called, those with the highest log-odds` : "";
    shown.textContent = all ? `${format(count)} regions${of}` : `${format(order.length)} of ${format(count)} regions`;
    grid.setAttribute("aria-rowcount", order.length + 1);
  }
  function rowOf(k) {
    const i = order[k], row = document.createElement("div");
    row.className = i === chosen ? "row chosen" : "row";
    row.setAttribute("role", "row");
    row.setAttribute("aria-rowindex", k + 2);
    row.setAttribute("aria-selected", i === chosen);
    row.dataset.region = i;
    row.style.top = k * ROW + "px";
    for (let c = 0; c < columns.length; c++) {
      const cell = document.createElement("div");
      cell.className = columns[c].number ? "cell right" : "cell";
      cell.setAttribute("role", "gridcell");
      cell.style.width = columns[c].width + "px";
      cell.textContent = shownText(i, c);
      cell.title = cell.textContent;
      row.append(cell);
    }
    return row;
  }
  let waiting = false;
  grid.addEventListener("scroll", () => {
    if (waiting) return;
    waiting = true;
    requestAnimationFrame(() => { waiting = false; draw(); });
  });
  function choose(i, move) {
    chosen = i;
    const k = order.indexOf(i);
    if (move && k >= 0) {
      const top = k * ROW, room = grid.clientHeight - 2 * ROW;
      if (top < grid.scrollTop) grid.scrollTop = top;
      if (top > grid.scrollTop + room) grid.scrollTop = top - room;
    }
    draw();
    onChoose(i);
  }
  body.addEventListener("click", (event) => {
    const row = event.target.closest(".row");
    if (row) choose(+row.dataset.region, false);
  });
  grid.addEventListener("keydown", (event) => {
    const page = Math.floor(grid.clientHeight / ROW) - 2;
    const steps = { ArrowDown: 1, ArrowUp: -1, PageDown: page, PageUp: -page, Home: -count, End: count };
    if (event.target.tagName === "BUTTON" || !order.length) return;
    if (event.key in steps || event.key === "Enter") {
      event.preventDefault();
      const now = order.indexOf(chosen), step = steps[event.key] ?? 0;
      choose(order[Math.min(Math.max(now < 0 ? 0 : now + step, 0), order.length - 1)], true);
    }
  });
  draw();
  return {
    count, start, end, record, state, first, last,
    id: (i) => raw[at.get("region_id")][i],
    posterior: (i) => raw[at.get("mean_posterior")][i],
    chosen: () => chosen,
    whenChosen: (f) => { onChoose = f; },
  };
}
