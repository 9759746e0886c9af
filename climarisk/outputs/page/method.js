// method.js: method, settings, sources and credits at the foot of the page.

const METHOD = [
  "Every hour of the record gives one value of the air at the field and, for each aircraft, one margin per check: distance or climb available against required times the operator\u2019s factors, in still air, in the most favourable direction that may be used. An hour falls short when a margin is negative, a stated limit is passed, or the air is hotter or higher than the table (\u201coutside table\u201d).",
  "Density altitude is the altitude of the International Standard Atmosphere with the same air density, moisture included. It is computed hour by hour and only then ordered into percentiles (Hyndman and Fan type 8), by month and hour of local standard time; clock changes are not applied. An hour is the nearest full hour.",
  "A year counts for a cell when at least 80 % of its days have a value there; the number of years is shown. A cell below the rule is \u201cno data\u201d: it does not mean no risk. Intervals come from resampling whole years; from too few years there is none.",
  "Air estimated from stations nearby carries an error, learned by hiding stations that are near the fields and estimating them from the others. Percentiles, shares and intervals include it; the central share does not.",
  "Trends by season are Theil-Sen slopes with the Mann-Kendall test, corrected for autocorrelation; a step beside the trend may be a station move. Return levels are a generalised extreme-value distribution fitted to annual maxima by L-moments, to twice the length of the record at most.",
  "Shown here: density altitude to the nearest 100 ft, shares to the whole per cent, \u201c< 1 %\u201d for anything above zero and below one. The CSV files hold the unrounded values.",
];

function settingText(value) {
  if (Array.isArray(value)) return value.map(settingText).join(", ");
  if (value !== null && typeof value === "object") {
    return Object.entries(value)
      .map(([name, part]) => name + ": " + settingText(part))
      .join("; ");
  }
  return String(value);
}

function settingsList() {
  return el(
    "dl",
    { class: "settings" },
    Object.entries(STUDY.settings).map(([name, value]) =>
      el(
        "div",
        null,
        el("dt", null, given(name.replace(/_/g, " "))),
        el("dd", null, given(settingText(value)))
      )
    )
  );
}

function aircraftItem(profile) {
  return el(
    "li",
    null,
    given(profile.name),
    " ",
    aircraftTag(profile),
    " ",
    el("span", { class: "quiet" }, "figures: ", given(profile.source))
  );
}

function credits() {
  return el(
    "ul",
    null,
    el(
      "li",
      null,
      "Map drawing: Leaflet 1.9.3, \u00a9 2010-2022 Vladimir Agafonkin, \u00a9 2010-2011 CloudMade, BSD 2-clause licence (text in the source of this page)."
    ),
    el(
      "li",
      null,
      "Colours: ColorBrewer 2.0, sequential scheme YlOrBr, by Cynthia Brewer and Mark Harrower, Pennsylvania State University."
    ),
    el("li", null, "climarisk" + (STUDY.version ? " " + STUDY.version : ""))
  );
}

function showMethod() {
  byId("method-part").append(
    el("h2", { id: "method-heading" }, "Method and sources"),
    el(
      "p",
      null,
      "The file study.json beside this page holds the inputs with their checksums, every setting, the stations and all findings; the CSV files hold every number."
    ),
    ...METHOD.map((text) => el("p", null, text)),
    section(
      "Cautions",
      el(
        "ul",
        null,
        STUDY.cautions.map((text) => el("li", null, text))
      )
    ),
    section("Settings", settingsList()),
    section("Aircraft", el("ul", null, STUDY.aircraft.map(aircraftItem))),
    section(
      "Data",
      STUDY.attributions.length
        ? el(
            "ul",
            null,
            STUDY.attributions.map((line) => el("li", null, given(line)))
          )
        : el("p", { class: "empty" }, "No attribution was supplied with the data.")
    ),
    section(
      "Findings",
      STUDY.findings.length
        ? el(
            "details",
            null,
            el(
              "summary",
              null,
              STUDY.findings.length +
                (STUDY.findings.length === 1 ? " finding" : " findings") +
                " of the quality control"
            ),
            el("ul", { class: "findings" }, STUDY.findings.map(findingItem))
          )
        : el("p", { class: "empty" }, "None.")
    ),
    section("Credits", credits())
  );
}
