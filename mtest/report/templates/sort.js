"use strict";
(() => {
  const status = document.getElementById("sort-status");
  document.documentElement.classList.add("scripted");

  const order = (one, two) => {
    // What cannot be estimated has an empty key and comes last, whichever way the column is sorted.
    if (one === "" || two === "") return { fixed: true, value: (one === "") - (two === "") };
    const a = Number(one), b = Number(two);
    const numeric = !Number.isNaN(a) && !Number.isNaN(b);
    return { fixed: false, value: numeric ? (a < b ? -1 : a > b ? 1 : 0) : one.localeCompare(two, "en") };
  };

  const sortBy = (table, column, head) => {
    const up = head.getAttribute("aria-sort") !== "ascending";
    for (const other of table.tHead.rows[0].cells) other.removeAttribute("aria-sort");
    head.setAttribute("aria-sort", up ? "ascending" : "descending");
    const rows = Array.from(table.tBodies[0].rows, (row) => ({ row, key: row.cells[column].dataset.sort }));
    rows.sort((one, two) => {
      const { fixed, value } = order(one.key, two.key);
      return fixed || up ? value : -value;
    });
    table.tBodies[0].append(...rows.map((entry) => entry.row));
    const name = head.querySelector(".head").textContent;
    status.textContent = `Sorted by ${name}, ${up ? "ascending" : "descending"}`;
  };

  for (const table of document.querySelectorAll("table[data-sortable]")) {
    Array.from(table.tHead.rows[0].cells).forEach((head, column) => {
      const text = head.querySelector(".head");
      const button = document.createElement("button");
      button.type = "button";
      text.replaceWith(button);
      button.append(text);
      button.addEventListener("click", () => sortBy(table, column, head));
    });
  }
})();
