// scale.js: classes of a measure, their colours and their shapes.
//
// Colours: the sequential scheme "YlOrBr" of ColorBrewer 2.0 by Cynthia Brewer and Mark Harrower
// (Pennsylvania State University), which its authors mark as safe for colour-blind readers.
// On a dark ground the scheme runs the other way, so that the highest class stands out most there too.
// Each class also has its own shape, and the number stands beside it.

const YLORBR = {
  1: ["#fec44f"],
  2: ["#fff7bc", "#fe9929"],
  3: ["#fff7bc", "#fec44f", "#d95f0e"],
  4: ["#ffffd4", "#fed98e", "#fe9929", "#cc4c02"],
  5: ["#ffffd4", "#fed98e", "#fe9929", "#d95f0e", "#993404"],
  6: ["#ffffd4", "#fee391", "#fec44f", "#fe9929", "#d95f0e", "#993404"],
  7: ["#ffffd4", "#fee391", "#fec44f", "#fe9929", "#ec7014", "#cc4c02", "#8c2d04"],
  8: ["#ffffe5", "#fff7bc", "#fee391", "#fec44f", "#fe9929", "#ec7014", "#cc4c02", "#8c2d04"],
  9: ["#ffffe5", "#fff7bc", "#fee391", "#fec44f", "#fe9929", "#ec7014", "#cc4c02", "#993404", "#662506"],
};
const MOST_CLASSES = 9;
const DARK_GROUND = "#1a2024";

// Outlines around (0, 0) in a square of 26; the last one serves every further class.
const SHAPES = [
  "M0,-10.5A10.5,10.5 0 1 1 0,10.5A10.5,10.5 0 1 1 0,-10.5Z",
  "M-9.5,-9.5H9.5V9.5H-9.5Z",
  "M0,-13L13,0L0,13L-13,0Z",
  "M0,-12L13,10.5H-13Z",
  "M0,12L13,-10.5H-13Z",
  "M-6.5,-11.3H6.5L13,0L6.5,11.3H-6.5L-13,0Z",
];
const NO_DATA_SHAPE = "M-11,-11L11,11M-11,11L11,-11";

function luminance(colour) {
  const [r, g, b] = [1, 3, 5].map((at) => {
    const part = parseInt(colour.slice(at, at + 2), 16) / 255;
    return part <= 0.04045 ? part / 12.92 : ((part + 0.055) / 1.055) ** 2.4;
  });
  return 0.2126 * r + 0.7152 * g + 0.0722 * b;
}

// Black or white, whichever has the higher contrast (WCAG 2.2): they meet at luminance 0.179.
function inkOn(colour) {
  return luminance(colour) > 0.179 ? "#000000" : "#ffffff";
}

function mix(one, other) {
  const part = (colour, at) => parseInt(colour.slice(at, at + 2), 16);
  return (
    "#" +
    [1, 3, 5]
      .map((at) =>
        Math.round((part(one, at) + part(other, at)) / 2)
          .toString(16)
          .padStart(2, "0")
      )
      .join("")
  );
}

function colours(count, dark) {
  if (!dark) return YLORBR[count];
  // The two lightest steps glare on a dark ground; they serve only where the classes need them.
  const steps = YLORBR[MOST_CLASSES].slice(count > MOST_CLASSES - 2 ? 0 : 2).reverse();
  const chosen = Array.from(
    { length: count },
    (_, i) => steps[count === 1 ? 4 : Math.round((i * (steps.length - 1)) / (count - 1))]
  );
  // Half way to the ground: a whole grid of the lowest class must not glow.
  if (count > 1) chosen[0] = mix(chosen[0], DARK_GROUND);
  return chosen;
}

function colourRules(count, dark) {
  const rules = colours(count, dark).map((c, i) => "--fill-" + i + ":" + c + ";--ink-" + i + ":" + inkOn(c));
  return ":root{" + rules.join(";") + "}";
}

const scaleStyle = document.head.appendChild(el("style", null));

function applyColours(count) {
  scaleStyle.textContent =
    colourRules(count, false) +
    "@media screen and (prefers-color-scheme:dark){" +
    colourRules(count, true) +
    "}";
}

function edgeText(share) {
  return String(Number((share * 100).toFixed(2)));
}

function classLabels(edges, text, unit) {
  const words = edges.map(text);
  if (!words.length) return ["any value"];
  return [
    "< " + words[0] + unit,
    ...words.slice(1).map((word, i) => words[i] + "-" + word + unit),
    words[words.length - 1] + unit + " or more",
  ];
}

// Density altitude: round steps over all months and hours, so that a colour keeps its meaning.
function altitudeScale() {
  let [low, high] = [Infinity, -Infinity];
  for (const name of ["altitude_hour_p50", "altitude_hour_p90", "altitude_p50", "altitude_p90"]) {
    for (const value of ARRAYS[name]) {
      if (value === NO_FEET) continue;
      low = Math.min(low, value);
      high = Math.max(high, value);
    }
  }
  if (low > high) return { edges: [], labels: ["any value"] };
  const step = [500, 1000, 2000, 3000, 4000, 5000].find((size) => (high - low) / size <= 5) || 10000;
  const edges = [];
  for (let edge = (Math.floor(low / step) + 1) * step; edge <= high; edge += step) edges.push(edge);
  return { edges, labels: classLabels(edges, grouped, " ft") };
}

const ALTITUDE_SCALE = altitudeScale();
const SCALES = {
  shortfall: { edges: STUDY.bands, labels: classLabels(STUDY.bands, edgeText, " %") },
  median: ALTITUDE_SCALE,
  p90: ALTITUDE_SCALE,
};

// The class of a value: its place among the edges, or -1 for no data.
function classOf(measure, value) {
  if (value === null) return -1;
  return SCALES[measure].edges.filter((edge) => value >= edge).length;
}

function className(number) {
  return number < 0 ? "class-none" : "class-" + number;
}

function shapePath(number) {
  return number < 0 ? NO_DATA_SHAPE : SHAPES[Math.min(number, SHAPES.length - 1)];
}

// A wedge on the symbol of a field with a steep runway; it stays where a label finds no room.
const WEDGE = "M14,12H-1L14,1Z";

function symbol(number, steep) {
  return svg(
    "svg",
    { viewBox: "-15 -15 30 30", class: "symbol " + className(number), "aria-hidden": "true" },
    svg("path", { d: shapePath(number), class: "shape" }),
    steep ? wedge() : null
  );
}

function wedge() {
  return svg("path", { d: WEDGE, class: "wedge" });
}
