// chart.js: bands and lines over the months or the hours, as inline SVG.

const PLOT = { width: 380, height: 190, left: 46, right: 8, top: 12, bottom: 24 };

function axisStep(span) {
  const size = 10 ** Math.floor(Math.log10(span / 4));
  return size * [1, 2, 5, 10].find((factor) => span / (factor * size) <= 5);
}

// Runs of places that follow one another without a gap.
function runsOf(values) {
  const runs = [];
  values.forEach((value, place) => {
    if (value === null) return;
    if (place && values[place - 1] !== null) runs[runs.length - 1].push(place);
    else runs.push([place]);
  });
  return runs;
}

// An empty chart with its axes: {node, x(place), y(value)}. `ticks` are the texts of the places,
// empty where a place has none.
function makePlot(title, values, ticks, axisText, limits) {
  let [bottom, top] = limits || [Math.min(...values), Math.max(...values)];
  const step = axisStep(Math.max(top - bottom, limits ? limits[1] : 1));
  [bottom, top] = [Math.floor(bottom / step) * step, Math.ceil(top / step) * step];
  if (bottom === top) top = bottom + step;
  const right = PLOT.width - PLOT.right;
  const x = (place) => PLOT.left + ((place + 0.5) * (right - PLOT.left)) / ticks.length;
  const y = (value) => PLOT.top + ((top - value) / (top - bottom)) * (PLOT.height - PLOT.top - PLOT.bottom);
  const node = svg(
    "svg",
    {
      viewBox: "0 0 " + PLOT.width + " " + PLOT.height,
      class: "band-chart",
      role: "img",
      "aria-label": title,
    },
    svg("title", null, title),
  );
  for (let value = bottom; value <= top + step / 2; value += step) {
    node.append(
      svg("line", { x1: PLOT.left, x2: right, y1: y(value), y2: y(value), class: "rule" }),
      svg("text", { x: PLOT.left - 6, y: y(value) + 4, "text-anchor": "end" }, axisText(value)),
    );
  }
  ticks.forEach((text, place) => {
    if (text) node.append(svg("text", { x: x(place), y: PLOT.height - 6, "text-anchor": "middle" }, text));
  });
  return { node, x, y };
}

// A level line with its name: {value, text, kind}.
function drawReference(plot, { value, text, kind }) {
  const right = PLOT.width - PLOT.right;
  const y = plot.y(value);
  plot.node.append(
    svg("line", { x1: PLOT.left, x2: right, y1: y, y2: y, class: "reference " + kind }),
    svg("text", { x: right - 2, y: y - 4, "text-anchor": "end", class: "reference-text" }, text),
  );
}

// series: {low, middle, high}, each 12 numbers or null in the unit of the axis.
function bandChart(title, series, axisText, references, limits) {
  const all = [...series.low, ...series.middle, ...series.high, ...references.map(({ value }) => value)];
  const values = all.filter((value) => value !== null);
  const plot = makePlot(title, values, MONTHS, axisText, limits);
  for (const run of runsOf(series.middle)) drawBand(plot, run, series);
  for (const reference of references) drawReference(plot, reference);
  return plot.node;
}

function points(list) {
  return list.map((point) => point.map((v) => v.toFixed(1)).join(",")).join(" ");
}

function drawBand({ node, x, y }, run, series) {
  const half = run.length === 1 ? 5 : 0;
  const edge = (values) =>
    run.flatMap((month) => [
      [x(month) - half, y(values[month])],
      [x(month) + half, y(values[month])],
    ]);
  const line = run.map((month) => [x(month), y(series.middle[month])]);
  node.append(
    svg("polygon", { points: points([...edge(series.high), ...edge(series.low).reverse()]), class: "band" }),
    svg("polyline", { points: points(line), class: "middle" }),
    ...line.map(([cx, cy]) => svg("circle", { cx: cx.toFixed(1), cy: cy.toFixed(1), r: 2.6, class: "dot" })),
  );
}

// Each line has its own shape of dot and its own dashes beside its colour.
const LINE_SHAPES = [
  "M0,-3.4A3.4,3.4 0 1 1 0,3.4A3.4,3.4 0 1 1 0,-3.4Z",
  "M-3.1,-3.1H3.1V3.1H-3.1Z",
  "M0,-4.2L4.2,3.4H-4.2Z",
  "M0,-4.5L4.5,0L0,4.5L-4.5,0Z",
];

function lineDot(number, x, y) {
  return svg("path", {
    d: LINE_SHAPES[number],
    transform: "translate(" + x.toFixed(1) + "," + y.toFixed(1) + ")",
    class: "line-dot line-" + number,
  });
}

function lineSample(number) {
  return svg(
    "svg",
    { viewBox: "0 0 34 12", class: "line-sample", "aria-hidden": "true" },
    svg("polyline", { points: "1,6 33,6", class: "line line-" + number }),
    lineDot(number, 17, 6),
  );
}

// series: up to four of {values, low, high} over the ticks; low and high may be null.
function lineChart(title, series, ticks, axisText, limits) {
  const all = series.flatMap(({ values, low, high }) => [...values, ...(low || []), ...(high || [])]);
  const known = all.filter((value) => value !== null);
  if (!known.length) return null;
  const plot = makePlot(title, known, ticks, axisText, limits);
  series.forEach((one, number) => drawWhiskers(plot, one, number, series.length));
  series.forEach((one, number) => drawLine(plot, one, number));
  return plot.node;
}

function drawLine({ node, x, y }, { values }, number) {
  for (const run of runsOf(values)) {
    const line = run.map((place) => [x(place), y(values[place])]);
    node.append(
      svg("polyline", { points: points(line), class: "line line-" + number }),
      ...line.map(([cx, cy]) => lineDot(number, cx, cy)),
    );
  }
}

// Intervals, a little beside each other so that none hides another.
function drawWhiskers({ node, x, y }, { low, high }, number, count) {
  if (!low) return;
  low.forEach((value, place) => {
    if (value === null || high[place] === null) return;
    const at = (x(place) + (number - (count - 1) / 2) * 4).toFixed(1);
    node.append(
      svg("line", {
        x1: at,
        x2: at,
        y1: y(value).toFixed(1),
        y2: y(high[place]).toFixed(1),
        class: "whisker line-" + number,
      }),
    );
  });
}
