// The table: a page of rows at a time, sorted by any column, in step with the figures.

const ROWS_A_PAGE = 15;
const table = { columns: [], sort: null, descending: false, order: [], first: 0 };

function tableColumns() {
  const which = byId("table-columns").value;
  if (which === "main") return page.shown.map((name) => fields.get(name));
  if (which === "all") return page.fields;
  return page.fields.filter((field) => field.family === which);
}

function sortKey(shape) {
  if (table.sort === null) return page.labels[shape];
  return isNumeric(table.sort) ? valuesOf(table.sort)[shape] : table.sort.texts[shape];
}

const collator = new Intl.Collator(undefined, { numeric: true });

function compare(a, b) {
  const left = sortKey(a), right = sortKey(b);
  const leftIsNull = left === null || Number.isNaN(left), rightIsNull = right === null || Number.isNaN(right);
  // What has no value comes last, whichever way the column is sorted.
  if (leftIsNull || rightIsNull) return leftIsNull - rightIsNull || a - b;
  const order = typeof left === "string" ? collator.compare(left, right) : left - right;
  return (table.descending ? -order : order) || a - b;
}

function isFound(shape, wanted) {
  if (!wanted) return true;
  if (page.labels[shape].toLowerCase().includes(wanted)) return true;
  return page.fields.some((field) => !isNumeric(field) && field.texts[shape]?.toLowerCase().includes(wanted));
}

function orderRows() {
  const wanted = byId("table-search").value.trim().toLowerCase();
  const only = byId("table-only").checked ? new Set(chosen.shapes) : null;
  table.order = [...page.labels.keys()].filter((shape) => (!only || only.has(shape)) && isFound(shape, wanted));
  if (table.sort !== undefined) table.order.sort(compare);
  table.first = 0;
}

function headCell(title, unit, field) {
  const isSorted = table.sort === field;
  const button = make("button", { type: "button", onclick: () => sortBy(field) }, title, unit ? make("span", { class: "unit" }, ` ${unit}`) : null);
  const sort = isSorted ? (table.descending ? "descending" : "ascending") : null;
  return make("th", { scope: "col", "aria-sort": sort, class: field && isNumeric(field) ? "number" : null }, button);
}

function sortBy(field) {
  table.descending = table.sort === field ? !table.descending : false;
  table.sort = field;
  orderRows();
  drawTable();
  const at = 1 + (field === null ? -1 : table.columns.indexOf(field));
  byId("shapes-table").tHead.rows[0].cells[at].querySelector("button").focus();
}

function bodyRow(shape) {
  const isChosen = chosen.shapes.includes(shape);
  const pick = make("button", { type: "button", class: "pick", "aria-pressed": String(isChosen) }, page.labels[shape]);
  const cells = table.columns.map((field) => {
    const text = isNumeric(field) ? cellText(field, valuesOf(field)[shape]) : (field.texts[shape] ?? "\u2013");
    return make("td", { class: isNumeric(field) ? "number" : null }, text);
  });
  const row = make("tr", { class: isChosen ? "chosen" : null, "data-row": shape }, make("th", { scope: "row" }, pick), ...cells);
  row.addEventListener("click", (event) => {
    event.stopPropagation();
    if (event.ctrlKey || event.metaKey || event.shiftKey) toggle(shape); else choose([shape]);
    byId("shapes-table").querySelector(`[data-row="${shape}"] .pick`)?.focus({ preventScroll: true });
  });
  return row;
}

function drawTable() {
  table.columns = tableColumns();
  const head = make("tr", {}, headCell("shape", "", null), ...table.columns.map((field) => headCell(field.title, field.unit, field)));
  const rows = table.order.slice(table.first, table.first + ROWS_A_PAGE).map(bodyRow);
  byId("shapes-table").tHead.replaceChildren(head);
  byId("shapes-table").tBodies[0].replaceChildren(...rows);
  const last = Math.min(table.first + ROWS_A_PAGE, table.order.length);
  byId("table-place").textContent = table.order.length
    ? `${table.first + 1}\u2013${last} of ${grouped(String(table.order.length))}` : "no row";
  byId("table-before").disabled = table.first === 0;
  byId("table-after").disabled = last >= table.order.length;
}

function turnTo(shape) {
  const at = table.order.indexOf(shape);
  if (at >= 0) table.first = at - (at % ROWS_A_PAGE);
}

onChoice(({ shapes }) => {
  if (byId("table-only").checked) orderRows();
  if (shapes.length) turnTo(shapes[0]);
  drawTable();
});

for (const [family, title] of Object.entries(page.families))
  byId("table-columns").append(make("option", { value: family }, title));
byId("table-columns").append(make("option", { value: "all" }, "Every column"));
byId("table-columns").addEventListener("change", drawTable);
for (const id of ["table-search", "table-only"])
  byId(id).addEventListener("input", () => { orderRows(); drawTable(); });
byId("table-before").addEventListener("click", () => { table.first -= ROWS_A_PAGE; drawTable(); });
byId("table-after").addEventListener("click", () => { table.first += ROWS_A_PAGE; drawTable(); });
table.sort = undefined;
orderRows();
drawTable();
