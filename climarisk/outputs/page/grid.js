// grid.js: the month by hour grid of a field. One tab stop; arrow keys move, Enter or Space chooses.

function gridCell(state, month, hour) {
  const value = measured(state.measure, state.field, state.aircraft, { season: false, index: month }, hour);
  const scale = scaleOf(state.measure, "hour");
  const text = measureText(state.measure, value, "hour");
  const inside = inWindow(state.field, month, hour);
  const told =
    MONTH_NAMES[month] +
    ", " +
    hourText(hour) +
    ": " +
    (state.measure === "weight" ? massText(value, STUDY.aircraft[state.aircraft]) : text) +
    (inside ? "" : ", outside the window");
  const chosen = !state.period.season && state.period.index === month && state.hour === hour;
  return el(
    "td",
    {
      class: className(classIn(scale, value)) + (inside ? "" : " outside") + (chosen ? " chosen" : ""),
      tabindex: "-1",
      "data-month": month,
      "data-hour": hour,
      "aria-label": told,
      "aria-selected": String(chosen),
      title: told,
    },
    cellText(state.measure, value),
  );
}

function gridMove(grid, event) {
  const step = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, -1], ArrowDown: [0, 1] }[event.key];
  const from = event.target.closest("td");
  if (!step || !from) return;
  const [month, hour] = [Number(from.dataset.month) + step[0], Number(from.dataset.hour) + step[1]];
  event.preventDefault();
  const next = grid.querySelector('td[data-month="' + month + '"][data-hour="' + hour + '"]');
  if (!next) return;
  from.tabIndex = -1;
  next.tabIndex = 0;
  next.focus();
}

function makeGrid(state, chooseCell) {
  const caption =
    MEASURES[state.measure].sentence("hour") +
    ", " +
    MEASURES[state.measure].unit("hour") +
    "; rows: hour, local standard time. Small cells: hours outside the window.";
  const hours = Array.from({ length: 24 }, (_, hour) => hour);
  const grid = el(
    "table",
    { class: "grid own-scale", role: "grid" },
    el("caption", null, caption),
    el(
      "thead",
      null,
      el(
        "tr",
        null,
        el("th", { scope: "col" }, "h"),
        MONTHS.map((name, month) =>
          el(
            "th",
            { scope: "col", class: !state.period.season && month === state.period.index ? "chosen" : null },
            name,
          ),
        ),
      ),
    ),
    el(
      "tbody",
      null,
      hours.map((hour) =>
        el(
          "tr",
          null,
          el(
            "th",
            { scope: "row", class: hour === state.hour ? "chosen" : null },
            String(hour).padStart(2, "0"),
          ),
          MONTHS.map((_, month) => gridCell(state, month, hour)),
        ),
      ),
    ),
  );
  const first =
    grid.querySelector("td.chosen") ||
    grid.querySelector(
      'td[data-month="' + (state.period.season ? 0 : state.period.index) + '"][data-hour="12"]',
    );
  first.tabIndex = 0;
  const choose = (cell) => chooseCell(Number(cell.dataset.month), Number(cell.dataset.hour));
  grid.addEventListener("click", (event) => event.target.closest("td") && choose(event.target.closest("td")));
  grid.addEventListener("keydown", (event) => {
    gridMove(grid, event);
    if ((event.key === "Enter" || event.key === " ") && event.target.closest("td")) {
      event.preventDefault();
      choose(event.target.closest("td"));
    }
  });
  return grid;
}
