"use strict";
for (const table of document.querySelectorAll(".table table")) {
  const body = table.tBodies[0];
  const original = Array.from(body.rows);
  const heads = Array.from(table.tHead.rows[0].cells);
  if (original.length < 2) continue;
  heads.forEach((head, column) => {
    const button = document.createElement("button");
    button.type = "button";
    button.append(...head.childNodes);
    head.append(button);
    head.setAttribute("aria-sort", "none");
    button.addEventListener("click", () => {
      const next = { none: "ascending", ascending: "descending", descending: "none" };
      const direction = next[head.getAttribute("aria-sort")];
      heads.forEach((other) => other.setAttribute("aria-sort", "none"));
      head.setAttribute("aria-sort", direction);
      const rows = original.slice();
      if (direction !== "none") {
        const sign = direction === "ascending" ? 1 : -1;
        const order = (row) => Number(row.cells[column].dataset.order);
        rows.sort((one, two) => {
          const a = order(one), b = order(two);
          if (a < 0 || b < 0) return (a < 0) - (b < 0);
          return sign * (a - b);
        });
      }
      body.append(...rows);
    });
  });
}
const opened = [];
addEventListener("beforeprint", () => {
  for (const part of document.querySelectorAll("details:not(.nodes):not([open])")) {
    part.open = true;
    opened.push(part);
  }
});
addEventListener("afterprint", () => {
  for (const part of opened.splice(0)) part.open = false;
});
