// controls.js: the four choices at the top of the page.

function option(value, text) {
  return el("option", { value }, text);
}

function group(label, options) {
  return el("optgroup", { label }, options);
}

function fillControls() {
  byId("aircraft").append(
    ...STUDY.aircraft.map((profile, i) =>
      option(i, givenString(profile.name) + (profile.scaled ? " (scaled, no table)" : "")),
    ),
  );
  const months = MONTH_NAMES.map((name, i) => option("m" + i, name));
  const seasons = STUDY.seasons.map((name, i) => option("s" + i, givenString(name)));
  byId("period").append(group("Month", months), ...(seasons.length ? [group("Season", seasons)] : []));
  byId("hour").append(
    option(-1, "Whole window (" + windowText() + ")"),
    ...Array.from({ length: 24 }, (_, hour) => option(hour, hourText(hour))),
  );
  const measures = (ofAircraft) =>
    Object.entries(MEASURES)
      .filter(([, measure]) => Boolean(measure.ofAircraft) === ofAircraft)
      .map(([key, measure]) => option(key, measure.name));
  byId("measure").append(group("Of the aircraft", measures(true)), group("Of the air", measures(false)));
  byId("controls").addEventListener("change", readControls);
  byId("controls").addEventListener("submit", (event) => event.preventDefault());
}

function readControls() {
  const period = byId("period").value;
  state.aircraft = Number(byId("aircraft").value);
  state.period = { season: period[0] === "s", index: Number(period.slice(1)) };
  state.hour = Number(byId("hour").value);
  const measure = byId("measure").value;
  if (measure !== state.measure && state.sort === "value") state.direction = worstFirst(measure);
  state.measure = measure;
  settle();
  draw();
}

function showControls() {
  byId("aircraft").value = state.aircraft;
  byId("period").value = (state.period.season ? "s" : "m") + state.period.index;
  byId("hour").value = state.hour;
  byId("measure").value = state.measure;
  byId("hour").disabled = state.period.season;
  byId("hour").title = state.period.season ? "A season is shown over the whole window." : "";
}
