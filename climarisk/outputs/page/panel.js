// panel.js: everything about one field.

function everyMonth(read) {
  return MONTHS.map((_, month) => read(month));
}

function months(read, name, field) {
  return everyMonth((month) => read(name, field * 12 + month));
}

function section(heading, ...content) {
  return el("section", { class: "part" }, el("h3", null, heading), ...content);
}

function noDataPart(heading) {
  return section(heading, el("p", { class: "empty" }, "No data in any month."));
}

function aircraftTag(profile) {
  return profile.scaled ? el("span", { class: "tag" }, "scaled, no table") : null;
}

function shareOf(share, what) {
  return share === null ? NO_DATA : percent(share) + what;
}

function headline(state) {
  const value = measured(state.measure, state.field, state.aircraft, state.period, state.hour);
  const risk = (column) => riskShare(column, state.field, state.aircraft, state.period);
  const years = riskYears(state.field, state.aircraft, state.period);
  const limit = limitingCheck(state.field, state.aircraft, state.period);
  const central = centralShare(state.field, state.aircraft, state.period);
  const profile = STUDY.aircraft[state.aircraft];
  const steep = isSteep(STUDY.fields[state.field]);
  const facts = [
    ["Shortfall", shareOf(risk("shortfall"), " of hours fall short")],
    ...(central === null ? [] : [["Central share", percent(central) + " with the air as estimated"]]),
    [confidenceText(), intervalText(state)],
    ["Years that count", String(years || 0)],
    ["Days affected", shareOf(risk("days_affected"), " of days have at least one such hour")],
    ["Outside table", shareOf(risk("outside_table"), " of hours")],
    ["Limiting check", limit || (risk("shortfall") === null ? NO_DATA : "none")],
  ];
  return el(
    "div",
    { class: "headline" },
    el(
      "p",
      { class: "big" },
      symbol(classOf(state.measure, value), steep),
      el("b", null, measureText(state.measure, value)),
      el("span", null, viewText(state))
    ),
    steep
      ? el(
          "p",
          { class: "steep-line" },
          el("span", { class: "tag" }, STEEP_MARK),
          " A runway is steeper than " + STUDY.steepPct + " %: no figure here is a pass."
        )
      : null,
    el("p", { class: "profile" }, given(profile.name), " ", aircraftTag(profile)),
    el("p", { class: "scope" }, periodText(state.period) + ", whole window (" + windowText() + ")"),
    factList(facts)
  );
}

function intervalText(state) {
  const risk = (column) => riskShare(column, state.field, state.aircraft, state.period);
  const note = intervalNote(state.field, state.aircraft, state.period);
  if (risk("shortfall") === null) return NO_DATA;
  if (risk("ci_low") === null) return note || "none";
  return interval(risk("ci_low"), risk("ci_high")) + (note ? " (" + note + ")" : "");
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
      this.texts.map((text) => el("li", null, this.letter(text), " " + text))
    );
  }
}

function riskByMonth(state) {
  const notes = new Notes();
  const anyCentral = MONTHS.some(
    (_, index) => centralShare(state.field, state.aircraft, { season: false, index }) !== null
  );
  const rows = MONTHS.map((name, index) => {
    const period = { season: false, index };
    const central = centralShare(state.field, state.aircraft, period);
    const risk = (column) => riskShare(column, state.field, state.aircraft, period);
    const value = risk("shortfall");
    return [
      name,
      [percent(value), central === null ? null : el("small", null, "central " + percent(central).replace(/ /g, "\u00a0"))],
      value === null
        ? NO_DATA
        : [
            interval(risk("ci_low"), risk("ci_high")),
            notes.letter(intervalNote(state.field, state.aircraft, period)),
          ],
      percent(risk("days_affected")),
      percent(risk("outside_table")),
      limitingCheck(state.field, state.aircraft, period) || (value === null ? NO_DATA : "none"),
      String(riskYears(state.field, state.aircraft, period) || 0),
    ];
  });
  return [
    table(
      "Hours that fall short in the window, by month",
      ["Month", "Shortfall", "Interval", "Days affected", "Outside table", "Limiting check", "Years"],
      rows,
      "plain-table months"
    ),
    notes.list(),
    anyCentral
      ? el("p", { class: "key" }, "Central: the share with the air as estimated, without its error.")
      : null,
  ];
}

function altitudePart(field) {
  const shown = ["p10", "p25", "p50", "p75", "p90", "p95"];
  const columns = shown.map((p) => months(feetAt, "altitude_" + p, field));
  if (columns[2].every((value) => value === null)) return noDataPart("Density altitude by month");
  const elevation = feetOf(STUDY.fields[field].elevation);
  const chart = bandChart(
    "Density altitude by month, feet: 10th to 90th percentile and median",
    { low: columns[0], middle: columns[2], high: columns[4] },
    grouped,
    { value: elevation, text: "field elevation" },
    null
  );
  const years = months(countAt, "altitude_years", field);
  const notes = new Notes();
  const note = months(countAt, "altitude_note", field);
  const rows = MONTHS.map((name, month) => [
    name,
    ...columns.map((column) => (column[month] === null ? NO_DATA : grouped(hundreds(column[month]) * 100))),
    [String(years[month] || 0), notes.letter(note[month] === null ? null : STUDY.notes[note[month]])],
  ]);
  return section(
    "Density altitude by month",
    el("p", { class: "key" }, "Band: 10th to 90th percentile of the hours in the window. Line: median."),
    chart,
    table(
      "Density altitude, ft",
      ["Month", ...shown.map((p) => p.toUpperCase()), "Years"],
      rows,
      "plain-table months"
    ),
    notes.list()
  );
}

function humidityPart(field) {
  const [low, middle, high] = ["p10", "p50", "p90"].map((p) => months(shareAt, "humidity_" + p, field));
  if (middle.every((value) => value === null)) return noDataPart("Relative humidity by month");
  const scaled = (list) => list.map((value) => (value === null ? null : value * 100));
  const chart = bandChart(
    "Relative humidity by month, per cent: 10th to 90th percentile and median",
    { low: scaled(low), middle: scaled(middle), high: scaled(high) },
    (value) => String(value),
    null,
    [0, 100]
  );
  const rows = MONTHS.map((name, month) => [
    name,
    percent(low[month]),
    percent(middle[month]),
    percent(high[month]),
  ]);
  return section(
    "Relative humidity by month",
    chart,
    table("Relative humidity", ["Month", "P10", "P50", "P90"], rows, "plain-table months")
  );
}

function findingItem(finding) {
  return el(
    "li",
    { class: "finding" },
    el("span", { class: "tag severity-" + finding.severity }, finding.severity),
    " ",
    finding.subject,
    " ",
    given(finding.id),
    ": ",
    given(finding.message)
  );
}

function findingsOf(state) {
  const field = STUDY.fields[state.field];
  const stations = new Set([...field.pinned, ...field.stations.map((use) => use.station)]);
  const list = STUDY.findings.filter(
    (finding) =>
      (finding.subject === "field" && finding.id === field.id) ||
      (finding.subject === "station" && stations.has(finding.id)) ||
      (finding.subject === "aircraft" && finding.id === STUDY.aircraft[state.aircraft].id)
  );
  return list.length
    ? el("ul", { class: "findings" }, list.map(findingItem))
    : el("p", { class: "empty" }, "None for this field, its stations and this aircraft.");
}

function pressureTable(field) {
  const rows = field.pressure.map((row) => [given(row.source), percent(row.share)]);
  if (!rows.length) return null;
  return table("Where the pressure of the hours came from", ["Source", "Share of hours"], rows);
}

function figures(state, actions) {
  return [
    headline(state),
    section(
      "Month by hour",
      el("ul", { class: "legend small" }, classItems(state.measure)),
      makeGrid(state, actions.chooseCell)
    ),
    section("Month by month", ...riskByMonth(state)),
    altitudePart(state.field),
    humidityPart(state.field),
    evidencePart(state),
    scenarioPart(state),
  ].filter(Boolean);
}

// In place of rows upon rows of "no data".
function emptyPart(field) {
  const reasons = STUDY.findings.filter(
    (finding) => finding.severity === "reject" && finding.subject === "field" && finding.id === field.id
  );
  return el(
    "div",
    { class: "headline" },
    el("p", { class: "big" }, symbol(-1, isSteep(field)), el("b", null, NO_DATA)),
    el(
      "p",
      null,
      "The study has no figure for this field: no month, no hour, no aircraft. That does not mean no risk."
    ),
    ...reasons.map((finding) => el("p", { class: "reason" }, given(finding.message)))
  );
}

function fieldPanel(state, actions) {
  const field = STUDY.fields[state.field];
  const back = el("button", { type: "button", id: "all-fields" }, "\u2190 All fields");
  back.addEventListener("click", actions.close);
  const place = degreesText(field.latitude, "N", "S") + ", " + degreesText(field.longitude, "E", "W");
  return [
    back,
    el("h2", { id: "field-heading", tabindex: "-1" }, given(field.name)),
    el(
      "p",
      { class: "place" },
      given(field.id),
      " \u00b7 " + elevationText(field.elevation) + " \u00b7 " + place + " \u00b7 ",
      given(field.timezone)
    ),
    el("p", { class: "air" }, airText(field)),
    ...(isEmpty(state.field) ? [emptyPart(field)] : figures(state, actions)),
    section("Runways", cards(field.runways, runwayCard, "No runway in the study.")),
    section(
      "Stations used",
      cards(field.stations, stationCard, "No station could be used: no data at this field."),
      pressureTable(field)
    ),
    section("Findings", findingsOf(state)),
    section(
      "Cautions",
      el(
        "ul",
        { class: "cautions" },
        STUDY.cautions.map((text) => el("li", null, text))
      )
    ),
  ];
}
