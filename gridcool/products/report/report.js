"use strict";
(() => {
  const value = (cell) => {
    const held = cell.dataset.value;
    return held === undefined ? cell.textContent.trim() : held === "" ? null : Number(held);
  };
  for (const table of document.querySelectorAll("table[data-sortable]")) {
    const heads = [...table.tHead.rows[0].cells];
    heads.forEach((head, column) => {
      const button = head.querySelector("button");
      if (!button) return;
      button.addEventListener("click", () => {
        const down = head.getAttribute("aria-sort") === "ascending";
        heads.forEach((each) => each.removeAttribute("aria-sort"));
        head.setAttribute("aria-sort", down ? "descending" : "ascending");
        const rows = [...table.tBodies[0].rows];
        rows.sort((a, b) => {
          const x = value(a.cells[column]), y = value(b.cells[column]);
          if (x === null || y === null) return (x === null) - (y === null);
          const order = typeof x === "number" ? x - y : String(x).localeCompare(String(y));
          return down ? -order : order;
        });
        table.tBodies[0].append(...rows);
      });
    });
  }
  const holder = document.getElementById("shapes-data");
  if (!holder) return;
  const data = JSON.parse(holder.textContent);
  const select = document.getElementById("shapes-column");
  const told = document.getElementById("shapes-told");
  const legend = document.getElementById("shapes-legend");
  const paths = [...document.querySelectorAll(".shapes path[data-row]")];
  const shown = (number) => (number === null ? "–" : Number(number.toPrecision(4)).toLocaleString("en"));
  const paint = () => {
    const column = data.columns[Number(select.value)];
    const known = column.values.filter((each) => each !== null);
    const low = Math.min(...known), high = Math.max(...known);
    for (const path of paths) {
      const number = column.values[Number(path.dataset.row)];
      const share = high > low ? (number - low) / (high - low) : 0.5;
      const step = Math.min(data.colours.length - 1, Math.floor(share * data.colours.length));
      path.setAttribute("fill", number === null ? data.missing : data.colours[step]);
    }
    legend.textContent = `${shown(low)} to ${shown(high)} ${column.unit}`.trim();
  };
  const tell = (path) => {
    const row = Number(path.dataset.row);
    const parts = data.columns.map((each) => `${each.name} ${shown(each.values[row])} ${each.unit}`.trim());
    told.textContent = "";
    const name = document.createElement("b");
    const isolated = document.createElement("bdi");
    isolated.textContent = data.names[row];
    name.append(isolated);
    told.append(name, " – " + parts.join("; "));
  };
  for (const path of paths) {
    for (const kind of ["mouseenter", "focus", "click"]) path.addEventListener(kind, () => tell(path));
  }
  select.addEventListener("change", paint);
  document.getElementById("shapes-choice").hidden = false;
  paint();
})();
