"use strict";
// Draw every section: what can be seen first, the rest when the browser has a moment.

const drawers = { chart: drawChart, matrix: drawMatrix, table: drawTable, view: drawView };
sfcpartPage.drawn = [];
performance.mark("scripts-there");

function drawSection(index) {
  const section = sfcpartPage.data.sections[index];
  const body = document.querySelector(`[data-section="${index}"]`);
  sfcpartPage.drawn[index] = drawers[section.kind](section, body, index) ?? true;
}

for (let index = 0; index < sfcpartPage.data.sections.length; index += 1) {
  drawSection(index);
  if (index === 0) performance.mark("first-drawing");
}
document.documentElement.dataset.drawn = "all";
