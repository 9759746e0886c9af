// data.js: the study as the page received it, and where each number stands in the packed arrays.

const STUDY = JSON.parse(byId("study").textContent);
const NO_BYTE = 255;
const NO_FEET = -32768;

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
  const isFeet = name.startsWith("altitude_p") || name.startsWith("altitude_hour");
  ARRAYS[name] = isFeet ? new Int16Array(bytes.buffer) : bytes;
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
