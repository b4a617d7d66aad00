// Start of a cruise's page.
"use strict";

async function startCruise() {
  if (!sampleCount) return;
  startKeyboard();
  await drawWaters();
  await drawSection();
  await drawStations();
  await drawSpread();
  await drawResidual();
  await drawSplit();
  document.documentElement.dataset.ready = "yes";
}

startCruise();
