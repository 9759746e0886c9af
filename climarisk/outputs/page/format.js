// format.js: numbers as the page shows them. Rounding happens here and nowhere else.

const MONTH_NAMES = STUDY.monthNames;
const MONTHS = MONTH_NAMES.map((name) => name.slice(0, 3));
const MINUS = "\u2212";
const NO_DATA = "no data";

// What the page can show. `ofAircraft`: whether it depends on the aircraft profile.
const MEASURES = {
  shortfall: {
    name: "Shortfall share",
    short: "Shortfall",
    sentence: () => "Share of hours that fall short",
    unit: () => "per cent",
    ofAircraft: true,
    text: percent,
    cell: percentNumber,
  },
  usable: {
    name: "Usable hours",
    short: "Usable hours",
    sentence: (time) =>
      time === "hour" ? "Days of the month on which the hour is usable" : "Usable hours of a " + time,
    unit: (time) => (time === "hour" ? "days of the month" : "hours"),
    ofAircraft: true,
    text: (value, time) => grouped(value) + (time === "hour" ? " days" : " h"),
    cell: grouped,
  },
  weight: {
    name: "Weight that holds",
    short: "Useful load",
    sentence: (time) =>
      "Useful load that holds in " + percent(STUDY.planning.holdsIn) + " of the hours" + stepWords(time),
    unit: () => "kg, rounded down",
    ofAircraft: true,
    text: loadText,
    cell: (load) => (load === NOT_MET ? "none" : grouped(load)),
  },
  median: {
    name: "Density altitude, median",
    short: "DA, median",
    sentence: () => "Density altitude, median",
    unit: () => "hundreds of feet",
    text: altitude,
    cell: (value) => grouped(hundreds(value)),
  },
  p90: {
    name: "Density altitude, 90th percentile",
    short: "DA, P90",
    sentence: () => "Density altitude exceeded in 1 hour of 10",
    unit: () => "hundreds of feet",
    text: altitude,
    cell: (value) => grouped(hundreds(value)),
  },
  humidity: {
    name: "Relative humidity, median",
    short: "Humidity",
    sentence: () => "Relative humidity, median",
    unit: () => "per cent",
    text: percent,
    cell: percentNumber,
  },
  "near-saturation": {
    name: "Near-saturation share",
    short: "Near saturation",
    sentence: () => "Share of hours at most 2.5 K above the dew point",
    unit: () => "per cent",
    text: percent,
    cell: percentNumber,
  },
};

if (!STUDY.planning.hasWeights) delete MEASURES.weight;

function grouped(whole) {
  return (whole < 0 ? MINUS : "") + String(Math.abs(whole)).replace(/\B(?=(\d{3})+$)/g, ",");
}

// Whole per cent of a share 0-1; nothing above zero is ever shown as 0.
function percentNumber(share) {
  if (share === 0) return "0";
  // The inner rounding takes back the error of the product: 0.285 * 100 is below 28.5.
  return share < 0.01 ? "<1" : String(Math.floor(Math.round(share * 1e8) / 1e6 + 0.5));
}

function percent(share) {
  if (share === null) return NO_DATA;
  return percentNumber(share).replace("<", "< ") + " %";
}

// A share of something good: whole per cent, rounded down when it was packed.
function percentDown(code) {
  if (code === null) return NO_DATA;
  return code === BELOW_ONE ? "< 1 %" : code + " %";
}

// Nothing below "all of them" is shown as all of them.
function shareBelowAll(share) {
  return share !== null && share > 0.99 && share < 1 ? "over 99 %" : percent(share);
}

function hundreds(feet) {
  return Math.floor((feet + 50) / 100);
}

function altitude(feet) {
  return feet === null ? NO_DATA : grouped(hundreds(feet) * 100) + " ft";
}

// `time` is "month" (the default), "season" or "hour".
function measureText(measure, value, time) {
  return value === null ? NO_DATA : MEASURES[measure].text(value, time || "month");
}

// Short form for a grid cell, in the unit that the caption names.
function cellText(measure, value) {
  return value === null ? "\u2013" : MEASURES[measure].cell(value);
}

function interval(low, high) {
  if (low === null || high === null) return "none";
  const [first, last] = [percentNumber(low), percentNumber(high)];
  return first === last ? percent(low) : first + "-" + last + " %";
}

// Feet per decade and the like: the nearest ten.
function tens(feet) {
  return feet === null ? NO_DATA : signedWhole(Math.floor((feet + 5) / 10) * 10);
}

// Hundredths, to the nearest tenth.
function tenths(hundredths) {
  return hundredths === null ? NO_DATA : signed(Math.floor((hundredths + 5) / 10) / 10, 1);
}

// One standard deviation: two digits say enough.
function errorText(feet) {
  if (feet === null) return "unknown";
  if (feet < 0.5) return "< 1 ft";
  return "\u00b1" + grouped(feet < 10 ? Math.round(feet) : Number(feet.toPrecision(2))) + " ft";
}

function hourText(hour) {
  return String(hour).padStart(2, "0") + ":00";
}

function windowText() {
  const hours = STUDY.settings.window;
  if (hours === "all") return "all hours";
  if (Array.isArray(hours)) return hours.map(hourText).join(" to ");
  return hours === "daylight" ? "daylight" : String(hours === undefined ? "hours of the study" : hours);
}

function periodText(period) {
  return period.season ? givenString(STUDY.seasons[period.index]) : MONTH_NAMES[period.index];
}

function elevationText(metres) {
  return grouped(Math.round(feetOf(metres))) + " ft (" + grouped(Math.round(metres)) + " m)";
}

// Runway lengths: metres with feet behind, both whole and rounded down: never more runway than there is.
function lengthText(metres) {
  return grouped(Math.floor(metres)) + " m (" + grouped(Math.floor(feetOf(metres))) + " ft)";
}

function degreesText(value, positive, negative) {
  const minutes = Math.round(Math.abs(value) * 60);
  const part = minutes % 60;
  const side = minutes === 0 ? "" : " " + (value < 0 ? negative : positive);
  return (
    Math.floor(minutes / 60) + "\u00b0" + (part ? " " + String(part).padStart(2, "0") + "\u2032" : "") + side
  );
}

function signedWhole(value) {
  return (value > 0 ? "+" : "") + grouped(value);
}

function signed(value, digits) {
  const text = Math.abs(value).toFixed(digits);
  if (Number(text) === 0) return text;
  return (value < 0 ? MINUS : "+") + text;
}

// Whole per cent of a margin, rounded down when it was packed.
function marginText(margin) {
  if (margin === null) return "\u2013";
  if (margin >= HIGHEST_MARGIN) return ">" + (HIGHEST_MARGIN - 1);
  return margin < 100 ? signedWhole(margin) : grouped(margin); // three digits leave no room for a sign
}
