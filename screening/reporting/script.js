"use strict";
(() => {
  const table = document.getElementById("shortlist");
  const body = table.tBodies[0];
  const headers = [...table.tHead.rows[0].cells];
  const key = (row, column) => {
    const text = row.cells[column].dataset.value ?? row.cells[column].textContent.trim();
    const number = Number(text);
    return text !== "" && Number.isFinite(number) ? number : text;
  };
  headers.forEach((header, column) => {
    const button = document.createElement("button");
    button.type = "button";
    button.textContent = header.textContent;
    header.replaceChildren(button);
    button.addEventListener("click", () => {
      const falling = header.getAttribute("aria-sort") === "ascending";
      headers.forEach((other) => other.removeAttribute("aria-sort"));
      header.setAttribute("aria-sort", falling ? "descending" : "ascending");
      const rows = [...body.rows].sort((a, b) => {
        const x = key(a, column), y = key(b, column);
        const order = typeof x === "number" && typeof y === "number" ? x - y : String(x).localeCompare(String(y));
        return falling ? -order : order;
      });
      body.replaceChildren(...rows);
    });
  });
  const filter = document.getElementById("filter");
  filter.addEventListener("input", () => {
    const wanted = filter.value.trim().toLowerCase();
    for (const row of body.rows) row.hidden = !row.cells[1].textContent.toLowerCase().includes(wanted);
  });
})();
