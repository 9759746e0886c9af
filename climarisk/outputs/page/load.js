// load.js: the useful load that holds in the share of the hours asked for, and its classes.

// The planning answers of the study.
const PLANNING = STUDY.planning;
const MAXIMUM_MASS = 254;
const CANNOT_BE_MET = 253;
// Stands for a useful load where no tabulated mass holds: below every load there is.
const NOT_MET = -1;
const NOT_MET_TEXT = "cannot be met";

// Kilograms above the empty mass, rounded down to the steps they travel in; null without data.
function loadFrom(name, place, profile, step) {
  const code = countAt(name, place);
  if (code === null) return null;
  if (code === CANNOT_BE_MET) return NOT_MET;
  return code === MAXIMUM_MASS ? profile.topLoad : code * step;
}

function loadThatHolds(field, aircraft, period, hour) {
  const profile = STUDY.aircraft[aircraft];
  const place = riskPlace(field, aircraft, period);
  const time = timeOf(period, hour);
  if (time === "hour") return loadFrom("load_hour", place * 24 + hour, profile, profile.coarseKg);
  return loadFrom("load_" + time, place, profile, profile.fineKg);
}

function loadBounds(field, aircraft, period) {
  const profile = STUDY.aircraft[aircraft];
  const name = "load_" + timeOf(period, -1) + "_";
  const place = riskPlace(field, aircraft, period);
  return ["low", "high"].map((end) => loadFrom(name + end, place, profile, profile.fineKg));
}

// Lower and upper end of what a measure shows for the whole window.
function measureBounds(measure, field, aircraft, period) {
  if (measure === "weight") return loadBounds(field, aircraft, period);
  return ["ci_low", "ci_high"].map((column) => riskShare(column, field, aircraft, period));
}

function measureInterval(measure, low, high) {
  if (measure !== "weight") return interval(low, high);
  if (low === null) return high === null ? "none" : "up to " + grouped(Math.floor(high)); // the lower end: none holds
  return high === null ? "none" : grouped(Math.floor(low)) + "-" + grouped(Math.floor(high));
}

function loadText(load) {
  return load === NOT_MET ? NOT_MET_TEXT : grouped(Math.floor(load)) + " kg";
}

// The mass of the whole aircraft; at most as heavy as the exact one.
function massOf(load, profile) {
  return Math.floor(profile.emptyKg + load);
}

// The steps in which loads and masses travel, where they are coarser than what is shown.
function stepWords(time) {
  const { fineKg, coarseKg } = STUDY.aircraft[state.aircraft];
  const step = time === "hour" ? coarseKg : fineKg;
  return step > 1 ? ", in steps of " + step + " kg" : "";
}

function massText(load, profile) {
  if (load === null || load === NOT_MET) return load === null ? NO_DATA : NOT_MET_TEXT;
  return grouped(massOf(load, profile)) + " kg, useful load " + loadText(load);
}

function listedMass(load, profile) {
  return load === null || load === NOT_MET ? "" : "mass " + grouped(massOf(load, profile));
}

// Quarters of the useful load at the maximum mass, our choice, and a class of its own, the worst
// one, where no tabulated mass holds.
function weightScale(profile) {
  const quarters = [1, 2, 3].map((part) => Math.round((part * profile.topLoad) / 4));
  const [first, second, third] = quarters.map(grouped);
  return {
    edges: [0, ...quarters, profile.topLoad],
    labels: [
      "maximum mass",
      third + " kg or more",
      second + "-" + third + " kg",
      first + "-" + second + " kg",
      "< " + first + " kg",
      NOT_MET_TEXT,
    ],
    fewIsWorse: true,
  };
}

// What the tip of a marker says: the value, of a mass as a whole sentence.
function toldText(view, value) {
  if (view.measure !== "weight" || value === null)
    return measureText(view.measure, value, timeOf(view.period, view.hour));
  const profile = STUDY.aircraft[view.aircraft];
  const often = " in " + percent(PLANNING.holdsIn) + " of the hours, " + whenText(view) + ".";
  if (value === NOT_MET) return "No tabulated mass holds" + often;
  const full = value === profile.topLoad ? "The maximum mass of " : "";
  return (
    full + grouped(massOf(value, profile)) + " kg, a useful load of " + loadText(value) + ", holds" + often
  );
}
