// app.js: the state of the view, the controls, the address fragment, and drawing.

const state = {
  aircraft: 0,
  period: { season: false, index: 0 },
  hour: -1,
  measure: "shortfall",
  field: -1,
  sort: "value",
  direction: -1,
};
const map = window.map_fields;

// The page opens on the month with the most shortfall of the first aircraft.
function worstMonth() {
  let [worst, most] = [0, -1];
  for (let index = 0; index < 12; index += 1) {
    const sum = STUDY.fields.reduce(
      (total, _, field) => total + (riskShare("shortfall", field, 0, { season: false, index }) || 0),
      0
    );
    if (sum > most) [worst, most] = [index, sum];
  }
  return { season: false, index: worst };
}

function viewText(view) {
  const hour =
    view.period.season || view.hour < 0
      ? "whole window (" + windowText() + ")"
      : hourText(view.hour) + " local standard time";
  return MEASURES[view.measure].sentence + ", " + periodText(view.period) + ", " + hour;
}

// Address fragment

function indexOfId(list, id) {
  return list.findIndex((item) => item.id === id);
}

function readFragment() {
  const words = new URLSearchParams(location.hash.slice(1));
  state.aircraft = Math.max(0, indexOfId(STUDY.aircraft, words.get("aircraft")));
  state.field = indexOfId(STUDY.fields, words.get("field"));
  const month = Number(words.get("month"));
  const season = STUDY.seasons.indexOf(words.get("season"));
  if (season >= 0) state.period = { season: true, index: season };
  else
    state.period =
      Number.isInteger(month) && month >= 1 && month <= 12
        ? { season: false, index: month - 1 }
        : worstMonth();
  const hour = words.has("hour") ? Number(words.get("hour")) : -1;
  state.hour = Number.isInteger(hour) && hour >= 0 && hour <= 23 ? hour : -1;
  state.measure = Object.hasOwn(MEASURES, words.get("measure")) ? words.get("measure") : "shortfall";
  settle();
}

// Seasons have shortfall shares over the whole window only.
function settle() {
  if (!state.period.season) return;
  state.hour = -1;
  state.measure = "shortfall";
}

function writeFragment() {
  const words = new URLSearchParams();
  words.set("aircraft", STUDY.aircraft[state.aircraft].id);
  if (state.period.season) words.set("season", STUDY.seasons[state.period.index]);
  else words.set("month", state.period.index + 1);
  if (state.hour >= 0) words.set("hour", state.hour);
  words.set("measure", state.measure);
  if (state.field >= 0) words.set("field", STUDY.fields[state.field].id);
  history.replaceState(null, "", "#" + words);
}

// Controls

function option(value, text) {
  return el("option", { value }, text);
}

function fillControls() {
  byId("aircraft").append(
    ...STUDY.aircraft.map((profile, i) =>
      option(i, givenString(profile.name) + (profile.scaled ? " (scaled, no table)" : ""))
    )
  );
  byId("period").append(
    el(
      "optgroup",
      { label: "Month" },
      MONTH_NAMES.map((name, i) => option("m" + i, name))
    )
  );
  if (STUDY.seasons.length) {
    byId("period").append(
      el(
        "optgroup",
        { label: "Season" },
        STUDY.seasons.map((name, i) => option("s" + i, givenString(name)))
      )
    );
  }
  byId("hour").append(
    option(-1, "Whole window (" + windowText() + ")"),
    ...Array.from({ length: 24 }, (_, hour) => option(hour, hourText(hour)))
  );
  byId("measure").append(...Object.entries(MEASURES).map(([key, measure]) => option(key, measure.name)));
  byId("controls").addEventListener("change", readControls);
  byId("controls").addEventListener("submit", (event) => event.preventDefault());
}

function readControls() {
  const period = byId("period").value;
  state.aircraft = Number(byId("aircraft").value);
  state.period = { season: period[0] === "s", index: Number(period.slice(1)) };
  state.hour = Number(byId("hour").value);
  state.measure = byId("measure").value;
  settle();
  draw();
}

function showControls() {
  byId("aircraft").value = state.aircraft;
  byId("period").value = (state.period.season ? "s" : "m") + state.period.index;
  byId("hour").value = state.hour;
  byId("measure").value = state.measure;
  byId("hour").disabled = state.period.season;
  byId("measure").disabled = state.period.season;
}

// Drawing

function classItems(measure) {
  const item = (number, text) => el("li", null, symbol(number), text);
  return [...SCALES[measure].labels.map((text, i) => item(i, text)), item(-1, NO_DATA)];
}

function legendItems(measure) {
  const steep = STUDY.fields.some(isSteep)
    ? el(
        "li",
        null,
        svg("svg", { viewBox: "-3 -1 19 15", class: "symbol key-wedge", "aria-hidden": "true" }, wedge()),
        STEEP_MARK
      )
    : null;
  return [...classItems(measure), steep].filter(Boolean);
}

function showCaption() {
  const profile = STUDY.aircraft[state.aircraft];
  const shortfall = state.measure === "shortfall";
  byId("caption").replaceChildren(
    viewText(state),
    ...(shortfall ? [", ", given(profile.name), " ", aircraftTag(profile)] : []).filter(Boolean)
  );
}

const actions = {
  open(index) {
    state.field = index;
    draw();
    const heading = byId("field-heading");
    heading.focus({ preventScroll: true });
    const { top } = heading.getBoundingClientRect();
    if (top < 0 || top > window.innerHeight / 2) byId("field-part").scrollIntoView();
  },
  close() {
    const id = STUDY.fields[state.field].id;
    state.field = -1;
    draw();
    const row = [...byId("fields").querySelectorAll("button[data-field]")].find(
      (button) => button.dataset.field === id
    );
    row.focus();
  },
  chooseCell(month, hour) {
    state.period = { season: false, index: month };
    state.hour = hour;
    draw();
    byId("field-part").querySelector("td.chosen").focus({ preventScroll: true });
  },
  sortBy(column, direction) {
    state.sort = column;
    state.direction = direction;
    draw();
  },
};

let showMarkers = null;

function draw() {
  applyColours(SCALES[state.measure].labels.length);
  showControls();
  showCaption();
  byId("legend").replaceChildren(...legendItems(state.measure));
  showList(state, actions.open, actions.sortBy);
  const open = state.field >= 0;
  byId("list-part").hidden = open;
  byId("field-part").hidden = !open;
  byId("field-part").replaceChildren(...(open ? fieldPanel(state, actions) : []));
  showMarkers(state);
  writeFragment();
}

function start() {
  let closed = [];
  const { first_year: first, last_year: last } = STUDY.settings;
  byId("study-title").replaceChildren(given(STUDY.title));
  byId("study-line").textContent = [
    first && last ? "Weather of " + first + "-" + last : null,
    "hours window: " + windowText(),
    STUDY.fields.length + (STUDY.fields.length === 1 ? " field" : " fields"),
  ]
    .filter(Boolean)
    .join(" \u00b7 ");
  byId("study-caution").textContent = STUDY.cautions[0];
  byId("legend").className = "legend";
  fillControls();
  showMethod();
  readFragment();
  addGround(map);
  showMarkers = addMarkers(map, actions.open);
  draw();
  fitFields(map);
  window.addEventListener("hashchange", () => {
    readFragment();
    draw();
  });
  window.addEventListener("beforeprint", () => {
    closed = [...document.querySelectorAll("details:not([open])")];
    for (const details of closed) details.open = true;
    map.invalidateSize({ animate: false });
    fitFields(map);
  });
  window.addEventListener("afterprint", () => {
    for (const details of closed) details.open = false;
  });
  window.addEventListener("keydown", (event) => {
    if (event.key === "Escape" && state.field >= 0) actions.close();
  });
  document.documentElement.dataset.ready = "yes";
}

start();
