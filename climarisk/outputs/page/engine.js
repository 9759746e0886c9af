// engine.js: what the air does to the engine: carburettor icing, power, the part of humidity.

// Icing

// What has to stand wherever a figure of the icing does.
function icingDoubt() {
  const { verified } = PLANNING.icing;
  if (verified === "yes") return "";
  return verified === "no" ? "chart not verified" : verified;
}

function icingMonths(field) {
  const bands = PLANNING.icing.bands.length;
  return PLANNING.icing.bands.map((_, band) =>
    everyMonth((month) => shareAt("icing_month", (field * bands + band) * 12 + month)),
  );
}

function icingCell(field, month, hour) {
  const share = shareAt("icing_hour", (field * 12 + month) * 24 + hour);
  const told = MONTH_NAMES[month] + ", " + hourText(hour) + ": ";
  const text = share === null ? "no data or no daylight" : percent(share) + ", " + icingDoubt();
  return el(
    "td",
    { class: className(classIn(ICING_SCALE, share)), title: told + text },
    share === null ? "\u2013" : percentNumber(share),
  );
}

function icingGrid(field) {
  const hours = Array.from({ length: 24 }, (_, hour) => hour);
  const known = hours.filter((hour) =>
    MONTHS.some((_, month) => shareAt("icing_hour", (field * 12 + month) * 24 + hour) !== null),
  );
  return el(
    "table",
    { class: "icing-grid icing-scale" },
    el(
      "caption",
      null,
      "Daylight hours in which ice is serious even in cruise, per cent, " +
        icingDoubt() +
        "; rows: hour, local standard time",
    ),
    el(
      "thead",
      null,
      el(
        "tr",
        null,
        el("th", { scope: "col" }, "h"),
        MONTHS.map((name) => el("th", { scope: "col" }, name)),
      ),
    ),
    el(
      "tbody",
      null,
      known.map((hour) =>
        el(
          "tr",
          null,
          el("th", { scope: "row" }, String(hour).padStart(2, "0")),
          MONTHS.map((_, month) => icingCell(field, month, hour)),
        ),
      ),
    ),
  );
}

function icingHow() {
  const { method } = PLANNING.icing;
  const how =
    method === "chart"
      ? "by zones of temperature and dew point"
      : "by the vapour that would freeze out in a chilled throat, an engineering assumption";
  return (
    "Share of the daylight hours whose surface air lies in each band, " +
    how +
    ". An exposure of the air, not of an engine: ice needs no cloud, comes soonest at low power, and its signs, " +
    "the use of carburettor heat and the flight manual go before this table."
  );
}

// Null for an aircraft without a carburettor.
function icingPart(state) {
  if (!PLANNING.icing || !STUDY.aircraft[state.aircraft].carburettor) return null;
  const bands = icingMonths(state.field);
  const rows = MONTHS.map((name, month) => [name, ...bands.map((band) => percent(band[month]))]);
  const doubt = icingDoubt();
  return section(
    "Carburettor icing",
    doubt ? el("p", null, el("span", { class: "tag severity-caution" }, doubt)) : null,
    el("p", { class: "key" }, icingHow()),
    table(
      "Daylight hours in each band" + (doubt ? ", " + doubt : ""),
      ["Month", ...PLANNING.icing.bands],
      rows,
      "plain-table icing",
    ),
    icingHours(state.field, doubt),
  );
}

// By the hour, on demand; on paper only where it stands open.
function icingHours(field, doubt) {
  return el(
    "div",
    { class: "on-demand" },
    collapsed("icing", "Serious even in cruise, by month and hour" + (doubt ? ", " + doubt : ""), [
      el("ul", { class: "legend small icing-scale" }, classItems(ICING_SCALE)),
      icingGrid(field),
    ]),
  );
}

// Power

function powerRow(state, name, month) {
  const engine = STUDY.aircraft[state.aircraft].engine;
  const place = (state.field * PLANNING.engines.length + engine) * 12 + month;
  const [low, middle, high, best] = ["power_p10", "power_p50", "power_p90", "optimistic_p50"].map((column) =>
    countAt(column, place),
  );
  const lost = countAt("humidity_power_pct_p50", place);
  const [feet, most] = ["p50", "p90"].map((p) => countAt("humidity_ft_" + p, state.field * 12 + month));
  return {
    power: middle,
    cells: [
      name,
      middle === null ? NO_DATA : [middle + " %", el("small", null, low + "-" + high)],
      best === null ? NO_DATA : best + " %",
      lost === null ? NO_DATA : (lost / 10).toFixed(1) + " %",
      feet === null ? NO_DATA : [grouped(feet * 10), el("small", null, "P90 " + grouped(most * 10))],
    ],
  };
}

function powerTable(rows, hasPower) {
  const heads = ["Month", "Power", "At best", "Humidity takes", "Humidity adds, ft"];
  const kept = (list) => (hasPower ? list : [list[0], list[4]]);
  return table(
    hasPower
      ? "Power in per cent of standard sea level, median and P10-P90; the part of humidity in it and in density altitude"
      : "The part of humidity in the density altitude",
    kept(heads),
    rows.map(({ cells }) => kept(cells)),
    "plain-table power",
  );
}

// Null where the study has no such answer.
function powerPart(state) {
  const method = PLANNING.engines[STUDY.aircraft[state.aircraft].engine];
  if (!method) return null;
  const rows = MONTHS.map((name, month) => powerRow(state, name, month));
  const hasPower = rows.some(({ power }) => power !== null);
  return airSection(
    "Engine power and humidity",
    el(
      "p",
      { class: "key" },
      "Power " +
        (hasPower ? "available at " : "") +
        method +
        ". " +
        (hasPower
          ? "At best: the more favourable of this and SAE J1349, median; what lies between is how unsure the method is. Mixture, ignition and wear are not in it. "
          : "") +
        "Power rounded down, humidity’s part up.",
    ),
    powerTable(rows, hasPower),
  );
}
