// weights.js: the mass that holds, month by month.

function weightFacts(state) {
  if (!PLANNING.hasWeights) return [];
  const load = loadThatHolds(state.field, state.aircraft, state.period, -1);
  const often = load === null ? "" : " in " + percent(PLANNING.holdsIn) + " of the hours";
  const steps = load > 0 ? stepWords("month") : "";
  return [["Weight that holds", massText(load, STUDY.aircraft[state.aircraft]) + often + steps]];
}

function massInterval(bounds, profile) {
  const [low, high] = bounds.map((load) => (load === null ? null : grouped(massOf(load, profile))));
  if (high === null) return "none";
  return low === null ? "up to " + high : low + "-" + high;
}

function weightRow(state, name, period, notes) {
  const profile = STUDY.aircraft[state.aircraft];
  const load = loadThatHolds(state.field, state.aircraft, period, -1);
  const place = riskPlace(state.field, state.aircraft, period);
  const time = "load_" + timeOf(period, -1);
  const note = countAt(time + "_note", place);
  const mark = notes.letter(note === null ? null : STUDY.notes[note]);
  const met = load !== null && load !== NOT_MET;
  const none = load === null ? NO_DATA : el("b", null, NOT_MET_TEXT);
  return [
    name,
    met
      ? [grouped(massOf(load, profile)), load === profile.topLoad ? el("small", null, "maximum") : null]
      : none,
    met ? grouped(Math.floor(load)) : load === null ? NO_DATA : "none",
    load === null ? NO_DATA : [massInterval(loadBounds(state.field, state.aircraft, period), profile), mark],
    percent(shareAt(time + "_never", place)),
  ];
}

// Null where the study has no such answer.
function weightPart(state) {
  if (!PLANNING.hasWeights) return null;
  const notes = new Notes();
  const profile = STUDY.aircraft[state.aircraft];
  const often = percent(PLANNING.holdsIn);
  const rows = [
    ...MONTH_NAMES.map((name, index) => weightRow(state, name, { season: false, index }, notes)),
    ...STUDY.seasons.map((name, index) => weightRow(state, given(name), { season: true, index }, notes)),
  ];
  return section(
    "Weight that holds",
    el(
      "p",
      { class: "key" },
      "The largest mass at which every check, landing included, holds in " +
        often +
        " of the hours of the window. Rounded down, in steps of " +
        profile.fineKg +
        " kg" +
        (profile.coarseKg > profile.fineKg ? ", by the hour of " + profile.coarseKg + " kg" : "") +
        "; empty " +
        grouped(profile.emptyKg) +
        ", maximum " +
        grouped(profile.maximumKg) +
        ". None holds: hours in which no tabulated mass would do.",
    ),
    table(
      ["Mass that holds in " + often + " of the hours, kg, ", given(profile.name)],
      ["Month, season", "Mass", "Useful load", confidenceText(), "None holds"],
      rows,
      "plain-table weights",
    ),
    notes.list(),
  );
}
