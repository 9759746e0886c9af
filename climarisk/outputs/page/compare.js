// compare.js: two to four fields beside each other, on one chart and in one table.

function toggleCompare(index) {
  const chosen = state.compare.includes(index);
  if (!chosen && state.compare.length >= MOST_COMPARED) return;
  state.compare = chosen ? state.compare.filter((other) => other !== index) : [...state.compare, index];
  draw();
}

// What the list says of the fields picked, with the way to the comparison.
function showCompareBar() {
  const count = state.compare.length;
  byId("compare-open").disabled = count < 2;
  byId("compare-open").textContent = count < 2 ? "Compare fields" : "Compare " + count + " fields";
  byId("compare-note").textContent =
    count < 2
      ? "Tick 2 to " + MOST_COMPARED + " fields to see them on one chart."
      : state.compare.map((index) => givenString(STUDY.fields[index].name)).join(", ");
}

// Values in the unit of an axis, with their interval where the measure has one.
function monthSeries(index) {
  const periods = MONTHS.map((_, month) => ({ season: false, index: month }));
  const values = periods.map((period) => measured(state.measure, index, state.aircraft, period, -1));
  if (!["shortfall", "weight"].includes(state.measure)) return { values, low: null, high: null };
  const ends = periods.map((period) => measureBounds(state.measure, index, state.aircraft, period));
  return { values, low: ends.map(([low]) => low), high: ends.map(([, high]) => high) };
}

function hourSeries(index) {
  const values = Array.from({ length: 24 }, (_, hour) =>
    measured(state.measure, index, state.aircraft, state.period, hour),
  );
  return { values, low: null, high: null };
}

function isShare() {
  return MEASURES[state.measure].text === percent;
}

function inPercent({ values, low, high }) {
  const scaled = (list) => list && list.map((value) => (value === null ? null : value * 100));
  return { values: scaled(values), low: scaled(low), high: scaled(high) };
}

// No mass holds: the line goes down to the empty aircraft.
function asDrawn(series) {
  if (isShare()) return inPercent(series);
  return { ...series, values: series.values.map((value) => (value === NOT_MET ? 0 : value)) };
}

function compareChart(title, series, ticks) {
  const drawn = series.map(state.measure === "weight" || isShare() ? asDrawn : (one) => one);
  const fromZero = state.measure === "usable" || state.measure === "weight";
  const limits = isShare() ? [0, shareTop(drawn)] : fromZero ? [0, highest(drawn)] : null;
  const chart = lineChart(title, drawn, ticks, grouped, limits);
  return chart || el("p", { class: "empty" }, "No data for any of these fields.");
}

function highest(series) {
  const all = series.flatMap(({ values, high }) => [...values, ...(high || [])]);
  return Math.max(1, ...all.filter((value) => value !== null));
}

// Per cent: not so fine that a share of a few per mille looks like a mountain.
function shareTop(series) {
  return Math.max(5, highest(series));
}

function compareKey() {
  return el(
    "ul",
    { class: "line-key" },
    state.compare.map((index, number) => {
      const field = STUDY.fields[index];
      const marks = [isSteep(field) ? STEEP_MARK : null, isDoubtful(field) ? DOUBT_MARK : null].filter(
        Boolean,
      );
      const open = el("button", { type: "button", class: "plain-button" }, clamped(field.name));
      open.addEventListener("click", () => actions.open(index));
      return el(
        "li",
        null,
        lineSample(number),
        el(
          "span",
          null,
          open,
          el(
            "span",
            { class: "quiet" },
            [elevationText(field.elevation), airText(field), ...marks].join(" \u00b7 "),
          ),
        ),
      );
    }),
  );
}

function compareTable() {
  const heads = [
    "Month",
    ...state.compare.map((index, number) => [lineSample(number), clamped(STUDY.fields[index].name)]),
  ];
  const series = state.compare.map(monthSeries);
  const cell = ({ values, low, high }, month) => {
    const text = measureText(state.measure, values[month]);
    if (!low || values[month] === null) return text;
    return [text, el("small", null, measureInterval(state.measure, low[month], high[month]))];
  };
  const rows = MONTHS.map((name, month) => [name, ...series.map((one) => cell(one, month))]);
  const caption = MEASURES[state.measure].sentence("month") + ", whole window (" + windowText() + ")";
  return table(caption, heads, rows, "plain-table compared");
}

function compareNote() {
  const what = {
    shortfall: "Per cent of the hours of the window",
    weight: "Useful load in kg; 0 where no mass can be met",
  }[state.measure];
  return what ? el("p", { class: "key" }, what + "; upright lines: " + confidenceText() + ".") : null;
}

function comparePanel(state, actions) {
  const back = el("button", { type: "button", id: "all-fields-compared" }, "\u2190 All fields");
  back.addEventListener("click", actions.closeCompare);
  const measure = MEASURES[state.measure];
  const profile = measure.ofAircraft ? ["for ", given(STUDY.aircraft[state.aircraft].name)] : [];
  const byMonth = measure.sentence("month") + " by month, whole window";
  const hours = Array.from({ length: 24 }, (_, hour) => (hour % 3 ? "" : String(hour).padStart(2, "0")));
  return [
    back,
    el("h2", { id: "compare-heading", tabindex: "-1" }, "Fields compared"),
    el("p", { class: "place" }, measure.name, ...(profile.length ? [", ", ...profile] : [])),
    compareKey(),
    section("By month", compareChart(byMonth, state.compare.map(monthSeries), MONTHS), compareNote()),
    state.period.season
      ? null
      : section(
          "By hour, " + periodText(state.period),
          compareChart(
            measure.sentence("hour") + " by hour, " + periodText(state.period),
            state.compare.map(hourSeries),
            hours,
          ),
          el("p", { class: "key" }, "Hours of local standard time, all hours of the day."),
        ),
    section("Figures", compareTable()),
  ].filter(Boolean);
}
