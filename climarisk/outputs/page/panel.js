// panel.js: everything about one field.

function aircraftTag(profile) {
  return profile.scaled ? el("span", { class: "tag" }, "scaled, no table") : null;
}

function shareOf(share, what) {
  return share === null ? NO_DATA : percent(share) + what;
}

function headlineFacts(state) {
  const risk = (column) => riskShare(column, state.field, state.aircraft, state.period);
  const years = riskYears(state.field, state.aircraft, state.period);
  const limit = limitingCheck(state.field, state.aircraft, state.period);
  const central = centralShare(state.field, state.aircraft, state.period);
  return [
    ["Shortfall", shareOf(risk("shortfall"), " of hours fall short")],
    ...(central === null ? [] : [["Central share", percent(central) + " with the air as estimated"]]),
    [confidenceText(), intervalText(state)],
    ["Usable hours", usableText(state.field, state.aircraft, state.period)],
    ...weightFacts(state),
    [
      "Years, coverage",
      (years === 1 ? "1 year that counts, " : (years || 0) + " years that count, ") +
        shareBelowAll(risk("coverage")) +
        " of the period",
    ],
    ["Days affected", shareOf(risk("days_affected"), " of days have at least one such hour")],
    ["Outside table", shareOf(risk("outside_table"), " of hours")],
    ["Limiting check", limit || (risk("shortfall") === null ? NO_DATA : "none")],
  ];
}

// What no figure of this field may be read without.
function warnings(field) {
  const steep = "A runway is steeper than " + STUDY.steepPct + " %: no figure here is a pass.";
  const doubt = "The stated elevation does not fit the pressure or the station beside it: see the findings.";
  return [isSteep(field) ? [STEEP_MARK, steep] : null, isDoubtful(field) ? [DOUBT_MARK, doubt] : null]
    .filter(Boolean)
    .map(([mark, text]) => el("p", { class: "steep-line" }, el("span", { class: "tag" }, mark), " " + text));
}

function headline(state) {
  const value = measured(state.measure, state.field, state.aircraft, state.period, state.hour);
  const profile = STUDY.aircraft[state.aircraft];
  const field = STUDY.fields[state.field];
  return el(
    "div",
    { class: "headline" },
    el(
      "p",
      { class: "big" },
      symbol(classOf(state.measure, value), isSteep(field)),
      el("b", null, measureText(state.measure, value, shownTime())),
      el("span", null, viewText(state)),
    ),
    warnings(field),
    el("p", { class: "profile" }, given(profile.name), " ", aircraftTag(profile)),
    el("p", { class: "scope" }, periodText(state.period) + ", whole window (" + windowText() + ")"),
    factList(headlineFacts(state)),
  );
}

function intervalText(state) {
  const risk = (column) => riskShare(column, state.field, state.aircraft, state.period);
  const note = intervalNote(state.field, state.aircraft, state.period);
  if (risk("shortfall") === null) return NO_DATA;
  if (risk("ci_low") === null) return note || "none";
  return interval(risk("ci_low"), risk("ci_high")) + (note ? " (" + note + ")" : "");
}

function riskByMonth(state) {
  const notes = new Notes();
  const anyCentral = MONTHS.some(
    (_, index) => centralShare(state.field, state.aircraft, { season: false, index }) !== null,
  );
  const rows = MONTHS.map((name, index) => {
    const period = { season: false, index };
    const central = centralShare(state.field, state.aircraft, period);
    const risk = (column) => riskShare(column, state.field, state.aircraft, period);
    const value = risk("shortfall");
    return [
      name,
      [
        percent(value),
        central === null ? null : el("small", null, "central " + percent(central).replace(/ /g, "\u00a0")),
      ],
      value === null
        ? NO_DATA
        : [
            interval(risk("ci_low"), risk("ci_high")),
            notes.letter(intervalNote(state.field, state.aircraft, period)),
          ],
      percent(risk("days_affected")),
      percent(risk("outside_table")),
      limitingCheck(state.field, state.aircraft, period) || (value === null ? NO_DATA : "none"),
      [
        String(riskYears(state.field, state.aircraft, period) || 0),
        risk("coverage") === null ? null : el("small", null, shareBelowAll(risk("coverage"))),
      ],
    ];
  });
  return [
    table(
      "Hours that fall short in the window, by month",
      [
        "Month",
        "Shortfall",
        "Interval",
        "Days affected",
        "Outside table",
        "Limiting check",
        "Years, coverage",
      ],
      rows,
      "plain-table months",
    ),
    notes.list(),
    anyCentral
      ? el("p", { class: "key" }, "Central: the share with the air as estimated, without its error.")
      : null,
  ];
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
    given(finding.message),
  );
}

function findingsOf(state) {
  const field = STUDY.fields[state.field];
  const stations = new Set([...field.pinned, ...field.stations.map((use) => use.station)]);
  const list = STUDY.findings.filter(
    (finding) =>
      (finding.subject === "field" && finding.id === field.id) ||
      (finding.subject === "station" && stations.has(finding.id)) ||
      (finding.subject === "aircraft" && finding.id === STUDY.aircraft[state.aircraft].id),
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

function figureParts(state, actions) {
  return [
    worksPart(state),
    weightPart(state),
    section(
      "Month by hour",
      el("ul", { class: "legend small own-scale" }, classItems(scaleOf(state.measure, "hour"))),
      makeGrid(state, actions.chooseCell),
    ),
    section("Month by month", ...riskByMonth(state)),
    marginsPart(state),
    altitudePart(state),
    humidityPart(state.field),
    icingPart(state),
    powerPart(state),
    evidencePart(state),
    scenarioPart(state),
  ].filter(Boolean);
}

// In place of rows upon rows of "no data".
function emptyPart(field) {
  const reasons = STUDY.findings.filter(
    (finding) => finding.severity === "reject" && finding.subject === "field" && finding.id === field.id,
  );
  return el(
    "div",
    { class: "headline" },
    el("p", { class: "big" }, symbol(-1, isSteep(field)), el("b", null, NO_DATA)),
    el(
      "p",
      null,
      "The study has no figure for this field: no month, no hour, no aircraft. That does not mean no risk.",
    ),
    ...reasons.map((finding) => el("p", { class: "reason" }, given(finding.message))),
  );
}

// A long panel on a small screen: the way to each of its parts.
function jumpTo(parts) {
  const select = el("select", { id: "jump" }, option("", "Go to\u2026"));
  parts.forEach((part, i) => select.append(option(i, part.querySelector("h3").textContent)));
  select.addEventListener("change", () => {
    const heading = parts[Number(select.value)].querySelector("h3");
    select.value = "";
    heading.tabIndex = -1;
    heading.focus({ preventScroll: true });
    heading.scrollIntoView();
  });
  return el("label", { class: "jump" }, el("span", null, "Part of this page"), select);
}

function placeLine(field) {
  const place = degreesText(field.latitude, "N", "S") + ", " + degreesText(field.longitude, "E", "W");
  return el(
    "p",
    { class: "place" },
    given(field.id),
    " \u00b7 " + elevationText(field.elevation) + " \u00b7 " + place + " \u00b7 ",
    given(field.timezone),
  );
}

function groundParts(state, field) {
  return [
    section("Runways", cards(field.runways, runwayCard, "No runway in the study.")),
    section(
      "Stations used",
      cards(field.stations, stationCard, "No station could be used: no data at this field."),
      pressureTable(field),
    ),
    section("Findings", findingsOf(state)),
    section(
      "Cautions",
      el(
        "ul",
        { class: "cautions" },
        STUDY.cautions.map((text) => el("li", null, text)),
      ),
    ),
  ];
}

function fieldPanel(state, actions) {
  const field = STUDY.fields[state.field];
  const back = el("button", { type: "button", id: "all-fields" }, "\u2190 All fields");
  back.addEventListener("click", actions.close);
  const empty = isEmpty(state.field);
  const parts = [...(empty ? [] : figureParts(state, actions)), ...groundParts(state, field)];
  return [
    el("div", { class: "panel-bar" }, back, jumpTo(parts)),
    el("h2", { id: "field-heading", tabindex: "-1" }, given(field.name)),
    placeLine(field),
    el("p", { class: "air" }, airText(field)),
    empty ? emptyPart(field) : headline(state),
    ...parts,
  ];
}
