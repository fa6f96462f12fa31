// Tables: sorting by column, and tables of a chart's numbers made on request.

function startTables() {
  for (const heading of document.querySelectorAll("th.sorts")) {
    heading.addEventListener("click", () => sortTable(heading));
  }
  for (const details of document.querySelectorAll("details.numbers")) {
    details.addEventListener("toggle", () => fillNumbers(details));
  }
  // A box that scrolls can be reached, and so scrolled, from the keyboard.
  const sized = new ResizeObserver((entries) => {
    for (const { target } of entries) {
      if (target.scrollWidth > target.clientWidth || target.scrollHeight > target.clientHeight) target.tabIndex = 0;
      else target.removeAttribute("tabindex");
    }
  });
  for (const box of document.querySelectorAll(".scroll")) sized.observe(box);
}

// Sorts by the column under this heading: first ascending, then descending.
// Fields without a value stay last either way, and equal ones in their order.
function sortTable(heading) {
  const table = heading.closest("table");
  const body = table.tBodies[0];
  const descending = heading.getAttribute("aria-sort") === "ascending";
  for (const other of heading.parentElement.children) other.removeAttribute("aria-sort");
  heading.setAttribute("aria-sort", descending ? "descending" : "ascending");
  const numeric = heading.classList.contains("n");
  const key = (row) => {
    const cell = row.cells[heading.cellIndex];
    const text = cell.dataset.sort ?? cell.textContent.trim();
    if (!numeric) return text;
    return cell.dataset.sort === undefined || text === "" ? NaN : Number(text);
  };
  const compare = (a, b) => (numeric ? a - b : a.localeCompare(b, "en", { numeric: true }));
  const empty = (k) => (numeric ? Number.isNaN(k) : k === "");
  const rows = [...body.rows].map((row, i) => ({ row, i, key: key(row) }));
  rows.sort((a, b) => {
    if (empty(a.key) || empty(b.key)) return empty(a.key) - empty(b.key) || a.i - b.i;
    return (descending ? compare(b.key, a.key) : compare(a.key, b.key)) || a.i - b.i;
  });
  body.append(...rows.map((r) => r.row));
}

// The numbers of a chart stand in its data; as a table they would make a page
// on many tests heavy, so each is made when its reader opens it.
function fillNumbers(details) {
  const box = details.querySelector(".scroll");
  if (!details.open || box.firstChild) return;
  const data = chartData(document.getElementById(details.dataset.chart));
  const table = document.createElement("table");
  const caption = document.createElement("span");
  caption.textContent = box.dataset.caption;
  table.createCaption().append(caption);
  const head = table.createTHead().insertRow();
  for (const name of data.columns) {
    const cell = document.createElement("th");
    cell.scope = "col";
    cell.className = "n";
    cell.textContent = name;
    head.append(cell);
  }
  const body = table.createTBody();
  for (const fields of data.rows) {
    const row = body.insertRow();
    for (const field of fields) {
      const cell = row.insertCell();
      cell.className = "n";
      cell.textContent = field;
    }
  }
  box.append(table);
}
