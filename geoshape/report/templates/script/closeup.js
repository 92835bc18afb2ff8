// One shape, closely: its outline with everything that is measured on it, its spectrum, and all its numbers.

const SIDE = 640, MARGIN = 56;
const closeRings = Object.fromEntries(["outline", "hull", "rectangle"].map((name) => [name, unpackRings(page.close[name])]));
const closeNumbers = {
  circle: float32(page.close.circle),
  ellipse: float32(page.close.ellipse),
  coefficients: float32(page.close.coefficients),
  beyond: float32(page.close.beyond),
  points: int16(page.close.points.xy),
  pointStep: float64(page.close.points.step),
};
const HARMONICS = page.close.harmonics;

// Z_k of a shape, k = -HARMONICS ... HARMONICS.
function coefficient(shape, k) {
  const at = 2 * (shape * (2 * HARMONICS + 1) + HARMONICS + k);
  return [closeNumbers.coefficients[at], closeNumbers.coefficients[at + 1]];
}

const amplitude = (shape, k) => Math.hypot(...coefficient(shape, k));

// z(t) = sum of Z_k exp(2 pi i k t), |k| up to K.
function rebuilt(shape, highest, steps = 360) {
  const points = [];
  for (let step = 0; step < steps; step++) {
    let x = 0, y = 0;
    for (let k = -highest; k <= highest; k++) {
      const [re, im] = coefficient(shape, k), angle = (2 * Math.PI * k * step) / steps;
      x += re * Math.cos(angle) - im * Math.sin(angle);
      y += re * Math.sin(angle) + im * Math.cos(angle);
    }
    points.push([x, y]);
  }
  return points;
}

// Root mean square distance between the outline and its first harmonics (Parseval).
function distanceLeft(shape, highest) {
  let power = closeNumbers.beyond[shape];
  for (let k = highest + 1; k <= HARMONICS; k++) power += amplitude(shape, k) ** 2 + amplitude(shape, -k) ** 2;
  return Math.sqrt(power);
}

function frameOf(shape) {
  const [x, y, radius] = closeNumbers.circle.subarray(3 * shape, 3 * shape + 3);
  if (!(radius > 0)) return null;
  let [west, east, south, north] = [x - radius, x + radius, y - radius, y + radius];
  for (const ring of closeRings.rectangle(shape)) {
    west = Math.min(west, ...ring.x); east = Math.max(east, ...ring.x);
    south = Math.min(south, ...ring.y); north = Math.max(north, ...ring.y);
  }
  const factor = (SIDE - 2 * MARGIN) / Math.max(east - west, north - south);
  return {
    factor,
    x: (value) => SIDE / 2 + (value - (west + east) / 2) * factor,
    y: (value) => SIDE / 2 - (value - (south + north) / 2) * factor,
  };
}

const at = (value) => value.toFixed(1);
const pathOf = (frame, rings) => rings.map((ring) => `M${ring.x.map((x, i) => `${at(frame.x(x))},${at(frame.y(ring.y[i]))}`).join("L")}z`).join("");

function layer(name, ...children) {
  const box = byId(`layer-${name}`);
  return draw("g", { class: `layer ${name}`, style: box && !box.checked ? "display:none" : null }, ...children);
}

function axesOf(shape, frame) {
  const [x, y, major, minor, azimuth] = closeNumbers.ellipse.subarray(5 * shape, 5 * shape + 5);
  if (!(major > 0) || Number.isNaN(azimuth)) return [];
  const angle = (azimuth * Math.PI) / 180;
  return [[major, Math.sin(angle), Math.cos(angle)], [minor, Math.cos(angle), -Math.sin(angle)]].map(([half, dx, dy]) =>
    draw("line", { x1: at(frame.x(x - half * dx)), y1: at(frame.y(y - half * dy)), x2: at(frame.x(x + half * dx)), y2: at(frame.y(y + half * dy)) }));
}

function pointsOf(shape, frame) {
  const { each } = page.close.points, step = closeNumbers.pointStep[shape], found = [];
  for (let i = 0; i < each; i++) {
    const x = step * closeNumbers.points[2 * (shape * each + i)], y = step * closeNumbers.points[2 * (shape * each + i) + 1];
    found.push(draw("circle", { cx: at(frame.x(x)), cy: at(frame.y(y)), r: i ? 2.4 : 5 }));
  }
  return found;
}

// A round length of about a quarter of the drawing.
function scaleBar(frame) {
  const raw = SIDE / 4 / frame.factor, power = 10 ** Math.floor(Math.log10(raw));
  const length = power * [5, 2, 1].find((factor) => power * factor <= raw);
  const unit = page.map.unit, text = unit === "m" && length >= 1000 ? `${numberText(length / 1000)} km` : `${numberText(length)} ${unit}`;
  const width = length * frame.factor, y = SIDE - 18;
  return draw("g", { class: "scale-bar" }, draw("path", { d: `M16,${y - 6}v6h${at(width)}v-6` }), draw("text", { x: 16 + width + 8, y: y + 1 }, text));
}

function northArrow() {
  return draw("g", { class: "north-arrow", transform: `translate(${SIDE - 28},44)` }, draw("path", { d: "M0,-22L7,8L0,3L-7,8z" }), draw("text", { x: 0, y: 24, "text-anchor": "middle" }, "N"));
}

function drawOutline(shape) {
  const svg = byId("closeup-drawing");
  const frame = frameOf(shape);
  byId("closeup-missing").hidden = Boolean(frame);
  svg.toggleAttribute("hidden", !frame);
  if (!frame) return;
  const [x, y, radius] = closeNumbers.circle.subarray(3 * shape, 3 * shape + 3);
  svg.replaceChildren(
    draw("title", {}, `Outline of ${page.labels[shape]} with what is measured on it`),
    layer("outline", draw("path", { d: pathOf(frame, closeRings.outline(shape)) })),
    layer("hull", draw("path", { d: pathOf(frame, closeRings.hull(shape)) })),
    layer("circle", draw("circle", { cx: at(frame.x(x)), cy: at(frame.y(y)), r: at(radius * frame.factor) })),
    layer("rectangle", draw("path", { d: pathOf(frame, closeRings.rectangle(shape)) })),
    layer("axes", ...axesOf(shape, frame)),
    layer("points", ...pointsOf(shape, frame)),
    layer("rebuilt", draw("path", { id: "rebuilt-path" })),
    scaleBar(frame),
    ...(byId("closeup-drawing").dataset.north === "up" ? [northArrow()] : []),
  );
  drawRebuilt();
}

function drawRebuilt() {
  const shape = chosen.shown, highest = Number(byId("harmonics").value), frame = frameOf(shape);
  if (!frame || !byId("rebuilt-path")) return;
  const text = `M${rebuilt(shape, highest).map(([x, y]) => `${at(frame.x(x))},${at(frame.y(y))}`).join("L")}z`;
  byId("rebuilt-path").setAttribute("d", text);
  const unit = page.map.unit;
  const pairs = highest === 1 ? "1 pair" : `${highest} pairs`;
  byId("harmonics-text").textContent = `${pairs}: ${numberText(distanceLeft(shape, highest), 3)} ${unit} off the outline (root mean square)`;
  byId("harmonics").setAttribute("aria-valuetext", byId("harmonics-text").textContent);
  byId("spectrum").querySelectorAll("rect").forEach((bar) => bar.classList.toggle("beyond", Math.abs(Number(bar.dataset.k)) > highest));
}

// Amplitudes on a logarithmic axis: the higher harmonics of any outline are small.
function drawSpectrum(shape) {
  const svg = byId("spectrum"), left = 84, right = 636, top = 12, bottom = 204, floor = -4;
  svg.replaceChildren(draw("title", {}, `Spectrum of ${page.labels[shape]}`));
  const size = amplitude(shape, 1);
  if (!(size > 0)) return;
  const shares = Array.from({ length: 2 * HARMONICS }, (_, i) => amplitude(shape, i < HARMONICS ? i + 1 : HARMONICS - i - 1) / size);
  // An outline that winds about itself has harmonics above the first.
  const ceiling = Math.max(Math.ceil(Math.log10(Math.max(...shares)) - 1e-9), 0);
  const y = (share) => top + ((bottom - top) * (ceiling - Math.log10(share))) / (ceiling - floor);
  for (let power = ceiling; power >= floor; power -= 1) {
    const level = y(10 ** power);
    svg.append(draw("line", { class: "grid", x1: left, x2: right, y1: level, y2: level }), draw("text", { x: left - 8, y: level + 6, "text-anchor": "end" }, `${numberText(100 * 10 ** power)} %`));
  }
  const slot = (right - left) / HARMONICS, bar = Math.min(slot * 0.36, 14);
  for (let k = 1; k <= HARMONICS; k++) {
    const middle = left + slot * (k - 0.5);
    for (const sign of [1, -1]) {
      const share = amplitude(shape, sign * k) / size;
      const height = share > 10 ** floor ? bottom - y(share) : 0;
      const mark = draw("rect", { "data-k": sign * k, class: sign > 0 ? "plus" : "minus", x: at(sign > 0 ? middle - bar : middle), y: at(bottom - height), width: at(bar), height: at(height) });
      mark.append(draw("title", {}, `k = ${sign * k}: ${numberText(100 * share, 3)} %`));
      svg.append(mark);
    }
    svg.append(draw("text", { x: at(middle), y: bottom + 22, "text-anchor": "middle" }, String(k)));
  }
  svg.append(draw("text", { x: (left + right) / 2, y: bottom + 48, "text-anchor": "middle" }, "harmonic k"));
}

function numberRow(field, shape) {
  const errorOf = (name) => (name ? valuesOf(fields.get(name))[shape] : NaN);
  const error = errorOf(field.error), bias = errorOf(field.bias);
  const value = isNumeric(field) ? valuesOf(field)[shape] : field.texts[shape];
  const shown = [textAt(field, shape, 5)];
  if (Number.isFinite(error)) shown.push(make("span", { class: "error" }, ` \u00b1\u00a0${withUnit(field, numberText(error, 2))}`));
  if (Number.isFinite(bias)) shown.push(make("span", { class: "error shift" }, `shift\u00a0${withUnit(field, numberText(bias, 2))}`));
  const meaning = field.meaning && field.family !== "attribute" ? make("span", { class: "meaning" }, field.meaning) : null;
  return make("tr", {}, make("th", { scope: "row" }, make("span", { class: "title" }, field.title), meaning),
    make("td", { class: isNumeric(field) ? "number" : null, "data-column": field.name, "data-value": value ?? "" }, ...shown));
}

function drawNumbers(shape) {
  const isOpen = new Map([...byId("closeup-numbers").querySelectorAll("details")].map((one) => [one.dataset.family, one.open]));
  const families = Object.entries(page.families).filter(([family]) => family !== "error");
  const blocks = families.map(([family, title]) => {
    const rows = page.fields.filter((field) => field.family === family).map((field) => numberRow(field, shape));
    const starts = !["moments", "spectrum", "record"].includes(family);
    return make("details", { "data-family": family, open: isOpen.get(family) ?? starts }, make("summary", {}, title),
      make("table", {}, make("caption", { class: "unseen" }, `${title}: ${page.labels[shape]}`),
        make("colgroup", {}, make("col", { class: "wide" }), make("col")), make("tbody", {}, ...rows)));
  });
  byId("closeup-numbers").replaceChildren(...blocks);
}

function showClosely(shape) {
  byId("closeup-name").textContent = page.labels[shape];
  const note = page.note[shape];
  const status = fields.get(`${page.prefix}shape_status`);
  byId("closeup-note").textContent = [`Row ${grouped(String(rowNumbers[shape] + 1))}`, status ? textAt(status, shape) : null, note].filter(Boolean).join(" \u00b7 ");
  byId("closeup-missing").textContent = `Nothing to draw${note ? `: ${note}` : ""}.`;
  drawSpectrum(shape);
  drawOutline(shape);
  drawNumbers(shape);
}

let lastShown = null;
onChoice(({ shown }) => {
  if (shown !== lastShown) showClosely(shown);
  lastShown = shown;
});

function step(by) {
  const order = table.order.length ? table.order : [...page.labels.keys()];
  const place = order.indexOf(chosen.shown);
  choose([order[(place + by + order.length) % order.length]]);
}

byId("shape-before").addEventListener("click", () => step(-1));
byId("shape-after").addEventListener("click", () => step(1));
byId("harmonics").max = HARMONICS;
byId("harmonics").addEventListener("input", drawRebuilt);
document.querySelectorAll("input[id^=layer-]").forEach((box) => box.addEventListener("change", () => {
  byId("closeup-drawing").querySelector(`.layer.${box.value}`)?.style.setProperty("display", box.checked ? "" : "none");
}));
