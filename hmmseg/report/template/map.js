"use strict";
// The map of one record: regions, posterior and G+C in panels that move together.
async function openMap(records, regions) {
  const { data, element, format } = Carried;
  const LEVELS = data.levels, NOTHING = data.nothing, COLUMNS = 900, NARROWEST = 40, MOST_BARS = 4000;
  const place = element("panels"), now = element("where-now");
  const { figure, show } = Bokeh.Plotting;
  const source = (columns) => new Bokeh.ColumnDataSource({ data: Object.fromEntries(columns.map((c) => [c, []])) });
  const x = new Bokeh.Range1d({ start: 0, end: 1 });
  const crossing = new Bokeh.Span({ dimension: "height", line_color: "#5a6470", line_width: 1, line_dash: [3, 3] });

  function panel(height, y_range, label, last) {
    const plot = figure({
      height, x_range: x, y_range, sizing_mode: "stretch_width", tools: [], toolbar_location: null,
      min_border_left: 58, min_border_right: 12, min_border_top: 6, min_border_bottom: last ? 46 : 6,
      outline_line_color: null, background_fill_color: "#ffffff", border_fill_color: "#ffffff",
    });
    plot.add_tools(new Bokeh.PanTool({ dimensions: "width" }));
    plot.add_tools(new Bokeh.WheelZoomTool({ dimensions: "width", modifiers: { ctrl: true } }));
    plot.add_tools(new Bokeh.CrosshairTool({ overlay: [crossing, new Bokeh.Span({ dimension: "width", visible: false })] }));
    plot.toolbar.active_scroll = plot.toolbar.tools[1];
    for (const axis of [...plot.xaxes, ...plot.yaxes]) {
      axis.axis_line_color = "#8a929c";
      axis.major_tick_line_color = "#8a929c";
      axis.minor_tick_line_color = null;
      axis.major_label_text_color = axis.axis_label_text_color = "#1c2530";
      axis.axis_label_text_font_style = "normal";
      axis.axis_label_text_font_size = axis.major_label_text_font_size = "11px";
    }
    for (const grid of [...plot.xgrids, ...plot.ygrids]) grid.grid_line_color = "#eceef1";
    plot.xaxes[0].formatter = new Bokeh.NumeralTickFormatter({ format: "0,0" });
    plot.xaxes[0].ticker = new Bokeh.BasicTicker({ desired_num_ticks: place.clientWidth < 480 ? 3 : 6 });
    plot.xaxes[0].visible = last;
    if (last) plot.xaxes[0].axis_label = "position in the record (bases)";
    plot.yaxes[0].axis_label = label;
    return plot;
  }
  const fixed = (start, end) => new Bokeh.Range1d({ start, end });
  const share = [0, 0.5, 1];
  const count = data.states.length;
  const lanes = panel(26 + 24 * count, fixed(0, count), "regions", false);
  lanes.yaxes[0].ticker = new Bokeh.FixedTicker({ ticks: [] });
  lanes.ygrids[0].grid_line_color = null;
  const chance = panel(190, fixed(-0.02, 1.04), "posterior", false);
  chance.yaxes[0].ticker = new Bokeh.FixedTicker({ ticks: share });
  const strong = fixed(0, 1);
  const gc = panel(166, strong, "G+C", true);
  gc.yaxes[0].ticker = new Bokeh.BasicTicker({ desired_num_ticks: 4 });

  // What is drawn.
  const holes = source(["left", "right"]);
  for (const [plot, top] of [[lanes, count], [chance, 1.04], [gc, 1]]) {
    plot.quad({
      left: { field: "left" }, right: { field: "right" }, bottom: plot === chance ? -0.02 : 0, top, source: holes,
      fill_color: "#f1f2f4", line_color: null, hatch_pattern: "right_diagonal_line", hatch_color: "#b9c0c8", hatch_weight: 0.6, hatch_scale: 7,
    });
  }
  const bars = source(["left", "right", "bottom", "top", "color", "id", "state", "from", "to", "posterior"]);
  const drawn = lanes.quad({
    left: { field: "left" }, right: { field: "right" }, bottom: { field: "bottom" }, top: { field: "top" },
    fill_color: { field: "color" }, line_color: { field: "color" }, line_width: 1, source: bars,
  });
  const mark = source(["left", "right"]);
  for (const [plot, top] of [[lanes, count], [chance, 1.04], [gc, 1]]) {
    plot.quad({
      left: { field: "left" }, right: { field: "right" }, bottom: plot === chance ? -0.02 : 0, top, source: mark,
      fill_color: "#1c2530", fill_alpha: 0.07, line_color: "#1c2530", line_alpha: 0.55, line_width: 1,
    });
  }
  const bands = data.states.map((s) => {
    const band = source(["x", "low", "high"]), line = source(["x", "y"]);
    chance.varea({ x: { field: "x" }, y1: { field: "low" }, y2: { field: "high" }, source: band, fill_color: s.color, fill_alpha: 0.28 });
    chance.line({ x: { field: "x" }, y: { field: "y" }, source: line, line_color: s.color, line_width: 1.4, line_join: "round" });
    return { band, line };
  });
  const level = source(["x", "y"]);
  if (data.gc) gc.line({ x: { field: "x" }, y: { field: "y" }, source: level, line_color: "#4d5866", line_width: 1.2 });
  const cells = source(["left", "right", "bottom", "top", "where", "said", "gc"]);
  const hidden = [chance, gc].map((plot) => plot.quad({
    left: { field: "left" }, right: { field: "right" }, bottom: 0, top: 1, source: cells, fill_alpha: 0, line_alpha: 0,
  }));
  // Fields are escaped by the library.
  const tip = (plot, renderer, lines) => plot.add_tools(new Bokeh.HoverTool({
    renderers: [renderer], mode: "mouse",
    tooltips: `<div style="color:#1c2530;font-size:12px;line-height:1.5">${lines.join("<br>")}</div>`,
  }));
  tip(lanes, drawn, ["<b>@id</b>", "@from to @to", "posterior @posterior"]);
  const lines = ["<b>@where</b>", ...(count ? ["@said"] : []), ...(data.gc ? ["G+C @gc"] : [])];
  hidden.forEach((renderer, i) => tip([chance, gc][i], renderer, lines));

  let record = -1, tracks = null, gaps = [];
  const size = data.bin;

  // Bins of the view, several taken together where there are more than can be seen.
  function view(a, b) {
    const n = tracks.states.length ? tracks.states[0].mean.length : tracks.gc.length;
    const from = Math.max(0, Math.floor(a / size)), to = Math.min(n, Math.ceil(b / size));
    const step = Math.max(1, Math.ceil((to - from) / COLUMNS));
    const begin = from - (from % step), out = [];
    for (let i = begin; i < to; i += step) out.push([i, Math.min(i + step, n)]);
    return out;
  }
  function taken(plane, [i, j], how) {
    let low = 255, high = -1, sum = 0, known = 0;
    for (; i < j; i++) {
      const v = plane[i];
      if (v === NOTHING) continue;
      if (v < low) low = v;
      if (v > high) high = v;
      sum += v;
      known++;
    }
    if (!known) return NaN;
    return (how === "low" ? low : how === "high" ? high : sum / known) / LEVELS;
  }
  function steps(spans, values) {
    const xs = [], ys = [], end = records.lengths[record];
    spans.forEach(([i, j], k) => {
      xs.push(i * size, Math.min(j * size, end));
      ys.push(values[k], values[k]);
    });
    return { x: xs, y: ys };
  }
  function draw() {
    const spans = view(x.start, x.end), end = records.lengths[record];
    const said = spans.map(() => []);
    tracks.states.forEach((track, s) => {
      const [low, mean, high] = ["lowest", "mean", "highest"].map((name, k) =>
        spans.map((span) => taken(track[name], span, ["low", "mean", "high"][k])));
      const upper = steps(spans, high.map((v) => (isNaN(v) ? 0 : v)));
      // Where nothing is known a band has no height, so nothing is drawn.
      bands[s].band.data = { x: upper.x, high: upper.y, low: steps(spans, low.map((v) => (isNaN(v) ? 0 : v))).y };
      bands[s].line.data = steps(spans, mean);
      mean.forEach((v, k) => said[k].push(isNaN(v) ? "none" :
        `${data.states[s].name} ${v.toFixed(2)} (${low[k].toFixed(2)} to ${high[k].toFixed(2)})`));
    });
    const strongs = tracks.gc ? spans.map((span) => taken(tracks.gc, span, "mean")) : [];
    if (tracks.gc) level.data = steps(spans, strongs);
    cells.data = {
      left: spans.map(([i]) => i * size), right: spans.map(([, j]) => Math.min(j * size, end)),
      where: spans.map(([i, j]) => `${format(i * size)} to ${format(Math.min(j * size, end))}`),
      said: said.map((s) => s.join(", ")), gc: spans.map((_, k) => (tracks.gc && !isNaN(strongs[k]) ? strongs[k].toFixed(2) : "none")),
      bottom: spans.map(() => 0), top: spans.map(() => 1),
    };
    drawBars();
    const span = x.end - x.start;
    const narrow = gaps.filter(([a, b]) => b > x.start && a < x.end && b - a > span / 4000);
    holes.data = { left: narrow.map((g) => g[0]), right: narrow.map((g) => g[1]) };
    tell();
  }
  function drawBars() {
    const out = { left: [], right: [], bottom: [], top: [], color: [], id: [], state: [], from: [], to: [], posterior: [] };
    const end = records.lengths[record], gap = (x.end - x.start) / MOST_BARS;
    const lastOf = new Map();
    for (let i = regions.first.get(record) ?? 0; i < (regions.last.get(record) ?? 0); i++) {
      // A region across the origin goes on at the beginning.
      const pieces = regions.end[i] > end ? [[regions.start[i], end], [0, regions.end[i] - end]] : [[regions.start[i], regions.end[i]]];
      const s = data.states.findIndex((one) => one.name === regions.state[i]);
      for (const [a, b] of pieces) {
        if (b < x.start || a > x.end || s < 0) continue;
        const before = lastOf.get(s);
        if (before !== undefined && a >= out.left[before] && a - out.right[before] < gap && b - a < gap) {
          // Too close to be told apart: one bar.
          out.right[before] = Math.max(out.right[before], b);
          out.id[before] = "several";
          out.to[before] = format(out.right[before]);
          out.posterior[before] = "";
          continue;
        }
        lastOf.set(s, out.left.length);
        out.left.push(a); out.right.push(b);
        out.bottom.push(count - 1 - s + 0.14); out.top.push(count - s - 0.14);
        out.color.push(data.states[s].color); out.id.push(regions.id(i)); out.state.push(regions.state[i]);
        out.from.push(format(regions.start[i])); out.to.push(format(regions.end[i])); out.posterior.push(regions.posterior(i));
      }
    }
    bars.data = out;
  }
  function tell() {
    const n = (regions.last.get(record) ?? 0) - (regions.first.get(record) ?? 0);
    const name = document.createElement("strong");
    name.textContent = records.names[record];
    now.replaceChildren(name, `: ${format(x.start)} to ${format(x.end)} of ${format(records.lengths[record])} bases, ${n ? format(n) : "no"} region${n === 1 ? "" : "s"} in the record`);
    Object.assign(place.dataset, { record, start: Math.round(x.start), end: Math.round(x.end), ready: "yes" });
  }

  let waiting = false;
  function changed() {
    if (waiting || !tracks) return;
    waiting = true;
    requestAnimationFrame(() => { waiting = false; if (clamp()) return; draw(); });
  }
  // Keeps the view within the record; true if it had to be moved.
  function clamp() {
    const end = records.lengths[record];
    const width = Math.min(Math.max(x.end - x.start, Math.min(NARROWEST, end)), end);
    const start = Math.min(Math.max((x.start + x.end - width) / 2, 0), end - width);
    if (Math.abs(start - x.start) < 0.5 && Math.abs(start + width - x.end) < 0.5) return false;
    x.setv({ start, end: start + width });
    return true;
  }
  x.change.connect(changed);

  async function open(which, a, b) {
    if (which !== record) {
      const own = await records.bins(which);
      record = which;
      tracks = own;
      gaps = records.gaps(which);
      element("record").value = records.names[which];
      mark.data = { left: [], right: [] };
      fitStrong();
    }
    x.setv({ start: a ?? 0, end: b ?? records.lengths[which] });
    clamp();
    draw();
  }
  function fitStrong() {
    if (!tracks.gc) return;
    let low = LEVELS, high = 0;
    for (const v of tracks.gc) if (v !== NOTHING) { if (v < low) low = v; if (v > high) high = v; }
    if (low > high) { low = 0; high = LEVELS; }
    strong.setv({ start: Math.max(0, low / LEVELS - 0.03), end: Math.min(1, high / LEVELS + 0.03) });
  }
  function zoom(factor) {
    const middle = (x.start + x.end) / 2, half = ((x.end - x.start) * factor) / 2;
    x.setv({ start: middle - half, end: middle + half });
  }
  function move(by) {
    const step = by * (x.end - x.start);
    x.setv({ start: x.start + step, end: x.end + step });
  }
  const other = (by) => open(Math.min(Math.max(record + by, 0), records.names.length - 1));
  const actions = {
    ArrowLeft: () => move(-0.25), ArrowRight: () => move(0.25), "+": () => zoom(0.5), "=": () => zoom(0.5),
    "-": () => zoom(2), "0": () => open(record), PageUp: () => other(-1), PageDown: () => other(1),
  };
  place.addEventListener("keydown", (event) => {
    if (event.ctrlKey || event.metaKey || event.altKey || !(event.key in actions)) return;
    event.preventDefault();
    actions[event.key]();
  });
  for (const [id, key] of [["left", "ArrowLeft"], ["right", "ArrowRight"], ["in", "+"], ["out", "-"], ["whole", "0"], ["previous", "PageUp"], ["next", "PageDown"]]) {
    element(id).addEventListener("click", actions[key]);
  }

  // Records by name: those that match what is typed, the longest first.
  const box = element("record"), list = element("records");
  function offer(text) {
    const needle = text.toLowerCase(), options = [];
    for (let i = 0; i < records.names.length && options.length < 50; i++) {
      if (!records.names[i].toLowerCase().includes(needle)) continue;
      const option = document.createElement("option");
      option.value = records.names[i];
      option.label = `${format(records.lengths[i])} bases`;
      options.push(option);
    }
    list.replaceChildren(...options);
  }
  box.addEventListener("focus", () => { box.select(); offer(""); });
  box.addEventListener("input", () => {
    offer(box.value);
    if (records.rank.has(box.value)) open(records.rank.get(box.value));
  });

  const legend = element("legend");
  for (const s of data.states) {
    const entry = document.createElement("span"), swatch = document.createElement("i");
    swatch.style.background = s.color;
    entry.append(swatch, s.name);
    legend.append(entry);
  }
  if (!data.gc) legend.append("G+C is not shown: the survey holds no gc.bw; hmmseg survey writes it.");

  regions.whenChosen(async (i) => {
    const a = regions.start[i], b = regions.end[i], room = Math.max((b - a) * 2, 200);
    await open(regions.record[i], a - room, b + room);
    mark.data = { left: [a], right: [b] };
  });

  await open(data.open);
  const layout = new Bokeh.Column({ children: data.gc ? [lanes, chance, gc] : [lanes, chance], sizing_mode: "stretch_width", spacing: 0 });
  if (!data.gc) { chance.xaxes[0].visible = true; chance.xaxes[0].axis_label = "position in the record (bases)"; chance.height = 240; chance.min_border_bottom = 46; }
  await show(layout, place);
}

window.addEventListener("DOMContentLoaded", async () => {
  const records = await openRecords();
  const regions = await openRegions(records);
  await openMap(records, regions);
});
