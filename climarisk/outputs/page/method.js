// method.js: method, settings, sources and credits at the foot of the page.

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
        el("dd", null, given(settingText(value))),
      ),
    ),
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
    el("span", { class: "quiet" }, "figures: ", given(profile.source)),
  );
}

function credits() {
  return el(
    "ul",
    null,
    el(
      "li",
      null,
      "Map drawing: Leaflet 1.9.3, \u00a9 2010-2022 Vladimir Agafonkin, \u00a9 2010-2011 CloudMade, BSD 2-clause licence (text in the source of this page).",
    ),
    el(
      "li",
      null,
      "Colours: ColorBrewer 2.0, sequential scheme YlOrBr, by Cynthia Brewer and Mark Harrower, Pennsylvania State University.",
    ),
    el(
      "li",
      null,
      "Coast and borders: Natural Earth 4.1.0, 1:50 million, public domain, packaged by world-atlas 2.0.2 (ISC licence). State lines of the United States: US Census Bureau, cartographic boundary files 2017, public domain, packaged by us-atlas 3.0.1 (ISC licence).",
    ),
    el(
      "li",
      null,
      "Borders show who controls the ground in fact as Natural Earth draws it, take no side in any claim, and like the coast may be off by a kilometre and more; they are for orientation only.",
    ),
    el("li", null, "climarisk" + (STUDY.version ? " " + STUDY.version : "")),
  );
}

function showMethod() {
  byId("method-part").append(
    el("h2", { id: "method-heading" }, "Method and sources"),
    el(
      "p",
      null,
      "The file study.json beside this page holds the inputs with their checksums, every setting, the stations and all findings; the CSV files hold every number.",
    ),
    ...STUDY.method.map((text) => el("p", null, text)),
    section(
      "Cautions",
      el(
        "ul",
        null,
        STUDY.cautions.map((text) => el("li", null, text)),
      ),
    ),
    section("Settings", settingsList()),
    section("Aircraft", el("ul", null, STUDY.aircraft.map(aircraftItem))),
    section(
      "Data",
      STUDY.attributions.length
        ? el(
            "ul",
            null,
            STUDY.attributions.map((line) => el("li", null, given(line))),
          )
        : el("p", { class: "empty" }, "No attribution was supplied with the data."),
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
                " of the quality control",
            ),
            el("ul", { class: "findings" }, STUDY.findings.map(findingItem)),
          )
        : el("p", { class: "empty" }, "None."),
    ),
    section("Credits", credits()),
  );
}
