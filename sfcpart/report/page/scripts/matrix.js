"use strict";
// A square sparse matrix on a canvas: wheel, pinch, drag, keys and buttons zoom and move it.

const MATRIX_EDGE = 44; // pixels beside the matrix for the numbers of rows and columns

class SparseMatrix {
  constructor(section, body) {
    this.section = section;
    this.body = body;
    this.row = unpacked(section.row, Int32Array);
    this.column = unpacked(section.column, Int32Array);
    this.value = Object.fromEntries(
      Object.entries(section.value).map(([name, text]) => [name, unpacked(text, Float64Array)]),
    );
    this.shown = Object.keys(this.value)[0];
    this.start = this.starts();
    this.place = sfcpartCharts.zoomIdentity;
    this.build();
  }

  /** Where each row begins: entries are sorted by row. */
  starts() {
    const start = new Int32Array(this.section.size + 1);
    for (const row of this.row) start[row + 1] += 1;
    for (let row = 0; row < this.section.size; row += 1) start[row + 1] += start[row];
    return start;
  }

  build() {
    const { section, body } = this;
    const label = `Matrix of ${section.size} rows: ${section.title}. Arrow keys move it, plus and minus zoom, 0 shows all.`;
    this.canvas = make("canvas", { tabindex: "0", role: "img", "aria-label": label });
    this.told = make("p", { class: "told", role: "status" });
    this.context = this.canvas.getContext("2d");
    body.append(this.controls(), this.canvas, this.told);
    this.zoom = sfcpartCharts
      .zoom()
      .scaleExtent([1, Math.max(8, section.size / 6)])
      .on("zoom", (event) => {
        this.place = event.transform;
        this.canvas.dataset.zoom = event.transform.k.toFixed(2);
        this.draw();
      });
    this.surface = sfcpartCharts.select(this.canvas).call(this.zoom);
    this.canvas.addEventListener("keydown", (event) => this.onKey(event));
    this.canvas.addEventListener("pointermove", (event) => this.onPoint(event));
    onWidth(this.canvas, () => this.resize());
    onTheme(() => this.draw());
    this.resize();
  }

  controls() {
    const { section } = this;
    const zoomBy = (factor) => () => this.surface.call(this.zoom.scaleBy, factor);
    const choice = make(
      "select",
      { change: (event) => this.show(event.target.value) },
      ...Object.keys(this.value).map((name) => make("option", { value: name }, name)),
    );
    const ask = make("input", {
      type: "text", inputmode: "numeric", size: "6",
      input: (event) => this.tellRow(event.target.value),
    });
    this.scale = make("span", { class: "scale" });
    return make(
      "div",
      { class: "controls" },
      make("label", {}, "Show ", choice),
      make("button", { type: "button", click: zoomBy(2) }, "Zoom in"),
      make("button", { type: "button", click: zoomBy(0.5) }, "Zoom out"),
      make("button", { type: "button", click: () => this.all() }, "All"),
      make("label", {}, `Neighbours of ${section.rowWord} `, ask),
      this.scale,
    );
  }

  show(name) {
    this.shown = name;
    this.draw();
  }

  all() {
    this.surface.call(this.zoom.transform, sfcpartCharts.zoomIdentity);
  }

  resize() {
    const ratio = window.devicePixelRatio || 1;
    const side = this.canvas.clientWidth || 400;
    this.side = side;
    this.canvas.width = Math.round(side * ratio);
    this.canvas.height = Math.round(side * ratio);
    this.context.setTransform(ratio, 0, 0, ratio, 0, 0);
    const edge = MATRIX_EDGE;
    this.zoom.extent([[edge, edge], [side, side]]).translateExtent([[edge, edge], [side, side]]);
    this.draw();
  }

  /** Left edge of a row or column on the canvas. */
  at(number, along) {
    const plain = MATRIX_EDGE + ((this.side - MATRIX_EDGE) * number) / this.section.size;
    return along === "x" ? this.place.applyX(plain) : this.place.applyY(plain);
  }

  draw() {
    const { context, side } = this;
    const edge = MATRIX_EDGE;
    context.clearRect(0, 0, side, side);
    context.save();
    context.beginPath();
    context.rect(edge, edge, side - edge, side - edge);
    context.clip();
    this.drawDiagonal();
    this.drawEntries();
    context.restore();
    this.drawNumbers();
  }

  drawDiagonal() {
    const { context } = this;
    const n = this.section.size;
    const side = this.at(1, "x") - this.at(0, "x");
    if (side > 3) {
      context.fillStyle = tone("grid");
      const gap = side > 7 ? 1 : 0;
      for (let k = 0; k < n; k += 1) context.fillRect(this.at(k, "x"), this.at(k, "y"), side - gap, side - gap);
      return;
    }
    context.strokeStyle = tone("grid");
    context.lineWidth = Math.max(1, this.at(1, "x") - this.at(0, "x"));
    context.beginPath();
    context.moveTo(this.at(0, "x"), this.at(0, "y"));
    context.lineTo(this.at(n, "x"), this.at(n, "y"));
    context.stroke();
  }

  drawEntries() {
    const { context, row, column, side } = this;
    const values = this.value[this.shown];
    const colours = this.colours();
    const cell = this.at(1, "x") - this.at(0, "x");
    const size = Math.max(1.2, cell - (cell > 7 ? 1 : 0));
    for (let k = 0; k < row.length; k += 1) {
      const x = this.at(column[k], "x");
      const y = this.at(row[k], "y");
      if (x > side || y > side || x + size < MATRIX_EDGE || y + size < MATRIX_EDGE) continue;
      context.fillStyle = colours(values[k]);
      context.fillRect(x, y, size, size);
    }
    this.canvas.dataset.entries = row.length;
  }

  /** Colours by the logarithm of the value, and the legend that says so. */
  colours() {
    const values = this.value[this.shown];
    let low = Infinity;
    let high = 0;
    for (const value of values) {
      if (value > 0 && value < low) low = value;
      if (value > high) high = value;
    }
    const dark = matchMedia("(prefers-color-scheme: dark)").matches;
    const span = Math.log(high / low) || 1;
    const shade = (share) => sfcpartCharts.interpolateCividis(dark ? 0.2 + 0.8 * share : 0.85 - 0.85 * share);
    const strip = make("i");
    const stops = [0, 0.25, 0.5, 0.75, 1].map(shade).join(", ");
    strip.style.background = `linear-gradient(90deg, ${stops})`;
    const ends = values.length ? [written(low, "plain"), written(high, "plain")] : ["–", "–"];
    this.scale.replaceChildren(ends[0], strip, ends[1]);
    return (value) => (value > 0 ? shade(Math.log(value / low) / span) : tone("grid"));
  }

  drawNumbers() {
    const { context, side } = this;
    const edge = MATRIX_EDGE;
    const cell = this.at(1, "x") - this.at(0, "x");
    const step = niceStep(46 / cell);
    context.fillStyle = tone("soft");
    context.font = "11px system-ui, sans-serif";
    context.textBaseline = "middle";
    for (let number = 0; number < this.section.size; number += step) {
      const text = wholeNumber.format(number * this.section.block);
      const x = this.at(number + 0.5, "x");
      const y = this.at(number + 0.5, "y");
      context.textAlign = "center";
      if (x > edge && x < side) context.fillText(text, x, edge / 2 + 8);
      context.textAlign = "right";
      if (y > edge && y < side) context.fillText(text, edge - 5, y);
    }
  }

  onKey(event) {
    const step = 60 / this.place.k;
    const moves = {
      ArrowLeft: [step, 0], ArrowRight: [-step, 0], ArrowUp: [0, step], ArrowDown: [0, -step],
    };
    if (moves[event.key]) this.surface.call(this.zoom.translateBy, ...moves[event.key]);
    else if (event.key === "+" || event.key === "=") this.surface.call(this.zoom.scaleBy, 1.5);
    else if (event.key === "-") this.surface.call(this.zoom.scaleBy, 1 / 1.5);
    else if (event.key === "0") this.all();
    else return;
    event.preventDefault();
  }

  onPoint(event) {
    const [x, y] = sfcpartCharts.pointerAt(event, this.canvas);
    const share = (value) => (value - MATRIX_EDGE) / (this.side - MATRIX_EDGE);
    const column = Math.floor(share(this.place.invertX(x)) * this.section.size);
    const row = Math.floor(share(this.place.invertY(y)) * this.section.size);
    const there = row >= 0 && column >= 0 && row < this.section.size && column < this.section.size;
    this.told.textContent = there ? this.entryText(row, column) : "";
  }

  name(number, word) {
    const { block } = this.section;
    const first = number * block;
    return block > 1 ? `${word}s ${first}–${first + block - 1}` : `${word} ${first}`;
  }

  entryText(row, column) {
    const { rowWord, columnWord, link } = this.section;
    const names = `${this.name(row, rowWord)} ${link} ${this.name(column, columnWord)}`;
    for (let k = this.start[row]; k < this.start[row + 1]; k += 1) {
      if (this.column[k] === column) return `${names}: ${this.valuesText(k)}`;
    }
    return `${names}: nothing`;
  }

  valuesText(k) {
    return Object.entries(this.value)
      .map(([name, values]) => `${written(values[k], "plain")} ${name}`)
      .join(", ");
  }

  tellRow(text) {
    const row = Math.floor(Number(text) / this.section.block);
    if (text.trim() === "" || !(row >= 0 && row < this.section.size)) {
      this.told.textContent = "";
      return;
    }
    const values = this.value[this.shown];
    const found = [];
    for (let k = this.start[row]; k < this.start[row + 1]; k += 1) {
      found.push(`${this.column[k] * this.section.block} (${written(values[k], "plain")})`);
    }
    const what = `${this.name(row, this.section.rowWord)}, ${this.shown}`;
    this.told.textContent = `${what}: ${found.length ? found.join(", ") : "none"}`;
  }
}

/** 1, 2 or 5 times a power of ten, at least as large as asked. */
function niceStep(least) {
  const power = 10 ** Math.floor(Math.log10(Math.max(least, 1)));
  return [1, 2, 5, 10].map((factor) => factor * power).find((step) => step >= least) ?? 1;
}

function drawMatrix(section, body) {
  return new SparseMatrix(section, body);
}
