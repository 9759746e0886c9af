// works.js: when a field works for the aircraft, and what limits it: months, hours, margins.

// Hours of the window with a share below the edge; null where no hour has a figure.
function workingHours(field, aircraft, month) {
  const inside = Array.from({ length: 24 }, (_, hour) => hour).filter((hour) => inWindow(field, month, hour));
  const shares = inside.map((hour) => hourShare(field, aircraft, month, hour));
  if (shares.every((share) => share === null)) return null;
  const hours = inside.filter((_, i) => shares[i] !== null && shares[i] < STUDY.worksShare);
  return { hours, inside: inside.length };
}

function workingText(found) {
  if (found === null) return NO_DATA;
  if (!found.hours.length) return "no hour";
  const all = found.hours.length === found.inside ? "all: " : "";
  return all + hourRanges(found.hours);
}

function usableText(field, aircraft, period) {
  const usable = usableHours(field, aircraft, period, -1);
  if (usable === null) return NO_DATA;
  return grouped(usable) + " of " + grouped(offeredHours(field, period));
}

// The lower and upper end of the usable hours, from the interval of the share.
function usableInterval(field, aircraft, period) {
  const [low, high] = ["ci_low", "ci_high"].map((column) => riskShare(column, field, aircraft, period));
  if (low === null || high === null) return "none";
  // Shares and hours are known to their levels and to whole hours: the interval is taken as wide as
  // they leave it, so that it never looks better than it is.
  const offered = offeredHours(field, period);
  const least = Math.floor(offered * (1 - nextLevel(high)));
  const most = Math.min(offered, Math.ceil((offered + 1) * (1 - low)));
  return grouped(least) + "-" + grouped(most);
}

function worksPart(state) {
  const limit = edgeText(STUDY.worksShare) + "\u00a0%";
  const rows = MONTH_NAMES.map((name, index) => {
    const period = { season: false, index };
    return [
      name,
      workingText(workingHours(state.field, state.aircraft, index)),
      usableText(state.field, state.aircraft, period),
      usableInterval(state.field, state.aircraft, period),
    ];
  });
  return section(
    "When it works",
    el(
      "p",
      { class: "key" },
      "Hours of the window, first to last full hour of local standard time, in which less than " +
        limit +
        " of the days fall short. " +
        "Usable hours a month: hours of the window that do not fall short. Colours and hours go by the unrounded share.",
    ),
    table(
      ["When ", given(STUDY.aircraft[state.aircraft].name), " works here"],
      ["Month", "Hours below " + limit, "Usable hours", confidenceText()],
      rows,
      "plain-table works",
    ),
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
