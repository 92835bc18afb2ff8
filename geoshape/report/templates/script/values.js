// The page's data: numbers unpacked when first asked for, and numbers written as people read them.

const page = JSON.parse(document.getElementById("page-data").textContent);
const byId = (id) => document.getElementById(id);

function bytesOf(text) {
  const binary = atob(text);
  const bytes = new Uint8Array(binary.length);
  for (let i = 0; i < binary.length; i++) bytes[i] = binary.charCodeAt(i);
  return bytes.buffer;
}

const float64 = (text) => new Float64Array(bytesOf(text));
const float32 = (text) => new Float32Array(bytesOf(text));
const int32 = (text) => new Int32Array(bytesOf(text));
const int16 = (text) => new Int16Array(bytesOf(text));

const rowNumbers = int32(page.rows);
const fields = new Map(page.fields.map((field) => [field.name, field]));
const isNumeric = (field) => field.kind !== "text";

function valuesOf(field) {
  if (!field.unpacked) field.unpacked = float64(field.values);
  return field.unpacked;
}

function quantilesOf(field) {
  if (!field.steps) field.steps = float64(field.quantiles);
  return field.steps;
}

// Rings of many shapes: {x, y} of one shape's rings, each with its place on the common plane.
function unpackRings(packed) {
  const rings = int32(packed.rings);
  const sizes = int32(packed.sizes);
  const frame = float64(packed.frame);
  const xy = int16(packed.xy);
  const firstRing = new Int32Array(rings.length + 1);
  rings.forEach((count, i) => (firstRing[i + 1] = firstRing[i] + count));
  const firstVertex = new Int32Array(sizes.length + 1);
  sizes.forEach((size, i) => (firstVertex[i + 1] = firstVertex[i] + Math.abs(size)));
  return (shape) => {
    const [middleX, middleY, step] = frame.subarray(3 * shape, 3 * shape + 3);
    const found = [];
    for (let ring = firstRing[shape]; ring < firstRing[shape + 1]; ring++) {
      const x = [], y = [];
      for (let at = firstVertex[ring]; at < firstVertex[ring + 1]; at++) {
        x.push(middleX + step * xy[2 * at]);
        y.push(middleY + step * xy[2 * at + 1]);
      }
      found.push({ x, y, isHole: sizes[ring] < 0 });
    }
    return found;
  };
}

function grouped(digits) {
  return digits.replace(/\B(?=(\d{3})+$)/g, "\u202f");
}

function numberText(value, digits = 4) {
  if (!Number.isFinite(value)) return "\u2013";
  if (value === 0) return "0";
  const size = Math.floor(Math.log10(Math.abs(value)));
  let text;
  if (size < -4 || size >= 15) {
    text = value.toExponential(digits - 1).replace(/\.?0+e/, "e").replace("e+", "e");
  } else {
    text = value.toFixed(Math.max(digits - 1 - size, 0));
    if (text.includes(".")) text = text.replace(/\.?0+$/, "");
    const [whole, rest] = text.split(".");
    text = grouped(whole) + (rest ? `.${rest}` : "");
  }
  return text.replaceAll("-", "\u2212");
}

// A count of ours has its thousands apart; a whole number of the layer may be a year or a key and stays as it is.
function bareText(field, value, digits = 4) {
  if (!Number.isFinite(value)) return "\u2013";
  if (field.kind !== "count") return numberText(value, digits);
  const text = String(value);
  return (field.family === "attribute" ? text : grouped(text)).replaceAll("-", "\u2212");
}

// In a column, the decimals that suit all its values.
function cellText(field, value) {
  if (field.kind !== "number" || field.decimals === null || !Number.isFinite(value)) return bareText(field, value);
  const [whole, rest] = value.toFixed(field.decimals).split(".");
  return (grouped(whole) + (rest ? `.${rest}` : "")).replaceAll("-", "\u2212");
}

function withUnit(field, text) {
  if (!field.unit || text === "\u2013") return text;
  return field.unit === "\u00b0" ? text + field.unit : `${text}\u00a0${field.unit}`;
}

function textAt(field, shape, digits = 4) {
  if (!isNumeric(field)) return field.texts[shape] ?? "\u2013";
  return withUnit(field, bareText(field, valuesOf(field)[shape], digits));
}

function titleWithUnit(field) {
  return field.unit ? `${field.title}, ${field.unit}` : field.title;
}

// Elements, with text as text.
function make(tag, settings = {}, ...children) {
  const element = document.createElement(tag);
  for (const [name, value] of Object.entries(settings)) {
    if (name.startsWith("on")) element.addEventListener(name.slice(2), value);
    else if (value !== null && value !== false) element.setAttribute(name, value === true ? "" : value);
  }
  element.append(...children.filter((child) => child !== null && child !== undefined));
  return element;
}

function draw(tag, settings = {}, ...children) {
  const element = document.createElementNS("http://www.w3.org/2000/svg", tag);
  for (const [name, value] of Object.entries(settings)) if (value !== null) element.setAttribute(name, value);
  element.append(...children);
  return element;
}

function fillSelect(select, wanted, chosen) {
  const groups = new Map();
  for (const field of page.fields) {
    if (!wanted(field)) continue;
    if (!groups.has(field.family)) groups.set(field.family, make("optgroup", { label: page.families[field.family] }));
    const option = make("option", { value: field.name }, titleWithUnit(field));
    option.selected = field.name === chosen;
    groups.get(field.family).append(option);
  }
  const attributes = groups.get("attribute");
  groups.delete("attribute");
  select.append(...groups.values(), ...(attributes ? [attributes] : []));
}
