// schedule.js: the flights of a schedule: how many are expected to fall short, when and which.

function namedRows(name) {
  const { columns, textColumns } = PLANNING.schedule;
  const texts = new Set(textColumns[name]);
  const heads = columns[name].map((column) => [column, texts.has(column)]);
  return PLANNING.schedule[name].map((row) => namedRow(heads, row));
}

const FLIGHTS = PLANNING.schedule ? namedRows("flights") : [];
const SCHEDULE_SEASONS = PLANNING.schedule ? namedRows("seasons") : [];
const SCHEDULE_DAYS = PLANNING.schedule ? namedRows("days") : [];

// How the list of flights can be ordered.
const byText = (column) => (a, b) => NAME_ORDER.compare(a[column] || "", b[column] || "");
const byNumber = (column) => (a, b) => (b[column] ?? -1) - (a[column] ?? -1);
const FLIGHT_ORDERS = {
  share: { name: "Most often short first", compare: byNumber("shortfall") },
  affected: { name: "Most flights affected first", compare: byNumber("affected") },
  flight: { name: "By flight", compare: byText("flight") },
  field: {
    name: "By field",
    compare: (a, b) => indexOfId(STUDY.fields, a.field) - indexOfId(STUDY.fields, b.field),
  },
  time: { name: "By clock time", compare: byText("clock_time") },
};

function flightEnds(low, text) {
  return low === null ? "no interval" : text;
}

function headlineText({ told, flights, unknown_flights: unknown }) {
  if (unknown >= flights)
    return [el("b", null, NO_DATA), el("span", null, "for any of " + grouped(flights) + " flights")];
  const known = grouped(flights - unknown);
  return [
    el("b", null, told + " of " + (unknown ? "the " : "") + known),
    el(
      "span",
      null,
      (unknown ? "flights with figures" : "flights") +
        " are expected to fall short" +
        (PLANNING.year ? " in " + PLANNING.year : ""),
    ),
  ];
}

function neverText() {
  const { never } = PLANNING.schedule;
  if (!never) return "none";
  return (
    grouped(never) +
    (never === 1 ? " row" : " rows") +
    " of the schedule fell short in every hour of the record at the mass planned"
  );
}

function scheduleHeadline() {
  const whole = SCHEDULE_SEASONS.find((row) => !row.season);
  if (!whole || !whole.flights) return null;
  const unknown = whole.unknown_flights;
  const facts = [
    [
      "Without figures",
      unknown
        ? grouped(unknown) +
          " of " +
          grouped(whole.flights) +
          " flights: not counted; that does not mean no risk"
        : "none",
    ],
    ["Never met at the mass planned", neverText()],
  ];
  if (whole.year_low !== null)
    facts.unshift([
      "Best and worst year",
      whole.told_years + (whole.worst_year ? ", worst " + whole.worst_year : ""),
    ]);
  if (unknown < whole.flights)
    facts.unshift([
      confidenceText(),
      flightEnds(whole.ci_low, whole.told_ends) + (whole.interval_note ? ", " + whole.interval_note : ""),
    ]);
  return el("div", { class: "headline" }, el("p", { class: "big" }, headlineText(whole)), factList(facts));
}

function scheduleSeasons() {
  const rows = SCHEDULE_SEASONS.filter((row) => row.season && row.flights).map((row) => [
    given(row.season),
    grouped(row.flights),
    row.told,
    row.affected === null ? NO_DATA : flightEnds(row.ci_low, row.told_ends),
    row.affected === null ? NO_DATA : row.told_years,
    row.unknown_flights ? grouped(row.unknown_flights) : "\u2013",
  ]);
  if (!rows.length) return null;
  const heads = [
    "Season",
    "Flights",
    "Fall short",
    confidenceText(),
    "Best and worst year",
    "Without figures",
  ];
  return section("By season", table("Flights expected to fall short", heads, rows, "plain-table seasons"));
}

function scheduleDays() {
  const rows = SCHEDULE_DAYS.filter((row) => row.affected !== null && row.affected > 0).map((row) => [
    [row.date, " ", el("small", null, row.weekday)],
    grouped(row.flights),
    row.told,
    percent(row.share),
  ]);
  if (!rows.length) return null;
  return section(
    "Worst days",
    table(
      "The " + rows.length + " days with the most flights affected",
      ["Day", "Flights", "Fall short", "Share"],
      rows,
      "plain-table days",
    ),
  );
}

function flightShare(flight) {
  if (flight.shortfall === null) return el("span", { class: "none" }, NO_DATA);
  return [
    el(
      "span",
      { class: "value-cell share-scale" },
      symbol(classIn(SCALES.shortfall, flight.shortfall)),
      percent(flight.shortfall),
    ),
    " ",
    el(
      "small",
      null,
      flight.ci_low === null
        ? flight.interval_note || "no interval"
        : interval(flight.ci_low, flight.ci_high),
    ),
    flight.never_met === "yes" ? el("span", { class: "tag severity-caution" }, "never met") : null,
  ];
}

function flightMass(flight) {
  if (flight.outcome === "cannot be met") return el("b", null, NOT_MET_TEXT);
  if (flight.mass_that_holds_kg === null) return NO_DATA;
  const kg = (value) => grouped(Math.floor(value)) + " kg";
  return [
    kg(flight.mass_that_holds_kg),
    " ",
    el(
      "small",
      null,
      "load " + kg(flight.useful_load_kg),
      flight.outcome === "maximum mass" ? ", maximum" : "",
    ),
  ];
}

function flightNearest(flight) {
  if (flight.shortfall === null) return NO_DATA;
  const hours = flight.nearest_shift_h;
  if (hours === 0) return "as planned";
  if (!flight.nearest_time) return flight.shortfall < PLANNING.target ? "as planned" : flight.no_time;
  const shift = hours === null ? "" : Math.abs(hours) + " h " + (hours < 0 ? "earlier" : "later");
  return [
    given(flight.nearest_time),
    " ",
    el("small", null, [shift, percent(flight.nearest_shortfall)].filter(Boolean).join(", ")),
  ];
}

function flightRow(flight, actions) {
  const index = indexOfId(STUDY.fields, flight.field);
  const profile = STUDY.aircraft.find(({ id }) => id === flight.aircraft);
  return [
    given(flight.flight),
    [
      index < 0 ? given(flight.field) : fieldLink(index, actions),
      el(
        "small",
        null,
        given(profile ? profile.name : flight.aircraft),
        ", " + flight.operation,
        flight.mass_kg === null ? "" : " at " + grouped(Math.floor(flight.mass_kg)) + " kg",
      ),
    ],
    [
      given(flight.when),
      " ",
      el(
        "small",
        null,
        given(flight.clock_time),
        ", " + grouped(flight.flights) + (flight.flights === 1 ? " flight" : " flights"),
      ),
      flight.note ? el("small", { class: "note" }, given(flight.note)) : null,
    ],
    flightShare(flight),
    flight.told,
    flight.limiting || (flight.shortfall === null ? NO_DATA : "none"),
    flightMass(flight),
    flightNearest(flight),
  ];
}

function flightsNote() {
  const { total } = PLANNING.schedule;
  if (total <= FLIGHTS.length)
    return total + (total === 1 ? " row of the schedule." : " rows of the schedule.");
  return (
    "The " +
    FLIGHTS.length +
    " rows that fall short most often of " +
    grouped(total) +
    "; all of them are in schedule_flights.csv."
  );
}

function scheduleView(state, actions) {
  const rows = FLIGHTS.slice().sort(FLIGHT_ORDERS[state.flights].compare);
  const heads = [
    "Flight",
    "Field, aircraft",
    "When",
    "Falls short",
    "Affected",
    "Limiting check",
    "Mass that holds",
    "Nearest hour that meets the target",
  ];
  const orders = Object.entries(FLIGHT_ORDERS).map(([key, { name }]) => option(key, name));
  return [
    el("h2", { id: "overview-heading", tabindex: "-1" }, "Schedule"),
    scheduleHeadline(),
    el("div", { class: "side-by-side" }, [scheduleSeasons(), scheduleDays()].filter(Boolean)),
    section(
      "Flights",
      el(
        "div",
        { class: "overview-choices" },
        choice("flight-order", "Order", orders, state.flights, (value) => (state.flights = value)),
      ),
      el(
        "p",
        { class: "key" },
        flightsNote() +
          " Share with its " +
          confidenceText() +
          "; mass that holds in " +
          percent(PLANNING.holdsIn) +
          " of the hours; target: fewer than " +
          edgeText(PLANNING.target) +
          " %. Affected: flights of the schedule expected to fall short." +
          steepWords(FLIGHTS.map((flight) => indexOfId(STUDY.fields, flight.field))),
      ),
      stackedTable(
        "flights",
        "Flights, their share of hours that fall short, and what would help",
        heads,
        rows.map((flight) => flightRow(flight, actions)),
      ),
    ),
  ];
}
