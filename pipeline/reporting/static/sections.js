// Where the waters lie: any quantity along a section, against depth or density, with the sea floor and the samples.
"use strict";

const GRID = {nx: 420, ny: 260};
const FLOOR = 20000; // metres, below any sea floor
const section = {}; // the figure's parts, set when it is drawn

/** Return what a choice of the vertical means: the quantity, and its range. */
function verticalOf(choice, rows, casts) {
  const key = {upper: "depth", deep: "sigma2"}[choice] ?? choice;
  const values = rows.map((row) => valueOf(key, row)).filter(Number.isFinite);
  if (key === "depth") {
    const bottom = Math.max(...values, ...casts.map((cast) => page.casts.bottom[cast] ?? 0), 1);
    const deepest = choice === "upper" ? Math.min(1000, bottom) : bottom;
    return {key, low: 0, high: deepest * 1.03, isDepth: true};
  }
  const [low, high] = spanOf(choice === "deep" ? belowUpper(rows) : values, 0.02);
  return {key, low, high, isDepth: false};
}

/** Return the densities of what lies below 1000 dbar; of all where nothing does. */
function belowUpper(rows) {
  const deep = rows.filter((row) => valueOf("pressure", row) >= 1000);
  return (deep.length ? deep : rows).map((row) => valueOf("sigma2", row));
}

/** Return the edges of the bands of colour of a quantity, and its scale. */
function coloursOf(one, rows) {
  if (one.group === "Shares" || one.key === "leading_share" || one.key === "leading_probability") {
    return {edges: Array.from({length: 11}, (_, k) => k / 10), scale: page.scales.viridis};
  }
  const scale = one.group.startsWith("Uncertainties") ? page.scales.cividis : page.scales.viridis;
  return {edges: bands(sorted(rows.map((row) => one.values[row]))), scale};
}

/** Return so many colours of a scale, evenly from end to end. */
function picked(scale, count) {
  return Array.from({length: count}, (_, k) => scale[Math.round((k + 0.5) / count * scale.length - 0.5)]);
}

function sectionChoice() {
  const number = Number(document.getElementById("choose-section").value) || 0;
  const chosen = page.sections[number];
  const one = quantity(document.getElementById("choose-quantity").value);
  const at = new Map(chosen.casts.map((cast, k) => [cast, chosen.distance[k]]));
  const rows = chosen.casts.flatMap((cast) => rowsOfCast[cast]);
  return {chosen, one, at, rows, vertical: verticalOf(document.getElementById("choose-vertical").value, rows, chosen.casts)};
}

async function drawSection() {
  if (!page.sections.length) return;
  fillSelect(document.getElementById("choose-section"), [["", page.sections.map((s, k) => [String(k), s.name])]], "0");
  document.getElementById("label-section").hidden = page.sections.length < 2;
  const first = [...quantities.keys()].find((key) => key.startsWith("share:")) ?? (quantities.has("oxygen") ? "oxygen" : "conservative_temperature");
  fillSelect(document.getElementById("choose-quantity"), quantityGroups(), first);
  const figure = newFigure("section", {
    x_range: new Bokeh.Range1d({start: 0, end: 1}), y_range: downward(0, 1), x_axis_label: "Distance", y_axis_label: "Depth",
  });
  for (const grid of figure.center) if ("grid_line_color" in grid) grid.visible = false;
  section.image = new Bokeh.ColumnDataSource({data: {image: [], x: [], y: [], dw: [], dh: []}});
  section.mapper = new Bokeh.LinearColorMapper({palette: picked(page.scales.viridis, 10), low: 0, high: 1, nan_color: "rgba(0,0,0,0)"});
  figure.image({image: {field: "image"}, x: {field: "x"}, y: {field: "y"}, dw: {field: "dw"}, dh: {field: "dh"},
    source: section.image, color_mapper: section.mapper, level: "image"});
  section.floor = new Bokeh.ColumnDataSource({data: {x: [], y: []}});
  const floor = figure.patches({field: "x"}, {field: "y"}, {source: section.floor, line_width: 1});
  section.names = new Bokeh.ColumnDataSource({data: {x: [], y: [], t: []}});
  const names = figure.text({field: "x"}, {field: "y"}, {field: "t"}, {source: section.names, text_font_size: "12px",
    text_font: FONT, text_align: "center", text_baseline: "bottom", y_offset: -2});
  painted((colours) => {
    floor.glyph.fill_color = colours.floor;
    floor.glyph.line_color = colours.floor;
    names.glyph.text_color = colours.quiet;
  });
  section.layer = sampleLayer("section", sampleColumns([], Number, Number, {value: [], fill: []}),
    {size: document.getElementById("plot-section").clientWidth < 700 ? 3 : 5, marker: "circle", fill_color: {field: "fill"}, fill_alpha: 1, line_color: "#000", line_alpha: 0.55, line_width: 0.5,
      nonselection_fill_alpha: 0.5}, [["", "@value"]]);
  section.ticker = new Bokeh.FixedTicker({ticks: []});
  section.bar = new Bokeh.ColorBar({color_mapper: section.mapper, ticker: section.ticker, width: 14, padding: 4,
    major_label_text_font: FONT, major_label_text_font_size: "13px"});
  figure.add_layout(section.bar, "right");
  painted((colours) => {
    section.bar.background_fill_color = colours.paper;
    section.bar.major_label_text_color = colours.ink;
  });
  section.figure = figure;
  updateSection();
  await mount("section");
  for (const id of ["choose-section", "choose-quantity", "choose-vertical", "choose-bottles"]) {
    document.getElementById(id).addEventListener("change", updateSection);
  }
}

function updateSection() {
  const choice = sectionChoice(), {chosen, one, at, rows, vertical} = choice, {figure} = section;
  const length = chosen.distance.at(-1), margin = length * 0.015 || 1; // a single place is a kilometre wide
  Object.assign(figure.x_range, {start: -margin, end: length + margin, reset_start: -margin, reset_end: length + margin});
  const top = vertical.low - (vertical.high - vertical.low) * 0.06;
  Object.assign(figure.y_range, {start: vertical.high, end: top, reset_start: vertical.high, reset_end: top});
  figure.below[0].axis_label = `Distance along ${plain(chosen.name)}, km`;
  figure.left[0].axis_label = label(quantity(vertical.key));
  const {edges, scale} = coloursOf(one, rows);
  const palette = picked(scale, edges.length - 1);
  Object.assign(section.mapper, {palette, low: edges[0], high: edges.at(-1)});
  section.ticker.ticks = edges.length > 16 ? edges.filter((_, k) => k % 2 === 0) : edges;
  drawGrid(choice, length, margin);
  drawFloor(choice);
  drawNames(choice, length, vertical.low);
  const inRange = (value) => value >= vertical.low && value <= vertical.high;
  const shown = document.getElementById("choose-bottles").checked
    ? rows.filter((row) => inRange(valueOf(vertical.key, row)) && Number.isFinite(one.values[row])) : [];
  const fill = (row) => {
    const band = Math.floor(((one.values[row] - edges[0]) / (edges.at(-1) - edges[0])) * palette.length);
    return palette[Math.min(palette.length - 1, Math.max(0, band))];
  };
  section.layer.set(sampleColumns(shown, (row) => at.get(page.samples.cast[row]), (row) => valueOf(vertical.key, row), {
    value: shown.map((row) => `${one.words} ${valueWords(one, one.values[row])}`), fill: shown.map(fill),
  }));
  tellSection(choice);
}

/** Return text without what the drawing library takes for a formula. */
function plain(text) {
  return text.replaceAll("$", "\uff04").replaceAll("\\", "\uff3c");
}

function drawGrid({one, at, rows, vertical}, length, margin) {
  const inside = rows.filter((row) => Number.isFinite(one.values[row]));
  const profiles = profilesAt(inside.map((row) => at.get(page.samples.cast[row])),
    inside.map((row) => valueOf(vertical.key, row)), inside.map((row) => one.values[row]), inside.map((row) => valueOf("depth", row)));
  const x0 = -margin, x1 = length + margin, {low: y0, high: y1} = vertical;
  const grid = gridded(profiles, {x0, x1, y0, y1, ...GRID, gap: depthGap});
  section.grid = {...grid, x0, x1, y0, y1};
  const image = Bokeh.require("core/util/ndarray").ndarray(grid.values, {dtype: "float64", shape: [grid.ny, grid.nx]});
  section.image.data = {image: [image], x: [x0], y: [y0], dw: [x1 - x0], dh: [y1 - y0]};
}

/** Draw the sea floor between neighbouring casts that both have its depth, and nowhere else. */
function drawFloor({chosen, vertical}) {
  const data = {x: [], y: []};
  let piece = [];
  const close = () => {
    if (piece.length > 1) {
      data.x.push([...piece.map(([x]) => x), piece.at(-1)[0], piece[0][0]]);
      data.y.push([...piece.map(([, y]) => y), FLOOR, FLOOR]);
    }
    piece = [];
  };
  if (vertical.isDepth) {
    chosen.casts.forEach((cast, k) => {
      const bottom = page.casts.bottom[cast];
      bottom === null ? close() : piece.push([chosen.distance[k], bottom]);
    });
    close();
  }
  section.floor.data = data;
}

/** Write the names of stations above, as many as have room. */
function drawNames({chosen}, length, top) {
  const room = length / Math.max(4, Math.min(24, document.getElementById("plot-section").clientWidth / 52)), data = {x: [], y: [], t: []};
  chosen.casts.forEach((cast, k) => {
    if (data.x.length && chosen.distance[k] - data.x.at(-1) < room) return;
    const name = page.casts.name[cast].replace(" cast ", "/");
    data.x.push(chosen.distance[k]);
    data.y.push(top);
    data.t.push(name.length > 8 ? `${name.slice(0, 7)}\u2026` : name);
  });
  section.names.data = data;
}

function tellSection({chosen, one, rows}) {
  const known = rows.filter((row) => Number.isFinite(one.values[row]));
  const refused = rows.filter((row) => one.refused.has(row)).length;
  let words = `${one.words} along ${chosen.name}: no value that may be used.`;
  if (known.length) {
    const least = known.reduce((a, b) => (one.values[b] < one.values[a] ? b : a));
    const most = known.reduce((a, b) => (one.values[b] > one.values[a] ? b : a));
    const middle = quantile(sorted(known.map((row) => one.values[row])), 0.5);
    words = `${one.words} along ${chosen.name}, ${stationsOf(chosen)}: `
      + `from ${valueWords(one, one.values[least])} (${placeOf(least)}) to ${valueWords(one, one.values[most])} (${placeOf(most)}), `
      + `median ${valueWords(one, middle)}, in ${known.length} ${page.rows}s.`;
  }
  if (refused) words += ` ${refused} more are refused by flags or checks.`;
  document.getElementById("see-section").textContent = words;
  document.getElementById("plot-section").setAttribute("aria-label", `Section. ${words}`);
}

/** Say from which station to which a section goes. */
function stationsOf({casts}) {
  const [first, last] = [page.casts.name[casts[0]], page.casts.name[casts.at(-1)]];
  return first === last ? `station ${first}` : `stations ${first} to ${last}`;
}

/** Say where a sample is, in the middle of a sentence. */
function placeOf(row) {
  return `station ${page.casts.name[page.samples.cast[row]]}, ${short(valueOf("pressure", row))} dbar`;
}
