// data.js: the study as the page received it, and where each number stands in the packed arrays.

const STUDY = JSON.parse(byId("study").textContent);
const NO_BYTE = 255;
const NO_FEET = -32768;
const FEET_ARRAYS = /^(scenario_)?altitude_(p|hour)|^trend_(slope|ci)/;

function decode(base64) {
  if (Uint8Array.fromBase64) return Uint8Array.fromBase64(base64);
  const raw = atob(base64);
  const bytes = new Uint8Array(raw.length);
  for (let i = 0; i < raw.length; i += 1) bytes[i] = raw.charCodeAt(i);
  return bytes;
}

const ARRAYS = {};
for (const [name, text] of Object.entries(STUDY.arrays)) {
  const bytes = decode(text);
  ARRAYS[name] = FEET_ARRAYS.test(name) ? new Int16Array(bytes.buffer) : bytes;
}

// Rows travel without the names of their columns.
for (const [name, columns] of Object.entries(STUDY.columns)) {
  for (const field of STUDY.fields)
    field[name] = field[name].map((row) => Object.fromEntries(columns.map((column, i) => [column, row[i]])));
}

// Feet, rounded down to whole ones; null where there is no data.
function feetAt(name, position) {
  const feet = ARRAYS[name][position];
  return feet === NO_FEET ? null : feet;
}

// A count, or the place of a word in a list; null where there is no data.
function countAt(name, position) {
  const count = ARRAYS[name][position];
  return count === NO_BYTE || count === undefined ? null : count;
}

// A share 0-1, as the last level it reaches: rounded down, yet never across a band edge, a whole
// per cent as shown, or zero. Null where there is no data.
function shareAt(name, position) {
  const level = countAt(name, position);
  return level === null ? null : STUDY.levels[level];
}

// A period is {season: false, index: 0-11} or {season: true, index: place in STUDY.seasons}.
function riskPlace(field, aircraft, period) {
  const length = period.season ? STUDY.seasons.length : 12;
  return (field * STUDY.aircraft.length + aircraft) * length + period.index;
}

function riskArray(column, period) {
  return (period.season ? "season_" : "month_") + column;
}

function riskShare(column, field, aircraft, period) {
  return shareAt(riskArray(column, period), riskPlace(field, aircraft, period));
}

function riskYears(field, aircraft, period) {
  return countAt(riskArray("n_years", period), riskPlace(field, aircraft, period));
}

function limitingCheck(field, aircraft, period) {
  const word = countAt(riskArray("limiting", period), riskPlace(field, aircraft, period));
  return word === null ? null : STUDY.limits[word];
}

// The share with the air as estimated, where it differs from the share by a whole per cent.
function centralShare(field, aircraft, period) {
  return riskShare("central", field, aircraft, period);
}

function intervalNote(field, aircraft, period) {
  const word = countAt(riskArray("note", period), riskPlace(field, aircraft, period));
  return word === null ? null : STUDY.notes[word];
}

// A field of which nothing at all is known, whatever the aircraft, month or hour.
function isEmpty(field) {
  const none = (name, from, count, missing) =>
    ARRAYS[name].subarray(from, from + count).every((value) => value === missing);
  const cells = STUDY.aircraft.length * 12 * 24;
  return (
    none("altitude_hour_p50", field * 12 * 24, 12 * 24, NO_FEET) &&
    none("hour_shortfall", field * cells, cells, NO_BYTE) &&
    MONTHS.every((_, index) =>
      STUDY.aircraft.every((_, a) => riskShare("shortfall", field, a, { season: false, index }) === null)
    )
  );
}

// The value of a measure for a field; hour -1 is the whole window.
function measured(measure, field, aircraft, period, hour) {
  const month = field * 12 + period.index;
  if (measure === "shortfall") {
    if (period.season || hour < 0) return riskShare("shortfall", field, aircraft, period);
    return shareAt("hour_shortfall", riskPlace(field, aircraft, period) * 24 + hour);
  }
  if (period.season) return null;
  const percentile = measure === "median" ? "p50" : "p90";
  if (hour < 0) return feetAt("altitude_" + percentile, month);
  return feetAt("altitude_hour_" + percentile, month * 24 + hour);
}

function feetOf(metres) {
  return metres / STUDY.metresPerFoot;
}
