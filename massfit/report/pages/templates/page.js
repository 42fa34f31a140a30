"use strict";
(() => {
  const MONTHS = ["Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec"];

  const button = (text, action) => {
    const made = document.createElement("button");
    made.type = "button";
    made.textContent = text;
    made.addEventListener("click", action);
    return made;
  };

  const save = (name, content) => {
    const link = document.createElement("a");
    link.href = typeof content === "string" ? content : URL.createObjectURL(content);
    link.download = name;
    link.click();
    if (typeof content !== "string") setTimeout(() => URL.revokeObjectURL(link.href), 10000);
  };

  // what a cell is sorted by: a day of the year, a number at its head, or its words
  const sortKey = (text) => {
    const plain = text.replace(/\u2212/g, "-").trim();
    if (/^\d{4}-\d\d-\d\d/.test(plain)) return plain;
    const day = plain.match(/^(\d{1,2}) ([A-Z][a-z]{2})[a-z]*$/);
    if (day && MONTHS.includes(day[2])) return 40 * MONTHS.indexOf(day[2]) + Number(day[1]);
    const number = plain.match(/^[+-]?(\d+\.?\d*|\.\d+)(e[+-]?\d+)?/i);
    return number ? Number(number[0]) : plain;
  };

  const compare = (first, second) => {
    if (typeof first === "number" && typeof second === "number") return first - second;
    if (typeof first === "number") return -1;
    if (typeof second === "number") return 1;
    return first.localeCompare(second);
  };

  const sortRows = (table, column, order) => {
    const body = table.tBodies[0];
    const rows = [...body.rows];
    rows.forEach((row, place) => { row.dataset.place ??= place; });
    const key = (row) => (order ? sortKey(row.cells[column].textContent) : Number(row.dataset.place));
    const down = order === "descending" ? -1 : 1;
    const keyed = rows.map((row) => [key(row), row]);
    keyed.sort((a, b) => down * compare(a[0], b[0]) || a[1].dataset.place - b[1].dataset.place);
    body.append(...keyed.map((pair) => pair[1]));
    [...table.tHead.rows[0].cells].forEach((cell, place) => {
      if (place === column && order) cell.setAttribute("aria-sort", order);
      else cell.removeAttribute("aria-sort");
    });
  };

  const drawn = (table, column) => table.tBodies[0].querySelector(`td:nth-child(${column + 1}) svg`) !== null;

  const makeSortable = (table) => {
    const next = { null: "ascending", ascending: "descending", descending: "" };
    [...table.tHead.rows[0].cells].forEach((cell, column) => {
      if (!cell.textContent.trim() || drawn(table, column)) return;
      const sort = button("", () => sortRows(table, column, next[cell.getAttribute("aria-sort")]));
      sort.className = "sort";
      sort.title = "Sort";
      sort.append(...cell.childNodes);
      cell.append(sort);
    });
  };

  // a spreadsheet takes text that begins like a formula for one
  const csvCell = (text) => {
    const number = text.replace(/\u2212/g, "-");
    const safe = /^[=+\-@\t\r]/.test(number) && !/^[+-]?[\d.]+$/.test(number) ? `'${number}` : number;
    return /[",\n]/.test(safe) ? `"${safe.replace(/"/g, '""')}"` : safe;
  };

  const tableCsv = (table) => {
    const worded = [...table.tHead.rows[0].cells].map((_, column) => !drawn(table, column));
    const line = (row) => [...row.cells].filter((_, column) => worded[column]).map((cell) => csvCell(cell.textContent.trim()));
    return [...table.rows].map((row) => `${line(row).join(",")}\n`).join("");
  };

  const unpacked = async (text) => {
    const bytes = Uint8Array.from(atob(text.trim()), (letter) => letter.charCodeAt(0));
    const stream = new Blob([bytes]).stream().pipeThrough(new DecompressionStream("gzip"));
    return new Blob([await new Response(stream).arrayBuffer()], { type: "text/csv" });
  };

  const tools = (...buttons) => {
    const line = document.createElement("p");
    line.className = "tools";
    line.append(...buttons);
    return line;
  };

  for (const table of document.querySelectorAll("table[data-name]")) {
    if (table.tBodies[0].rows.length > 2) makeSortable(table);
    const csv = () => save(`${table.dataset.name}.csv`, new Blob([tableCsv(table)], { type: "text/csv" }));
    table.parentElement.after(tools(button("Table as CSV", csv)));
  }
  for (const figure of document.querySelectorAll("figure[data-name]")) {
    const name = figure.dataset.name;
    const line = tools(button("Figure as PNG", () => save(`${name}.png`, figure.querySelector("img").src)));
    const packed = figure.querySelector("script");
    if (packed) line.append(button("Its data as CSV", async () => save(`${name}.csv`, await unpacked(packed.textContent))));
    figure.append(line);
  }
  const themes = ["as the system", "light", "dark"];
  let theme = 0;
  const shade = button("Colours: as the system", () => {
    theme = (theme + 1) % themes.length;
    document.documentElement.dataset.theme = ["", "light", "dark"][theme];
    shade.textContent = `Colours: ${themes[theme]}`;
  });
  document.querySelector("header").prepend(tools(shade));
})();
