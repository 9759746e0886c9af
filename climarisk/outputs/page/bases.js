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
    run: countAt("base_days_with_run", place),
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

// Ends of the strips: no figure, interval or single year lies outside.
function stripScale(bases) {
  const hours = bases.flatMap((base) => [base.usable, ...base.ends, ...base.years]);
  const known = hours.filter((value) => value !== null);
  const low = Math.min(...known);
  return known.length ? [low, Math.max(low + 1, ...known)] : [0, 1];
}

// Thin: single years, 10th to 90th percentile; thick: the interval; dot: the mean.
function baseStrip({ usable, ends, years }, [least, most]) {
  const x = (hours) =>
    (STRIP.edge + ((hours - least) / (most - least)) * (STRIP.width - 2 * STRIP.edge)).toFixed(1);
  const y = STRIP.height / 2;
  const line = ([low, high], kind) =>
    low === null || high === null
      ? null
      : svg("line", { x1: x(low), x2: x(high), y1: y, y2: y, class: kind });
  return svg(
    "svg",
    { viewBox: "0 0 " + STRIP.width + " " + STRIP.height, class: "strip", "aria-hidden": "true" },
    svg("line", { x1: STRIP.edge, x2: STRIP.width - STRIP.edge, y1: y, y2: y, class: "rule" }),
    line(years, "spread"),
    line(ends, "ends"),
    svg("circle", { cx: x(usable), cy: y, r: 4, class: "mean" }),
  );
}

const PAIRS = new Map(PLANNING.pairs.map(([one, other], number) => [one + " " + other, number]));

// What a difference is besides its hours.
const DIFFERENCE = { apart: 1, tiny: 2, fewer: 4 };

// Tenths of hours that one base has more or fewer than another, as they were rounded when packed,
// with the ends of the interval seen that way; null where the pair was not computed.
function differenceOf(first, second, who) {
  const pair = PAIRS.get(Math.min(first, second) + " " + Math.max(first, second));
  if (pair === undefined) return null;
  const place = pair * (STUDY.aircraft.length + 1) + who;
  const [mean, low, high] = ["", "_low", "_high"].map((end) => feetAt("difference" + end, place));
  if (mean === null) return null;
  const kind = countAt("difference_kind", place);
  const packedFewer = (kind & DIFFERENCE.fewer) > 0;
  const ends = packedFewer ? [-high, -low] : [low, high];
  return {
    tenths: Math.abs(mean),
    fewer: packedFewer !== first > second,
    ends: low === null || high === null ? null : ends,
    apart: (kind & DIFFERENCE.apart) > 0,
    tiny: (kind & DIFFERENCE.tiny) > 0,
  };
}

// One decimal below 10 hours, whole hours from there on.
function tenthsText(tenths) {
  const size = Math.abs(tenths);
  if (size === 0) return "0";
  return (tenths < 0 ? MINUS : "") + (size < 100 ? (size / 10).toFixed(1) : grouped(size / 10));
}

function span(low, high, between) {
  return low === high ? low : low + between + high;
}

function differenceText(difference) {
  if (difference === null) return "not computed";
  const { tenths, fewer, ends, apart, tiny } = difference;
  const none = tenths === 0 && !tiny;
  const gap = (tiny ? "< 0.1" : tenthsText(tenths)) + " h" + (none ? "" : fewer ? " fewer" : " more");
  if (ends === null) return gap + ", no interval";
  const told = gap + " (" + span(...ends.map(tenthsText), " to ") + ")";
  return apart ? told : "not told apart: " + told;
}

function usableCell(base, scale) {
  if (base.usable === null) return el("span", { class: "none" }, NO_DATA);
  const [low, high] = base.ends;
  return [
    el("b", null, grouped(base.usable) + " h"),
    " ",
    el("small", null, low === null || high === null ? "no interval" : span(grouped(low), grouped(high), "-")),
    baseStrip(base, scale),
  ];
}

function pairOf([low, high], text, between) {
  return low === null || high === null ? NO_DATA : text(low) + between + text(high);
}

function baseRow(base, number, scale, against, who, actions) {
  const none = base.usable === null;
  const cells = [
    [none ? null : el("span", { class: "rank" }, number + 1 + "."), fieldLink(base.field, actions)],
    usableCell(base, scale),
    none || base.years.includes(null) ? NO_DATA : [...new Set(base.years)].map(grouped).join("-") + " h",
    none
      ? NO_DATA
      : [
          grouped(base.worst || 0) + " h ",
          base.season === null ? null : el("small", null, given(base.season)),
        ],
    percentDown(base.run),
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
  const known = order.filter((base) => base.usable !== null);
  return el(
    "div",
    { class: "overview-choices" },
    choice(
      "bases-of",
      "Usable hours of",
      [
        option(0, "the fleet"),
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

function fleetText() {
  return PLANNING.fleet.flatMap((count, i) => [
    i ? ", " : "",
    Number(count.toFixed(2)) + " \u00d7 ",
    given(STUDY.aircraft[i].name),
  ]);
}

function basesKey(bases, [least, most]) {
  const pairs =
    bases.filter((base) => base.usable !== null).length > PLANNING.allPairs
      ? " Of more than " +
        PLANNING.allPairs +
        " fields with a rank each is compared with the best and the next in rank; the other differences are not computed."
      : "";
  return el(
    "p",
    { class: "key" },
    "The fleet: ",
    fleetText(),
    ". Usable hours: hours of the window (" +
      windowText() +
      ") in a month that do not fall short, mean over the year; the fleet by how many there are of each aircraft. " +
      "Behind them and thick: " +
      confidenceText() +
      "; thin: single years, 10th to 90th percentile; strips from " +
      grouped(least) +
      " to " +
      grouped(most) +
      " h. Differences: with the interval from the same years at both bases; not told apart where it holds 0 before rounding." +
      pairs +
      steepWords(bases.map((base) => base.field)),
  );
}

function basesView(state, actions) {
  const order = orderedBases(state.who);
  const best = order.length && order[0].usable !== null ? order[0].field : -1;
  const against = state.base >= 0 && readBase(state.base, state.who).usable !== null ? state.base : best;
  const scale = stripScale(order);
  const heads = [
    "Base",
    "Usable hours a month; strip " + scale.map(grouped).join(" to ") + " h",
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
    basesKey(order, scale),
    stackedTable(
      "bases",
      ["Ranked by usable hours", ...name],
      heads,
      order.map((base, number) => baseRow(base, number, scale, against, state.who, actions)),
    ),
  ];
}
