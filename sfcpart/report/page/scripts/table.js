"use strict";
// A table to sort, search and copy. A search is part of a number or text, or such as "load > 1.02".

const TABLE_FIRST = 50; // rows shown before all are asked for

class DataTable {
  constructor(section, body) {
    this.section = section;
    this.body = body;
    this.count = section.columns.length ? section.rows[section.columns[0].key].length : 0;
    this.every = false;
    this.wide = false;
    this.query = "";
    this.key = section.sort || section.columns[0].key;
    this.falling = Boolean(section.sort);
    this.build();
  }

  build() {
    const { section, body } = this;
    const more = section.columns.some((column) => !column.shown);
    this.search = make("input", {
      type: "search", size: "18", placeholder: "12 or halo > 500",
      input: (event) => this.find(event.target.value),
    });
    this.columnsButton = make("button", { type: "button", click: () => this.toggleWide() }, "All columns");
    const copy = make("button", { type: "button", click: () => this.copy() }, "Copy as CSV");
    this.told = make("span", { role: "status" });
    this.head = make("thead");
    this.rows = make("tbody");
    const title = make("caption", { class: "unseen" }, section.title);
    this.moreButton = make("button", { type: "button", click: () => this.showEvery() });
    body.append(
      make(
        "div", { class: "controls" },
        make("label", {}, "Search ", this.search),
        ...(more ? [this.columnsButton] : []), copy, this.told,
      ),
      make(
        "div", { class: "scroll", tabindex: "0", role: "region", "aria-label": `${section.title}: rows` },
        make("table", {}, title, this.head, this.rows),
      ),
      make("p", {}, this.moreButton),
    );
    this.draw();
  }

  columns() {
    return this.section.columns.filter((column) => this.wide || column.shown);
  }

  toggleWide() {
    this.wide = !this.wide;
    this.columnsButton.textContent = this.wide ? "Fewer columns" : "All columns";
    this.draw();
  }

  showEvery() {
    this.every = true;
    this.draw();
  }

  find(query) {
    this.query = query.trim();
    this.draw();
  }

  sortBy(key) {
    this.falling = key === this.key ? !this.falling : key !== this.section.columns[0].key;
    this.key = key;
    this.draw();
  }

  /** Numbers of the rows found, in order: unknown values last, equal ones by place. */
  order() {
    const values = this.section.rows[this.key];
    const sign = this.falling ? -1 : 1;
    const test = this.test();
    const found = Array.from({ length: this.count }, (_, row) => row).filter(test);
    return found.sort((a, b) => {
      const [x, y] = [values[a], values[b]];
      if (x === null || y === null) return (x === null) - (y === null) || a - b;
      return sign * (x > y) - sign * (x < y) || a - b;
    });
  }

  test() {
    const { query } = this;
    if (query === "") return () => true;
    const found = query.match(/^(.+?)\s*(<=|>=|=|<|>)\s*([-+.\d,e]+)\s*(%?)$/i);
    const column = found && this.named(found[1]);
    if (column) {
      const bound = Number(found[3].replaceAll(",", "")) * (found[4] ? 0.01 : 1);
      const holds = {
        "<": (value) => value < bound, ">": (value) => value > bound, "=": (value) => value === bound,
        "<=": (value) => value <= bound, ">=": (value) => value >= bound,
      }[found[2]];
      const values = this.section.rows[column.key];
      return (row) => values[row] !== null && holds(values[row]);
    }
    const first = this.section.columns[0];
    const names = this.section.rows[first.key];
    const low = query.toLowerCase();
    if (first.form === "text") return (row) => String(names[row]).toLowerCase().includes(low);
    const chosen = partsIn(query, Infinity > this.count ? Math.max(...names) + 1 : this.count);
    return (row) => chosen !== null && chosen.has(names[row]);
  }

  named(text) {
    const low = text.toLowerCase();
    const all = this.section.columns;
    return (
      all.find((column) => column.key === low || column.title.toLowerCase() === low) ??
      all.find((column) => column.title.toLowerCase().startsWith(low) || column.key.startsWith(low))
    );
  }

  draw() {
    const columns = this.columns();
    const order = this.order();
    const shown = this.every ? order : order.slice(0, TABLE_FIRST);
    this.head.replaceChildren(make("tr", {}, ...columns.map((column) => this.headCell(column))));
    this.rows.replaceChildren(...shown.map((row) => this.bodyRow(columns, row)));
    this.told.textContent = this.query ? `${wholeNumber.format(order.length)} found` : "";
    this.moreButton.hidden = shown.length === order.length;
    this.moreButton.textContent = `Show all ${wholeNumber.format(order.length)} rows`;
  }

  headCell(column) {
    const sorted = column.key === this.key;
    const unit = column.unit && !["seconds", "duration", "bytes"].includes(column.form) && column.unit !== column.title
      ? [make("small", {}, column.unit)] : [];
    return make(
      "th",
      {
        scope: "col", class: column.form === "text" ? "text" : "",
        "aria-sort": sorted ? (this.falling ? "descending" : "ascending") : null,
      },
      make("button", { type: "button", title: column.meaning || null, click: () => this.sortBy(column.key) }, column.title, ...unit),
    );
  }

  bodyRow(columns, row) {
    const cells = columns.map((column, k) => {
      const text = written(this.section.rows[column.key][row], column.form);
      const style = column.form === "text" ? "text" : "";
      return k === 0 ? make("th", { scope: "row", class: style }, text) : make("td", { class: style }, text);
    });
    return make("tr", {}, ...cells);
  }

  /** The rows found, all columns, in full precision. */
  csv() {
    const { columns, rows } = this.section;
    const quoted = (value) => (/[",\n]/.test(value) ? `"${value.replaceAll('"', '""')}"` : value);
    const cell = (value) => (value === null ? "" : quoted(String(value)));
    const lines = [columns.map((column) => quoted(column.key)).join(",")];
    for (const row of this.order()) {
      lines.push(columns.map((column) => cell(rows[column.key][row])).join(","));
    }
    return `${lines.join("\n")}\n`;
  }

  async copy() {
    const text = this.csv();
    try {
      await navigator.clipboard.writeText(text);
    } catch {
      copyByHand(text);
    }
    this.told.textContent = `${wholeNumber.format(text.split("\n").length - 2)} rows copied`;
  }
}

/** Copy where the clipboard is not open to scripts. */
function copyByHand(text) {
  const sheet = make("textarea", { class: "unseen" });
  sheet.value = text;
  document.body.append(sheet);
  sheet.select();
  document.execCommand("copy");
  sheet.remove();
}

function drawTable(section, body) {
  return new DataTable(section, body);
}
