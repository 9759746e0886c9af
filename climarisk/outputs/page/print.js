// print.js: what has to change before the page goes to paper, and back again.

// The list and the map as they are on paper: with intervals, and fitted to the fields.
function showPrinted(map) {
  draw();
  if (state.view) return; // no map there
  map.invalidateSize({ animate: false, pan: false });
  fitFields(map);
}

// What is collapsed in the method is opened. The map takes its size on paper (`printing`) before the
// browser lays the paper out, so that it can be fitted to the fields at that size.
function preparePrint(map) {
  let closed = [];
  let view = null;
  window.addEventListener("beforeprint", () => {
    closed = [...document.querySelectorAll("#method-part details:not([open])")];
    for (const details of closed) details.open = true;
    view = { centre: map.getCenter(), zoom: map.getZoom() };
    document.documentElement.classList.add("printing");
    showPrinted(map);
  });
  window.addEventListener("afterprint", () => {
    for (const details of closed) details.open = false;
    document.documentElement.classList.remove("printing");
    draw();
    if (state.view) return;
    map.invalidateSize({ animate: false, pan: false });
    if (view) map.setView(view.centre, view.zoom, { animate: false });
  });
}
