// list.js: the list of fields, the equivalent of the markers for keyboard and readers; sortable,
// searchable, with a box in each row to pick fields for comparison. Rows are made once.

const LIST_COLUMNS = [
  { key: "name", head: "Field", first: 1 },
  { key: "elevation", head: "Elevation", first: -1 },
  { key: "value", head: "Value", first: -1 },
  { key: "interval", head: "Interval", first: -1 },
];
// From here on a list is long enough to look for a name in it, or to scroll by itself.
const SEARCH_FROM = 13;
const SCROLL_FROM = 21;
const MOST_COMPARED = 4;
// The column of intervals stands only where it leaves room for the names.
const WIDE = window.matchMedia("(min-width: 1100px)");
const NAME_ORDER = new Intl.Collator("en", { numeric: true, sensitivity: "base" });

// The parts of the list that stay: made at the first showing.
let list = null;

// Search

// Letters that no accent comes off from.
const PLAIN_LETTERS = { ß: "ss", æ: "ae", œ: "oe", ø: "o", ł: "l", đ: "d", ð: "d", þ: "th", ı: "i" };

function plainText(text) {
  return String(text)
    .normalize("NFKD")
    .replace(/\p{M}/gu, "")
    .toLowerCase()
    .replace(/[ßæœøłđðþı]/g, (letter) => PLAIN_LETTERS[letter]);
}

function countText(shown) {
  const all = STUDY.fields.length;
  const fields = all === 1 ? " field" : " fields";
  if (shown === all && !list.search.value.trim()) return all + fields;
  if (shown === 0) return "No field of " + all + " has this in its name or identifier.";
  return shown + " of " + all + fields;
}

function applySearch() {
  const words = plainText(list.search.value).split(/\s+/).filter(Boolean);
  let shown = 0;
  for (const row of list.rows) {
    const found = words.every((word) => row.words.includes(word));
    shown += found;
    patch(row, "hidden", !found, (hidden) => (row.node.hidden = hidden));
  }
  patch(list, "count", countText(shown), (text) => (list.count.textContent = text));
}

function clearSearch() {
  list.search.value = "";
  applySearch();
}

function searchPart(search, count) {
  search.addEventListener("input", applySearch);
  search.addEventListener("keydown", (event) => {
    if (event.key !== "Escape" || !search.value) return;
    event.preventDefault();
    event.stopPropagation();
    clearSearch();
  });
  return el("div", { class: "list-search" }, el("label", null, "Find a field", search), count);
}

// Head

function columnTitle(column, state) {
  // The value's column is headed by the measure where it has a short name.
  return (column.key === "value" && MEASURES[state.measure].short) || column.head;
}

function listHead(column, sortBy) {
  const title = el("span", null);
  const arrow = el("span", { class: "arrow", "aria-hidden": "true" });
  const button = el("button", { type: "button", "data-sort": column.key }, title, arrow);
  const node = el("th", { scope: "col", role: "columnheader", class: "column-" + column.key }, button);
  const head = { column, node, title, arrow, active: false, direction: column.first, shown: {} };
  button.addEventListener("click", () => sortBy(column.key, head.active ? -head.direction : column.first));
  return head;
}

function showHead(head, state, sort) {
  head.active = sort === head.column.key;
  head.direction = state.direction;
  const words = { 1: ["ascending", "\u25b2"], "-1": ["descending", "\u25bc"] }[state.direction];
  const [order, arrow] = head.active ? words : ["none", ""];
  patch(head, "title", columnTitle(head.column, state), (text) => (head.title.textContent = text));
  patch(head, "order", order, (text) => head.node.setAttribute("aria-sort", text));
  patch(head, "arrow", arrow, (text) => (head.arrow.textContent = text));
}

// Rows

function fieldButton(field, index, choose) {
  const estimate = estimateMark(field);
  const marks = [estimate, ...warningMarks(field).map((text) => el("span", { class: "steep" }, text))].filter(
    Boolean,
  );
  const button = el(
    "button",
    { type: "button", "data-field": field.id },
    given(field.name),
    marks.length
      ? el(
          "span",
          { class: "marks" },
          marks.flatMap((mark, i) => (i ? [" \u00b7 ", mark] : mark)),
        )
      : null,
  );
  button.addEventListener("click", () => choose(index));
  return button;
}

function listRow(field, index, choose) {
  const steep = isSteep(field);
  const picture = symbol(-1, steep);
  const value = el("span", null);
  const second = el("small", null);
  const interval = el("td", { role: "cell", class: "number column-interval" });
  const pick = el("input", {
    type: "checkbox",
    "aria-label": "Compare " + givenString(field.name),
    "data-compare": field.id,
  });
  pick.addEventListener("change", () => toggleCompare(index));
  const label = el("label", { class: "pick" }, pick);
  const node = el(
    "tr",
    { role: "row" },
    el("th", { scope: "row", role: "rowheader" }, fieldButton(field, index, choose)),
    el("td", { role: "cell", class: "number" }, grouped(Math.round(feetOf(field.elevation))) + " ft"),
    el(
      "td",
      { role: "cell", class: "number value" },
      el("span", { class: "value-cell" }, picture, el("span", null, value, second)),
    ),
    interval,
    el("td", { role: "cell", class: "column-compare" }, label),
  );
  const doubtful = isDoubtful(field);
  const words = plainText(field.name) + " " + plainText(field.id);
  return {
    field,
    index,
    node,
    symbol: picture,
    doubtful,
    value,
    second,
    interval,
    pick,
    label,
    words,
    shown: {},
  };
}

// The interval of a share or a mass belongs to the whole window; hours have none.
function hasIntervals(state) {
  const wide = WIDE.matches || document.documentElement.classList.contains("printing");
  return wide && ["shortfall", "weight"].includes(state.measure) && (state.hour < 0 || state.period.season);
}

function readRow(row, state) {
  const { index } = row;
  row.number = measured(state.measure, index, state.aircraft, state.period, state.hour);
  [row.low, row.high] = hasIntervals(state)
    ? measureBounds(state.measure, index, state.aircraft, state.period)
    : [null, null];
}

function showRow(row, state) {
  const none = row.number === null;
  const text = measureText(state.measure, row.number, timeOf(state.period, state.hour));
  patchSymbol(row, classOf(state.measure, row.number), false);
  patch(row, "value", text, (words) => (row.value.textContent = words));
  const second = state.measure === "weight" ? listedMass(row.number, STUDY.aircraft[state.aircraft]) : "";
  patch(row, "second", second, (words) => (row.second.textContent = words));
  patch(row, "none", none, (on) => row.node.classList.toggle("none", on));
  if (hasIntervals(state))
    patch(row, "interval", none ? NO_DATA : measureInterval(state.measure, row.low, row.high), (words) => {
      row.interval.textContent = words;
      row.interval.classList.toggle("unknown", row.high === null);
    });
  const chosen = state.compare.includes(row.index);
  const full = state.compare.length >= MOST_COMPARED && !chosen;
  row.pick.checked = chosen;
  patch(row, "full", full, (on) => {
    row.pick.disabled = on;
    row.label.title = on ? "Four fields are chosen already; take one away first." : "";
  });
}

function listOrder(rows, sort, direction) {
  // Fields without data stand last whichever way the list runs.
  const last = { value: (row) => row.number === null, interval: (row) => row.high === null }[sort];
  const compare = {
    name: (a, b) => a.place - b.place,
    elevation: (a, b) => a.field.elevation - b.field.elevation,
    value: (a, b) => a.number - b.number,
    interval: (a, b) => a.high - b.high || a.low - b.low,
  }[sort];
  return rows.slice().sort((a, b) => {
    const missing = last ? last(a) - last(b) : 0;
    if (missing || (last && last(a))) return missing || a.index - b.index;
    return direction * compare(a, b) || a.index - b.index;
  });
}

// Moves rows only where their order has changed; whoever has the focus keeps it.
function putInOrder(rows) {
  if (rows.every((row, i) => row === list.order[i])) return;
  const focused = document.activeElement;
  list.order = rows;
  list.body.replaceChildren(...rows.map((row) => row.node));
  if (focused !== document.activeElement && list.body.contains(focused))
    focused.focus({ preventScroll: true });
}

function makeList(choose, sortBy) {
  const table = byId("fields");
  const rows = STUDY.fields.map((field, index) => listRow(field, index, choose));
  rows
    .slice()
    .sort((a, b) => NAME_ORDER.compare(a.field.name, b.field.name) || a.index - b.index)
    .forEach((row, place) => (row.place = place));
  const search = el("input", { type: "search", id: "find-field", autocomplete: "off", spellcheck: "false" });
  const count = el("p", { class: "list-count", "aria-live": "polite" });
  const heads = LIST_COLUMNS.map((column) => listHead(column, sortBy));
  const headRow = el("tr", { role: "row" });
  const body = el("tbody", { role: "rowgroup" });
  const frame = el("div", { class: "list-frame" });
  if (rows.length >= SEARCH_FROM) byId("compare-bar").before(searchPart(search, count));
  frame.classList.toggle("long", rows.length >= SCROLL_FROM);
  table.replaceWith(frame);
  frame.append(table);
  table.setAttribute("role", "table");
  table.replaceChildren(el("thead", { role: "rowgroup" }, headRow), body);
  WIDE.addEventListener("change", () => showList(state, choose, sortBy));
  list = { rows, search, count, heads, headRow, body, table, order: [], open: -1, shown: {} };
  applySearch();
}

function showHeads(state, sort) {
  for (const head of list.heads) showHead(head, state, sort);
  patch(list, "intervals", hasIntervals(state), (on) => {
    const heads = list.heads.filter((head) => on || head.column.key !== "interval");
    list.table.classList.toggle("no-interval", !on);
    list.headRow.replaceChildren(
      ...heads.map((head) => head.node),
      el("td", { role: "columnheader", class: "column-compare" }, "Compare"),
    );
  });
}

function showList(state, choose, sortBy) {
  if (!list) makeList(choose, sortBy);
  const sort = state.sort === "interval" && !hasIntervals(state) ? "value" : state.sort;
  const focused = document.activeElement;
  showHeads(state, sort);
  for (const row of list.rows) {
    readRow(row, state);
    showRow(row, state);
  }
  putInOrder(listOrder(list.rows, sort, state.direction));
  if (focused !== document.activeElement && list.headRow.contains(focused)) focused.focus();
  // Whoever comes back from a field finds its row, even if the search would hide it.
  if (list.open >= 0 && state.field < 0 && list.rows[list.open].node.hidden) clearSearch();
  list.open = state.field;
}
