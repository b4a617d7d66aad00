// How sure that is: spreads of shares, residuals; and what respiration changed, against pressure.
"use strict";

/** Draw the standard uncertainty of every share against the share. */
async function drawSpread() {
  if (!document.getElementById("plot-spread")) return;
  newFigure("spread", {x_axis_label: "Share", y_axis_label: "Standard uncertainty of the share",
    x_range: new Bokeh.Range1d({start: -0.02, end: 1.02})});
  for (const source of page.sources) {
    const share = quantity(`share:${source.code}`).values, spread = quantity(`share_uncertainty:${source.code}`).values;
    const rows = [...share.keys()].filter((row) => Number.isFinite(share[row]) && Number.isFinite(spread[row]));
    if (!rows.length) continue;
    sampleLayer("spread", sampleColumns(rows, (row) => share[row], (row) => spread[row], {
      colour: rows.map(() => source.colour), marker: rows.map(() => source.marker), alpha: rows.map(() => 0.6),
    }), {size: 5});
  }
  await mount("spread");
}

/** Return the samples that have both, and their pressure. */
function withPressure(values) {
  const pressure = quantity("pressure").values;
  return [...values.keys()].filter((row) => Number.isFinite(values[row]) && Number.isFinite(pressure[row]));
}

/** Make a figure of a quantity against pressure whose quantity can change; returns {set(quantity)}. */
function againstPressure(id) {
  const pressure = quantity("pressure").values;
  const figure = newFigure(id, {
    x_range: new Bokeh.Range1d({start: 0, end: 1}), y_range: downward(0, spanOf(pressure)[1]),
    x_axis_label: "", y_axis_label: label(quantity("pressure")),
  });
  const zero = new Bokeh.Span({location: 0, dimension: "height", line_width: 1.5});
  figure.add_layout(zero);
  painted((colours) => { zero.line_color = colours.ink; });
  const beside = new Bokeh.ColumnDataSource({data: {x: [], y: []}});
  const dots = figure.scatter({field: "x"}, {field: "y"}, {source: beside, size: 3, marker: "circle", line_color: null});
  painted((colours) => { dots.glyph.fill_color = colours.quiet; });
  const layer = sampleLayer(id, sampleColumns([], Number, Number), {size: 6});
  return {
    set(one, words, other = null) {
      const rows = withPressure(one.values), also = other ? withPressure(other.values) : [];
      const all = [...rows.map((row) => one.values[row]), ...also.map((row) => other.values[row])];
      const [start, end] = spanOf(all);
      Object.assign(figure.x_range, {start, end, reset_start: start, reset_end: end});
      figure.below[0].axis_label = words;
      beside.data = {x: also.map((row) => other.values[row]), y: also.map((row) => pressure[row])};
      layer.set(sampleColumns(rows, (row) => one.values[row], (row) => pressure[row]));
    },
  };
}

async function drawResidual() {
  const select = document.getElementById("choose-residual"), groups = quantityGroups((one) => one.group === "Residuals");
  if (!select || !groups.length) return;
  fillSelect(select, [["", groups[0][1].map(([key, words]) => [key, words.split(",")[0]])]]);
  const figure = againstPressure("residual");
  const update = () => {
    const one = quantity(select.value), known = sorted([...one.values]);
    figure.set(one, label(one));
    document.getElementById("see-residual").textContent = `${one.words}: median ${withUnit(quantile(known, 0.5), one.unit)}, `
      + `nine tenths of ${known.length} samples between ${short(quantile(known, 0.05))} and ${withUnit(quantile(known, 0.95), one.unit)}.`;
  };
  update();
  select.addEventListener("change", update);
  await mount("residual");
}

async function drawSplit() {
  const select = document.getElementById("choose-split");
  if (!select || !page.split.length) return;
  fillSelect(select, [["", page.split.map((name) => [name, (quantities.get(name) ?? quantity(`${name}_from_sources`)).words])]], page.split[0]);
  const left = againstPressure("split-sources"), right = againstPressure("split-respiration");
  const update = () => {
    const brought = quantity(`${select.value}_from_sources`), added = quantity(`${select.value}_from_respiration`);
    const observed = quantities.get(select.value) ?? nothing;
    left.set(brought, label({...brought, words: "From sources, and observed"}), observed);
    right.set(added, label({...added, words: "From respiration"}));
    const known = sorted([...added.values]);
    document.getElementById("see-split").textContent = known.length ? `${added.words.split(" (")[0]}: from ${short(known[0])} to `
      + `${withUnit(known.at(-1), added.unit)}, median ${withUnit(quantile(known, 0.5), added.unit)}, in ${known.length} samples.` : "No sample has it.";
  };
  update();
  select.addEventListener("change", update);
  await mount("split-sources");
  await mount("split-respiration");
}
