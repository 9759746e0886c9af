// works.js: when a field works for the aircraft, and what limits it: months, hours, margins.

function monthPlace(state, month) {
  return riskPlace(state.field, state.aircraft, { season: false, index: month });
}

// Hours in the order of the window as "06:00-10:00, 18:00"; the label of an hour is its full hour.
function hourRanges(hours) {
  return hours.replace(/\d+/g, "$&:00").replaceAll(" ", ", ");
}

// The same by the civil clock, earlier days first where it changes within the month.
function clockRanges(hours) {
  return hours
    .split(" / ")
    .map((days) => days.replaceAll(" ", ", "))
    .join(" / ");
}

function workingCell(state, month) {
  const place = monthPlace(state, month);
  const [hours, clock] = ["hours", "clock_hours"].map((name) => hoursAt("window_" + name, place));
  if (hours === null) return NO_DATA;
  const unknown = countAt("clock_unknown", place);
  const shown = clock === null ? "" : PLANNING.windowClocks[clock];
  return [
    PLANNING.windowHours[hours] ? hourRanges(PLANNING.windowHours[hours]) : "no hour",
    shown ? el("small", null, "clock ", given(clockRanges(shown))) : null,
    unknown ? el("small", null, unknown + (unknown === 1 ? " hour" : " hours") + " without figures") : null,
  ];
}

function daylightCell(state, month, notes) {
  const place = monthPlace(state, month);
  const [usable, all, low, high] = ["usable_hours", "daylight_hours", "usable_low", "usable_high"].map(
    (name) => hoursAt("daylight_" + name, place),
  );
  if (usable === null) return NO_DATA;
  const note = countAt("daylight_note", place);
  return [
    grouped(usable) + " of " + grouped(all),
    el(
      "small",
      null,
      low === null || high === null ? "no interval" : grouped(low) + "-" + grouped(high),
      notes.letter(note === null ? null : STUDY.notes[note]),
    ),
  ];
}

function usableText(field, aircraft, period) {
  const usable = usableHours(field, aircraft, period, -1);
  if (usable === null) return NO_DATA;
  return grouped(usable) + " of " + grouped(offeredHours(field, period));
}

function worksPart(state) {
  const limit = edgeText(PLANNING.target) + "\u00a0%";
  const notes = new Notes();
  const rows = MONTHS.map((name, month) => [
    name,
    workingCell(state, month),
    daylightCell(state, month, notes),
    percentDown(countAt("run_days", monthPlace(state, month))),
  ]);
  return section(
    "When it works",
    el(
      "p",
      { class: "key" },
      "Hours of the window, first to last full hour of local standard time, in which less than " +
        limit +
        " of the days fall short; below them the same by the civil clock" +
        (PLANNING.year ? " of " + PLANNING.year : "") +
        ", earlier days before the stroke where it changes within the month. Usable hours a month: hours in daylight that do not fall short, with their " +
        confidenceText() +
        ". Days: at least " +
        PLANNING.runHours +
        " usable hours in a row, rounded down.",
    ),
    table(
      ["When ", given(STUDY.aircraft[state.aircraft].name), " works here"],
      [
        "Month",
        "Hours below " + limit,
        "Usable in daylight",
        "Days with " + PLANNING.runHours + " h in a row",
      ],
      rows,
      "plain-table works",
    ),
    notes.list(),
  );
}

// Margins by check

function checkPlace(state, check, month) {
  const profile = state.field * STUDY.aircraft.length + state.aircraft;
  return (profile * STUDY.checks.length + check) * 12 + month;
}

function checkRow(head, cells) {
  return el("tr", null, el("th", { scope: "row" }, head), cells);
}

function checkRows(state, check) {
  const margins = everyMonth((month) => countAt("check_margin_p10", checkPlace(state, check, month)));
  const shares = everyMonth((month) => shareAt("check_shortfall", checkPlace(state, check, month)));
  if (shares.every((share) => share === null)) return [];
  const marginCell = (packed) => {
    const margin = packed === null ? null : packed + LOWEST_MARGIN;
    return el("td", { class: margin !== null && margin < 0 ? "short" : null }, marginText(margin));
  };
  const shareCell = (share) =>
    el("td", { class: share ? "short" : null }, share === null ? "\u2013" : percentNumber(share));
  const hasMargin = margins.some((margin) => margin !== null);
  return [
    el("tr", { class: "check" }, el("th", { scope: "rowgroup", colspan: 13 }, STUDY.checks[check])),
    hasMargin ? checkRow("margin", margins.map(marginCell)) : null,
    checkRow("fails", shares.map(shareCell)),
  ].filter(Boolean);
}

function marginsPart(state) {
  const groups = STUDY.checks.map((_, check) => checkRows(state, check)).filter((rows) => rows.length);
  if (!groups.length) return null;
  const heads = MONTHS.map((name) => el("th", { scope: "col" }, name));
  return section(
    "Margins by check",
    el(
      "p",
      { class: "key" },
      "Margin: available over required with the factors, less one, in the window; 9 hours of 10 have more. " +
        "Fails: hours in which this check falls short. Both per cent, margins rounded down; " +
        grouped(LOWEST_MARGIN) +
        " stands for that and less: beyond the table, or no climb at all.",
    ),
    el(
      "table",
      { class: "check-table" },
      el("caption", null, given(STUDY.aircraft[state.aircraft].name)),
      el("thead", null, el("tr", null, el("th", { scope: "col" }, "Check"), heads)),
      groups.map((rows) => el("tbody", null, rows)),
    ),
  );
}
