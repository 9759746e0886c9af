// cards.js: runways and stations of a field, one card each.

// No figure of such a field is a pass: published factors do not hold on the slope.
const STEEP = "steep";
const STEEP_REST = ": own procedure";
const STEEP_MARK = STEEP + STEEP_REST;

function isSteep(field) {
  return field.runways.some((runway) => runway.steep);
}

// The elevation that a field or its own station states does not fit their pressure or each other.
const DOUBT_MARK = "elevation in doubt";
const DOUBT_CHECKS = new Set(["station-elevation", "field-elevation"]);
const DOUBTFUL = new Set(
  STUDY.findings
    .filter((finding) => finding.subject === "field" && DOUBT_CHECKS.has(finding.check))
    .map((finding) => finding.id),
);

function isDoubtful(field) {
  return DOUBTFUL.has(field.id);
}

function factList(facts) {
  return el(
    "dl",
    null,
    facts.map(([term, text]) => el("div", null, el("dt", null, term), el("dd", null, text))),
  );
}

function runwayUse(runway) {
  if (runway.takeoff && runway.landing) return "take-off and landing";
  if (runway.takeoff) return "take-off only";
  return runway.landing ? "landing only" : "closed";
}

function runwayCard(runway) {
  const [tora, toda, asda, lda] = runway.lengths.map(lengthText);
  const slope =
    runway.slope === 0
      ? "level"
      : signed(runway.slope, 1) + " % " + (runway.slope > 0 ? "(uphill)" : "(downhill)");
  const facts = [
    ["TORA", tora],
    ["TODA", toda],
    ["ASDA", asda],
    ["LDA", lda],
    ["Heading", Math.round(runway.heading) + "\u00b0"],
    ["Slope", slope],
    ["Surface", runway.surface.replace("-", " ")],
    ["Use", runwayUse(runway)],
  ];
  return el(
    "li",
    { class: "card" },
    el(
      "h4",
      null,
      "Runway ",
      given(runway.runway),
      runway.undeclared ? el("span", { class: "tag" }, "undeclared distances") : null,
      runway.steep
        ? el("span", { class: "tag" }, "slope over " + STUDY.steepPct + " %: needs a site-specific procedure")
        : null,
    ),
    factList(facts),
  );
}

function stationCard(use) {
  const day = (value) => (value === null ? NO_DATA : value);
  const height = use.height_difference_m;
  const facts = [
    ["Distance", use.distance_km === null ? NO_DATA : use.distance_km.toFixed(1) + " km"],
    [
      "Field above station",
      height === null
        ? NO_DATA
        : signedWhole(Math.round(height)) + " m (" + signedWhole(Math.round(feetOf(height))) + " ft)",
    ],
    [
      "Record",
      use.first === null && use.last === null
        ? NO_DATA
        : [given(day(use.first)), " to ", given(day(use.last))],
    ],
    ["Coverage", shareBelowAll(use.coverage)],
    ["Share of the field\u2019s hours", shareBelowAll(use.share_of_hours)],
    ["Pressure", given(day(use.pressure_kind))],
    ["Archive", given(day(use.archive))],
  ];
  return el(
    "li",
    { class: "card" },
    el(
      "h4",
      null,
      given(use.name === null ? use.station : use.name),
      " ",
      el("small", null, given(use.station)),
    ),
    factList(facts),
  );
}

function cards(list, make, empty) {
  return list.length ? el("ul", { class: "cards" }, list.map(make)) : el("p", { class: "empty" }, empty);
}
