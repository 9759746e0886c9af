// dom.js: building elements. Text enters the page only as text nodes and attribute values.

const SVG_SPACE = "http://www.w3.org/2000/svg";

function byId(id) {
  return document.getElementById(id);
}

function fill(node, attributes, children) {
  for (const [name, value] of Object.entries(attributes || {})) {
    if (value !== null && value !== undefined && value !== false) node.setAttribute(name, value);
  }
  node.append(...children.flat().filter((child) => child !== null && child !== undefined));
  return node;
}

// el("td", {class: "number"}, "12 %"): an HTML element; null attributes and children are left out.
function el(tag, attributes, ...children) {
  return fill(document.createElement(tag), attributes, children);
}

function svg(tag, attributes, ...children) {
  return fill(document.createElementNS(SVG_SPACE, tag), attributes, children);
}

// Text from a file, kept from reordering what stands around it.
function given(text) {
  return el("bdi", { class: "given" }, String(text));
}

// The same, cut after a few lines where it is far too long for its place.
function clamped(text) {
  return el("bdi", { class: "given clamped", title: text }, String(text));
}

// The same for places that take a string only (option, aria-label, title): isolate characters.
function givenString(text) {
  return "\u2068" + text + "\u2069";
}

function section(heading, ...content) {
  return el("section", { class: "part" }, el("h3", null, heading), ...content);
}

function dataCell(content) {
  return el("td", { class: [content].flat()[0] === NO_DATA ? "none" : null }, content);
}

// A table from a caption, column heads and rows of cells; the first cell of a row is its head.
function table(caption, heads, rows, kind) {
  return el(
    "table",
    { class: kind || "plain-table" },
    el("caption", null, caption),
    el(
      "thead",
      null,
      el(
        "tr",
        null,
        heads.map((head) => el("th", { scope: "col" }, head)),
      ),
    ),
    el(
      "tbody",
      null,
      rows.map((row) =>
        el(
          "tr",
          null,
          row.map((cell, i) => (i ? dataCell(cell) : el("th", { scope: "row" }, cell))),
        ),
      ),
    ),
  );
}
