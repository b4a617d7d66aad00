// Making figures: axes and their colours, ranges, and filling the form controls beside them.
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
  figure.toolbar.active_drag = finePointer ? figure.toolbar.tools.find((tool) => tool.type === "BoxSelectTool") ?? null : null;
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
  const fit = () => {
    for (const axis of figure.below) {
      if ("desired_num_ticks" in axis.ticker) axis.ticker.desired_num_ticks = Math.round(Math.min(10, Math.max(3, place.clientWidth / 75)));
    }
  };
  fit();
  addEventListener("resize", fit);
  figures.get(id).view = await Bokeh.Plotting.show(figure, place);
  place.dataset.ready = "yes";
  return figure;
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
