// chart.js: a band from the 10th to the 90th percentile with the median, month by month, as inline SVG.

const PLOT = { width: 380, height: 190, left: 46, right: 8, top: 12, bottom: 24 };

function axisStep(span) {
  const size = 10 ** Math.floor(Math.log10(span / 4));
  return size * [1, 2, 5, 10].find((factor) => span / (factor * size) <= 5);
}

// Runs of months that follow one another without a gap.
function monthRuns(values) {
  const runs = [];
  values.forEach((value, month) => {
    if (value === null) return;
    if (month && values[month - 1] !== null) runs[runs.length - 1].push(month);
    else runs.push([month]);
  });
  return runs;
}

// series: {low, middle, high}, each 12 numbers or null in the unit of the axis; reference: {value, text} or null.
function bandChart(title, series, axisText, reference, limits) {
  const all = [...series.low, ...series.middle, ...series.high, reference && reference.value].filter(
    (v) => v !== null
  );
  let [bottom, top] = limits || [Math.min(...all), Math.max(...all)];
  const step = axisStep(Math.max(top - bottom, 1));
  [bottom, top] = [Math.floor(bottom / step) * step, Math.ceil(top / step) * step];
  const right = PLOT.width - PLOT.right;
  const x = (month) => PLOT.left + ((month + 0.5) * (right - PLOT.left)) / 12;
  const y = (value) =>
    PLOT.top + ((top - value) / (top - bottom || 1)) * (PLOT.height - PLOT.top - PLOT.bottom);
  const chart = svg(
    "svg",
    {
      viewBox: "0 0 " + PLOT.width + " " + PLOT.height,
      class: "band-chart",
      role: "img",
      "aria-label": title,
    },
    svg("title", null, title)
  );
  for (let value = bottom; value <= top + step / 2; value += step) {
    chart.append(
      svg("line", { x1: PLOT.left, x2: right, y1: y(value), y2: y(value), class: "rule" }),
      svg("text", { x: PLOT.left - 6, y: y(value) + 4, "text-anchor": "end" }, axisText(value))
    );
  }
  MONTHS.forEach((name, month) =>
    chart.append(svg("text", { x: x(month), y: PLOT.height - 6, "text-anchor": "middle" }, name))
  );
  for (const run of monthRuns(series.middle)) drawRun(chart, run, series, x, y);
  if (reference) {
    chart.append(
      svg("line", {
        x1: PLOT.left,
        x2: right,
        y1: y(reference.value),
        y2: y(reference.value),
        class: "reference",
      }),
      svg(
        "text",
        { x: right - 2, y: y(reference.value) - 4, "text-anchor": "end", class: "reference-text" },
        reference.text
      )
    );
  }
  return chart;
}

function drawRun(chart, run, series, x, y) {
  const half = run.length === 1 ? 5 : 0;
  const upper = run
    .map((m) => [
      [x(m) - half, y(series.high[m])],
      [x(m) + half, y(series.high[m])],
    ])
    .flat();
  const lower = run
    .map((m) => [
      [x(m) - half, y(series.low[m])],
      [x(m) + half, y(series.low[m])],
    ])
    .flat()
    .reverse();
  const line = run.map((m) => [x(m), y(series.middle[m])]);
  const points = (list) => list.map((point) => point.map((v) => v.toFixed(1)).join(",")).join(" ");
  chart.append(
    svg("polygon", { points: points([...upper, ...lower]), class: "band" }),
    svg("polyline", { points: points(line), class: "middle" }),
    ...line.map(([cx, cy]) => svg("circle", { cx: cx.toFixed(1), cy: cy.toFixed(1), r: 2.6, class: "dot" }))
  );
}
