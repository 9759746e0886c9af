// app.js: what the reader can do, and drawing the page from the state.

const map = window.map_fields;

function classItems(scale) {
  const item = (number, text) => el("li", null, symbol(number), text);
  return [...scale.labels.map((text, i) => item(i, text)), item(-1, NO_DATA)];
}

function legendItems() {
  const steep = STUDY.fields.some(isSteep)
    ? el(
        "li",
        null,
        svg("svg", { viewBox: "-3 -1 19 15", class: "symbol key-wedge", "aria-hidden": "true" }, wedge()),
        STEEP_MARK,
      )
    : null;
  return [...classItems(shownScale), steep].filter(Boolean);
}

function showCaption() {
  const profile = STUDY.aircraft[state.aircraft];
  const named = MEASURES[state.measure].ofAircraft
    ? [", ", given(profile.name), " ", aircraftTag(profile)]
    : [];
  byId("caption").replaceChildren(viewText(state), ...named.filter(Boolean));
}

// Bring a heading to the reader's eye and ear.
function moveTo(heading) {
  heading.focus({ preventScroll: true });
  const { top } = heading.getBoundingClientRect();
  if (top < 0 || top > window.innerHeight / 2) heading.closest("section").scrollIntoView();
}

const actions = {
  open(index) {
    state.field = index;
    state.comparing = false;
    state.view = "";
    draw();
    moveTo(byId("field-heading"));
  },
  close() {
    const id = STUDY.fields[state.field].id;
    state.field = -1;
    draw();
    const buttons = [...byId("fields").querySelectorAll("button[data-field]")];
    const row = buttons.find((button) => button.dataset.field === id);
    (row || byId("fields-heading")).focus();
  },
  overview(view) {
    state.view = view;
    state.field = -1;
    state.comparing = false;
    draw();
    moveTo(byId(shownHeading()));
  },
  compare() {
    state.comparing = true;
    state.field = -1;
    draw();
    moveTo(byId("compare-heading"));
  },
  closeCompare() {
    state.comparing = false;
    draw();
    byId("fields-heading").focus();
  },
  chooseCell(month, hour) {
    state.period = { season: false, index: month };
    state.hour = hour;
    draw();
    byId("field-part").querySelector("td.chosen").focus({ preventScroll: true });
  },
  sortBy(column, direction) {
    state.sort = column;
    state.direction = direction;
    draw();
  },
};

let showMarkers = null;

function showNotice() {
  byId("notice").textContent = unknown.length
    ? "The link asks for " +
      unknown.join(" and ") +
      " that this study does not have; the page shows what it has."
    : "";
}

function pageTitle() {
  if (state.field >= 0) return STUDY.fields[state.field].name + ": " + STUDY.title;
  if (state.view) return OVERVIEWS[state.view].name + ": " + STUDY.title;
  return STUDY.title;
}

function shownHeading() {
  if (state.field >= 0) return "field-heading";
  if (state.view) return "overview-heading";
  return state.comparing ? "compare-heading" : "fields-heading";
}

function showPart(id, shown, content) {
  byId(id).hidden = !shown;
  byId(id).replaceChildren(...(shown ? content() : []));
}

// The map is put away below an overview; what it missed meanwhile it catches up with.
function showMap() {
  const away = document.documentElement.classList.contains("overview");
  document.documentElement.classList.toggle("overview", state.view !== "");
  if (state.view) return;
  if (away) map.invalidateSize({ animate: false, pan: false });
  showMarkers(state);
}

function draw() {
  showScale(state.measure, shownTime(), gridTime());
  showControls();
  showCaption();
  byId("legend").replaceChildren(...legendItems());
  showList(state, actions.open, actions.sortBy);
  showCompareBar();
  const open = state.field >= 0;
  byId("list-part").hidden = open || state.comparing || state.view !== "";
  showPart("field-part", open, () => fieldPanel(state, actions));
  showPart("compare-part", state.comparing, () => comparePanel(state, actions));
  showPart("overview-part", state.view !== "", () => OVERVIEWS[state.view].content(state, actions));
  showViews();
  showNotice();
  document.title = pageTitle();
  byId("skip").href = "#" + shownHeading();
  document.documentElement.classList.toggle("one-part", open || state.comparing || state.view !== "");
  showMap();
  writeFragment();
}

function showTitle() {
  const { first_year: first, last_year: last } = STUDY.settings;
  const count = STUDY.fields.length + (STUDY.fields.length === 1 ? " field" : " fields");
  const parts = [
    first && last ? "Weather of " + first + "-" + last : null,
    "hours window: " + windowText(),
    count,
  ];
  byId("study-title").replaceChildren(given(STUDY.title));
  byId("study-line").textContent = parts.filter(Boolean).join(" \u00b7 ");
  byId("study-caution").textContent = STUDY.cautions[0];
}

function listen() {
  byId("compare-open").addEventListener("click", actions.compare);
  byId("skip").addEventListener("click", (event) => {
    event.preventDefault(); // the fragment keeps the view
    moveTo(byId(shownHeading()));
  });
  window.addEventListener("hashchange", () => {
    readFragment();
    fromHistory = true;
    draw();
    fromHistory = false;
    if (document.activeElement === document.body) moveTo(byId(shownHeading()));
  });
  window.addEventListener("keydown", (event) => {
    if (event.key !== "Escape" || event.defaultPrevented || event.target.closest("select, input")) return;
    if (state.field >= 0) actions.close();
    else if (state.comparing) actions.closeCompare();
    else if (state.view) actions.overview("");
  });
}

function start() {
  showTitle();
  byId("legend").className = "legend";
  fillControls();
  fillViews(actions);
  showMethod();
  readFragment();
  addGround(map);
  addTiles(map);
  showMarkers = addMarkers(map, actions.open);
  fitFields(map); // before the first drawing, which reads the view
  draw();
  listen();
  preparePrint(map);
  document.documentElement.dataset.ready = "yes";
}

start();
