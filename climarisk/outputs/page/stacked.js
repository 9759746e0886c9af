// stacked.js: wide tables whose rows become cards on a narrow screen; their roles stand in them, as
// a row that is laid out as a card is no row to a reader any more.

function stackedTable(kind, caption, heads, rows) {
  const cell = (content, i) =>
    i
      ? el("td", { role: "cell", "data-head": heads[i] }, el("div", null, content))
      : el("th", { scope: "row", role: "rowheader" }, el("div", null, content));
  return el(
    "table",
    { class: "stacked " + kind, role: "table" },
    el("caption", null, caption),
    el(
      "thead",
      { role: "rowgroup" },
      el(
        "tr",
        { role: "row" },
        heads.map((head) => el("th", { scope: "col", role: "columnheader" }, head)),
      ),
    ),
    el(
      "tbody",
      { role: "rowgroup" },
      rows.map((row) => el("tr", { role: "row" }, row.map(cell))),
    ),
  );
}

// A button with the name of a field that opens it, and what warns of the field.
function fieldLink(index, actions) {
  const button = el("button", { type: "button", class: "plain-button" }, clamped(STUDY.fields[index].name));
  button.addEventListener("click", () => actions.open(index));
  const marks = warningMarks(STUDY.fields[index]);
  const told = el("span", { class: "marks" }, el("span", { class: "steep" }, marks.join(" \u00b7 ")));
  return el("span", { class: "named" }, button, marks.length ? told : null);
}

// What the mark of a steep field means, where one of the fields shown has it.
function steepWords(fields) {
  return fields.some((index) => index >= 0 && isSteep(STUDY.fields[index]))
    ? " \u201c" +
        STEEP_MARK +
        "\u201d: a runway of more than " +
        STUDY.steepPct +
        " % slope; no figure there is a pass."
    : "";
}

function choice(id, label, options, value, choose) {
  const select = el("select", { id }, options);
  select.value = value;
  select.addEventListener("change", () => {
    choose(select.value);
    draw();
    byId(id).focus();
  });
  return el("label", null, label + " ", select);
}
