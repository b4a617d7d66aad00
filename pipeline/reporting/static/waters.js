// What the waters are: Conservative Temperature against Absolute Salinity, over lines of equal density.
"use strict";

async function drawWaters() {
  const salinity = quantity("absolute_salinity"), temperature = quantity("conservative_temperature");
  const figure = newFigure("waters", {
    x_axis_label: label(salinity), y_axis_label: label(temperature),
    x_range: new Bokeh.Range1d(rangeOf(spanOf(salinity.values))), y_range: new Bokeh.Range1d(rangeOf(spanOf(temperature.values))),
  });
  const lines = figure.multi_line({field: "x"}, {field: "y"}, {
    source: new Bokeh.ColumnDataSource({data: {x: page.density.map((l) => l.x), y: page.density.map((l) => l.y)}}),
    line_width: 1, line_dash: [4, 3],
  });
  const texts = figure.text({field: "x"}, {field: "y"}, {text: {field: "t"}}, {
    source: new Bokeh.ColumnDataSource({data: densityTexts(spanOf(salinity.values), spanOf(temperature.values))}),
    text_font_size: "12px", text_font: FONT, text_align: "right", text_baseline: "middle", x_offset: -2,
  });
  painted((colours) => {
    lines.glyph.line_color = colours.quiet;
    texts.glyph.text_color = colours.quiet;
    texts.glyph.background_fill_color = colours.water;
  });
  const rows = [...Array(sampleCount).keys()]
    .filter((row) => Number.isFinite(salinity.values[row]) && Number.isFinite(temperature.values[row]))
    .sort((a, b) => (page.samples.leader[a] < 0 ? 0 : 1) - (page.samples.leader[b] < 0 ? 0 : 1) || a - b);
  sampleLayer("waters", sampleColumns(rows, (row) => salinity.values[row], (row) => temperature.values[row]),
    {size: rows.length > 2000 ? 6 : 8});
  await mount("waters");
}

function rangeOf([start, end]) {
  return {start, end};
}

/** Return where the densities stand: at the end of each line that is farthest right inside the figure. */
function densityTexts([x0, x1], [y0, y1]) {
  const data = {x: [], y: [], t: []};
  for (const line of page.density) {
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
