// The page of the archive: tracks on a map, and shares at two visits.
"use strict";

/** Return a longitude within half a turn of the map's middle. */
function near(longitude) {
  const turned = (((longitude - page.centre + 180) % 360) + 360) % 360 + page.centre - 180;
  return turned;
}

/** Return where tick marks stand over a range of degrees, and what they say. */
function degrees([low, high], positive, negative, most) {
  const step = [0.1, 0.2, 0.5, 1, 2, 5, 10, 15, 30, 60].find((one) => (high - low) / one <= most) ?? 60;
  const ticks = [], labels = new Map();
  for (let k = Math.ceil(low / step); k * step <= high; k++) {
    const at = Number((k * step).toFixed(4)), turned = ((at + 540) % 360) - 180;
    ticks.push(at);
    const size = Number(Math.abs(positive === "E" ? turned : at).toFixed(4));
    const half = (positive === "E" ? turned : at) < 0 ? negative : positive;
    labels.set(at, size === 0 || size === 180 ? `${size}\u00b0` : `${size}\u00b0 ${half}`);
  }
  return {ticks, labels};
}

async function drawMap() {
  const cruises = page.cruises.filter((cruise) => cruise.tracks.length);
  if (!cruises.length) return;
  const points = cruises.flatMap((cruise) => cruise.tracks.flatMap((track) => track.longitude.map((x, k) => ({
    x: near(x), y: track.latitude[k], name: cruise.name, days: cruise.days, colour: colourOf(cruise)}))));
  const xs = spanOf(points.map((p) => p.x), 0.1), ys = spanOf(points.map((p) => p.y), 0.1);
  const place = document.getElementById("plot-map"), squeeze = Math.max(0.1, Math.cos((ys[0] + ys[1]) / 2 * Math.PI / 180));
  widen(xs, ys, (place.clientWidth - 90) / (place.clientHeight - 90) / squeeze);
  const figure = newFigure("map", {
    x_range: new Bokeh.Range1d({start: xs[0], end: xs[1]}), y_range: new Bokeh.Range1d({start: ys[0], end: ys[1]}),
    tools: "pan,box_zoom,wheel_zoom,reset,save",
  });
  for (const [axis, span, positive, negative, most] of [
    [figure.below[0], xs, "E", "W", place.clientWidth / 90], [figure.left[0], ys, "N", "S", place.clientHeight / 60]]) {
    const {ticks, labels} = degrees(span, positive, negative, most);
    axis.ticker = new Bokeh.FixedTicker({ticks});
    axis.major_label_overrides = labels;
  }
  for (const grid of figure.center) if ("ticker" in grid) grid.ticker = (grid.dimension === 0 ? figure.below : figure.left)[0].ticker;
  const lines = cruises.flatMap((cruise) => cruise.tracks.map((track) => ({
    x: track.longitude.map(near), y: track.latitude, colour: colourOf(cruise)})));
  figure.multi_line({field: "x"}, {field: "y"}, {line_color: {field: "colour"}, line_width: 2, line_alpha: 0.7,
    source: new Bokeh.ColumnDataSource({data: {x: lines.map((l) => l.x), y: lines.map((l) => l.y), colour: lines.map((l) => l.colour)}})});
  const data = Object.fromEntries(["x", "y", "name", "days", "colour"].map((key) => [key, points.map((p) => p[key])]));
  const dots = figure.scatter({field: "x"}, {field: "y"}, {source: new Bokeh.ColumnDataSource({data}), size: 6, marker: "circle",
    fill_color: {field: "colour"}, line_width: 0.6});
  const first = namesOf(cruises, points, xs[1], (xs[1] - xs[0]) / place.clientWidth, (ys[1] - ys[0]) / place.clientHeight);
  const names = figure.text({field: "x"}, {field: "y"}, {field: "t"}, {text_font: FONT, text_font_size: "13px", text_baseline: "bottom",
    source: new Bokeh.ColumnDataSource({data: {x: first.map((p) => p.x), y: first.map((p) => p.y), t: first.map((p) => p.t)}})});
  painted((colours) => {
    names.glyph.text_color = colours.ink;
    dots.glyph.line_color = colours.ink;
  });
  figure.add_tools(new Bokeh.HoverTool({renderers: [dots], tooltips: [["", "@name"], ["", "@days"]], mode: "mouse"}));
  await mount("map");
}

/** Return where names of cruises stand: near a track, not over another name and over as few stations as can be. */
function namesOf(cruises, points, east, perX, perY) {
  const placed = [];
  for (const cruise of cruises) {
    const {longitude, latitude} = cruise.tracks[0], last = longitude.length - 1;
    const wide = cruise.name.length * 8 * perX, high = 17 * perY;
    const spots = [0, last, last >> 1, last >> 2].flatMap((k) => [10, -24, 30, -44].map((up) => ({
      x: Math.min(near(longitude[k]), east - wide - 20 * perX), y: latitude[k] + up * perY, t: cruise.name, wide})));
    const free = spots.filter((one) => placed.every((other) => Math.abs(one.y - other.y) > high
      || one.x > other.x + other.wide || other.x > one.x + wide));
    const over = (one) => points.filter((p) => p.x > one.x - 5 * perX && p.x < one.x + wide && p.y > one.y - 4 * perY && p.y < one.y + high).length;
    if (free.length) placed.push(free.map((one) => [over(one), one]).reduce((a, b) => (b[0] < a[0] ? b : a))[1]);
  }
  return placed;
}

/** Widen the narrower of two ranges until the map has the shape of its place. */
function widen(xs, ys, shape) {
  const wide = xs[1] - xs[0], high = ys[1] - ys[0];
  const [narrow, more] = wide / high < shape ? [xs, high * shape - wide] : [ys, wide / shape - high];
  narrow[0] -= more / 2;
  narrow[1] += more / 2;
}

function colourOf(cruise) {
  const scale = page.scales.viridis, most = Math.max(1, page.cruises.length - 1);
  return scale[Math.round((cruise.rank / most) * (scale.length - 30))];
}

async function drawChange() {
  if (!page.comparisons.length) return;
  const which = document.getElementById("choose-comparison"), source = document.getElementById("choose-source");
  fillSelect(which, [["", page.comparisons.map((one, k) => [String(k), one.name])]]);
  fillSelect(source, [["", page.sources.map((one) => [one.code, one.code])]]);
  const figure = newFigure("change", {x_range: new Bokeh.Range1d({start: -0.03, end: 1.03}), y_range: downward(0, 1),
    x_axis_label: "Mean share", y_axis_label: "Pressure, dbar", tools: "pan,box_zoom,reset,save"});
  const visits = ["earlier", "later"].map((visit) => {
    const data = new Bokeh.ColumnDataSource({data: {x: [], y: []}}), dash = visit === "earlier" ? "dashed" : "solid";
    const line = figure.line({field: "x"}, {field: "y"}, {source: data, line_width: 2, line_dash: dash});
    const dots = figure.scatter({field: "x"}, {field: "y"}, {source: data, size: 10, line_width: 2});
    return {visit, data, line, dots};
  });
  const update = () => {
    const one = page.comparisons[Number(which.value)], look = page.sources.find((s) => s.code === source.value);
    const changes = one.changes.filter((change) => change.code === source.value);
    for (const {visit, data, line, dots} of visits) {
      data.data = {x: changes.map((c) => c[visit]), y: changes.map(middleOf)};
      line.glyph.line_color = dots.glyph.line_color = look.colour;
      dots.glyph.fill_color = visit === "later" ? look.colour : null;
      dots.glyph.marker = look.marker;
    }
    Object.assign(figure.y_range, {start: Math.max(1000, ...changes.map(middleOf)) * 1.08, end: 0});
    tellChange(one, changes, source.value);
  };
  update();
  which.addEventListener("change", update);
  source.addEventListener("change", update);
  await mount("change");
}

/** Return the pressure at which a layer is drawn; the lowest has no floor. */
function middleOf(change) {
  return change.bottom > 9000 ? change.top + 500 : (change.top + change.bottom) / 2;
}

function tellChange(one, changes, code) {
  const table = document.getElementById("change-table");
  table.caption.textContent = `Mean share of ${code}, ${one.name}`;
  table.tBodies[0].replaceChildren(...changes.map((c) => {
    const line = document.createElement("tr");
    const layer = c.bottom > 9000 ? `below ${c.top}` : `${c.top} to ${c.bottom}`;
    const sign = c.difference <= -0.0005 ? "\u2212" : "+";
    const words = [layer, c.earlier.toFixed(3), c.later.toFixed(3), `${sign}${Math.abs(c.difference).toFixed(3)} \u00b1 ${c.error.toFixed(3)}`, c.places];
    words.forEach((word, k) => {
      const cell = line.appendChild(document.createElement(k ? "td" : "th"));
      cell.textContent = word;
      cell.className = k ? "n" : "";
      if (!k) cell.scope = "row";
    });
    return line;
  }));
}

async function startArchive() {
  await drawMap();
  await drawChange();
  document.documentElement.dataset.ready = "yes";
}

startArchive();
