"use strict";
// Charts of all kinds, drawn by Observable Plot; redrawn when width or theme change.

function drawChart(section, body, index) {
  const { series } = section;
  const told = series.filter((one, k) => series.findIndex((other) => other.name === one.name) === k);
  if (told.length > 1) body.append(chartLegend(told));
  const room = make("div");
  body.append(room);
  const redraw = () => {
    const width = Math.max(280, body.clientWidth);
    room.replaceChildren(plotted(section, width, index));
  };
  redraw();
  onWidth(body, redraw);
  onTheme(redraw);
}

function chartLegend(series) {
  return make(
    "ul",
    { class: "legend" },
    ...series.map((one) => {
      const isLine = ["line", "step", "rule", "tick"].includes(one.mark);
      const patch = make("i", { class: isLine ? "line" : "", "aria-hidden": "true" });
      patch.style.setProperty("--tone", `var(--mark-${one.colour % 7})`);
      return make("li", {}, patch, one.name);
    }),
  );
}

function plotted(section, width, index) {
  const charts = sfcpartCharts;
  const narrow = width < 520;
  const marks = [charts.gridY({ stroke: tone("grid"), strokeOpacity: 1, ticks: 5 })];
  for (const one of section.series) marks.push(...markOf(one, section));
  const facets = section.series.some((one) => one.facet);
  const figure = charts.plot({
    width,
    ...(facets ? { fy: { label: null, domain: [...new Set(section.series.map((one) => one.facet))] } } : {}),
    height: section.height,
    marginLeft: 60,
    marginRight: facets ? 92 : 16,
    marginBottom: 38,
    marginTop: 30,
    style: { fontSize: "12px", color: tone("soft"), fontFamily: "inherit" },
    inset: section.series.some((one) => one.named) ? 24 : 0,
    x: axisOf(section.x, narrow ? 5 : 10, section.series, "x"),
    y: axisOf(section.y, facets ? 3 : 5, section.series, "y"),
    marks,
  });
  figure.setAttribute("role", "img");
  figure.setAttribute("aria-label", `Chart: ${section.title}`);
  if (document.getElementById(`summary-${index}`)) {
    figure.setAttribute("aria-describedby", `summary-${index}`);
  }
  // Numbers of axes are not labels of their own for those who listen.
  for (const inner of figure.querySelectorAll("[aria-label], [aria-description]")) {
    inner.removeAttribute("aria-label");
    inner.removeAttribute("aria-description");
  }
  return figure;
}

function axisOf(axis, ticks, series, side) {
  const shown = { label: axis.label, type: axis.kind, ticks, labelArrow: "none", line: side === "x" };
  if (axis.form !== "plain") shown.tickFormat = (value) => written(value, axis.form);
  const values = series.flatMap((one) => (one.mark === "rule" && side === "x" ? [] : one[side]));
  const there = values.filter((value) => value !== null);
  if (axis.kind === "linear") {
    let low = Math.min(...there, axis.least ?? Infinity);
    let high = Math.max(...there, axis.most ?? -Infinity);
    if (low === high) [low, high] = [low - 1, high + 1];
    const wide = side === "x" && series.some((one) => one.mark === "bar" || one.mark === "tick");
    shown.domain = wide ? [low - 0.6, high + 0.6] : [low, high];
    shown.nice = side === "y";
    if (there.every(Number.isInteger) && axis.form === "plain") {
      shown.tickFormat = (value) => (Number.isInteger(value) ? wholeNumber.format(value) : "");
    }
  } else {
    if (axis.form === "plain") shown.tickFormat = (value) => threeDigits.format(value);
    shown.ticks = Math.min(ticks, 6);
  }
  return shown;
}

function markOf(one, section) {
  const charts = sfcpartCharts;
  const colour = tone(`mark-${one.colour % 7}`);
  const points = one.y.map((y, k) => ({ x: one.x[k] ?? 0, y, name: one.label[k] ?? one.name }));
  const strip = one.facet ? { fy: () => one.facet } : {};
  const title = (point) =>
    `${point.name}\n${section.y.label}: ${written(point.y, section.y.form)}`;
  const told = charts.tip(
    points,
    charts.pointerX({ x: "x", y: "y", ...strip, title, fill: tone("sheet"), stroke: tone("line") }),
  );
  const there = { x: "x", y: "y", ...strip };
  switch (one.mark) {
    case "bar": {
      const gap = points.length > 250 ? 0 : 0.08;
      const rect = { x1: (p) => p.x - 0.5 + gap, x2: (p) => p.x + 0.5 - gap, y1: 0, y2: "y" };
      return [charts.rect(points, { ...rect, fill: colour }), charts.ruleY([0], { stroke: tone("soft") }), told];
    }
    case "tick":
      return [
        charts.ruleY(points, { y: "y", x1: (p) => p.x - 0.5, x2: (p) => p.x + 0.5, stroke: colour, strokeWidth: 2 }),
      ];
    case "rule":
      return [charts.ruleY(one.y, { stroke: colour, strokeWidth: 1.5, strokeDasharray: "5 4" })];
    case "line":
    case "step":
      return [
        charts.line(points, { ...there, stroke: colour, strokeWidth: 2, curve: one.mark === "step" ? "step-after" : "linear" }),
        told,
      ];
    default: {
      const dots = charts.dot(points, { ...there, fill: colour, r: points.length > 300 ? 2 : 3.5 });
      if (!one.named) return [dots, told];
      const names = charts.text(points, { ...there, text: "name", dy: -11, fill: tone("ink") });
      return [dots, names, told];
    }
  }
}
