// Colours of the elements and their legends.

function hexBytes(hex) {
  return [1, 3, 5].map((k) => parseInt(hex.slice(k, k + 2), 16));
}

// Bytes of colour for every stack or region or value; one look-up an element.
function paintOf(mesh, by, ply) {
  const m = mesh.size;
  const bare = hexBytes(words.colours.bare);
  if (by === "region") {
    const tones = words.regions.map((region) => hexBytes(region.colour));
    const parts = new Map(words.regions.map((region) => [region.part, region.colour]));
    return {
      of: (e) => tones[mesh.region[e]],
      legend: () => make("div", { class: "legend" }, ...[...parts].map(([name, colour]) => make("span", {}, swatch(colour), " ", name))),
    };
  }
  if (by === "stack") {
    const tones = words.colours.stack.map(hexBytes);
    return {
      of: (e) => (mesh.stack[e] < 0 ? bare : tones[(mesh.stack[e] * 3) % tones.length]),
      legend: () => make("p", { class: "quiet" }, `${words.stacks.length} stacks. A line runs where the stack changes; ` +
        "tones only tell neighbours apart. Click to read one."),
    };
  }
  if (by === "cover") {
    const counts = words.stacks.map((stack) => stack.layers.filter((layer) => layer[0] === ply).length);
    const most = Math.max(...counts, 0);
    const scale = words.colours.stack.slice(2).map(hexBytes);
    const tone = (n) => (n ? scale[Math.round(((n - 1) * (scale.length - 1)) / Math.max(most - 1, 1))] : bare);
    const tones = counts.map(tone);
    const seen = [...new Set(counts)].sort((a, b) => a - b);
    const css = (n) => `rgb(${tone(n).join(" ")})`;
    const few = seen.length > 9 ? seen.filter((_, k) => k % Math.ceil(seen.length / 8) === 0 || k === seen.length - 1) : seen;
    return {
      of: (e) => (mesh.stack[e] < 0 ? bare : tones[mesh.stack[e]]),
      legend: () => make("div", { class: "legend" }, make("b", {}, `Layers of ‘${words.plies[ply] ?? ""}’`),
        ...few.map((n) => make("span", {}, swatch(css(n)), ` ${n || "none"}`))),
    };
  }
  if (by === "angle") return paintOfAngles(mesh, ply, bare);
  const scale = words.values[by];
  if (!scale) return { of: () => bare, legend: () => make("p", { class: "quiet" }, "The blade file has no plies.") };
  const tones = scale.colours.map(hexBytes);
  const value = valueOf(mesh, by);
  const last = tones.length - 1;
  const covered = by === "thickness" || by === "plies";
  return {
    of: (e) => {
      if (covered && mesh.stack[e] < 0) return bare;
      const v = value(e);
      let k = 0;
      while (k < last && v >= scale.levels[k + 1]) k++;
      return tones[k];
    },
    legend: () => make("div", {}, make("b", {}, scale.title), make("div", { class: "steps" },
      ...scale.colours.map((colour, k) => make("span", { colour }, make("i", {}, +scale.levels[k].toPrecision(6)),
        k === last ? make("i", { class: "last" }, +scale.levels[k + 1].toPrecision(6)) : null)))),
  };
}

const degrees = (angle) => `${angle > 0 ? "+" : angle < 0 ? "−" : ""}${Math.abs(+angle.toPrecision(6))}°`;

// Blue is negative, orange positive, yellow none; a stack that has the ply at several angles is green.
function toneOfAngle(angles) {
  if (angles.length > 1) return [110, 160, 84];
  const [a] = angles, share = Math.min(Math.abs(a) / 90, 1);
  const [pale, dark] = a > 0 ? [[249, 190, 122], [140, 58, 0]] : [[158, 202, 235], [10, 56, 120]];
  return a === 0 ? [240, 226, 150] : pale.map((v, d) => Math.round(v + share * (dark[d] - v)));
}

// Angle of one ply where it lies: a wrong sign shows as another colour, and in the legend as a number.
function paintOfAngles(mesh, ply, bare) {
  const angles = anglesOf(ply).map((found) => found.sort((a, b) => a - b));
  const tones = angles.map((found) => (found.length ? toneOfAngle(found) : bare));
  const groups = new Map();
  for (let e = 0; e < mesh.size; e++) {
    const name = (angles[mesh.stack[e]] ?? []).map(degrees).join(" and ") || "none";
    if (!groups.has(name)) groups.set(name, [0, tones[mesh.stack[e]] ?? bare]);
    groups.get(name)[0] += 1;
  }
  return {
    of: (e) => tones[mesh.stack[e]] ?? bare,
    legend: () => make("div", { class: "legend" }, make("b", {}, `Angle of ‘${words.plies[ply] ?? ""}’, + from e1 to e2`),
      ...[...groups].sort().map(([name, [n, tone]]) => make("span", {}, swatch(`rgb(${tone.join(" ")})`), ` ${name} on ${grouped(n)} elements`))),
  };
}

function valueOf(mesh, by) {
  if (by === "thickness") {
    const t = words.stacks.map((stack) => +(stack.thickness * 1e3).toFixed(9));
    return (e) => t[mesh.stack[e]];
  }
  if (by === "plies") return (e) => words.stacks[mesh.stack[e]].layers.length;
  return (e) => mesh[by][e];
}
