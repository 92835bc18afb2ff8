// The contact sheet: one size or one scale, and a row for any column; then printing and copying.

function setScale() {
  const isOne = byId("one-scale").checked;
  document.querySelectorAll(".sheet").forEach((sheet) => sheet.classList.toggle("to-scale", isOne));
}

function tileOf(shape, place, caption, scale) {
  const rings = closeRings.outline(shape);
  const x = rings.flatMap((ring) => ring.x), y = rings.flatMap((ring) => ring.y);
  if (!x.length) return null;
  const low = (values) => values.reduce((a, b) => Math.min(a, b)), high = (values) => values.reduce((a, b) => Math.max(a, b));
  const [west, east, south, north] = [low(x), high(x), low(y), high(y)];
  const factor = 180 / Math.max(east - west, north - south);
  const frame = { x: (value) => (value - (west + east) / 2) * factor, y: (value) => ((south + north) / 2 - value) * factor };
  const svg = draw("svg", { viewBox: "-100 -100 200 200", "aria-hidden": "true" }, draw("path", { d: pathOf(frame, rings), style: `--scale:${scale}` }));
  return make("li", { class: `tile ${place}` }, make("button", { type: "button", "data-shape": shape, "data-jump": "" }, svg,
    make("span", { class: "label" }, page.labels[shape]), make("span", { class: "value" }, caption)));
}

const sizeOf = (shape) => closeNumbers.pointStep[shape] * 32767;

function drawAnyRow() {
  const field = fields.get(byId("sheet-column").value);
  const kinds = ["lowest", "typical", "highest"];
  const largest = Math.max(...field.ends.flat().map(sizeOf), 0);
  const tiles = field.ends.flatMap((shapes, i) => shapes.map((shape) =>
    tileOf(shape, kinds[i], textAt(field, shape, 3), sizeOf(shape) / largest)));
  byId("sheet-any").replaceChildren(...tiles.filter(Boolean));
  byId("sheet-any-note").textContent = `${field.name}${field.unit ? `, ${field.unit}` : ""}: ${field.meaning}`;
}

if (byId("sheet-column")) {
  fillSelect(byId("sheet-column"), (field) => Boolean(field.ends), page.fields.find((field) => field.ends && field.family !== "record")?.name);
  byId("sheet-column").addEventListener("change", drawAnyRow);
  if (byId("sheet-column").value) drawAnyRow();
}
document.querySelectorAll("input[name=sheet-scale]").forEach((box) => box.addEventListener("change", setScale));
setScale();

// On paper nothing can be opened: what is folded is unfolded first.
let folded = [];
window.addEventListener("beforeprint", () => {
  folded = [...document.querySelectorAll("details:not([open])")];
  folded.forEach((one) => (one.open = true));
});
window.addEventListener("afterprint", () => folded.forEach((one) => (one.open = false)));

byId("copy-method")?.addEventListener("click", async () => {
  const paragraph = byId("method-text");
  try {
    await navigator.clipboard.writeText(paragraph.textContent.trim());
    byId("copied").textContent = "Copied.";
  } catch {
    getSelection().selectAllChildren(paragraph);
    byId("copied").textContent = "Selected: copy it with your keyboard.";
  }
});

window.geoshapeReport = { onReady, onFigures, onBars, ticks, tickText };
listeners.forEach((listener) => listener(chosen));
document.documentElement.classList.add("scripted");
