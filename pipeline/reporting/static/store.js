// The page's data, read once, and what is marked: every figure asks here and is told from here.
"use strict";

const quantities = new Map();
for (const one of page.quantities ?? []) {
  quantities.set(one.key, {...one, values: column(one.values), refused: new Map(one.refused ?? [])});
}
const nothing = {words: "", unit: "", values: new Float64Array(0), refused: new Map()};

/** Return a quantity, an empty one where the cruise does not have it. */
function quantity(key) {
  return quantities.get(key) ?? nothing;
}

/** Return a value of a sample, NaN where there is none. */
function valueOf(key, row) {
  return quantity(key).values[row] ?? NaN;
}

const sampleCount = page.samples?.cast.length ?? 0;
const rowsOfCast = (page.casts?.name ?? []).map(() => []);
for (let row = 0; row < sampleCount; row++) rowsOfCast[page.samples.cast[row]].push(row);
for (const rows of rowsOfCast) rows.sort((a, b) => valueOf("pressure", a) - valueOf("pressure", b) || a - b);

/** Say what a sample is, in a few words. */
function nameOf(row) {
  const sample = page.samples.sample[row];
  const words = [`Station ${page.casts.name[page.samples.cast[row]]}`];
  if (sample) words.push(`sample ${sample}`);
  words.push(`${short(valueOf("pressure", row))} dbar`);
  return words.join(", ");
}

/** Say what a sample is made of: shares that do not round to zero, the largest first. */
function sharesOf(row) {
  return page.sources
    .map((source) => [source.code, valueOf(`share:${source.code}`, row), valueOf(`share_uncertainty:${source.code}`, row)])
    .filter(([, share]) => share >= 0.005)
    .sort((a, b) => b[1] - a[1])
    .map(([code, share, spread]) => `${code} ${share.toFixed(2)}${Number.isFinite(spread) ? ` \u00b1 ${spread.toFixed(2)}` : ""}`)
    .join(", ");
}

/** Say all that fits in a line about a sample. */
function sentenceOf(row) {
  const measured = ["conservative_temperature", "absolute_salinity", "oxygen"]
    .filter((key) => Number.isFinite(valueOf(key, row)))
    .map((key) => `${quantity(key).words} ${withUnit(valueOf(key, row), quantity(key).unit)}`);
  const shares = sharesOf(row), tag = page.samples.tag[row];
  const made = shares ? ` Sources: ${shares}.` : "";
  return `${nameOf(row)}: ${measured.join(", ")}.${made}${tag && !shares ? ` Not resolved: ${tag}.` : ""}`;
}

/** Colour, form and strength of a sample's sign. */
function lookOf(row) {
  const source = page.sources[page.samples.leader[row]];
  if (!source) return {colour: page.noSource, marker: "circle", alpha: 0.5};
  const sure = !(valueOf("leading_probability", row) < page.sure);
  return {colour: source.colour, marker: source.marker, alpha: sure ? 0.9 : 0.25};
}
const looks = Array.from({length: sampleCount}, (_, row) => lookOf(row));

const marks = {
  rows: new Set(),
  cursor: -1,
  listeners: [],
  /** Call ``listener`` with what made the change whenever what is marked, or pointed at, changes. */
  listen(listener) {
    this.listeners.push(listener);
  },
  tell(from) {
    for (const listener of this.listeners) listener(from);
  },
  set(rows, from) {
    this.rows = new Set(rows);
    this.tell(from);
  },
  toggle(rows, from) {
    const next = new Set(this.rows), all = rows.every((row) => next.has(row));
    for (const row of rows) all ? next.delete(row) : next.add(row);
    this.set(next, from);
  },
  point(row, from) {
    this.cursor = row;
    this.tell(from);
  },
};
