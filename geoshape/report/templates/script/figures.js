// The linked figures: outlines and values go into one source, so what is selected in one is selected in all.

const axes = { histogram: { x: null, y: null }, scatter: { x: null, y: null } };
let models = null;
let extent = [Infinity, -Infinity, Infinity, -Infinity];

// Shapes smaller than this on the screen are shown as dots, else their colour would drown in their outline.
const DOT_PIXELS = 5;
let sizes = null;

function boxOf(rings) {
  let [west, east, south, north] = [Infinity, -Infinity, Infinity, -Infinity];
  for (const { x, y } of rings) {
    for (const v of x) { if (v < west) west = v; if (v > east) east = v; }
    for (const v of y) { if (v < south) south = v; if (v > north) north = v; }
  }
  return [west, east, south, north];
}

function mapOutlines() {
  const ringsOf = unpackRings(page.map.outline);
  const xs = [], ys = [], cx = [], cy = [];
  sizes = new Float64Array(page.count);
  for (let shape = 0; shape < page.count; shape++) {
    const shapeX = [], shapeY = [];
    const rings = ringsOf(shape);
    const [west, east, south, north] = boxOf(rings);
    cx.push(rings.length ? (west + east) / 2 : NaN);
    cy.push(rings.length ? (south + north) / 2 : NaN);
    sizes[shape] = rings.length ? Math.max(east - west, north - south) : Infinity;
    if (rings.length) extent = [Math.min(extent[0], west), Math.max(extent[1], east), Math.min(extent[2], south), Math.max(extent[3], north)];
    for (const ring of rings) {
      if (!ring.isHole) { shapeX.push([]); shapeY.push([]); }
      shapeX[shapeX.length - 1].push(ring.x);
      shapeY[shapeY.length - 1].push(ring.y);
    }
    xs.push(shapeX);
    ys.push(shapeY);
  }
  return { xs, ys, cx, cy };
}

// Place of a value between 0 and 1 among the column's quantiles.
function rankOf(steps, value) {
  let low = 0, high = steps.length - 1;
  while (high - low > 1) {
    const middle = (low + high) >> 1;
    if (steps[middle] <= value) low = middle; else high = middle;
  }
  const width = steps[high] - steps[low];
  return (low + (width > 0 ? Math.min(Math.max((value - steps[low]) / width, 0), 1) : 0.5)) / (steps.length - 1);
}

function placeOn(field, spread) {
  const steps = quantilesOf(field);
  if (spread === "rank") return (value) => rankOf(steps, value);
  const along = field.log ? Math.log10 : (value) => value;
  const low = along(steps[0]), width = along(steps[steps.length - 1]) - low;
  return (value) => (width > 0 ? (along(value) - low) / width : 0.5);
}

function classColour(field, text) {
  if (text === null) return null;
  return page.colours.classes[field.classes.indexOf(text)] ?? page.colours.other;
}

function classTexts(field) {
  if (!isNumeric(field)) return field.texts;
  return Array.from(valuesOf(field), (value) => (Number.isNaN(value) ? null : String(value)));
}

function coloursOf(field, spread) {
  if (field.classes) return classTexts(field).map((text) => classColour(field, text));
  const place = placeOn(field, spread), ramp = page.colours.ramp;
  return Array.from(valuesOf(field), (value) =>
    Number.isNaN(value) ? null : ramp[Math.round(Math.min(Math.max(place(value), 0), 1) * (ramp.length - 1))]);
}

function colourMap() {
  const field = fields.get(byId("map-column").value);
  const spread = byId("map-spread").value;
  byId("map-spread").disabled = Boolean(field.classes);
  drawLegend(field, spread);
  if (!models) return;
  const colours = coloursOf(field, spread);
  const shapes = [...colours.keys()];
  models.known.view.filter.indices = shapes.filter((shape) => colours[shape] !== null);
  models.unknown.view.filter.indices = shapes.filter((shape) => colours[shape] === null);
  models.shapes.data = {
    ...models.shapes.data,
    fill: colours.map((colour) => colour ?? page.colours.null),
    value: colours.map((_, shape) => `${field.title} ${textAt(field, shape)}`),
  };
}

function drawLegend(field, spread) {
  const legend = byId("map-legend");
  legend.replaceChildren(make("p", { class: "legend-title" }, titleWithUnit(field)));
  const hasNull = field.classes ? classTexts(field).includes(null) : valuesOf(field).some(Number.isNaN);
  if (field.classes) {
    const keys = field.classes.map((text) =>
      make("li", {}, make("span", { class: "swatch", style: `background:${classColour(field, text)}` }), text));
    if (hasNull) keys.push(nullKey());
    legend.append(make("ul", { class: "keys" }, ...keys));
    return;
  }
  const stops = page.colours.ramp.filter((_, i) => i % 15 === 0).join(",");
  const ticks = make("div", { class: "ticks" });
  const steps = quantilesOf(field), last = steps.length - 1;
  for (const share of [0, 0.25, 0.5, 0.75, 1]) {
    let value = steps[Math.round(share * last)];
    if (spread === "value") {
      value = field.log
        ? 10 ** (Math.log10(steps[0]) + share * (Math.log10(steps[last]) - Math.log10(steps[0])))
        : steps[0] + share * (steps[last] - steps[0]);
    }
    ticks.append(make("span", { style: `left:${100 * share}%` }, numberText(value, 3)));
  }
  const how = spread === "rank" ? "equal steps of rank" : field.log ? "logarithmic" : "equal steps of value";
  legend.append(
    make("div", { class: "ramp-frame" }, make("div", { class: "ramp", style: `background:linear-gradient(90deg,${stops})` }), ticks),
    make("ul", { class: "keys" }, make("li", { class: "quiet" }, how), ...(hasNull ? [nullKey()] : [])),
  );
}

const nullKey = () => make("li", {}, make("span", { class: "swatch hatched" }), "no value");

// Keep a metre as long upwards as sideways, whatever the window; at first, leave room below for the scale bar.
function fitMap(keepsView) {
  const { map } = models;
  const width = map.inner_width, height = map.inner_height;
  if (!(width > 0 && height > 0)) return;
  const room = keepsView ? 0 : Math.min(SCALE_BAR_ROOM, height / 4);
  let [west, east, south, north] = extent;
  if (keepsView) [west, east, south, north] = [map.x_range.start, map.x_range.end, map.y_range.start, map.y_range.end];
  const each = keepsView ? (east - west) / width : 1.04 * Math.max((east - west) / width, (north - south) / (height - room));
  const middleX = (west + east) / 2, middleY = (south + north) / 2 - (each * room) / 2;
  const view = [middleX - (each * width) / 2, middleX + (each * width) / 2, middleY - (each * height) / 2, middleY + (each * height) / 2];
  map.x_range.setv({ start: view[0], end: view[1] });
  map.y_range.setv({ start: view[2], end: view[3] });
  if (keepsView) return;
  map.x_range.setv({ reset_start: view[0], reset_end: view[1] });
  map.y_range.setv({ reset_start: view[2], reset_end: view[3] });
}

const SCALE_BAR_ROOM = 64;
let waiting = null;

function drawDots() {
  const each = (models.map.x_range.end - models.map.x_range.start) / models.map.inner_width;
  const small = [...sizes.keys()].filter((shape) => sizes[shape] < DOT_PIXELS * each);
  const before = models.dots.view.filter.indices;
  if (small.length !== before.length || small.some((shape, i) => shape !== before[i])) models.dots.view.filter.indices = small;
}

function drawDotsSoon() {
  clearTimeout(waiting);
  waiting = setTimeout(drawDots, 120);
}

function setAxis(plot, side, title, low, high, isLog) {
  axes[plot][side] = { isLog };
  const model = models[plot];
  const axis = (side === "x" ? model.below : model.left)[0];
  const range = side === "x" ? model.x_range : model.y_range;
  range.setv({ start: low, end: high, reset_start: low, reset_end: high, bounds: null });
  axis.axis_label.text = title;
  axis.axis_label = axis.axis_label;
  axis.change.emit();
}

function drawHistogram() {
  const field = fields.get(byId("histogram-column").value);
  const { start, step, counts } = field.bins;
  const left = counts.map((_, i) => start + i * step);
  models.bars.data = { left, right: left.map((x) => x + step), top: counts };
  const width = step * counts.length;
  setAxis("histogram", "x", titleWithUnit(field), start - 0.02 * width, start + 1.02 * width, field.log);
  setAxis("histogram", "y", "shapes", 0, 1.06 * Math.max(...counts), false);
  countChosen();
}

function binOf(field, value) {
  if (Number.isNaN(value)) return -1;
  const { start, step, counts } = field.bins;
  return Math.min(Math.max(Math.floor(((field.log ? Math.log10(value) : value) - start) / step), 0), counts.length - 1);
}

function countChosen() {
  const field = fields.get(byId("histogram-column").value);
  const values = valuesOf(field), counts = field.bins.counts.map(() => 0);
  for (const shape of chosen.shapes) { const bin = binOf(field, values[shape]); if (bin >= 0) counts[bin]++; }
  const { left, right } = models.bars.data;
  models.chosenBars.data = { left, right, top: counts };
}

function drawScatter() {
  const places = ["x", "y"].map((side) => {
    const field = fields.get(byId(`scatter-${side}`).value);
    const values = Array.from(valuesOf(field), (value) => (field.log ? Math.log10(value) : value));
    const known = values.filter((value) => !Number.isNaN(value));
    const low = known.reduce((a, b) => Math.min(a, b), Infinity), high = known.reduce((a, b) => Math.max(a, b), -Infinity);
    const pad = 0.05 * (high - low || 1);
    if (known.length) setAxis("scatter", side, titleWithUnit(field), low - pad, high + pad, field.log);
    return values;
  });
  models.shapes.data = { ...models.shapes.data, px: places[0], py: places[1] };
}

// Round steps, or powers of ten with twos and fives where they would be few.
function ticks(plot, side, range) {
  const axis = axes[plot][side];
  const [low, high] = [range.start, range.end];
  if (!axis || !(high > low)) return [];
  if (axis.isLog && high - low > 0.6) {
    const ticksWith = (factors) => {
      const found = [];
      for (let power = Math.floor(low); power <= Math.ceil(high); power++)
        for (const factor of factors) found.push(power + Math.log10(factor));
      return found.filter((tick) => tick >= low && tick <= high);
    };
    const few = [[1], [1, 3], [1, 2, 5]].map(ticksWith).filter((found) => found.length <= 5);
    const most = few.length ? few[few.length - 1] : ticksWith([1]);
    const each = Math.ceil(most.length / 5);
    return most.filter((_, i) => i % each === 0);
  }
  const power = 10 ** Math.floor(Math.log10(high - low));
  const about = side === "x" ? 5 : 4;
  const inside = (step) => Math.floor(high / step) - Math.ceil(low / step) + 1;
  const step = [5, 2, 1, 0.5, 0.2, 0.1].map((factor) => factor * power)
    .reduce((best, next) => (Math.abs(inside(next) - about) < Math.abs(inside(best) - about) ? next : best));
  const found = [];
  for (let i = Math.ceil(low / step); i * step <= high; i++) found.push(Number((i * step).toPrecision(12)));
  return found;
}

function tickText(plot, side, tick) {
  const value = axes[plot][side]?.isLog ? 10 ** tick : tick, size = Math.abs(value);
  if (size < 1e6 || size >= 1e15) return numberText(value, 3);
  const power = Math.floor(Math.log10(size) + 1e-9), mantissa = numberText(value / 10 ** power, 3);
  const raised = "10" + [...String(power)].map((digit) => "\u2070\u00b9\u00b2\u00b3\u2074\u2075\u2076\u2077\u2078\u2079"[digit]).join("");
  return mantissa === "1" ? raised : `${mantissa}\u00d7${raised}`;
}

// Under a finger a figure scrolls with the page, until the reader picks a tool.
function letTouchScroll() {
  if (!matchMedia("(pointer: coarse)").matches) return;
  for (const plot of [models.map, models.histogram, models.scatter])
    for (const tool of plot.toolbar.tools) if (tool.active && tool.event_types.includes("pan")) tool.active = false;
}

function onReady(given) {
  models = given;
  letTouchScroll();
  const outlines = mapOutlines();
  if (!(extent[0] <= extent[1])) extent = [0, 1, 0, 1];
  const empty = page.labels.map(() => NaN);
  models.shapes.data = { ...outlines, fill: page.labels.map(() => page.colours.null), px: empty, py: empty, label: page.labels, value: page.labels };
  colourMap();
  fitMap(false);
  for (const side of ["inner_width", "inner_height"]) {
    let wasFitted = models.map.inner_width > 0;
    models.map.properties[side].change.connect(() => { fitMap(wasFitted); wasFitted = true; });
  }
  models.map.x_range.properties.start.change.connect(drawDotsSoon);
  drawDots();
  if (byId("histogram-column").value) drawHistogram();
  if (byId("scatter-x").value && byId("scatter-y").value) drawScatter();
  document.documentElement.dataset.figures = "ready";
}

// Callbacks come late: what is chosen already was chosen elsewhere.
function onFigures(indices) {
  const isKnown = indices.length === chosen.shapes.length && indices.every((shape, i) => shape === chosen.shapes[i]);
  if (!isKnown) choose([...indices]);
}

function onBars(indices) {
  if (!indices.length) return;
  const field = fields.get(byId("histogram-column").value), values = valuesOf(field), bins = new Set(indices);
  choose([...values.keys()].filter((shape) => bins.has(binOf(field, values[shape]))));
}

onChoice(({ shapes }) => {
  if (!models) return;
  models.shapes.selected.indices = shapes;
  models.bars.selected.indices = [];
  if (byId("histogram-column").value) countChosen();
});

const isColour = (field) => isNumeric(field) || field.classes;
fillSelect(byId("map-column"), isColour, page.mapColumn);
fillSelect(byId("histogram-column"), isNumeric, page.mapColumn);
fillSelect(byId("scatter-x"), isNumeric, page.pair[0]);
fillSelect(byId("scatter-y"), isNumeric, page.pair[1] ?? page.pair[0]);

byId("map-column").addEventListener("change", () => {
  colourMap();
  const field = fields.get(byId("map-column").value);
  if (isNumeric(field)) { byId("histogram-column").value = field.name; drawHistogram(); }
});
byId("map-spread").addEventListener("change", colourMap);
byId("histogram-column").addEventListener("change", drawHistogram);
for (const side of ["x", "y"]) byId(`scatter-${side}`).addEventListener("change", drawScatter);
