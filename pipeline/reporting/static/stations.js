// One station: CTD and bottles together, shares over depth, and its samples as a table.
"use strict";

const FIXED = ["conservative_temperature", "absolute_salinity", "oxygen"];
const profiles = []; // the drawn ones: {set(quantity, place)}
const places = []; // what can be chosen: {name, cast, ctd}

function gatherPlaces() {
  const ctd = new Map(page.ctd.filter((one) => one.cast >= 0).map((one) => [one.cast, one.values]));
  const along = new Map(castOrder.map((cast, k) => [cast, k]));
  for (const cast of [...along.keys()]) places.push({name: page.casts.name[cast], cast, ctd: ctd.get(cast)});
  for (const one of page.ctd) if (one.cast < 0) places.push({name: one.name, cast: -1, ctd: one.values});
}

function profileFigure(id) {
  const figure = newFigure(id, {
    x_range: new Bokeh.Range1d({start: 0, end: 1}), y_range: downward(0, 1), x_axis_label: "", y_axis_label: "Pressure, dbar",
    tools: "pan,box_zoom,box_select,tap,reset",
  });
  const line = new Bokeh.ColumnDataSource({data: {x: [], y: []}}), cross = new Bokeh.ColumnDataSource({data: {x: [], y: []}});
  const drawn = figure.line({field: "x"}, {field: "y"}, {source: line, line_width: 2});
  const refused = figure.scatter({field: "x"}, {field: "y"}, {source: cross, size: 10, marker: "x", line_width: 2});
  const layer = sampleLayer(id, sampleColumns([], Number, Number, {value: []}), {size: 9, line_width: 1, line_alpha: 1, fill_alpha: 0.9}, [["", "@value"]]);
  painted((colours) => {
    drawn.glyph.line_color = colours.quiet;
    refused.glyph.line_color = colours.ink;
  });
  const pressure = quantity("pressure").values;
  return {
    set(one, key, place, deepest) {
      const rows = place.cast < 0 ? [] : rowsOfCast[place.cast];
      const known = rows.filter((row) => Number.isFinite(one.values[row]) && Number.isFinite(pressure[row]));
      const crossed = rows.filter((row) => one.refused.has(row));
      const ctd = place.ctd?.[key] ? {x: column(place.ctd[key]), y: column(place.ctd.pressure)} : {x: [], y: []};
      line.data = ctd;
      cross.data = {x: crossed.map((row) => one.refused.get(row)), y: crossed.map((row) => pressure[row])};
      layer.set(sampleColumns(known, (row) => one.values[row], (row) => pressure[row], {
        value: known.map((row) => `${one.words} ${valueWords(one, one.values[row])}`),
      }));
      const [start, end] = spanOf([...known.map((row) => one.values[row]), ...ctd.x], 0.06);
      Object.assign(figure.x_range, {start, end, reset_start: start, reset_end: end});
      Object.assign(figure.y_range, {start: deepest, end: 0, reset_start: deepest, reset_end: 0});
      figure.below[0].axis_label = wrapped(known.length || ctd.x.length ? label(one) : `${one.words}: no value here`, document.getElementById(`plot-${id}`).clientWidth / 8.5);
    },
  };
}

/** Make the figure of shares over pressure: a line and signs for each source. */
function sharesFigure(id) {
  const figure = newFigure(id, {x_range: new Bokeh.Range1d({start: -0.03, end: 1.03}), y_range: downward(0, 1),
    x_axis_label: "Share of each source", y_axis_label: "Pressure, dbar", tools: "pan,box_zoom,box_select,tap,reset"});
  const pressure = quantity("pressure").values;
  const parts = page.sources.map((source) => {
    const line = new Bokeh.ColumnDataSource({data: {x: [], y: []}});
    figure.line({field: "x"}, {field: "y"}, {source: line, line_color: source.colour, line_width: 1.5, line_alpha: 0.7});
    const layer = sampleLayer(id, sampleColumns([], Number, Number), {size: 7});
    return {source, line, layer};
  });
  return {
    set(place, deepest) {
      const rows = place.cast < 0 ? [] : rowsOfCast[place.cast];
      for (const {source, line, layer} of parts) {
        const share = quantity(`share:${source.code}`).values;
        const known = rows.filter((row) => Number.isFinite(share[row]));
        line.data = {x: known.map((row) => share[row]), y: known.map((row) => pressure[row])};
        layer.set(sampleColumns(known, (row) => share[row], (row) => pressure[row], {
          colour: known.map(() => source.colour), marker: known.map(() => source.marker), alpha: known.map(() => 0.9),
        }));
      }
      figure.below[0].axis_label = rows.some((row) => page.samples.leader[row] >= 0) ? "Share of each source" : "Sources: not resolved here";
      Object.assign(figure.y_range, {start: deepest, end: 0, reset_start: deepest, reset_end: 0});
    },
  };
}

async function drawStations() {
  gatherPlaces();
  const select = document.getElementById("choose-station"), fourth = document.getElementById("choose-profile");
  fillSelect(select, [["", places.map((place, k) => [String(k), place.name])]], String(firstPlace()));
  const wanted = ["nitrate", "phosphate", "silicate", "sigma0"].find((key) => quantities.has(key));
  fillSelect(fourth, quantityGroups((one) => !FIXED.includes(one.key)), wanted);
  for (const k of [1, 2, 3, 4]) profiles.push(profileFigure(`profile-${k}`));
  const shares = document.getElementById("plot-profile-5") ? sharesFigure("profile-5") : null;
  const update = () => updateStation(places[Number(select.value)], fourth.value, shares);
  update();
  for (const one of [select, fourth]) one.addEventListener("change", update);
  document.getElementById("mark-station").addEventListener("click", () => {
    const {cast} = places[Number(select.value)];
    if (cast >= 0) marks.set(rowsOfCast[cast], "button");
  });
  marks.listen(markTable);
  marks.listen(() => {
    const casts = new Set([...marks.rows].map((row) => page.samples.cast[row]));
    const place = places.findIndex((one) => casts.size === 1 && casts.has(one.cast));
    if (place < 0 || place === Number(select.value)) return;
    select.value = String(place); // what is marked in one cast is shown here
    update();
  });
  for (const k of [1, 2, 3, 4]) await mount(`profile-${k}`);
  if (shares) await mount("profile-5");
}

/** Return the place to begin with: one with both CTD and bottles, with most samples. */
function firstPlace() {
  let best = 0;
  const worth = (place) => (place.cast < 0 ? 0 : rowsOfCast[place.cast].length) + (place.ctd ? 1000 : 0);
  places.forEach((place, k) => { if (worth(place) > worth(places[best])) best = k; });
  return best;
}

function updateStation(place, fourth, shares) {
  if (!place) return;
  const rows = place.cast < 0 ? [] : rowsOfCast[place.cast];
  const pressures = [...rows.map((row) => valueOf("pressure", row)), ...column(place.ctd?.pressure ?? [])];
  const deepest = spanOf(pressures)[1];
  [...FIXED, fourth].forEach((key, k) => {
    const one = quantities.get(key) ?? {...nothing, ...page.profiled[key]};
    profiles[k].set(one, key, place, deepest);
  });
  shares?.set(place, deepest);
  tellStation(place, rows, fourth);
}

function tellStation(place, rows, fourth) {
  const where = place.cast < 0 ? "" : ` at ${placeWords(page.casts.latitude[place.cast], page.casts.longitude[place.cast])}`
    + (page.casts.date[place.cast] ? `, ${page.casts.date[place.cast]}` : "");
  const bottom = place.cast < 0 ? null : page.casts.bottom[place.cast];
  let words = `Station ${place.name}${where}: ${rows.length} ${page.rows}${rows.length === 1 ? "" : "s"}`
    + `${bottom === null ? "" : `, sea floor at ${short(bottom)} m`}${place.ctd ? "" : ", no CTD profile"}.`;
  for (const source of page.sources) {
    const share = quantity(`share:${source.code}`).values;
    const known = rows.filter((row) => share[row] > 0.5);
    if (known.length) {
      const most = known.reduce((a, b) => (share[b] > share[a] ? b : a));
      words += ` ${source.code} reaches ${share[most].toFixed(2)} at ${short(valueOf("pressure", most))} dbar.`;
    }
  }
  document.getElementById("see-station").textContent = words;
  fillTable(place, rows, fourth);
}

function fillTable(place, rows, fourth) {
  const table = document.getElementById("station-table");
  const keys = ["pressure", ...FIXED, fourth, ...page.sources.map((source) => `share:${source.code}`)].filter((key) => quantities.has(key));
  table.caption.textContent = `Station ${place.name}, from the surface down`;
  const head = table.tHead, body = table.tBodies[0];
  head.replaceChildren(rowOf("th", ["Sample", ...keys.map((key) => label(quantity(key)))], "col"));
  body.replaceChildren(...rows.map((row) => {
    const line = rowOf("td", keys.map((key) => (Number.isFinite(valueOf(key, row)) ? (key.startsWith("share") ? valueOf(key, row).toFixed(3) : short(valueOf(key, row))) : "\u2013")));
    const name = document.createElement("th"), button = document.createElement("button");
    name.scope = "row";
    button.type = "button";
    button.textContent = page.samples.sample[row] || short(valueOf("pressure", row));
    button.setAttribute("aria-label", `Mark ${nameOf(row)}`);
    button.addEventListener("click", () => { marks.cursor = row; marks.toggle([row], "table"); });
    name.append(button);
    line.prepend(name);
    line.dataset.row = row;
    return line;
  }));
  markTable();
}

function rowOf(kind, words, scope = "") {
  const line = document.createElement("tr");
  for (const word of words) {
    const cell = line.appendChild(document.createElement(kind));
    cell.textContent = word;
    cell.className = kind === "td" || line.children.length > 1 ? "n" : "";
    if (scope) cell.scope = scope;
  }
  return line;
}

function markTable() {
  for (const line of document.querySelectorAll("#station-table tbody tr")) {
    const marked = marks.rows.has(Number(line.dataset.row));
    line.classList.toggle("is-marked", marked);
    line.querySelector("button").setAttribute("aria-pressed", String(marked));
  }
}
