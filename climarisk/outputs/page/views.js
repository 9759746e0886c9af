// views.js: the overviews of the whole study beside the list of fields, and the way to them.

const OVERVIEWS = {};
if (PLANNING.hasBases) OVERVIEWS.bases = { name: "Bases", content: basesView };
if (PLANNING.schedule) OVERVIEWS.schedule = { name: "Schedule", content: scheduleView };

function fillViews(actions) {
  const names = Object.entries(OVERVIEWS).map(([key, { name }]) => [key, name]);
  if (!names.length) return;
  for (const [key, name] of [["", "Fields"], ...names]) {
    const button = el("button", { type: "button", "data-view": key }, name);
    button.addEventListener("click", () => actions.overview(key));
    byId("views").append(button);
  }
}

function showViews() {
  for (const button of byId("views").children) {
    if (button.dataset.view === state.view) button.setAttribute("aria-current", "page");
    else button.removeAttribute("aria-current");
  }
}
