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
  const confidence = STUDY.settings.confidence;
  const years = riskYears(state.field, state.aircraft, state.period);
  const limit = limitingCheck(state.field, state.aircraft, state.period);
  const profile = STUDY.aircraft[state.aircraft];
  const facts = [
    ["Shortfall", shareOf(risk("shortfall"), " of hours fall short")],
    [
      confidence ? Math.round(confidence * 100) + " % interval" : "Interval",
      interval(risk("ci_low"), risk("ci_high")),
    ],
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
      symbol(classOf(state.measure, value)),
      el("b", null, measureText(state.measure, value)),
      el("span", null, viewText(state))
    ),
    el("p", { class: "profile" }, given(profile.name), " ", aircraftTag(profile)),
    el("p", { class: "scope" }, periodText(state.period) + ", whole window (" + windowText() + ")"),
    factList(facts)
  );
}

function riskByMonth(state) {
  const rows = MONTHS.map((name, index) => {
    const period = { season: false, index };
    const risk = (column) => riskShare(column, state.field, state.aircraft, period);
    const value = risk("shortfall");
    return [
      name,
      percent(value),
      interval(risk("ci_low"), risk("ci_high")),
      percent(risk("days_affected")),
      percent(risk("outside_table")),
      limitingCheck(state.field, state.aircraft, period) || (value === null ? NO_DATA : "none"),
      String(riskYears(state.field, state.aircraft, period) || 0),
    ];
  });
  return table(
    "Hours that fall short in the window, by month",
    ["Month", "Shortfall", "Interval", "Days affected", "Outside table", "Limiting check", "Years"],
    rows,
    "plain-table months"
  );
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
  const rows = MONTHS.map((name, month) => [
    name,
    ...columns.map((column) => (column[month] === null ? NO_DATA : grouped(hundreds(column[month]) * 100))),
    String(years[month] || 0),
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
    )
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

function fieldPanel(state, actions) {
  const field = STUDY.fields[state.field];
  const back = el("button", { type: "button", id: "all-fields" }, "\u2190 All fields");
  back.addEventListener("click", actions.close);
  const place = degreesText(field.latitude, "N", "S") + ", " + degreesText(field.longitude, "E", "W");
  const pressure = field.pressure.map((row) => [given(row.source), percent(row.share)]);
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
    headline(state),
    section(
      "Month by hour",
      el("ul", { class: "legend small" }, legendItems(state.measure)),
      makeGrid(state, actions.chooseCell)
    ),
    section("Month by month", riskByMonth(state)),
    altitudePart(state.field),
    humidityPart(state.field),
    section("Runways", cards(field.runways, runwayCard, "No runway in the study.")),
    section(
      "Stations used",
      cards(field.stations, stationCard, "No station could be used: no data at this field."),
      pressure.length
        ? table("Where the pressure of the hours came from", ["Source", "Share of hours"], pressure)
        : null
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
