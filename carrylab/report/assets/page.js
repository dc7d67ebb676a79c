(() => {
  "use strict";
  const status = document.getElementById("status");
  const number = (cell) => {
    const text = cell.title || cell.textContent;
    const found = /^[-+]?(\d|inf|\.)/.test(text) ? parseFloat(text.replace("inf", "Infinity").replace(/,/g, "")) : NaN;
    return found;
  };
  // Numbers before words, words in their order, empty cells last whatever the direction.
  const compare = (a, b, down) => {
    const [x, y] = [number(a), number(b)];
    const [s, t] = [a.textContent.trim(), b.textContent.trim()];
    const empty = (text, value) => Number.isNaN(value) && (text === "" || text === "-");
    if (empty(s, x) || empty(t, y)) return empty(s, x) - empty(t, y);
    const order = Number.isNaN(x) || Number.isNaN(y)
      ? Number.isNaN(x) - Number.isNaN(y) || s.localeCompare(t, "en", { numeric: true })
      : x - y;
    return down ? -order : order;
  };
  const turned = (head, table) => {
    const down = head.getAttribute("aria-sort") === "ascending";
    table.querySelectorAll("[aria-sort]").forEach((other) => other.removeAttribute("aria-sort"));
    head.setAttribute("aria-sort", down ? "descending" : "ascending");
    return down;
  };
  const say = (what) => {
    status.textContent = what;
  };
  const sortRows = (table, head) => {
    const at = head.cellIndex;
    const down = turned(head, table);
    [...table.tBodies]
      .sort((a, b) => compare(a.rows[0].cells[at], b.rows[0].cells[at], down))
      .forEach((body) => table.append(body));
    say(`Sorted by ${head.textContent.trim()}, ${down ? "largest" : "smallest"} first`);
  };
  const sortColumns = (table, row) => {
    const cells = [...row.cells].slice(1);
    const head = row.cells[0];
    const down = row.dataset.order === "up";
    const order = cells.map((_, at) => at).sort((a, b) => compare(cells[a], cells[b], down));
    table.querySelectorAll("tr[data-order]").forEach((other) => delete other.dataset.order);
    row.dataset.order = down ? "down" : "up";
    for (const line of table.rows) {
      if (line.cells.length !== cells.length + 1) continue;
      const old = [...line.cells].slice(1);
      order.forEach((at) => line.append(old[at]));
    }
    say(`Columns sorted by ${head.textContent.trim()}, ${down ? "largest" : "smallest"} first`);
  };
  // No button element: browsers leave those out where the head of a table repeats on paper.
  const button = (head, click) => {
    const made = document.createElement("span");
    made.tabIndex = 0;
    made.setAttribute("role", "button");
    made.append(...head.childNodes);
    made.addEventListener("click", click);
    made.addEventListener("keydown", (event) => {
      if (event.key !== "Enter" && event.key !== " ") return;
      event.preventDefault();
      click();
    });
    head.append(made);
  };
  const text = (table) =>
    [...table.rows]
      .map((row) => [...row.cells].map((cell) => (cell.querySelector(".spoken") ? "" : cell.textContent.trim())).join("\t"))
      .join("\n");
  const copy = async (tables) => {
    const plain = tables.map(text).join("\n\n") + "\n";
    try {
      await navigator.clipboard.writeText(plain);
    } catch {
      const area = document.createElement("textarea");
      area.value = plain;
      document.body.append(area);
      area.select();
      document.execCommand("copy");
      area.remove();
    }
    say("Copied");
  };
  for (const sheet of document.querySelectorAll(".sheet")) {
    const tables = [...sheet.querySelectorAll("table")];
    const head = document.createElement("div");
    const tools = document.createElement("div");
    const made = document.createElement("button");
    const title = sheet.querySelector("h3");
    head.className = "head";
    tools.className = "tools";
    made.type = "button";
    made.textContent = "Copy as text";
    made.setAttribute("aria-label", `Copy as text: ${title.textContent}`);
    made.addEventListener("click", async () => {
      await copy(tables);
      made.textContent = "Copied";
      setTimeout(() => (made.textContent = "Copy as text"), 1500);
    });
    title.before(head);
    tools.append(made);
    head.append(title, tools);
    for (const table of tables) {
      const rows = table.dataset.by === "rows" && table.tBodies.length > 1;
      const columns = table.dataset.by === "columns" && table.tHead.rows[0].cells.length > 2;
      if (rows) table.querySelectorAll("thead th").forEach((one) => button(one, () => sortRows(table, one)));
      if (columns) {
        for (const row of table.querySelectorAll("tbody tr:not(.heading)")) {
          if (!row.cells[0].querySelector(".spoken")) button(row.cells[0], () => sortColumns(table, row));
        }
      }
      if (rows || columns) tools.append(rows ? "Heads sort the rows. " : "Names of rows sort the columns. ");
    }
  }
  // A region that does not scroll is no stop of the Tab key.
  const stops = () =>
    document.querySelectorAll(".scroll").forEach((area) => {
      if (area.scrollWidth > area.clientWidth) area.tabIndex = 0;
      else area.removeAttribute("tabindex");
    });
  stops();
  window.addEventListener("resize", stops);
})();
