// ground.js: the ground of the map: land, coast, borders, and a graticule of whole degrees or
// minutes with its labels.

// Whole numbers of seven bits a byte, low bits first; the top bit of a byte tells that more follow.
function wholeNumbers(bytes) {
  const numbers = [];
  let [number, weight] = [0, 1];
  for (const byte of bytes) {
    number += (byte & 127) * weight;
    weight *= 128;
    if (byte > 127) continue;
    numbers.push(number);
    [number, weight] = [0, 1];
  }
  return numbers;
}

// Lines of [longitude, latitude] in units: the number of points of each, then the steps from
// point to point, their sign in the lowest bit.
function outlineLines(kind) {
  const numbers = wholeNumbers(decode(STUDY.outlines[kind]));
  const lines = [];
  const last = [0, 0];
  for (let at = 0; at < numbers.length;) {
    const end = at + 1 + 2 * numbers[at];
    const line = [];
    for (at += 1; at < end; at += 2) {
      for (const i of [0, 1]) {
        const step = numbers[at + i];
        last[i] += step % 2 ? -(step + 1) / 2 : step / 2;
      }
      line.push([...last]);
    }
    lines.push(line);
  }
  return lines;
}

// The parts of a ring of land that are coast and not the edge of what was cut out of the world.
function coastParts(ring) {
  const { longitudes, latitudes } = STUDY.outlines.seams;
  const cut = (a, b) =>
    (a[0] === b[0] && longitudes.includes(a[0])) || (a[1] === b[1] && latitudes.includes(a[1]));
  const parts = [[ring[0]]];
  for (let i = 1; i <= ring.length; i += 1) {
    const point = ring[i % ring.length];
    if (cut(ring[i - 1], point)) parts.push([point]);
    else parts[parts.length - 1].push(point);
  }
  return parts.filter((part) => part.length > 1);
}

// One path for each kind, in a pane of their own below everything; the wide padding keeps the
// ground filled while the map is dragged. The colours are those of the style sheet.
function addOutlines(map) {
  const pane = map.createPane("outlines");
  pane.style.zIndex = 140;
  pane.style.pointerEvents = "none";
  pane.setAttribute("aria-hidden", "true");
  const renderer = L.svg({ pane: "outlines", padding: 0.5 });
  const places = (line) => line.map(([x, y]) => [y / STUDY.outlines.perDegree, x / STUDY.outlines.perDegree]);
  const style = (className) => ({ className, renderer, pane: "outlines", interactive: false });
  const land = outlineLines("land");
  L.polygon(
    land.map((ring) => [places(ring)]),
    { ...style("land"), stroke: false },
  ).addTo(map);
  for (const kind of ["state", "border"])
    L.polyline(outlineLines(kind).map(places), style("between " + kind)).addTo(map);
  L.polyline(land.flatMap(coastParts).map(places), style("coast")).addTo(map);
}

// Graticule

const GRATICULE_STEPS = [90, 60, 30, 15, 10, 5, 2, 1, 0.5, 0.25, 1 / 6, 1 / 12, 1 / 30, 1 / 60];
const LINES_WANTED = 4;
const CORNER_PX = 64;

function graticuleStep(span) {
  return (
    GRATICULE_STEPS.find((step) => span / step >= LINES_WANTED) || GRATICULE_STEPS[GRATICULE_STEPS.length - 1]
  );
}

// Meridians go on beyond 180 degrees, where fields on both sides of it are drawn together.
const FURTHEST_LON = 540;

function meridianText(lon) {
  const around = ((((lon + 180) % 360) + 360) % 360) - 180;
  return degreesText(around, Math.abs(around) === 180 ? "" : "E", Math.abs(around) === 180 ? "" : "W");
}

function marks(from, to, step, limit) {
  const found = [];
  for (let i = Math.ceil(Math.max(from, -limit) / step); i * step <= Math.min(to, limit); i += 1)
    found.push(i * step);
  return found;
}

function graticuleLabel(place, text, side) {
  const icon = L.divIcon({
    html: el("span", null, text),
    className: "graticule-label " + side,
    iconSize: [0, 0],
  });
  return L.marker(place, { icon, interactive: false, keyboard: false, pane: "ground" });
}

function drawGround(map, group) {
  group.clearLayers();
  const view = map.getBounds();
  const wide = view.pad(0.5);
  const step = graticuleStep(view.getEast() - view.getWest());
  const style = { className: "graticule", interactive: false, pane: "ground", weight: 1 };
  for (const lat of marks(wide.getSouth(), wide.getNorth(), step, 85)) {
    group.addLayer(
      L.polyline(
        [
          [lat, wide.getWest()],
          [lat, wide.getEast()],
        ],
        style,
      ),
    );
    // No labels in the upper corners, where the buttons stand and the two rows would meet.
    const at = map.latLngToContainerPoint([lat, view.getEast()]);
    if (at.y > CORNER_PX / 2 && at.y < map.getSize().y) {
      group.addLayer(graticuleLabel([lat, view.getEast()], degreesText(lat, "N", "S"), "east"));
    }
  }
  for (const lon of marks(wide.getWest(), wide.getEast(), step, FURTHEST_LON)) {
    const [south, north] = [Math.max(wide.getSouth(), -85), Math.min(wide.getNorth(), 85)];
    group.addLayer(
      L.polyline(
        [
          [south, lon],
          [north, lon],
        ],
        style,
      ),
    );
    const at = map.latLngToContainerPoint([view.getNorth(), lon]);
    if (at.x > CORNER_PX && at.x < map.getSize().x - CORNER_PX) {
      group.addLayer(graticuleLabel([view.getNorth(), lon], meridianText(lon), "north"));
    }
  }
}

function addGround(map) {
  addOutlines(map);
  const pane = map.createPane("ground");
  pane.style.zIndex = 150;
  pane.style.pointerEvents = "none";
  const group = L.layerGroup().addTo(map);
  map.on("moveend resize", () => drawGround(map, group));
  drawGround(map, group);
}
