// state.js: what the page shows, and how the address fragment keeps it.

const state = {
  aircraft: 0,
  period: { season: false, index: 0 },
  hour: -1,
  measure: "shortfall",
  field: -1,
  compare: [],
  comparing: false,
  view: "", // or an overview of the study: "bases", "schedule"
  who: 0, // of the bases: the fleet, or an aircraft counted from 1
  base: -1, // the base to compare with; the best one
  flights: "share",
  sort: "value",
  direction: -1,
};

// The page opens on the month with the most shortfall of the first aircraft.
function worstMonth() {
  let [worst, most] = [0, -1];
  for (let index = 0; index < 12; index += 1) {
    const sum = STUDY.fields.reduce(
      (total, _, field) => total + (riskShare("shortfall", field, 0, { season: false, index }) || 0),
      0,
    );
    if (sum > most) [worst, most] = [index, sum];
  }
  return { season: false, index: worst };
}

function shownTime() {
  return timeOf(state.period, state.hour);
}

// The scale of a grid is that of its hours, whatever the map shows.
function gridTime() {
  return "hour";
}

function whenText(view) {
  const hour =
    view.period.season || view.hour < 0
      ? "whole window (" + windowText() + ")"
      : hourText(view.hour) + " local standard time";
  return periodText(view.period) + ", " + hour;
}

function viewText(view) {
  return MEASURES[view.measure].sentence(timeOf(view.period, view.hour)) + ", " + whenText(view);
}

function indexOfId(list, id) {
  return list.findIndex((item) => item.id === id);
}

function wholeNumber(text, low, high) {
  const number = text === null || text.trim() === "" ? NaN : Number(text);
  return Number.isInteger(number) && number >= low && number <= high ? number : null;
}

function readPeriod(words) {
  const season = STUDY.seasons.indexOf(words.get("season"));
  if (season >= 0) return { season: true, index: season };
  if (words.has("season")) unknown.push("a season");
  const month = wholeNumber(words.get("month"), 1, 12);
  return month === null ? worstMonth() : { season: false, index: month - 1 };
}

// The direction in which the worst value leads the list.
function worstFirst(measure) {
  return measure === "usable" || measure === "weight" ? 1 : -1;
}

function readSort(words) {
  const [column, way] = (words.get("sort") || "").split(".");
  const known = LIST_COLUMNS.find((item) => item.key === column && item.first);
  state.sort = known ? column : "value";
  state.direction = known ? (way === "up" ? 1 : -1) : worstFirst(state.measure);
}

// What a link asked for and this study does not have; told to the reader.
let unknown = [];

function wanted(words, key, list, what) {
  const index = indexOfId(list, words.get(key));
  if (words.has(key) && index < 0) unknown.push(what);
  return index;
}

function readFragment() {
  unknown = [];
  const words = new URLSearchParams(location.hash.slice(1));
  state.aircraft = Math.max(0, wanted(words, "aircraft", STUDY.aircraft, "an aircraft"));
  state.field = wanted(words, "field", STUDY.fields, "a field");
  state.period = readPeriod(words);
  const hour = wholeNumber(words.get("hour"), 0, 23);
  state.hour = hour === null ? -1 : hour;
  state.measure = Object.hasOwn(MEASURES, words.get("measure")) ? words.get("measure") : "shortfall";
  const compared = (words.get("compare") || "").split(" ").map((id) => indexOfId(STUDY.fields, id));
  const known = [...new Set(compared)].filter((index) => index >= 0).slice(0, MOST_COMPARED);
  if (words.has("compare") && compared.includes(-1)) unknown.push("a field to compare");
  state.comparing = state.field < 0 && known.length > 1;
  if (state.comparing) state.compare = known;
  readOverview(words);
  readSort(words);
  settle();
}

function readOverview(words) {
  const view = words.get("view") || "";
  if (view && !OVERVIEWS[view]) unknown.push("an overview");
  state.view = OVERVIEWS[view] && state.field < 0 && !state.comparing ? view : "";
  state.who = 1 + wanted(words, "of", STUDY.aircraft, "an aircraft of the bases");
  state.base = wanted(words, "base", STUDY.fields, "a base to compare with");
  state.flights = FLIGHT_ORDERS[words.get("flights")] ? words.get("flights") : "share";
}

function writeOverview(words) {
  words.set("view", state.view);
  if (state.view === "schedule") {
    if (state.flights !== "share") words.set("flights", state.flights);
    return;
  }
  if (state.who) words.set("of", STUDY.aircraft[state.who - 1].id);
  if (state.base >= 0) words.set("base", STUDY.fields[state.base].id);
}

// Seasons have figures over the whole window only.
function settle() {
  if (state.period.season) state.hour = -1;
}

let writtenPart = null;
let fromHistory = false;

function writeFragment() {
  const words = new URLSearchParams();
  words.set("aircraft", STUDY.aircraft[state.aircraft].id);
  if (state.period.season) words.set("season", STUDY.seasons[state.period.index]);
  else words.set("month", state.period.index + 1);
  if (state.hour >= 0) words.set("hour", state.hour);
  words.set("measure", state.measure);
  if (state.field >= 0) words.set("field", STUDY.fields[state.field].id);
  if (state.comparing) words.set("compare", state.compare.map((index) => STUDY.fields[index].id).join(" "));
  if (state.view) writeOverview(words);
  if (state.sort !== "value" || state.direction !== worstFirst(state.measure))
    words.set("sort", state.sort + "." + (state.direction > 0 ? "up" : "down"));
  // Opening a field or a comparison is a step that Back takes back; a choice is not.
  const part = state.field + " " + state.comparing + " " + state.view;
  const step = writtenPart !== null && part !== writtenPart && !fromHistory;
  history[step ? "pushState" : "replaceState"](null, "", "#" + words);
  writtenPart = part;
}
