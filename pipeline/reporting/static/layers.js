// Layers of samples that mark each other, and what pointing at one tells.
"use strict";

const nameKept = kept(nameOf), sharesKept = kept(sharesOf);

/** Return a function that works out a sample's words once. */
function kept(tell) {
  const told = [];
  return (row) => (told[row] ??= tell(row));
}

/** Return columns that a layer of samples is drawn from. */
function sampleColumns(rows, x, y, more = {}) {
  return {
    row: rows, x: rows.map(x), y: rows.map(y),
    colour: rows.map((row) => looks[row].colour), marker: rows.map((row) => looks[row].marker),
    alpha: rows.map((row) => looks[row].alpha), words: rows.map(nameKept), shares: rows.map(sharesKept), ...more,
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
    renderers: [glyph], mode: "mouse", limit: 3, point_policy: "snap_to_data", attachment: "horizontal",
    tooltips: [["", "@words"], ...(page.sources.length ? [["", "@shares"]] : []), ...tips],
  }));
  let told = false; // whether the change comes from elsewhere
  source.selected.properties.indices.change.connect(() => {
    if (told) return;
    marks.set(source.selected.indices.map((index) => source.data.row[index]), layer);
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

/** Return where a sample is drawn, in pixels of the window; null where it is not. */
function pixelOf(id, row) {
  const {view, layers} = figures.get(id);
  for (const {source} of layers) {
    const index = source.data.row.indexOf(row);
    if (index < 0) continue;
    const box = view.canvas_view.el.getBoundingClientRect(), {x_scale, y_scale} = view.frame;
    return [box.x + x_scale.compute(source.data.x[index]), box.y + y_scale.compute(source.data.y[index])];
  }
  return null;
}
