// data.js: the study as the page received it, and where each number stands in the packed arrays.

const STUDY = JSON.parse(byId("study").textContent);
const NO_BYTE = 255;
const NO_FEET = -32768;
const NO_WORD = 65535;
// Stands for a share of something good that is above none and below 1 %.
const BELOW_ONE = 101;
const LOWEST_MARGIN = -100;
const HIGHEST_MARGIN = LOWEST_MARGIN + NO_BYTE - 1;

function decode(base64) {
  if (Uint8Array.fromBase64) return Uint8Array.fromBase64(base64);
  const raw = atob(base64);
  const bytes = new Uint8Array(raw.length);
  for (let i = 0; i < raw.length; i += 1) bytes[i] = raw.charCodeAt(i);
  return bytes;
}

// Bytes with runs: a byte that comes twice is followed by a third that says how often more.
function unrolled(marks) {
  let length = 0;
  for (let i = 0; i < marks.length; i += 1) {
    length += 1;
    if (marks[i] === marks[i + 1]) {
      length += 1 + marks[i + 2];
      i += 2;
    }
  }
  const bytes = new Uint8Array(length);
  let at = 0;
  for (let i = 0; i < marks.length; i += 1) {
    const run = marks[i] === marks[i + 1] ? 2 + marks[i + 2] : 1;
    bytes.fill(marks[i], at, at + run);
    at += run;
    if (run > 1) i += 2;
  }
  return bytes;
}

// Prefix codes (climarisk/outputs/coding.py): how many bytes, the lengths of the 256 codes, the codes.
function uncoded(bytes) {
  const count = bytes[0] | (bytes[1] << 8) | (bytes[2] << 16) | (bytes[3] << 24);
  const lengths = Array.from(
    { length: 256 },
    (_, value) => (bytes[4 + (value >> 1)] >> (value & 1 ? 0 : 4)) & 15,
  );
  const most = Math.max(1, ...lengths);
  // For whatever the next bits begin with: the value and how many of them it takes.
  const found = new Uint16Array(1 << most);
  let place = 0;
  for (let length = 1; length <= most; length += 1)
    for (let value = 0; value < 256; value += 1) {
      if (lengths[value] !== length) continue;
      const next = place + (1 << (most - length));
      found.fill((value << 4) | length, place, next);
      place = next;
    }
  const values = new Uint8Array(count);
  let [at, held, waiting] = [4 + 128, 0, 0];
  for (let i = 0; i < count; i += 1) {
    while (held < most) {
      waiting = ((waiting & 0xffff) << 8) | (at < bytes.length ? bytes[at] : 0);
      at += 1;
      held += 8;
    }
    const code = found[(waiting >> (held - most)) & ((1 << most) - 1)];
    values[i] = code >> 4;
    held -= code & 15;
  }
  return values;
}

function summed(steps) {
  for (let i = 1; i < steps.length; i += 1) steps[i] += steps[i - 1];
  return steps;
}

const CODINGS = {
  "": (bytes) => bytes,
  r: unrolled,
  h: (bytes) => unrolled(uncoded(bytes)),
  d: (bytes) => summed(unrolled(uncoded(bytes))),
};

// All lower bytes, then all upper ones.
function wordsFrom(bytes, Kind) {
  const words = new Kind(bytes.length / 2);
  for (let i = 0; i < words.length; i += 1) words[i] = bytes[i] | (bytes[words.length + i] << 8);
  return words;
}

const TYPES = {
  u1: (bytes) => bytes,
  u2: (bytes) => wordsFrom(bytes, Uint16Array),
  i2: (bytes) => wordsFrom(bytes, Int16Array),
};

const ARRAYS = {};
for (const [name, [kind, text]] of Object.entries(STUDY.arrays))
  ARRAYS[name] = TYPES[kind.slice(-2)](CODINGS[kind.slice(0, -2)](decode(text)));

// Rows travel without the names of their columns, and with numbers in place of their texts.
function namedRow(columns, row) {
  const value = (cell, isText) => (isText && cell !== null ? STUDY.texts[cell] : cell);
  return Object.fromEntries(columns.map(([name, isText], i) => [name, value(row[i], isText)]));
}

for (const [name, columns] of Object.entries(STUDY.columns))
  for (const field of STUDY.fields) field[name] = field[name].map((row) => namedRow(columns, row));

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

// A density altitude in feet, to the nearest hundred.
function altitudeAt(name, position) {
  const steps = ARRAYS[name][position];
  const none = ARRAYS[name] instanceof Uint16Array ? NO_WORD : NO_BYTE;
  return steps === none || steps === undefined ? null : (STUDY.altitudeBase + steps) * 100;
}

// A share 0-1, as the last level it reaches: rounded down, yet never across a band edge, a whole
// per cent as shown, or zero. Null where there is no data.
function shareAt(name, position) {
  const level = countAt(name, position);
  return level === null ? null : STUDY.levels[level];
}

// Whole hours, rounded down.
function hoursAt(name, position) {
  const hours = ARRAYS[name][position];
  return hours === NO_WORD || hours === undefined ? null : hours;
}

// A period is {season: false, index: 0-11} or {season: true, index: place in STUDY.seasons}.
// With an hour of -1 it means the whole window; seasons have no hours of their own.
function timeOf(period, hour) {
  if (period.season) return "season";
  return hour < 0 ? "month" : "hour";
}

function airPlace(field, period, hour) {
  if (period.season) return field * STUDY.seasons.length + period.index;
  const month = field * 12 + period.index;
  return hour < 0 ? month : month * 24 + hour;
}

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

function hourShare(field, aircraft, month, hour) {
  return shareAt("hour_shortfall", riskPlace(field, aircraft, { season: false, index: month }) * 24 + hour);
}

// Hours of the window in a month or season of a year, by the calendar.
function offeredHours(field, period) {
  return hoursAt(riskArray("offered", period), airPlace(field, period, -1));
}

function usableHours(field, aircraft, period, hour) {
  if (period.season || hour < 0)
    return hoursAt(riskArray("usable", period), riskPlace(field, aircraft, period));
  const share = hourShare(field, aircraft, period.index, hour);
  if (share === null) return null;
  const days = STUDY.daysOffered[period.index];
  // A share above zero stands for one a little above its level.
  return Math.max(0, Math.floor(days * (1 - share) - (share > 0 ? 1e-9 : 0)));
}

// Whether an hour lies inside the hours window on any day of the month.
function inWindow(field, month, hour) {
  const bit = month * 24 + hour;
  return ((ARRAYS.window_bits[field * 36 + (bit >> 3)] >> (7 - (bit & 7))) & 1) === 1;
}

// A field of which nothing at all is known, whatever the aircraft, month or hour.
function isEmpty(field) {
  const none = (name, from, count) => {
    const missing = ARRAYS[name] instanceof Uint16Array ? NO_WORD : NO_BYTE;
    return ARRAYS[name].subarray(from, from + count).every((value) => value === missing);
  };
  const cells = STUDY.aircraft.length * 12;
  return (
    none("altitude_hour_p50", field * 12 * 24, 12 * 24) &&
    none("hour_shortfall", field * cells * 24, cells * 24) &&
    none("month_shortfall", field * cells, cells)
  );
}

// The value of a measure for a field; hour -1 is the whole window.
function measured(measure, field, aircraft, period, hour) {
  const time = timeOf(period, hour);
  const place = airPlace(field, period, hour);
  switch (measure) {
    case "shortfall":
      if (time === "hour") return hourShare(field, aircraft, period.index, hour);
      return riskShare("shortfall", field, aircraft, period);
    case "usable":
      return usableHours(field, aircraft, period, hour);
    case "weight":
      return loadThatHolds(field, aircraft, period, hour);
    case "humidity":
      return shareAt("humidity_" + time + "_p50", place);
    case "near-saturation":
      return shareAt("near_" + time + "_2_5k", place);
    default:
      return altitudeAt("altitude_" + time + (measure === "median" ? "_p50" : "_p90"), place);
  }
}

function feetOf(metres) {
  return metres / STUDY.metresPerFoot;
}
