// list.js: the list of fields, the equivalent of the markers for keyboard and readers; sortable.

const LIST_COLUMNS = [
  { key: "name", head: "Field", first: 1 },
  { key: "elevation", head: "Elevation", first: -1 },
  { key: "value", head: "Value", first: -1 },
];

function listOrder(rows, sort, direction) {
  const compare = {
    name: (a, b) => (a.field.name < b.field.name ? -1 : Number(a.field.name > b.field.name)),
    elevation: (a, b) => a.field.elevation - b.field.elevation,
    value: (a, b) => a.value - b.value,
  }[sort];
  return rows.slice().sort((a, b) => {
    // Fields without data stand last whichever way the list runs.
    if (sort === "value" && (a.value === null || b.value === null)) {
      return (a.value === null) - (b.value === null) || a.index - b.index;
    }
    return direction * compare(a, b) || a.index - b.index;
  });
}

function listHead(column, state, sortBy) {
  const active = state.sort === column.key;
  const direction = active ? (state.direction > 0 ? "ascending" : "descending") : "none";
  const arrow = active ? (state.direction > 0 ? " \u25b2" : " \u25bc") : "";
  const button = el(
    "button",
    { type: "button", "data-sort": column.key },
    column.head,
    el("span", { "aria-hidden": "true" }, arrow)
  );
  button.addEventListener("click", () => sortBy(column.key, active ? -state.direction : column.first));
  return el("th", { scope: "col", "aria-sort": direction, class: "column-" + column.key }, button);
}

function listRow(row, state, choose) {
  const number = classOf(state.measure, row.value);
  const marked = [
    estimateMark(row.field),
    isSteep(row.field) ? el("span", { class: "steep" }, STEEP_MARK) : null,
  ].filter(Boolean);
  const button = el(
    "button",
    { type: "button", "data-field": row.field.id },
    given(row.field.name),
    marked.length ? el("span", { class: "marks" }, marked.flatMap((mark, i) => (i ? [" \u00b7 ", mark] : mark))) : null
  );
  button.addEventListener("click", () => choose(row.index));
  return el(
    "tr",
    { class: number < 0 ? "none" : null },
    el("th", { scope: "row" }, button),
    el("td", { class: "number" }, grouped(Math.round(feetOf(row.field.elevation))) + " ft"),
    el(
      "td",
      { class: "number value" },
      el("span", { class: "value-cell" }, symbol(number, isSteep(row.field)), measureText(state.measure, row.value))
    )
  );
}

function showList(state, choose, sortBy) {
  const rows = STUDY.fields.map((field, index) => ({
    field,
    index,
    value: measured(state.measure, index, state.aircraft, state.period, state.hour),
  }));
  const focused = document.activeElement && document.activeElement.dataset.sort;
  byId("fields").replaceChildren(
    el(
      "thead",
      null,
      el(
        "tr",
        null,
        LIST_COLUMNS.map((column) => listHead(column, state, sortBy))
      )
    ),
    el(
      "tbody",
      null,
      listOrder(rows, state.sort, state.direction).map((row) => listRow(row, state, choose))
    )
  );
  if (focused)
    byId("fields")
      .querySelector('[data-sort="' + focused + '"]')
      .focus();
}
