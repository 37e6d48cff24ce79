"use strict";
// What all sections use: the data of the page, elements, numbers, colours of the theme.

const sfcpartPage = { data: JSON.parse(document.getElementById("page-data").textContent) };

/** Make an element with attributes (functions become listeners) and children. */
function make(name, attributes = {}, ...children) {
  const element = document.createElement(name);
  for (const [key, value] of Object.entries(attributes)) {
    if (typeof value === "function") element.addEventListener(key, value);
    else if (value === true) element.setAttribute(key, "");
    else if (value !== false && value !== null) element.setAttribute(key, value);
  }
  element.append(...children);
  return element;
}

/** A colour of the theme, as it is now. */
function tone(name) {
  return getComputedStyle(document.documentElement).getPropertyValue(`--${name}`).trim();
}

/** Numbers from base64, little-endian. */
function unpacked(text, Kind) {
  const bytes = Uint8Array.from(atob(text), (letter) => letter.charCodeAt(0));
  return new Kind(bytes.buffer);
}

const wholeNumber = new Intl.NumberFormat("en", { maximumFractionDigits: 0 });
const threeDigits = new Intl.NumberFormat("en", { maximumSignificantDigits: 3 });
const threePlaces = new Intl.NumberFormat("en", {
  minimumFractionDigits: 3,
  maximumFractionDigits: 3,
});

/** Write a number as people read it; the same rules as sfcpart's own tables. */
function written(value, form) {
  if (value === null || value === undefined) return "–";
  if (form === "text") return String(value);
  if (form === "whole") return wholeNumber.format(value);
  if (form === "ratio") return threePlaces.format(value);
  if (form === "percent") return `${threeDigits.format(100 * value)} %`;
  if (form === "seconds") return withUnit(value, [["s", 1], ["ms", 1e-3], ["us", 1e-6]]);
  if (form === "duration") {
    return Math.abs(value) < 120 ? written(value, "seconds") : withUnit(value, [["d", 86400], ["h", 3600], ["min", 60]]);
  }
  if (form === "bytes") return withUnit(value, [["GB", 1e9], ["MB", 1e6], ["kB", 1e3]]);
  if (value !== 0 && (Math.abs(value) < 1e-3 || Math.abs(value) >= 1e6)) {
    return value.toExponential(2);
  }
  return Math.abs(value) >= 1000 ? wholeNumber.format(value) : threeDigits.format(value);
}

function withUnit(value, units) {
  if (value === 0) return `0 ${units[0][0] === "s" ? "s" : units[units.length - 1][0]}`;
  const found = units.find(([, size]) => Math.abs(value) >= size) ?? units[units.length - 1];
  return `${threeDigits.format(value / found[1])} ${found[0]}`;
}

/** Call when light turns dark or the other way round. */
function onTheme(redraw) {
  matchMedia("(prefers-color-scheme: dark)").addEventListener("change", redraw);
}

/** Call when an element's width changes, at most once a frame. */
function onWidth(element, redraw) {
  let last = 0;
  let waiting = false;
  new ResizeObserver(() => {
    const width = element.clientWidth;
    if (waiting || width === 0 || Math.abs(width - last) < 2) return;
    waiting = true;
    requestAnimationFrame(() => {
      waiting = false;
      last = element.clientWidth;
      redraw(last);
    });
  }).observe(element);
}

/** "1-4, 7" as a set of parts; null for an empty text. */
function partsIn(text, count) {
  const chosen = new Set();
  for (const piece of text.split(/[,;\s]+/).filter(Boolean)) {
    const found = piece.match(/^(\d+)(?:-(\d+))?$/);
    if (!found) continue;
    const last = Math.min(Number(found[2] ?? found[1]), count - 1);
    for (let part = Number(found[1]); part <= last; part += 1) chosen.add(part);
  }
  return text.trim() === "" ? null : chosen;
}
