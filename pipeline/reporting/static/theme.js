// The page's data, read once, and its colours, which follow the reader's choice of light or dark.
"use strict";

const page = JSON.parse(document.getElementById("data").textContent);
const dark = matchMedia("(prefers-color-scheme: dark)");
const onPaper = matchMedia("print");

/** Return the page's colours as the style sheet has them now. */
function theme() {
  const style = getComputedStyle(document.documentElement);
  const names = ["paper", "ink", "quiet", "rule", "link", "floor", "grid", "water"];
  return Object.fromEntries(names.map((name) => [name, style.getPropertyValue(`--${name}`).trim()]));
}

/** Call ``paint`` with the colours now and whenever they change. */
function painted(paint) {
  const again = () => paint(theme());
  dark.addEventListener("change", again);
  onPaper.addEventListener("change", again);
  again();
}
