// Making figures: axes and their colours, layers of samples that mark each other, what pointing at one tells.
"use strict";

const FONT = "system-ui, sans-serif";
const finePointer = matchMedia("(pointer: fine)").matches;
const figures = new Map(); // by id: {figure, layers}

/** Make an empty figure; ``options`` are those of the library. */
function newFigure(id, options) {
  const figure = Bokeh.Plotting.figure({
    sizing_mode: "stretch_both", min_border_right: 12, min_border_top: 8,
    tools: "pan,box_zoom,wheel_zoom,box_select,tap,reset,save",
    toolbar_location: "above", ...options,
  });
  figure.toolbar.logo = null;
  figure.toolbar.active_scroll = null;
  figure.toolbar.active_drag = finePointer ? figure.toolbar.tools.find((tool) => tool.type === "BoxSelectTool") : null;
  for (const axis of axesOf(figure)) {
    axis.axis_label_text_font = axis.major_label_text_font = FONT;
    axis.axis_label_text_font_style = "normal";
    axis.axis_label_text_font_size = "14px";
    axis.major_label_text_font_size = "13px";
    axis.minor_tick_line_color = null;
  }
  figures.set(id, {figure, layers: []});
  return figure;
}

function axesOf(figure) {
  return [...figure.below, ...figure.left, ...figure.above, ...figure.right].filter((one) => "axis_label" in one);
}

/** Show a figure in its place and keep its colours those of the page. */
async function mount(id) {
  const {figure} = figures.get(id), place = document.getElementById(`plot-${id}`);
  painted((colours) => {
    figure.background_fill_color = colours.water;
    figure.border_fill_color = colours.paper;
    figure.outline_line_color = colours.rule;
    for (const axis of axesOf(figure)) {
      axis.axis_label_text_color = axis.major_label_text_color = colours.ink;
      axis.axis_line_color = axis.major_tick_line_color = colours.quiet;
    }
    for (const one of figure.center) if ("grid_line_color" in one) one.grid_line_color = colours.grid;
  });
  await Bokeh.Plotting.show(figure, place);
  place.dataset.ready = "yes";
  return figure;
}

/** Return columns that a layer of samples is drawn from. */
function sampleColumns(rows, x, y, more = {}) {
  return {
    row: rows, x: rows.map(x), y: rows.map(y),
    colour: rows.map((row) => looks[row].colour), marker: rows.map((row) => looks[row].marker),
    alpha: rows.map((row) => looks[row].alpha), words: rows.map(nameOf), shares: rows.map(sharesOf), ...more,
  };
}

/**
 * Add a layer of samples to a figure: it marks and is marked, and tells what is pointed at.
 *
 * Returns {source, set}: set(columns) draws other samples or places.
 */
function sampleLayer(id, columns, style = {}, tips = []) {
  const {figure, layers} = figures.get(id);
  const source = new Bokeh.ColumnDataSource({data: columns});
  const at = {field: "x"}, to = {field: "y"};
  const glyph = figure.scatter(at, to, {
    source, size: 7, marker: {field: "marker"}, fill_color: {field: "colour"}, fill_alpha: {field: "alpha"},
    line_color: {field: "colour"}, line_alpha: {field: "alpha"}, line_width: 0.6,
    nonselection_fill_alpha: 0.12, nonselection_line_alpha: 0.12,
    selection_fill_alpha: 1, selection_line_alpha: 1, selection_line_width: 1.6, ...style,
  });
  painted((colours) => {
    if (glyph.selection_glyph?.line_color !== undefined) glyph.selection_glyph.line_color = colours.ink;
  });
  const ring = new Bokeh.ColumnDataSource({data: {x: [], y: []}});
  const circle = figure.scatter(at, to, {source: ring, size: 17, marker: "circle", fill_color: null, line_width: 3});
  painted((colours) => { circle.glyph.line_color = colours.link; });
  figure.add_tools(new Bokeh.HoverTool({
    renderers: [glyph], mode: "mouse", point_policy: "snap_to_data", attachment: "horizontal",
    tooltips: [["", "@words"], ...(page.sources.length ? [["", "@shares"]] : []), ...tips],
  }));
  let told = false; // whether the change comes from elsewhere
  source.selected.properties.indices.change.connect(() => {
    if (told) return;
    const kept = [...marks.rows].filter((row) => !source.data.row.includes(row));
    const chosen = source.selected.indices.map((index) => source.data.row[index]);
    marks.set([...kept.filter(() => false), ...chosen], layer);
  });
  const layer = {
    source,
    set(next) {
      told = true;
      source.selected.indices = [];
      source.data = next;
      told = false;
      this.show();
    },
    show(from) {
      const {row, x, y} = source.data;
      if (from !== this) {
        told = true;
        source.selected.indices = marks.rows.size ? row.flatMap((one, index) => (marks.rows.has(one) ? [index] : [])) : [];
        told = false;
      }
      const index = row.indexOf(marks.cursor);
      ring.data = index < 0 ? {x: [], y: []} : {x: [x[index]], y: [y[index]]};
    },
  };
  marks.listen((from) => layer.show(from));
  layers.push(layer);
  return layer;
}

/** Return the range of numbers, a little wider. */
function spanOf(values, margin = 0.04) {
  let low = Infinity, high = -Infinity;
  for (const value of values) if (Number.isFinite(value)) { low = Math.min(low, value); high = Math.max(high, value); }
  if (!(high >= low)) return [0, 1];
  const room = (high - low || Math.abs(high) || 1) * margin;
  return [low - room, high + room];
}

/** Return a vertical range that goes down. */
function downward(low, high) {
  return new Bokeh.Range1d({start: high, end: low});
}

/** Fill a select element: groups of [value, words]. Words are text, whatever they hold. */
function fillSelect(select, groups, chosen) {
  for (const [group, options] of groups) {
    const parent = group ? select.appendChild(document.createElement("optgroup")) : select;
    if (group) parent.label = group;
    for (const [value, words] of options) {
      const option = parent.appendChild(document.createElement("option"));
      option.value = value;
      option.textContent = words;
      option.selected = value === chosen;
    }
  }
}

/** Return the quantities in their groups, for a select element. */
function quantityGroups(wanted = () => true) {
  const groups = new Map();
  for (const one of quantities.values()) {
    if (!wanted(one)) continue;
    if (!groups.has(one.group)) groups.set(one.group, []);
    groups.get(one.group).push([one.key, one.words]);
  }
  return [...groups];
}
