// What the waters are: Conservative Temperature against Absolute Salinity, over lines of equal density.
"use strict";

async function drawWaters() {
  if (!page.views.length) return;
  const select = document.getElementById("choose-waters");
  fillSelect(select, [["", page.views.map(({above}, k) => [String(k), above ? `below ${above} dbar` : "all"])]], "0");
  const figure = newFigure("waters", {
    x_axis_label: label(quantity("absolute_salinity")), y_axis_label: label(quantity("conservative_temperature")),
    x_range: new Bokeh.Range1d({start: 0, end: 1}), y_range: new Bokeh.Range1d({start: 0, end: 1}),
  });
  const along = new Bokeh.ColumnDataSource({data: {x: [], y: []}}), beside = new Bokeh.ColumnDataSource({data: {x: [], y: [], t: []}});
  const lines = figure.multi_line({field: "x"}, {field: "y"}, {source: along, line_width: 1, line_dash: "dashed"});
  const texts = figure.text({field: "x"}, {field: "y"}, {field: "t"}, {source: beside, text_font_size: "12px", text_font: FONT,
    text_align: "right", text_baseline: "bottom"});
  painted((colours) => {
    lines.glyph.line_color = colours.quiet;
    texts.glyph.text_color = colours.quiet;
  });
  const layer = sampleLayer("waters", sampleColumns([], Number, Number), {size: sampleCount > 2000 ? 6 : 8});
  drawEnds(figure);
  const update = () => {
    const {above, salinity, temperature, lines: drawn} = page.views[Number(select.value)];
    Object.assign(figure.x_range, rangeOf(salinity));
    Object.assign(figure.y_range, rangeOf(temperature));
    along.data = {x: drawn.map((line) => line.x), y: drawn.map((line) => line.y)};
    beside.data = densityTexts(drawn, salinity, temperature);
    const rows = watersFrom(above);
    layer.set(sampleColumns(rows, (row) => valueOf("absolute_salinity", row), (row) => valueOf("conservative_temperature", row)));
  };
  update();
  select.addEventListener("change", update);
  await mount("waters");
}

/** Return the samples from a pressure on, those without a leading source first: the others lie over them. */
function watersFrom(pressure) {
  const led = (row) => (page.samples.leader[row] < 0 ? 0 : 1);
  return [...Array(sampleCount).keys()]
    .filter((row) => Number.isFinite(valueOf("absolute_salinity", row)) && Number.isFinite(valueOf("conservative_temperature", row))
      && valueOf("pressure", row) >= pressure)
    .sort((a, b) => led(a) - led(b) || a - b);
}

/** Draw the sources themselves as large hollow signs with their codes. */
function drawEnds(figure) {
  const ends = page.sources.filter((source) => source.salinity !== null && source.temperature !== null);
  const source = new Bokeh.ColumnDataSource({data: {
    x: ends.map((one) => one.salinity), y: ends.map((one) => one.temperature), code: ends.map((one) => one.code),
    colour: ends.map((one) => one.colour), marker: ends.map((one) => one.marker),
  }});
  figure.scatter({field: "x"}, {field: "y"}, {source, size: 19, marker: {field: "marker"}, fill_color: null,
    line_color: {field: "colour"}, line_width: 3});
  const codes = figure.text({field: "x"}, {field: "y"}, {field: "code"}, {source, text_font: FONT, text_font_size: "14px",
    text_font_style: "bold", x_offset: 13, text_baseline: "middle"});
  painted((colours) => { codes.glyph.text_color = colours.ink; });
}

function rangeOf([start, end]) {
  return {start, end, reset_start: start, reset_end: end};
}

/** Return where the densities stand: at the end of each line that is farthest right inside the figure. */
function densityTexts(lines, [x0, right], [y0, top]) {
  const x1 = right - (right - x0) * 0.005, y1 = top - (top - y0) * 0.04;
  const data = {x: [], y: [], t: []};
  for (const line of lines) {
    let best = -1;
    line.x.forEach((x, k) => {
      const inside = x >= x0 && x <= x1 && line.y[k] >= y0 && line.y[k] <= y1;
      if (inside && (best < 0 || x > line.x[best])) best = k;
    });
    if (best < 0) continue;
    data.x.push(line.x[best]);
    data.y.push(line.y[best]);
    data.t.push(String(line.sigma));
  }
  return data;
}
