// markers.js: one marker per field: shape, colour, number and name; reachable and usable by keyboard.

// Above this many fields the list is the one way by keyboard; the markers leave the tab order.
const MOST_TAB_STOPS = 60;
const MARKER_SIZE = 44;

function fitFields(map) {
  const places = STUDY.fields.map((field) => [field.latitude, field.drawn]);
  if (places.length)
    map.fitBounds(places, {
      paddingTopLeft: [76, 44],
      paddingBottomRight: [76, 72],
      maxZoom: 10,
      animate: false,
    });
}

function makeMarker(map, field, index, choose) {
  const root = el("div", { class: "marker" });
  const icon = L.divIcon({ html: root, className: "marker-box", iconSize: [MARKER_SIZE, MARKER_SIZE] });
  const keyboard = STUDY.fields.length <= MOST_TAB_STOPS;
  const marker = L.marker([field.latitude, field.drawn], { icon, keyboard, riseOnHover: true }).addTo(
    map
  );
  const tip = el("div", { class: "tip" });
  marker.bindTooltip(tip, { direction: "top", offset: [0, -14] });
  marker.on("click", () => choose(index));
  marker.getElement().dataset.field = field.id;
  marker.getElement().addEventListener("keydown", (event) => {
    if (event.key !== "Enter" && event.key !== " ") return;
    event.preventDefault();
    choose(index);
  });
  return { marker, root, tip, label: null };
}

function showMarker(entry, index, state) {
  const field = STUDY.fields[index];
  const value = measured(state.measure, index, state.aircraft, state.period, state.hour);
  const number = classOf(state.measure, value);
  const text = measureText(state.measure, value);
  entry.number = number;
  const steep = isSteep(field);
  entry.label = el(
    "div",
    { class: "label" },
    el("div", { class: "head" }, el("b", null, text), steep ? el("em", null, STEEP, el("i", null, STEEP_REST)) : null),
    el("span", null, given(field.name))
  );
  entry.root.replaceChildren(symbol(number, steep), entry.label);
  entry.root.classList.toggle("chosen", state.field === index);
  entry.tip.replaceChildren(
    el("b", null, given(field.name)),
    ...[elevationText(field.elevation), text, ...(steep ? [STEEP_MARK] : [])].map((line) =>
      el("span", null, line)
    )
  );
  entry.marker.getElement().setAttribute("aria-label", [givenString(field.name), text, ...(steep ? [STEEP_MARK] : [])].join(", "));
  // The higher the class, the nearer the top of a pile.
  entry.marker.setZIndexOffset(state.field === index ? 100000 : (number + 1) * 1000);
}

function overlaps(a, b) {
  return a.left < b.right && b.left < a.right && a.top < b.bottom && b.top < a.bottom;
}

// Corners of a label of a size on one side of a marker whose symbol fills the box `at`.
function labelBox(at, size, side) {
  const [x, y] = [(at.left + at.right) / 2, (at.top + at.bottom) / 2];
  const left = {
    below: x - size.width / 2,
    above: x - size.width / 2,
    right: at.right,
    left: at.left - size.width,
  }[side];
  const top = {
    below: at.bottom - 1,
    above: at.top - size.height,
    right: y - size.height / 2,
    left: y - size.height / 2,
  }[side];
  return { left, top, right: left + size.width, bottom: top + size.height };
}

const LABEL_PLACES = ["below", "above", "right", "left"];

const LABEL_KINDS = ["", "no-name", "no-name short"];

// Sizes of every label in each kind. All labels change kind at once: one layout for each.
function labelSizes(entries) {
  const sizes = entries.map(() => []);
  for (const kind of LABEL_KINDS) {
    for (const entry of entries) entry.label.className = "label " + kind;
    entries.forEach((entry, index) => {
      const { width, height } = entry.label.getBoundingClientRect();
      sizes[index].push({ kind, width, height });
    });
  }
  return sizes;
}

// The first place where a label covers no other marker or label: with its name, else the number
// alone, else not at all (the list and the tip still have it). Sizes are read once, then placed.
function placeLabels(entries, state, container) {
  const frame = container.getBoundingClientRect();
  const inside = (box) =>
    box.left >= frame.left && box.right <= frame.right && box.top >= frame.top && box.bottom <= frame.bottom;
  const symbols = entries.map((entry) => entry.root.firstChild.getBoundingClientRect());
  const sizes = labelSizes(entries);
  const taken = [...container.querySelectorAll(".leaflet-control, .graticule-label span")].map((node) =>
    node.getBoundingClientRect()
  );
  const order = entries.map((_, i) => i);
  const first = (i) => 2 * (state.field === i) + isSteep(STUDY.fields[i]);
  order.sort((a, b) => first(b) - first(a) || entries[b].number - entries[a].number || a - b);
  for (const index of order) {
    const free = (box) =>
      inside(box) &&
      taken.every((other) => !overlaps(box, other)) &&
      symbols.every((other, i) => i === index || !overlaps(box, other));
    const choices = sizes[index].flatMap((size) => LABEL_PLACES.map((side) => ({ size, side })));
    const choice = choices.find(({ size, side }) => free(labelBox(symbols[index], size, side)));
    if (choice) taken.push(labelBox(symbols[index], choice.size, choice.side));
    entries[index].label.className = choice
      ? "label " + choice.side + " " + choice.size.kind
      : "label no-label";
  }
}

function addMarkers(map, choose) {
  const entries = STUDY.fields.map((field, index) => makeMarker(map, field, index, choose));
  let current = null;
  const tidy = () => current && placeLabels(entries, current, map.getContainer());
  map.on("moveend resize", tidy);
  return (state) => {
    current = state;
    entries.forEach((entry, index) => showMarker(entry, index, state));
    tidy();
  };
}
