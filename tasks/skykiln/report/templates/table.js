"use strict";
// Sorting and filtering of the table of probes. Without it the page shows all of them by name.
(() => {
  const table = document.getElementById("probes");
  const rows = [...table.tBodies[0].rows];
  const words = rows.map((row) => row.dataset.words);
  const box = document.getElementById("filter");
  const count = document.getElementById("count");
  const show = () => {
    const asked = box.value.toLowerCase().split(/\s+/).filter(Boolean);
    let shown = 0;
    rows.forEach((row, i) => {
      row.hidden = !asked.every((word) => words[i].includes(word));
      shown += row.hidden ? 0 : 1;
    });
    count.textContent = shown === rows.length ? `${shown} probes` : `${shown} of ${rows.length} probes`;
  };
  const value = (row, column) => {
    const text = row.cells[column].dataset.value;
    return text === "" ? null : Number.isNaN(Number(text)) ? text : Number(text);
  };
  const sort = (head, column) => {
    const down = head.getAttribute("aria-sort") === (head.dataset.first === "down" ? "none" : "ascending");
    const sign = down ? -1 : 1;
    for (const other of table.tHead.rows[0].cells) {
      if (other.hasAttribute("aria-sort")) other.setAttribute("aria-sort", "none");
    }
    head.setAttribute("aria-sort", down ? "descending" : "ascending");
    const keyed = rows.map((row, i) => [value(row, column), i, row]);
    keyed.sort((a, b) => {
      if (a[0] === null || b[0] === null) return (a[0] === null) - (b[0] === null) || a[1] - b[1];
      return a[0] < b[0] ? -sign : a[0] > b[0] ? sign : a[1] - b[1];
    });
    table.tBodies[0].append(...keyed.map((entry) => entry[2]));
  };
  [...table.tHead.rows[0].cells].forEach((head, column) => {
    head.querySelector("button")?.addEventListener("click", () => sort(head, column));
  });
  box.addEventListener("input", show);
  box.closest("[hidden]")?.removeAttribute("hidden");
  show();
})();
