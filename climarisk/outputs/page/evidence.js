// evidence.js: how the air of a field is known, how it changes and how high it goes, and variants.

// Whether each collapsed part stands open; kept while the panel is drawn anew.
const opened = new Set();

function collapsed(name, summary, content) {
  const details = el(
    "details",
    { open: opened.has(name) ? "" : null },
    el("summary", null, summary),
    content,
  );
  details.addEventListener("toggle", () => (details.open ? opened.add(name) : opened.delete(name)));
  return details;
}

// Air

function isKnown(estimate) {
  return Boolean(estimate) && (estimate.own_station > 0 || estimate.stations > 0);
}

// "estimated from 4 stations, +-100 ft of density altitude (1 sd), error learned by hiding 6 stations"
function estimateText(estimate) {
  const count = (n) => n + (n === 1 ? " station" : " stations");
  const hidden = estimate.verified_stations;
  return (
    "estimated from " +
    count(estimate.stations) +
    ", " +
    errorText(estimate.transfer_error_ft) +
    " of density altitude (1 sd), " +
    (hidden
      ? "error learned by hiding " + count(hidden)
      : "error from planning values, no station could be hidden")
  );
}

function airText(field) {
  const [estimate] = field.estimate;
  if (!isKnown(estimate)) return "Air: " + NO_DATA + ", no station could be used.";
  const own = estimate.own_station;
  let how = "measured at its own station";
  if (own <= 0) how = estimateText(estimate);
  else if (own < 1) how += " in " + shareBelowAll(own) + " of the hours, otherwise " + estimateText(estimate);
  return "Air " + how + "; pressure " + errorText(estimate.pressure_error_ft) + " (1 sd).";
}

// The short form for the list; null where everything is the station's own.
function estimateMark(field) {
  const [estimate] = field.estimate;
  if (!isKnown(estimate)) return null;
  const parts = [];
  if (estimate.own_station < 1)
    parts.push(
      (estimate.own_station > 0 ? "partly estimated " : "estimated ") + errorText(estimate.transfer_error_ft),
    );
  if (estimate.pressure_error_ft >= STUDY.pressureToldFt)
    parts.push("pressure " + errorText(estimate.pressure_error_ft));
  return parts.length ? el("span", { class: "estimated" }, parts.join(", ")) : null;
}

// Trends

function trendRow(field, aircraft, season) {
  const place = (field * (STUDY.aircraft.length + 1) + aircraft) * STUDY.trendSeasons.length + season;
  const since = countAt("trend_break", place);
  return {
    season,
    slope: feetAt("trend_slope_per_decade", place),
    low: feetAt("trend_ci_low", place),
    high: feetAt("trend_ci_high", place),
    years: countAt("trend_n_years", place) || 0,
    significant: countAt("trend_significant", place) === 1,
    broken: since === null ? null : STUDY.settings.first_year + since,
  };
}

function trendCells(row, text) {
  const name = given(STUDY.trendSeasons[row.season]);
  if (row.slope === null)
    return [name, NO_DATA, NO_DATA, String(row.years), "fewer than " + STUDY.trendYears + " years"];
  const verdict = row.significant ? "significant" : "not significant";
  return [
    name,
    text(row.slope),
    text(row.low) + " to " + text(row.high),
    String(row.years),
    row.broken === null ? verdict : verdict + "; " + STUDY.stationMove + ", step in " + row.broken,
  ];
}

function confidenceText() {
  return Number((STUDY.settings.confidence * 100).toFixed(1)) + " % interval";
}

function trendTable(caption, rows, text) {
  const heads = ["Season", "Per decade", confidenceText(), "Years", "Trend"];
  return table(
    caption,
    heads,
    rows.map((row) => trendCells(row, text)),
    "plain-table trends",
  );
}

function trendTables(state) {
  const rows = (aircraft) => STUDY.trendSeasons.map((_, season) => trendRow(state.field, aircraft, season));
  const [air, shares] = [rows(0), rows(state.aircraft + 1)];
  const all = [...air, ...shares];
  if (all.every((row) => row.slope === null)) {
    const most = Math.max(0, ...all.map((row) => row.years));
    return {
      why: "No trend: it needs " + STUDY.trendYears + " years of a season, at most " + most + " count.",
    };
  }
  const profile = STUDY.aircraft[state.aircraft];
  return {
    tables: [
      trendTable("Density altitude, 90th percentile, ft per decade", air, tens),
      trendTable(["Shortfall, percentage points per decade, ", given(profile.name)], shares, tenths),
    ],
  };
}

// Return levels

function extremesTable(field) {
  const { years, levels } = field.extremes;
  const found = STUDY.findings.find(
    (finding) => finding.subject === "field" && finding.id === field.id && finding.check === "extremes",
  );
  if (!levels.length)
    return { why: ["No return levels", found ? [": ", given(found.message)] : null, "."].flat() };
  const rows = levels.map(([period, level, low, high]) => [
    "1 in " + period,
    altitude(level),
    grouped(hundreds(low) * 100) + " to " + altitude(high),
  ]);
  return {
    tables: [
      table(
        "Highest density altitude of a year, from " + years + " annual maxima",
        ["Years that exceed it", "Level", confidenceText()],
        rows,
      ),
    ],
  };
}

function evidencePart(state) {
  const parts = [trendTables(state), extremesTable(STUDY.fields[state.field])];
  const tables = parts.flatMap((part) => part.tables || []);
  const whys = parts.filter((part) => part.why).map((part) => el("p", { class: "empty" }, part.why));
  return section(
    "Trends and extremes",
    tables.length ? collapsed("evidence", "Trends by season and return levels", [...tables, ...whys]) : whys,
  );
}

// Scenarios

function change(text) {
  return text === null ? null : el("small", null, text);
}

function shareChange(place) {
  const [rise, fall] = ["scenario_rise", "scenario_fall"].map((name) => shareAt(name, place));
  if (rise === 0) return "no change";
  if (rise === null && fall === null) return null;
  const points = percentNumber(rise === null ? fall : rise);
  if (points === "<1") return "< 1 point " + (rise === null ? "down" : "up");
  return (rise === null ? MINUS : "+") + points + (points === "1" ? " point" : " points");
}

function scenarioRow(state, name, number) {
  const field = number * STUDY.fields.length + state.field;
  const place = (field * STUDY.aircraft.length + state.aircraft) * 12 + state.period.index;
  const month = field * 12 + state.period.index;
  const [share, low, high] = ["shortfall", "ci_low", "ci_high"].map((column) =>
    shareAt("scenario_" + column, place),
  );
  const air = (p) => {
    const moved = feetAt("scenario_altitude_" + p + "_change", month);
    return [
      altitude(feetAt("scenario_altitude_" + p, month)),
      change(moved === null ? null : tens(moved) + " ft"),
    ];
  };
  return [
    given(name),
    [percent(share), change(shareChange(place))],
    share === null ? NO_DATA : interval(low, high),
    air("p50"),
    air("p90"),
  ];
}

function studyRow(state) {
  const risk = (column) => riskShare(column, state.field, state.aircraft, state.period);
  const month = state.field * 12 + state.period.index;
  return [
    "the study",
    percent(risk("shortfall")),
    risk("shortfall") === null ? NO_DATA : interval(risk("ci_low"), risk("ci_high")),
    altitude(altitudeAt("altitude_month_p50", month)),
    altitude(altitudeAt("altitude_month_p90", month)),
  ];
}

// Null where the study has no variants.
function scenarioPart(state) {
  if (!STUDY.scenarios.length) return null;
  if (state.period.season)
    return section("Scenarios", el("p", { class: "empty" }, "Scenarios are by month: choose a month above."));
  const profile = STUDY.aircraft[state.aircraft];
  return section(
    "Scenarios",
    collapsed(
      "scenarios",
      "The study held against its variants, " + periodText(state.period),
      table(
        [periodText(state.period) + ", whole window (" + windowText() + "), ", given(profile.name)],
        ["Variant", "Shortfall", "Interval", "Density altitude, median", "90th percentile"],
        [studyRow(state), ...STUDY.scenarios.map((name, number) => scenarioRow(state, name, number))],
        "plain-table scenarios",
      ),
    ),
  );
}
