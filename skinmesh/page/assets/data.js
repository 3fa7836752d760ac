// The words and arrays of the page, and small helpers. Text always goes in through textContent.

const byId = (id) => document.getElementById(id);
const words = JSON.parse(byId("blade-words").textContent);

function make(tag, options = {}, ...children) {
  const node = document.createElement(tag);
  for (const [name, value] of Object.entries(options)) {
    if (name === "class") node.className = value;
    else if (name === "colour") node.style.background = value;
    else if (name.startsWith("on")) node.addEventListener(name.slice(2), value);
    else if (name in node) node[name] = value;
    else node.setAttribute(name, value);
  }
  node.append(...children.filter((child) => child !== null && child !== undefined).map((c) => (c instanceof Node ? c : String(c))));
  return node;
}

function makeSvg(tag, attributes = {}, text = null) {
  const node = document.createElementNS("http://www.w3.org/2000/svg", tag);
  for (const [name, value] of Object.entries(attributes)) node.setAttribute(name, value);
  if (text !== null) node.textContent = text;
  return node;
}

const swatch = (colour) => make("span", { class: "swatch", colour });

function table(heads, rows, { numeric = [], name = "" } = {}) {
  const kind = (k) => (numeric.includes(k) ? "n" : "");
  return make("div", { class: "scroll" }, make("table", { class: name },
    make("thead", {}, make("tr", {}, ...heads.map((head, k) => make("th", { class: kind(k), scope: "col" }, head)))),
    make("tbody", {}, ...rows.map((row) => make("tr", {}, ...row.map((cell, k) => make("td", { class: kind(k) }, cell)))))));
}

function facts(pairs) {
  return make("dl", {}, ...pairs.flatMap(([name, value]) => [make("dt", {}, name), make("dd", {}, value)]));
}

const grouped = (n) => Math.round(n).toLocaleString("en-GB").replaceAll(",", "\u202f");
const fixed = (x, digits = 3) => (x === null || x === undefined || !isFinite(x) ? "–" : x.toFixed(digits));
const millimetres = (t) => `${+(t * 1e3).toPrecision(6)} mm`;

function significant(x, digits = 4, plainBelow = 1e5) {
  if (x === null || x === undefined || !isFinite(x)) return "–";
  if (x !== 0 && (Math.abs(x) >= plainBelow || Math.abs(x) < 1e-3)) {
    const [mantissa, power] = x.toExponential(digits - 1).split("e");
    return `${mantissa} × 10${[...String(+power)].map((c) => (c === "-" ? "⁻" : "⁰¹²³⁴⁵⁶⁷⁸⁹"[c])).join("")}`;
  }
  return String(+x.toPrecision(digits));
}

function bytesOf(text) {
  if (Uint8Array.fromBase64) return Uint8Array.fromBase64(text);
  const letters = atob(text);
  const bytes = new Uint8Array(letters.length);
  for (let i = 0; i < letters.length; i++) bytes[i] = letters.charCodeAt(i);
  return bytes;
}

const ARRAY_TYPES = { float32: Float32Array, int32: Int32Array, int16: Int16Array, uint16: Uint16Array, uint8: Uint8Array };

// Undo what the packing did: bytes of equal weight stand together, integers are differences along the first axis.
function unpack(bytes, { type, shape, delta, start }) {
  const Type = ARRAY_TYPES[type];
  const size = Type.BYTES_PER_ELEMENT;
  const columns = shape.length > 1 ? shape[1] : 1;
  const n = shape[0] * columns;
  const out = new Uint8Array(n * size);
  for (let b = 0; b < size; b++) {
    const from = start + b * n;
    for (let i = 0, k = b; i < n; i++, k += size) out[k] = bytes[from + i];
  }
  const values = new Type(out.buffer);
  if (delta) for (let i = columns; i < n; i++) values[i] += values[i - columns];
  return values;
}

async function readMesh() {
  const holder = byId("blade-mesh");
  const packed = new Blob([bytesOf(holder.textContent)]);
  holder.remove();
  const stream = packed.stream().pipeThrough(new DecompressionStream("deflate"));
  const bytes = new Uint8Array(await new Response(stream).arrayBuffer());
  const mesh = {};
  for (const [name, entry] of Object.entries(words.arrays)) mesh[name] = unpack(bytes, entry);
  mesh.sides = words.facts.sides;
  mesh.size = mesh.region.length;
  // Arc of every corner of every element.
  const n = mesh.size * mesh.sides;
  mesh.arc = new Float32Array(n);
  for (let i = 0; i < n; i++) mesh.arc[i] = mesh.node_arc[mesh.cells[i]];
  mesh.other_corner.forEach((corner, k) => { mesh.arc[corner] = mesh.other_arc[k]; });
  return mesh;
}

const thicknessOf = (stack) => (stack < 0 ? 0 : words.stacks[stack].thickness);
const regionName = (region) => words.regions[region].name;
const sideName = (side) => ({ 1: "suction", [-1]: "pressure", 0: "web or base" })[side];
