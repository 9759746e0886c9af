// tiles.js: background images from the source that the study names, where it names one.
// The page asks for nothing by itself: the images are off until the reader switches them on, so
// that opening the page tells no one which fields are looked at, and images that are slow or not
// to be had stand in nobody's way. The choice lives as long as the page.

// The attribution is text from a file, and Leaflet's own would show it as HTML.
function imagesControl(switchTo) {
  const box = el("input", { type: "checkbox" });
  const source = el("p", { hidden: "" }, given(STUDY.tiles.attribution));
  const trouble = el("p", { role: "status" });
  const from = el("small", null, "from ", given(new URL(STUDY.tiles.url).host));
  const node = el(
    "div",
    { class: "images" },
    el("label", null, box, el("span", null, "Background images ", from)),
    source,
    trouble,
  );
  box.addEventListener("change", () => {
    source.hidden = !box.checked;
    trouble.textContent = "";
    switchTo(box.checked);
  });
  L.DomEvent.disableClickPropagation(node);
  return { node, trouble };
}

function addTiles(map) {
  if (!STUDY.tiles) return;
  const pane = map.createPane("images");
  pane.style.zIndex = 130;
  pane.style.pointerEvents = "none";
  pane.setAttribute("aria-hidden", "true");
  const layer = L.tileLayer(STUDY.tiles.url, { pane: "images" });
  // The land gives way to the images once there is one.
  const covered = (yes) => map.getContainer().classList.toggle("with-images", yes);
  const { node, trouble } = imagesControl((on) => {
    if (on) layer.addTo(map);
    else layer.remove();
    covered(false);
    // The control has changed its size, and labels keep clear of it.
    map.fire("resize");
  });
  layer.on("tileload", () => {
    trouble.textContent = "";
    covered(true);
  });
  layer.on("tileerror", () => {
    if (!map.getContainer().classList.contains("with-images"))
      trouble.textContent = "No image could be loaded.";
  });
  const control = L.control({ position: "bottomright" });
  control.onAdd = () => node;
  control.addTo(map);
}
