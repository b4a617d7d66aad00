// Numbers and names as they stand on the page.
"use strict";

/** Return a column of JSON as numbers; null is NaN. */
function column(values) {
  return Float64Array.from(values, (value) => (value === null ? NaN : value));
}

/** Return a number in four digits, without needless zeros. */
function short(value) {
  if (!Number.isFinite(value)) return "unknown";
  const size = Math.abs(value);
  const text = size >= 1e4 && size < 1e9 ? value.toFixed(0) : String(Number(value.toPrecision(4)));
  return text.replace("-", "\u2212");
}

/** Return a number with its unit, which may be "". */
function withUnit(value, unit) {
  return unit ? `${short(value)} ${unit}` : short(value);
}

/** Return a value of a quantity: shares to two digits, all else with its unit. */
function valueWords(one, value) {
  return /^share/i.test(one.key ?? "") ? value.toFixed(2) : withUnit(value, one.unit);
}

/** Return a place in words: 31.64° S, 16.12° W. */
function placeWords(latitude, longitude) {
  const size = (value) => Math.abs(value).toFixed(2);
  return `${size(latitude)}\u00b0 ${latitude < 0 ? "S" : "N"}, ${size(longitude)}\u00b0 ${longitude < 0 ? "W" : "E"}`;
}

/** Return the label of an axis. */
function label(quantity) {
  const words = quantity.words[0].toUpperCase() + quantity.words.slice(1);
  return quantity.unit ? `${words}, ${quantity.unit}` : words;
}

/** Return words in lines of at most so many characters, as far as words allow. */
function wrapped(words, most) {
  return words.split(" ").reduce((lines, word) => {
    const joined = `${lines.at(-1)} ${word}`.trim();
    return joined.length <= most ? [...lines.slice(0, -1), joined] : [...lines, word];
  }, [""]).filter(Boolean).join("\n");
}

/** Return finite numbers, sorted. */
function sorted(values) {
  return Float64Array.from(values.filter(Number.isFinite)).sort();
}

/** Return the value below which the part p of sorted numbers lies. */
function quantile(ordered, p) {
  const at = p * (ordered.length - 1), low = Math.floor(at);
  return low + 1 < ordered.length ? ordered[low] + (at - low) * (ordered[low + 1] - ordered[low]) : ordered[low];
}

/** Return a round step that divides a span into about so many parts. */
function roundStep(span, parts) {
  const rough = span / parts, size = 10 ** Math.floor(Math.log10(rough));
  const one = [1, 2, 2.5, 5, 10].find((step) => step * size >= rough * 0.999);
  return one * size;
}

/** Return the round edges of bands of colour for sorted numbers, without the outermost hundredths. */
function bands(ordered, most = 14) {
  if (!ordered.length) return [0, 1];
  const low = quantile(ordered, 0.01), high = quantile(ordered, 0.99);
  if (!(high > low)) return [low - Math.max(0.5, Math.abs(low) * 0.01), low + Math.max(0.5, Math.abs(low) * 0.01)];
  const step = roundStep(high - low, most);
  const first = Math.floor(low / step), last = Math.ceil(high / step);
  return Array.from({length: last - first + 1}, (_, k) => Number(((first + k) * step).toPrecision(10)));
}
