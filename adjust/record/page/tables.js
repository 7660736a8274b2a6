/* Tables that can be sorted by any head and filtered. Without this script they stand complete in the order of the book. */
(() => {
  "use strict";
  const texts = pageTexts();
  const collator = new Intl.Collator(document.documentElement.lang || "en", { numeric: true, sensitivity: "base" });

  /* What a cell says, without the button that leads to the plan. */
  function cellText(cell) {
    let text = "";
    for (const node of cell.childNodes) {
      if (!(node instanceof Element && node.matches("button.show"))) text += node.textContent;
    }
    return text.trim();
  }

  /* A cell's number: its raw value where the page gives one, else what is printed, with either decimal mark. */
  function cellNumber(cell) {
    const raw = cell.dataset.value ?? cellText(cell).replace(/[\s\u2009\u202f]/g, "").replace("−", "-").replace(/,(\d+)$/, ".$1");
    return raw === "" ? NaN : Number.parseFloat(raw);
  }

  function keyOf(row, column, numeric) {
    const cell = row.cells[column];
    if (!cell) return numeric ? NaN : "";
    return numeric ? cellNumber(cell) : cell.dataset.value ?? cellText(cell);
  }

  /* Empty cells stand last, whichever way the others are sorted; equal ones keep the order they began in. */
  function compare(numeric, sign) {
    const empty = numeric ? (key) => Number.isNaN(key) : (key) => key === "";
    const order = numeric ? (a, b) => a - b : collator.compare;
    return (a, b) => {
      const [none, noneToo] = [empty(a.key), empty(b.key)];
      if (none || noneToo) return none - noneToo || a.place - b.place;
      return sign * order(a.key, b.key) || a.place - b.place;
    };
  }

  /* Rows in another order: they are moved as one piece, so that the page is laid out once. */
  function reorder(body, rows) {
    const piece = document.createDocumentFragment();
    for (const row of rows) piece.append(row);
    body.append(piece);
  }

  function prepare(table) {
    const body = table.tBodies[0];
    const head = table.tHead?.rows[table.tHead.rows.length - 1];
    if (!body || !head) return;
    const rows = [...body.rows];
    const first = rows.filter((row) => row.hasAttribute("data-first"));
    const initial = [...first, ...rows.filter((row) => !row.hasAttribute("data-first"))];
    if (initial.some((row, i) => row !== rows[i])) reorder(body, initial);
    for (const cell of head.cells) addSort(table, body, initial, cell);
    addFilter(table, initial);
  }

  function addSort(table, body, initial, head) {
    if (head.dataset.sort === "none" || !head.textContent.trim()) return;
    const button = document.createElement("button");
    button.type = "button";
    button.title = texts("tables.sort_hint");
    button.append(...head.childNodes);
    head.append(button);
    button.addEventListener("click", () => sortBy(table, body, initial, head));
  }

  /* Up, down, and back to the order of the beginning. */
  function sortBy(table, body, initial, head) {
    const now = head.getAttribute("aria-sort");
    for (const other of table.tHead.querySelectorAll("[aria-sort]")) other.removeAttribute("aria-sort");
    if (now === "descending") return reorder(body, initial);
    const sign = now === "ascending" ? -1 : 1;
    head.setAttribute("aria-sort", sign > 0 ? "ascending" : "descending");
    const numeric = head.dataset.sort === "number";
    const keyed = initial.map((row, place) => ({ row, place, key: keyOf(row, head.cellIndex, numeric) }));
    reorder(body, keyed.sort(compare(numeric, sign)).map((one) => one.row));
  }

  function addFilter(table, rows) {
    const line = document.createElement("div");
    const label = document.createElement("label");
    const field = document.createElement("input");
    const count = document.createElement("output");
    line.className = "filter";
    field.type = "search";
    field.autocomplete = "off";
    count.setAttribute("aria-live", "polite");
    label.append(table.dataset.filterLabel || texts("tables.filter"), " ", field);
    line.append(label, count);
    outermost(table).before(line);
    let words = null; // what each row says, read once at the first filtering
    let asked = 0;
    const apply = () => {
      words ??= rows.map((row) => [...row.cells].map(cellText).join(" ").toLowerCase());
      filter(rows, words, field.value, count);
    };
    field.addEventListener("input", () => {
      cancelAnimationFrame(asked);
      asked = requestAnimationFrame(apply);
    });
  }

  /* All words must occur in a row, in any order. */
  function filter(rows, words, asked, count) {
    const wanted = asked.toLowerCase().split(/\s+/).filter(Boolean);
    let shown = 0;
    rows.forEach((row, i) => {
      const fits = wanted.every((word) => words[i].includes(word));
      shown += fits;
      if (row.hidden === fits) row.hidden = !fits;
    });
    count.textContent = wanted.length ? texts("tables.rows", { shown, all: rows.length }) : "";
  }

  /* The field stands outside of a box that scrolls sideways with the table. */
  function outermost(table) {
    const parent = table.parentElement;
    return parent && parent.children.length === 1 && parent.matches("div, figure") ? parent : table;
  }

  document.querySelectorAll("table.sortable").forEach(prepare);
})();
