// bases.js: the fields beside each other as bases for the fleet or for one aircraft.

const STRIP = { width: 150, height: 26, edge: 5 };

function basePlace(field, who) {
  return field * (STUDY.aircraft.length + 1) + who;
}

function readBase(field, who) {
  const place = basePlace(field, who);
  const hours = (name) => hoursAt("base_" + name, place);
  const share = (name) => shareAt("base_" + name, place);
  const season = countAt("base_worst_season", place);
  return {
    field,
    rank: hoursAt("base_rank", basePlace(field, 0)),
    usable: hours("usable_hours_month"),
    ends: [hours("ci_low"), hours("ci_high")],
    years: [hours("year_p10"), hours("year_p90")],
    season: season === null ? null : PLANNING.baseSeasons[season],
    worst: hours("worst_season_hours_month"),
    run: share("days_with_run"),
    near: [share("share_2_5k"), share("share_1k")],
    icing: share("icing_serious"),
  };
}

// The fleet has its ranks; for one aircraft its own hours decide. Those without figures stand last.
function orderedBases(who) {
  const bases = STUDY.fields.map((_, field) => readBase(field, who));
  const known = bases.filter((base) => base.usable !== null);
  known.sort((a, b) => (who ? b.usable - a.usable : a.rank - b.rank) || a.field - b.field);
  return [...known, ...bases.filter((base) => base.usable === null)];
}

// Thin: single years, 1 in 10 below and above; thick: the interval; dot: the mean.
function baseStrip({ usable, ends, years }, most) {
  const x = (hours) => STRIP.edge + (hours / most) * (STRIP.width - 2 * STRIP.edge);
  const y = STRIP.height / 2;
  const line = ([low, high], kind) =>
    low === null || high === null
      ? null
      : svg("line", { x1: x(low).toFixed(1), x2: x(high).toFixed(1), y1: y, y2: y, class: kind });
  return svg(
    "svg",
    { viewBox: "0 0 " + STRIP.width + " " + STRIP.height, class: "strip", "aria-hidden": "true" },
    svg("line", { x1: STRIP.edge, x2: STRIP.width - STRIP.edge, y1: y, y2: y, class: "rule" }),
    line(years, "spread"),
    line(ends, "ends"),
    svg("circle", { cx: x(usable).toFixed(1), cy: y, r: 4, class: "mean" }),
  );
}

const PAIRS = new Map(PLANNING.pairs.map(([one, other], number) => [one + " " + other, number]));

// Hours of one base less those of another, with its interval; null where it is not on the page.
function differenceOf(first, second, who) {
  const pair = PAIRS.get(Math.min(first, second) + " " + Math.max(first, second));
  if (pair === undefined) return null;
  const place = pair * (STUDY.aircraft.length + 1) + who;
  const [hours, low, high] = ["", "_low", "_high"].map((end) => {
    const tenths = feetAt("difference" + end, place);
    return tenths === null ? null : tenths / 10;
  });
  if (hours === null || first < second) return { hours, low, high };
  const turned = (value) => (value === null ? null : -value);
  return { hours: -hours, low: turned(high), high: turned(low) };
}

function differenceText(difference) {
  if (difference === null || difference.hours === null) return "see base_differences.csv";
  const { hours, low, high } = difference;
  const sign = hours < 0 ? -1 : 1;
  const text = grouped(Math.round(Math.abs(hours))) + " h " + (hours < 0 ? "fewer" : "more");
  if (low === null || high === null) return text + ", no interval";
  const [least, most] = (sign > 0 ? [low, high] : [-high, -low]).map((value, i) =>
    i ? Math.ceil(value) : Math.floor(value),
  );
  return text + " (" + grouped(least) + (least < 0 ? " to " : "-") + grouped(most) + ")";
}

function usableCell(base, most) {
  if (base.usable === null) return el("span", { class: "none" }, NO_DATA);
  const [low, high] = base.ends;
  return [
    el("b", null, grouped(base.usable) + " h"),
    " ",
    el("small", null, low === null || high === null ? "no interval" : grouped(low) + "-" + grouped(high)),
    baseStrip(base, most),
  ];
}

function pairOf([low, high], text, between) {
  return low === null || high === null ? NO_DATA : text(low) + between + text(high);
}

function baseRow(base, number, most, against, who, actions) {
  const none = base.usable === null;
  const cells = [
    [none ? null : el("span", { class: "rank" }, number + 1 + "."), fieldLink(base.field, actions)],
    usableCell(base, most),
    none || base.years.includes(null) ? NO_DATA : [...new Set(base.years)].map(grouped).join("-") + " h",
    none
      ? NO_DATA
      : [
          grouped(base.worst || 0) + " h ",
          base.season === null ? null : el("small", null, given(base.season)),
        ],
    percent(base.run),
    pairOf(base.near, percent, " / "),
  ];
  if (PLANNING.icing) cells.push(base.icing === null ? NO_DATA : [percent(base.icing), " ", icingMark()]);
  if (against >= 0)
    cells.push(
      base.field === against
        ? "the base compared"
        : none
          ? NO_DATA
          : differenceText(differenceOf(base.field, against, who)),
    );
  return cells;
}

function icingMark() {
  const doubt = icingDoubt();
  return doubt ? el("small", null, doubt) : null;
}

function baseChoices(order, against) {
  const fleet = PLANNING.fleet.map(
    (count, i) => Number(count.toFixed(2)) + " \u00d7 " + givenString(STUDY.aircraft[i].name),
  );
  const known = order.filter((base) => base.usable !== null);
  return el(
    "div",
    { class: "overview-choices" },
    choice(
      "bases-of",
      "Usable hours of",
      [
        option(0, "the fleet: " + fleet.join(", ")),
        ...STUDY.aircraft.map((profile, i) => option(i + 1, givenString(profile.name))),
      ],
      state.who,
      (value) => (state.who = Number(value)),
    ),
    choice(
      "bases-against",
      "Compared with",
      known.map(({ field }) => option(field, givenString(STUDY.fields[field].name))),
      against,
      (value) => (state.base = Number(value)),
    ),
  );
}

function pairsNote() {
  const shown = PLANNING.pairs.length;
  return PLANNING.allPairs > shown
    ? " Differences of " + grouped(shown) + " pairs; all of them are in base_differences.csv."
    : "";
}

function basesView(state, actions) {
  const order = orderedBases(state.who);
  const best = order.length && order[0].usable !== null ? order[0].field : -1;
  const against = state.base >= 0 && readBase(state.base, state.who).usable !== null ? state.base : best;
  const most = Math.max(
    1,
    ...order.flatMap((base) => [base.usable || 0, base.ends[1] || 0, base.years[1] || 0]),
  );
  const heads = [
    "Base",
    "Usable hours a month",
    "1 year in 10 below and above",
    "Worst season",
    "Days with " + PLANNING.runHours + " h in a row",
    "Near saturation, 2.5 K / 1 K",
    ...(PLANNING.icing ? ["Icing serious even in cruise"] : []),
    ...(against >= 0 ? ["Against the base compared, a month"] : []),
  ];
  const name = against >= 0 ? ["; differences to ", given(STUDY.fields[against].name)] : [];
  return [
    el("h2", { id: "overview-heading", tabindex: "-1" }, "Bases side by side"),
    baseChoices(order, against),
    el(
      "p",
      { class: "key" },
      "Usable hours: hours of the window (" +
        windowText() +
        ") in a month that do not fall short, mean over the year; the fleet by how many there are of each aircraft. " +
        "In brackets and thick: " +
        confidenceText() +
        ", of a difference from the same years at both bases. Thin: single years. An interval that holds 0 settles nothing." +
        pairsNote(),
    ),
    stackedTable(
      "bases",
      ["Ranked by usable hours", ...name],
      heads,
      order.map((base, number) => baseRow(base, number, most, against, state.who, actions)),
    ),
  ];
}
