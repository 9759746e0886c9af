// scale.js: classes of a measure, their colours and their shapes.
//
// Colours and shapes come with the study (climarisk/outputs/colours.py). On a dark ground the scheme runs the other way, so that the highest class stands out most there too.
// Each class also has its own shape, and the number stands beside it.

const { classes: YLORBR, shapes: SHAPES, noData: NO_DATA_SHAPE } = STUDY.palette;
const MOST_CLASSES = 9;
const DARK_GROUND = "#1a2024";

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
          .padStart(2, "0"),
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
    (_, i) => steps[count === 1 ? 4 : Math.round((i * (steps.length - 1)) / (count - 1))],
  );
  // Half way to the ground: a whole grid of the lowest class must not glow.
  if (count > 1) chosen[0] = mix(chosen[0], DARK_GROUND);
  return chosen;
}

function colourRules(scope, count, dark) {
  const rules = colours(count, dark).map((c, i) => "--fill-" + i + ":" + c + ";--ink-" + i + ":" + inkOn(c));
  return scope + "{" + rules.join(";") + "}";
}

const scaleStyle = document.head.appendChild(el("style", null));

function edgeText(share) {
  return String(Number((share * 100).toFixed(2)));
}

function classLabels(edges, text, unit) {
  const words = edges.map(text);
  if (!words.length) return ["any value"];
  return [
    "< " + words[0] + unit,
    ...words.slice(1).map((word, i) => words[i] + (edges[i] < 0 ? " to " : "-") + word + unit),
    words[words.length - 1] + unit + " or more",
  ];
}

// Round edges over the range of all values, so that a colour keeps its meaning from view to view.
function steppedEdges(values, steps) {
  const [low, high] = [Math.min(...values), Math.max(...values)];
  if (!values.length) return [];
  const step = steps.find((size) => (high - low) / size <= 5) || steps[steps.length - 1];
  const edges = [];
  for (let edge = (Math.floor(low / step) + 1) * step; edge <= high; edge += step) edges.push(edge);
  return edges.slice(-(MOST_CLASSES - 1));
}

function altitudeScale() {
  const seen = new Set();
  for (const name of ["hour_p50", "hour_p90", "month_p50", "month_p90", "season_p50", "season_p90"])
    ARRAYS["altitude_" + name].forEach((_, place) => seen.add(altitudeAt("altitude_" + name, place)));
  const feet = [...seen].filter((value) => value !== null);
  const edges = steppedEdges(feet, [500, 1000, 2000, 3000, 4000, 5000, 10000]);
  return { edges, labels: classLabels(edges, grouped, " ft") };
}

// Of usable hours few are bad: the classes run the other way, so that the worst stands out.
function usableScale(values, unit) {
  return fewIsWorse(steppedEdges([0, ...values], [25, 50, 100, 250, 500, 1000, 2500]), unit);
}

function fewIsWorse(edges, unit) {
  return { edges, labels: classLabels(edges, grouped, unit).reverse(), fewIsWorse: true };
}

function shareScale(edges) {
  return { edges, labels: classLabels(edges, edgeText, " %") };
}

function knownHours(name) {
  return [...new Set(ARRAYS[name])].filter((hours) => hours !== NO_WORD);
}

const ALTITUDE_SCALE = altitudeScale();
const ICING_SCALE = shareScale(STUDY.edges.nearSaturation);
const SCALES = {
  shortfall: shareScale(STUDY.bands),
  "usable month": usableScale(knownHours("month_offered"), " h"),
  "usable season": usableScale(knownHours("season_offered"), " h"),
  "usable hour": fewIsWorse([7, 14, 21, 28], " days") /* weeks: a whole February is a whole month */,
  median: ALTITUDE_SCALE,
  p90: ALTITUDE_SCALE,
  humidity: shareScale(STUDY.edges.humidity),
  "near-saturation": shareScale(STUDY.edges.nearSaturation),
};

function scaleOf(measure, time) {
  if (measure === "weight") return weightScale(STUDY.aircraft[state.aircraft]);
  return SCALES[measure === "usable" ? "usable " + time : measure];
}

// The colours of the map and the list, and those of the grids of a field, whose scales may have
// other numbers of classes.
const COLOURED = { ".icing-scale": ICING_SCALE, ".share-scale": SCALES.shortfall };

function applyColours(count, gridCount) {
  const fixed = Object.entries(COLOURED).map(([scope, { labels }]) => [scope, labels.length]);
  const scopes = [[":root", count], [".own-scale", gridCount], ...fixed];
  const rules = (dark) => scopes.map(([scope, number]) => colourRules(scope, number, dark)).join("");
  scaleStyle.textContent =
    rules(false) + "@media screen and (prefers-color-scheme:dark){" + rules(true) + "}";
}

// The scale of the map and the list; each drawing sets it.
let shownScale = SCALES.shortfall;

function showScale(measure, time, gridTime) {
  shownScale = scaleOf(measure, time);
  applyColours(shownScale.labels.length, scaleOf(measure, gridTime).labels.length);
}

// The class of a value: its place among the edges, the worst highest, or -1 for no data.
function classIn(scale, value) {
  if (value === null) return -1;
  const place = scale.edges.filter((edge) => value >= edge).length;
  return scale.fewIsWorse ? scale.edges.length - place : place;
}

function classOf(measure, value) {
  return classIn(shownScale, value);
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
    steep ? wedge() : null,
  );
}

function wedge() {
  return svg("path", { d: WEDGE, class: "wedge" });
}
