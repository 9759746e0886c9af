// air.js: density altitude and humidity of a field, month by month.

function everyMonth(read) {
  return MONTHS.map((_, month) => read(month));
}

function months(read, name, field) {
  return everyMonth((month) => read(name, field * 12 + month));
}

function noDataPart(heading) {
  return section(heading, el("p", { class: "empty" }, "No data in any month."));
}

// Notes told once below a table, and the letters that stand for them in it.
class Notes {
  constructor() {
    this.texts = [];
  }

  letter(text) {
    if (text === null) return null;
    if (!this.texts.includes(text)) this.texts.push(text);
    return el("sup", null, "abcdefgh"[this.texts.indexOf(text)]);
  }

  list() {
    if (!this.texts.length) return null;
    return el(
      "ul",
      { class: "notes" },
      this.texts.map((text) => el("li", null, this.letter(text), " " + text)),
    );
  }
}

function airSection(heading, ...content) {
  const part = section(heading, ...content);
  part.classList.add("air-part");
  return part;
}

// The limit that the aircraft's own figures state, where it comes into the picture of these values.
function altitudeLimit(profile, values) {
  const limit = profile.limitAltitude;
  if (limit === null) return { line: null, text: null };
  const [low, high] = [Math.min(...values), Math.max(...values)];
  const near = limit <= high + (high - low) && limit >= low - (high - low);
  const name = "density altitude limit of " + givenString(profile.name);
  if (near)
    return {
      line: { value: limit, text: "limit", kind: "limit" },
      text: "Dotted: " + name + ", " + grouped(limit) + " ft.",
    };
  const side = limit > high ? " above" : " below";
  return { line: null, text: "The " + name + ", " + grouped(limit) + " ft, lies" + side + " this chart." };
}

function altitudeTable(columns, shown, field) {
  const years = months(countAt, "altitude_month_years", field);
  const note = months(countAt, "altitude_month_note", field);
  const notes = new Notes();
  const rows = MONTHS.map((name, month) => [
    name,
    ...columns.map((column) => (column[month] === null ? NO_DATA : grouped(column[month]))),
    [String(years[month] || 0), notes.letter(note[month] === null ? null : STUDY.notes[note[month]])],
  ]);
  const heads = ["Month", ...shown.map((p) => p.toUpperCase()), "Years"];
  return [table("Density altitude, ft", heads, rows, "plain-table months"), notes.list()];
}

function altitudePart(state) {
  const field = state.field;
  const shown = ["p10", "p25", "p50", "p75", "p90", "p95"];
  const columns = shown.map((p) => months(altitudeAt, "altitude_month_" + p, field));
  const [low, , middle, , high] = columns;
  if (middle.every((value) => value === null)) return noDataPart("Density altitude by month");
  const elevation = feetOf(STUDY.fields[field].elevation);
  const values = [...low, ...high, elevation].filter((value) => value !== null);
  const limit = altitudeLimit(STUDY.aircraft[state.aircraft], values);
  const references = [{ value: elevation, text: "field elevation", kind: "level" }, limit.line];
  return airSection(
    "Density altitude by month",
    el("p", { class: "key" }, "Band: 10th to 90th percentile of the hours in the window. Line: median."),
    bandChart(
      "Density altitude by month, feet: 10th to 90th percentile and median",
      { low, middle, high },
      grouped,
      references.filter(Boolean),
      null,
    ),
    limit.text === null ? null : el("p", { class: "key" }, limit.text),
    ...altitudeTable(columns, shown, field),
  );
}

function humidityPart(field) {
  const [low, middle, high] = ["p10", "p50", "p90"].map((p) => months(shareAt, "humidity_month_" + p, field));
  if (middle.every((value) => value === null)) return noDataPart("Relative humidity by month");
  const near = ["2_5k", "1k"].map((spread) => months(shareAt, "near_month_" + spread, field));
  const scaled = (list) => list.map((value) => (value === null ? null : value * 100));
  const rows = MONTHS.map((name, month) => [
    name,
    ...[low, middle, high, ...near].map((column) => percent(column[month])),
  ]);
  return airSection(
    "Relative humidity by month",
    bandChart(
      "Relative humidity by month, per cent: 10th to 90th percentile and median",
      { low: scaled(low), middle: scaled(middle), high: scaled(high) },
      (value) => String(value),
      [],
      [0, 100],
    ),
    table(
      "Relative humidity, and hours near saturation: temperature at most 2.5 K or 1 K above the dew point",
      ["Month", "P10", "P50", "P90", "2.5 K", "1 K"],
      rows,
      "plain-table months",
    ),
  );
}
