// Small curves along the span.

function ticks(low, high, wanted = 5) {
  const size = (high - low || 1) / wanted;
  const power = 10 ** Math.floor(Math.log10(size));
  const step = [1, 2, 2.5, 5, 10].map((k) => k * power).find((s) => s >= size);
  const found = [];
  for (let v = Math.ceil(low / step - 1e-9) * step; v <= high + 1e-9 * step; v += step) found.push(+v.toPrecision(10));
  return found;
}

function chart(title, unit, z, curves, { logarithmic = false, zero = false } = {}) {
  const width = 420, height = 170, left = 52, right = 8, top = 10, bottom = 22;
  const all = curves.flatMap((curve) => curve.values).filter((v) => v !== null && (!logarithmic || v > 0));
  if (!z.length || !all.length) return null;
  let low = Math.min(...all, ...(zero ? [0] : [])), high = Math.max(...all);
  const marks = logarithmic ? powers(low, high) : ticks(low, high, 4);
  if (logarithmic) [low, high] = [Math.min(low, marks[0]), Math.max(high, marks.at(-1))];
  if (high === low) [low, high] = [low - 1, high + 1];
  const along = (v) => left + ((v - words.span[0]) / (words.span[1] - words.span[0])) * (width - left - right);
  const scaled = logarithmic ? Math.log10 : (v) => v;
  const up = (v) => height - bottom - ((scaled(v) - scaled(low)) / (scaled(high) - scaled(low))) * (height - top - bottom);
  const svg = makeSvg("svg", { viewBox: `0 0 ${width} ${height}`, role: "img", "aria-label": `${title} along the span; the numbers stand in the table below` });
  for (const v of marks) {
    svg.append(makeSvg("line", { class: "axis", x1: left, x2: width - right, y1: up(v), y2: up(v) }),
      makeSvg("text", { x: left - 5, y: up(v) + 4, "text-anchor": "end" }, logarithmic ? significant(v, 1, 0).replace("1 × ", "") : String(v)));
  }
  for (const v of ticks(words.span[0], words.span[1], 6)) {
    svg.append(makeSvg("text", { x: along(v), y: height - 6, "text-anchor": "middle" }, `${v}${v === 0 ? " m" : ""}`));
  }
  const mark = makeSvg("line", { class: "mark", y1: top, y2: height - bottom });
  svg.append(mark);
  curves.forEach((curve, k) => {
    let path = "", pen = "M";
    curve.values.forEach((v, i) => {
      if (v === null || (logarithmic && v <= 0)) { pen = "M"; return; }
      path += `${pen}${along(z[i]).toFixed(1)} ${up(v).toFixed(1)}`;
      pen = "L";
    });
    svg.append(makeSvg("path", { class: k ? "curve second" : "curve", d: path }));
  });
  const names = curves.length > 1 ? ` – ${curves.map((curve, k) => `${curve.name} ${k ? "(dashed)" : ""}`.trim()).join(", ")}` : "";
  const node = make("div", { class: "chart" }, make("h3", {}, `${title}, ${unit}${names}`), svg);
  node.mark = (at) => { mark.setAttribute("x1", along(at)); mark.setAttribute("x2", along(at)); };
  return node;
}

function powers(low, high) {
  const found = [];
  for (let p = Math.floor(Math.log10(low)); p <= Math.ceil(Math.log10(high)); p++) found.push(+`1e${p}`);
  const step = Math.ceil(found.length / 5);
  return found.filter((_, k) => (found.length - 1 - k) % step === 0);
}

function showCharts() {
  const { shape, beam } = words;
  const relative = shape.thickness.map((t, k) => (100 * t) / shape.chord[k]);
  const nodes = [
    chart("Planform, y of the edges", "m", shape.z, [{ name: "leading", values: shape.leading }, { name: "trailing", values: shape.trailing }]),
    chart("Chord", "m", shape.z, [{ values: shape.chord }], { zero: true }),
    chart("Twist", "°", shape.z, [{ values: shape.twist }]),
    chart("Thickness", "% of chord", shape.z, [{ values: relative }], { zero: true }),
    chart("Mass", "kg/m", beam.z, [{ values: beam.mass }], { zero: true }),
    chart("Bending stiffness", "N m²", beam.z, [{ name: "smaller", values: beam.EI_small }, { name: "larger", values: beam.EI_large }], { logarithmic: true }),
    chart("Torsional stiffness GJ", "N m²", beam.z, [{ values: beam.GJ }], { logarithmic: true }),
    chart("Axial stiffness EA", "N", beam.z, [{ values: beam.EA }], { logarithmic: true }),
  ].filter(Boolean);
  byId("charts").replaceChildren(...nodes);
  byId("span-note").textContent = "Shape measured on the mesh: chord from the leading edge node to the middle of the trailing edge, thickness across it; where a profile keeps its own axes, the twist differs from the table's by some tenths of a degree." +
    (beam.z.length ? ` Mass and stiffness by thin-wall theory on the mesh's own elements, at ${beam.z.length} of ${beam.rows} element rows. The orange line is the cut.` : "");
  const rows = words.stations.map((z, k) => {
    const s = nearest(shape, z), b = nearest(beam, z);
    return [String(k).padStart(2, "0"), fixed(z), s ? fixed(s.chord) : "–", s ? fixed(s.twist, 2) : "–", s ? fixed((100 * s.thickness) / s.chord, 1) : "–",
      ...["mass", "EA", "EI_small", "EI_large", "GJ"].map((name) => (b ? significant(b[name]) : "–"))];
  });
  byId("span-table").replaceChildren(table(["station", "z m", "chord m", "twist °", "thickness %", "kg/m", "EA N", "EI smaller N m²", "EI larger N m²", "GJ N m²"],
    rows, { numeric: [1, 2, 3, 4, 5, 6, 7, 8, 9] }),
    make("p", { class: "quiet" }, "Mass and stiffness are those of the nearest element row's middle."));
  return (z) => nodes.forEach((node) => node.mark(z));
}
