// ground.js: the ground of the map, a graticule of whole degrees or minutes with its labels.

const GRATICULE_STEPS = [30, 15, 10, 5, 2, 1, 0.5, 0.25, 1 / 6, 1 / 12, 1 / 30, 1 / 60];
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
        style
      )
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
        style
      )
    );
    const at = map.latLngToContainerPoint([view.getNorth(), lon]);
    if (at.x > CORNER_PX && at.x < map.getSize().x - CORNER_PX) {
      group.addLayer(graticuleLabel([view.getNorth(), lon], meridianText(lon), "north"));
    }
  }
}

function addGround(map) {
  const pane = map.createPane("ground");
  pane.style.zIndex = 150;
  pane.style.pointerEvents = "none";
  const group = L.layerGroup().addTo(map);
  map.on("moveend resize", () => drawGround(map, group));
  drawGround(map, group);
}
