// Figures by keyboard, and the line at the foot of the page that says what is pointed at and marked.
"use strict";

/** Casts in the order in which left and right go through them: along the sections, then all others. */
const castOrder = (() => {
  const along = page.sections.flatMap((section) => section.casts);
  return [...along, ...page.casts.name.keys()].filter((cast, k, all) => all.indexOf(cast) === k && rowsOfCast[cast].length);
})();

/** Return the sample of a cast whose pressure is nearest. */
function nearest(cast, pressure) {
  const rows = rowsOfCast[cast];
  return rows.reduce((best, row) =>
    Math.abs(valueOf("pressure", row) - pressure) < Math.abs(valueOf("pressure", best) - pressure) ? row : best, rows[0]);
}

/** Return the sample that an arrow key leads to. */
function neighbour(row, key) {
  if (row < 0) return rowsOfCast[castOrder[0]][0];
  const cast = page.samples.cast[row], rows = rowsOfCast[cast], at = rows.indexOf(row);
  if (key === "ArrowUp") return rows[Math.max(0, at - 1)];
  if (key === "ArrowDown") return rows[Math.min(rows.length - 1, at + 1)];
  const step = key === "ArrowRight" ? 1 : -1, place = castOrder.indexOf(cast) + step;
  return nearest(castOrder[Math.min(castOrder.length - 1, Math.max(0, place))], valueOf("pressure", row));
}

function onKey(event) {
  if (event.ctrlKey || event.metaKey || event.altKey) return;
  if (event.key.startsWith("Arrow")) {
    marks.point(neighbour(marks.cursor, event.key), "keyboard");
  } else if ((event.key === "Enter" || event.key === " ") && marks.cursor >= 0) {
    marks.toggle(event.shiftKey ? rowsOfCast[page.samples.cast[marks.cursor]] : [marks.cursor], "keyboard");
  } else if (event.key === "Escape") {
    marks.point(-1, "keyboard");
    marks.set([], "keyboard");
  } else {
    return;
  }
  event.preventDefault();
}

function tellMarks() {
  const pointed = document.getElementById("pointed"), count = document.getElementById("marked-count");
  const rows = [...marks.rows], things = page.rows === "sample" ? "samples" : "levels";
  const words = marks.cursor >= 0 ? sentenceOf(marks.cursor) : rows.length === 1 ? sentenceOf(rows[0]) : "";
  if (pointed.textContent !== words) pointed.textContent = words;
  const stations = new Set(rows.map((row) => page.samples.cast[row]));
  count.textContent = !rows.length ? "Nothing is marked." : rows.length === 1 ? `Marked: ${nameOf(rows[0])}.`
    : `Marked: ${rows.length} ${things} of ${stations.size} cast${stations.size === 1 ? "" : "s"}.`;
  document.getElementById("unmark").hidden = !rows.length;
}

function startKeyboard() {
  for (const plot of document.querySelectorAll(".plot")) plot.addEventListener("keydown", onKey);
  document.getElementById("unmark").addEventListener("click", () => { marks.cursor = -1; marks.set([], "button"); });
  marks.listen(tellMarks);
}
