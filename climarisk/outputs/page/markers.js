// markers.js: one marker per field: shape, colour, number and name; reachable and usable by keyboard.
// Markers are made once; a new view writes only what has changed. Where they crowd they become dots.

// Above this many fields the list is the one way by keyboard and for screen readers.
const MOST_TAB_STOPS = 60;
const MARKER_SIZE = 44;
// A whole symbol, as in map.css.
const SYMBOL_SIZE = 30;
// A click or tap this near to the middle of a marker means it: half of a target of 44 px.
const CLICK_PX = 22;
// Symbols nearer to each other than this touch; they crowd from this many on.
const CROWD_PX = 26;
const LEAST_CROWD = 6;
// Crowded symbols shrink with their spacing; below this spacing they are plain dots.
const DOTS_BELOW_PX = 16;
// Diameter of a dot: part of the spacing, within these limits, and larger with each class.
const DOT_PART = 0.75;
const DOT_LIMITS = [6, 16];
const DOT_FIRST = 0.8;
const DOT_STEP = 0.13;
const DOT_CLASSES = 6;
// A cross is thinner than a dot and needs more room to be seen.
const CROSS_SCALE = 1.4;
// The circle takes this part of its symbol; labels begin here in parts of the size.
const CIRCLE_PART = 0.7;
const DOT_REACH = 0.4;
const SYMBOL_REACH = 0.5;
// The ring around the chosen marker needs this much more.
const RING_PX = 5;
// Room around the fields: for names, or for numbers alone where there are many fields.
const NAME_ROOM = 76;
const NUMBER_ROOM = 40;
const LOW_PX = 220;

function fitFields(map) {
  const places = STUDY.fields.map((field) => [field.latitude, field.drawn]);
  const low = map.getSize().y < LOW_PX; // on the sheet of a field
  const room = low || places.length > MOST_TAB_STOPS ? NUMBER_ROOM : NAME_ROOM;
  if (places.length)
    map.fitBounds(places, {
      paddingTopLeft: [room, low ? 16 : 44],
      paddingBottomRight: [room, low ? 16 : room - 4],
      maxZoom: 10,
      animate: false,
    });
}

// What stands beside the name of a field whatever the view, as text.
function warningMarks(field) {
  return [isDoubtful(field) ? DOUBT_MARK : null, isSteep(field) ? STEEP_MARK : null].filter(Boolean);
}

// How the symbol of a class looks: its class attribute and its outline, made once for each class.
const looks = new Map();

function lookOf(number) {
  if (!looks.has(number)) {
    const made = symbol(number, false);
    const outline = made.querySelector(".shape").getAttribute("d");
    looks.set(number, { name: made.getAttribute("class"), outline });
  }
  return looks.get(number);
}

// Writes to the page only what differs from what was written before.
function patch(entry, key, value, write) {
  if (entry.shown[key] === value) return;
  entry.shown[key] = value;
  write(value);
}

function patchSymbol(entry, number, dot) {
  const look = lookOf(number);
  const outline = dot && number >= 0 ? lookOf(0).outline : look.outline;
  const doubtful = entry.doubtful ? " doubtful" : "";
  patch(entry, "symbol", look.name + doubtful, (name) => entry.symbol.setAttribute("class", name));
  patch(entry, "outline", outline, (path) => entry.symbol.firstChild.setAttribute("d", path));
}

// Markers

function makeMarker(map, field, index, choose) {
  const steep = isSteep(field);
  const number = el("b", null);
  const label = el(
    "div",
    { class: "label" },
    el("div", { class: "head" }, number, steep ? el("em", null, STEEP, el("i", null, STEEP_REST)) : null),
    el("span", null, given(field.name)),
  );
  const picture = symbol(-1, steep);
  const root = el("div", { class: "marker" }, picture, label);
  const icon = L.divIcon({ html: root, className: "marker-box", iconSize: [MARKER_SIZE, MARKER_SIZE] });
  const keyboard = STUDY.fields.length <= MOST_TAB_STOPS;
  const marker = L.marker([field.latitude, field.drawn], { icon, keyboard }).addTo(map);
  const box = marker.getElement();
  box.dataset.field = field.id;
  if (keyboard)
    box.addEventListener("keydown", (event) => {
      if (event.key !== "Enter" && event.key !== " ") return;
      event.preventDefault();
      choose(index);
    });
  const [marks, doubtful] = [warningMarks(field), isDoubtful(field)];
  return {
    index,
    marker,
    box,
    root,
    symbol: picture,
    label,
    number,
    marks,
    steep,
    doubtful,
    keyboard,
    shown: {},
  };
}

function showMarker(entry, state) {
  const value = measured(state.measure, entry.index, state.aircraft, state.period, state.hour);
  entry.rank = classOf(state.measure, value);
  entry.text = measureText(state.measure, value, timeOf(state.period, state.hour));
  entry.told = toldText(state, value);
  entry.chosen = state.field === entry.index;
  patch(entry, "text", entry.text, (text) => (entry.number.textContent = text));
  patch(entry, "chosen", entry.chosen, (chosen) => entry.root.classList.toggle("chosen", chosen));
  // The higher the class, the nearer the top of a pile.
  const height = entry.chosen ? 100000 : (entry.rank + 1) * 1000;
  patch(entry, "height", height, (offset) => entry.marker.setZIndexOffset(offset));
  if (!entry.keyboard) return;
  const name = [givenString(STUDY.fields[entry.index].name), entry.told, ...entry.marks].join(", ");
  patch(entry, "name", name, (words) => entry.box.setAttribute("aria-label", words));
}

// Dots grow with the zoom, as their spacing does, and with their class.
function dotSize(rank, spacing) {
  const [least, most] = DOT_LIMITS;
  const first = Math.min(most, Math.max(least, spacing * DOT_PART));
  const scale = rank < 0 ? CROSS_SCALE : DOT_FIRST + DOT_STEP * Math.min(rank, DOT_CLASSES - 1);
  return Math.round((2 * first * scale) / CIRCLE_PART) / 2;
}

function symbolSize(entry, view) {
  if (entry.chosen || !view.crowded) return SYMBOL_SIZE;
  if (view.dots) return dotSize(entry.rank, view.spacing);
  return Math.round((SYMBOL_SIZE * view.spacing) / CROWD_PX);
}

function sizeMarker(entry, view) {
  const dot = view.dots && !entry.chosen;
  entry.size = symbolSize(entry, view);
  entry.reach = entry.size * (dot ? DOT_REACH : SYMBOL_REACH) + (entry.chosen ? RING_PX : 0);
  patchSymbol(entry, entry.rank, dot);
  patch(entry, "size", entry.size, (size) => entry.root.style.setProperty("--size", size + "px"));
  patch(entry, "reach", entry.reach, (reach) => entry.root.style.setProperty("--reach", reach + "px"));
}

// Where things are

// The marker nearest to a point, within a distance; of several at one place that on top.
function nearest(entries, view, at, within) {
  let [found, least] = [-1, within * within];
  view.points.forEach((point, index) => {
    const square = (point.x - at.x) ** 2 + (point.y - at.y) ** 2;
    const above = found < 0 || entries[index].shown.height > entries[found].shown.height;
    if (square < least || (square === least && above)) [found, least] = [index, square];
  });
  return found;
}

// How many other points stand within CROWD_PX of a point, on average over all of them.
function crowding(points) {
  const cells = new Map();
  const keyOf = (x, y) => x * 65536 + y;
  for (const point of points) {
    const key = keyOf(Math.floor(point.x / CROWD_PX), Math.floor(point.y / CROWD_PX));
    cells.set(key, [...(cells.get(key) || []), point]);
  }
  let pairs = 0;
  for (const point of points) {
    const [column, row] = [Math.floor(point.x / CROWD_PX), Math.floor(point.y / CROWD_PX)];
    for (const x of [column - 1, column, column + 1])
      for (const y of [row - 1, row, row + 1])
        for (const other of cells.get(keyOf(x, y)) || [])
          if ((point.x - other.x) ** 2 + (point.y - other.y) ** 2 < CROWD_PX ** 2) pairs += 1;
  }
  // Each point has found itself as well.
  return points.length ? pairs / points.length - 1 : 0;
}

// Everything that depends on where the map stands, and not on the month: read once for each move.
function readView(map, entries) {
  const frame = map.getContainer().getBoundingClientRect();
  const points = entries.map((entry) => map.latLngToContainerPoint(entry.marker.getLatLng()));
  const inside = points.map(({ x, y }) => x >= 0 && y >= 0 && x <= frame.width && y <= frame.height);
  const near = crowding(points.filter((_, index) => inside[index]));
  const taken = [...map.getContainer().querySelectorAll(".leaflet-control, .graticule-label span")].map(
    (node) => {
      const box = node.getBoundingClientRect();
      const [left, top] = [box.left - frame.left, box.top - frame.top];
      return { left, top, right: left + box.width, bottom: top + box.height };
    },
  );
  // Crowded: on average each symbol in view touches more than one other.
  const crowded = near > 1 && inside.filter(Boolean).length >= LEAST_CROWD;
  const spacing = CROWD_PX / Math.sqrt(Math.max(near, 1));
  const dots = crowded && spacing < DOTS_BELOW_PX;
  return { points, inside, taken, width: frame.width, height: frame.height, crowded, spacing, dots };
}

// The tip: one for all markers, by mouse or by focus.

function fillTip(content, entry) {
  const field = STUDY.fields[entry.index];
  content.replaceChildren(
    el("b", null, given(field.name)),
    ...[elevationText(field.elevation), entry.told, ...entry.marks].map((line) => el("span", null, line)),
  );
}

function tipSide(point, view) {
  const room = MARKER_SIZE * 3;
  if (point.x < room) return "right";
  if (point.x > view.width - room) return "left";
  return point.y < room ? "bottom" : "top";
}

function tipFor(map, entries) {
  const content = el("div", { class: "tip" });
  const tip = L.tooltip({ offset: [0, 0] }).setContent(content);
  let current = -1;
  return (index, view) => {
    if (index === current) return;
    current = index;
    map.getContainer().classList.toggle("over-field", index >= 0);
    map.closeTooltip(tip);
    if (index < 0) return;
    const entry = entries[index];
    const side = tipSide(view.points[index], view);
    const [x, y] = { top: [0, -1], bottom: [0, 1], left: [-1, 0], right: [1, 0] }[side];
    fillTip(content, entry);
    tip.options.direction = side;
    tip.options.offset = [x * entry.reach, y * entry.reach];
    map.openTooltip(tip.setLatLng(entry.marker.getLatLng()));
  };
}

// The map itself finds what is meant: the nearest marker, however many lie upon each other.
function watchMap(map, entries, viewNow, choose) {
  const tip = tipFor(map, entries);
  map.on("click", (event) => {
    const index = nearest(entries, viewNow(), event.containerPoint, CLICK_PX);
    tip(-1);
    if (index >= 0) choose(index);
  });
  map.on("mousemove", (event) => tip(nearest(entries, viewNow(), event.containerPoint, CLICK_PX), viewNow()));
  map.on("mouseout movestart zoomstart", () => tip(-1));
  document.addEventListener("keydown", (event) => event.key === "Escape" && tip(-1));
  for (const entry of entries) {
    if (!entry.keyboard) continue;
    entry.box.addEventListener("focus", () => tip(entry.index, viewNow()));
    entry.box.addEventListener("blur", () => tip(-1));
  }
}

function addMarkers(map, choose) {
  // The style is asked for before there are thousands of nodes to give one to.
  const ruler = textRuler(getComputedStyle(map.getContainer()).fontFamily);
  const entries = STUDY.fields.map((field, index) => makeMarker(map, field, index, choose));
  let view = null;
  let current = null;
  const dress = () => {
    map.getContainer().classList.toggle("crowded", view.crowded);
    map.getContainer().classList.toggle("dots", view.dots);
    for (const entry of entries) sizeMarker(entry, view);
    placeLabels(entries, view, ruler);
  };
  if (STUDY.fields.length > MOST_TAB_STOPS) map.getPane("markerPane").setAttribute("aria-hidden", "true");
  watchMap(map, entries, () => view, choose);
  map.on("moveend resize", () => {
    if (!current) return;
    view = readView(map, entries);
    dress();
  });
  return (state) => {
    current = state;
    for (const entry of entries) showMarker(entry, state);
    if (!view) view = readView(map, entries);
    dress();
  };
}
