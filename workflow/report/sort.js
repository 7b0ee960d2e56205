"use strict";
// Heads of a sortable table become buttons. Without this script the table stands as it is, nothing is missing.
for (const table of document.querySelectorAll("table[data-sortable]")) {
  const heads = [...table.tHead.rows[0].cells];
  const body = table.tBodies[0];
  const said = document.createElement("p");
  said.className = "unseen";
  said.setAttribute("role", "status");
  table.parentElement.before(said);
  const hint = document.createElement("p");
  hint.className = "file";
  hint.textContent = "A head sorts the table by its column; chosen again, the other way round.";
  table.parentElement.before(hint);
  const keyOf = (row, column) => {
    const cell = row.cells[column];
    if (!("sort" in cell.dataset)) return cell.textContent.trim();
    return cell.dataset.sort === "" ? null : Number(cell.dataset.sort);
  };
  const compare = (a, b) => typeof a === "number" ? a - b : a.localeCompare(b, "en", { numeric: true });
  heads.forEach((head, column) => {
    const button = document.createElement("button");
    button.type = "button";
    button.append(...head.childNodes);
    head.append(button);
    button.addEventListener("click", () => {
      const down = head.getAttribute("aria-sort") === "ascending";
      for (const other of heads) other.removeAttribute("aria-sort");
      head.setAttribute("aria-sort", down ? "descending" : "ascending");
      const rows = [...body.rows].map((row, at) => [keyOf(row, column), at, row]);
      rows.sort(([a, i], [b, j]) => {
        if (a === null || b === null) return (a === null) - (b === null) || i - j;
        return (down ? compare(b, a) : compare(a, b)) || i - j;
      });
      body.append(...rows.map((one) => one[2]));
      said.textContent = `Sorted by ${button.innerText.replace(/\s+/g, " ")}, ${down ? "descending" : "ascending"}.`;
    });
  });
}
