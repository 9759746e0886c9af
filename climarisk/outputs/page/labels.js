// labels.js: which markers have room for a number or a name, and on which side.
//
// Sizes come from the widths of the texts, so that placing them reads no layout.

// Sizes of type, as in map.css.
const LABEL_TYPE = { number: "bold 13px", steep: "600 11px", name: "12px" };
const LABEL_LINE = { number: 13 * 1.15, steep: 11 * 1.15, name: 12 * 1.15 };
const LABEL_MOST = 140;
const LABEL_KINDS = ["", "no-name", "no-name short"];
const LABEL_PLACES = ["below", "above", "right", "left"];

// A function from a kind of type and a text to a width, remembering what it has measured.
function textRuler(family) {
  const pen = document.createElement("canvas").getContext("2d");
  const widths = new Map();
  return (type, text) => {
    const key = type + " " + text;
    if (!widths.has(key)) {
      pen.font = LABEL_TYPE[type] + " " + family;
      widths.set(key, Math.ceil(pen.measureText(text).width) + 1);
    }
    return widths.get(key);
  };
}

function labelSize(entry, kind, ruler) {
  const lines = [["number", entry.text]];
  if (entry.steep) lines.push(["steep", kind === "no-name short" ? STEEP : STEEP_MARK]);
  if (kind === "") lines.push(["name", STUDY.fields[entry.index].name]);
  return {
    width: Math.max(...lines.map(([type, text]) => Math.min(LABEL_MOST, ruler(type, text)))),
    height: lines.reduce((sum, [type]) => sum + LABEL_LINE[type], 0),
  };
}

// The box of a label of a size on one side of a marker.
function labelBox({ x, y }, reach, { width, height }, side) {
  const left = { right: x + reach, left: x - reach - width }[side] ?? x - width / 2;
  const top = { below: y + reach - 1, above: y - reach - height }[side] ?? y - height / 2;
  return { left, top, right: left + width, bottom: top + height };
}

const CELL_PX = 48;

// Boxes by the squares they touch, so that one is compared only with those around it.
function boxGrid() {
  const cells = new Map();
  const keys = (box) => {
    const found = [];
    for (let x = Math.floor(box.left / CELL_PX); x * CELL_PX < box.right; x += 1)
      for (let y = Math.floor(box.top / CELL_PX); y * CELL_PX < box.bottom; y += 1) found.push(x * 65536 + y);
    return found;
  };
  return {
    add(box) {
      for (const key of keys(box)) {
        if (!cells.has(key)) cells.set(key, []);
        cells.get(key).push(box);
      }
    },
    isFree(box, own) {
      const hit = (other) =>
        other !== own &&
        box.left < other.right &&
        other.left < box.right &&
        box.top < other.bottom &&
        other.top < box.bottom;
      return !keys(box).some((key) => (cells.get(key) || []).some(hit));
    },
  };
}

// A function from a marker to how far the symbols at its place reach: those of fields at the same
// place lie on each other, and the label of the one on top has to clear them all.
function furthestReach(entries, view) {
  const place = ({ index }) => Math.round(view.points[index].x) + " " + Math.round(view.points[index].y);
  const reach = new Map();
  for (const entry of entries) reach.set(place(entry), Math.max(entry.reach, reach.get(place(entry)) || 0));
  return (entry) => reach.get(place(entry));
}

// The first place where a label covers no other marker or label: with its name, else the number
// alone, else not at all (the list and the tip still have it). Dots carry numbers only.
function placeLabels(entries, view, ruler) {
  const grid = boxGrid();
  view.taken.forEach(grid.add);
  const shown = entries.filter((entry) => view.inside[entry.index]);
  const reachAt = furthestReach(shown, view);
  for (const entry of shown) {
    const { x, y } = view.points[entry.index];
    const reach = reachAt(entry);
    entry.square = { left: x - reach, top: y - reach, right: x + reach, bottom: y + reach };
    grid.add(entry.square);
  }
  const first = (entry) => 2 * entry.chosen + (entry.steep && !view.dots);
  shown.sort((a, b) => first(b) - first(a) || b.rank - a.rank || a.index - b.index);
  const fits = (box) => box.left >= 0 && box.top >= 0 && box.right <= view.width && box.bottom <= view.height;
  for (const entry of entries) entry.place = "no-label";
  for (const entry of shown) {
    const kinds = view.dots && !entry.chosen ? LABEL_KINDS.slice(-1) : LABEL_KINDS;
    for (const kind of kinds) {
      const size = labelSize(entry, kind, ruler);
      const boxOn = (side) => labelBox(view.points[entry.index], reachAt(entry), size, side);
      const side = LABEL_PLACES.find((one) => fits(boxOn(one)) && grid.isFree(boxOn(one), entry.square));
      if (!side) continue;
      grid.add(boxOn(side));
      entry.place = side + (kind && " " + kind);
      break;
    }
  }
  for (const entry of entries)
    patch(entry, "place", entry.place, (place) => (entry.label.className = "label " + place));
}
