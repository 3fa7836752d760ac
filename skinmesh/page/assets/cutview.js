// The drawing of a cut, to scale, with the numbers of its station.

function makeCut(mesh, pick) {
  const svg = byId("cut-view");
  const state = { z: 0, factor: 1, part: "", box: null, cut: null };
  let low = Infinity, high = -Infinity;
  for (let i = 2; i < mesh.points.length; i += 3) {
    low = Math.min(low, mesh.points[i]);
    high = Math.max(high, mesh.points[i]);
  }
  mesh.zRange = [low, high];

  byId("cut-hand").textContent =
    `the leading edge on the ${words.hand === "counter-clockwise" ? "right" : "left"}, the suction side above.`;
  const slider = byId("cut-slider"), number = byId("cut-z"), station = byId("cut-station");
  slider.min = number.min = low;
  slider.max = number.max = high;
  station.append(make("option", { value: "" }, "–"), ...words.stations.map((z, k) =>
    make("option", { value: z }, `${String(k).padStart(2, "0")} · ${fixed(z)} m`)));

  function extent(walls) {
    const box = [Infinity, Infinity, -Infinity, -Infinity];
    for (const wall of walls) {
      const points = [...wall.ends.map((end) => [end.y, end.x]), ...layersOf(mesh, wall, state.factor).flatMap((layer) => layer.corners)];
      for (const [y, x] of points) {
        box[0] = Math.min(box[0], y);
        box[1] = Math.min(box[1], -x);
        box[2] = Math.max(box[2], y);
        box[3] = Math.max(box[3], -x);
      }
    }
    return box[0] < box[2] ? box : [0, 0, 1, 1];
  }

  function frame() {
    const walls = state.cut.walls.filter((wall) => !state.part || String(wall.region) === state.part);
    const [a, b, c, d] = extent(walls.length ? walls : state.cut.walls);
    const aspect = svg.clientWidth / svg.clientHeight || 2;
    // Room at the sides for the names.
    const width = Math.max((state.part ? 1.15 : 1.3) * (c - a), 1.25 * (d - b) * aspect) + 1e-6;
    state.box = [(a + c) / 2 - width / 2, (b + d) / 2 - width / aspect / 2, width, width / aspect];
  }

  function draw() {
    const { walls } = state.cut;
    const [left, top, width, height] = state.box;
    const pixel = width / (svg.clientWidth || 800);
    svg.setAttribute("viewBox", state.box.join(" "));
    const text = (y, x) => `${y.toFixed(6)} ${(-x).toFixed(6)}`;
    const plies = new Map();
    const faces = new Map();
    for (const wall of walls) {
      const layers = layersOf(mesh, wall, state.factor);
      for (const layer of layers) {
        const key = layer.material;
        if (!plies.has(key)) plies.set(key, []);
        plies.get(key).push(`M${layer.corners.map(([y, x]) => text(y, x)).join("L")}Z`);
      }
      const outer = layers.length ? layers[0].corners.slice(0, 2) : wall.ends.map((end) => [end.y, end.x]);
      if (!faces.has(wall.region)) faces.set(wall.region, []);
      faces.get(wall.region).push(`M${outer.map(([y, x]) => text(y, x)).join("L")}`);
    }
    const parts = [];
    for (const [material, shapes] of plies) {
      const path = makeSvg("path", { class: "ply", d: shapes.join(""), fill: words.materials[material].colour, "vector-effect": "non-scaling-stroke" });
      path.append(makeSvg("title", {}, words.materials[material].name));
      parts.push(path);
    }
    for (const [region, lines] of faces) {
      parts.push(makeSvg("path", { d: lines.join(""), fill: "none", stroke: words.regions[region].colour, "stroke-width": "3", "vector-effect": "non-scaling-stroke" }));
    }
    for (const joint of jointsOf(walls)) {
      parts.push(makeSvg("circle", { cx: joint.y, cy: -joint.x, r: 3.2 * pixel, fill: "none", stroke: "currentColor", "stroke-width": 1.2 * pixel }));
    }
    parts.push(...labels(walls, pixel), ...scaleBar(left, top, width, height, pixel));
    svg.replaceChildren(...parts);
  }

  // The name of each region that is long enough on the screen, on the outside of its middle wall.
  function labels(walls, pixel) {
    const byRegion = Map.groupBy ? Map.groupBy(walls, (wall) => wall.region) : groupBy(walls, (wall) => wall.region);
    const found = [], taken = [];
    for (const [region, list] of byRegion) {
      const inside = list.filter((wall) => wall.ends.every((end) =>
        end.y > state.box[0] && end.y < state.box[0] + state.box[2] && -end.x > state.box[1] && -end.x < state.box[1] + state.box[3]));
      if (inside.reduce((sum, wall) => sum + wall.length, 0) < 34 * pixel) continue;
      const middle = inside.sort((a, b) => a.ends[0].y + a.ends[0].x - b.ends[0].y - b.ends[0].x)[inside.length >> 1];
      const isWeb = words.regions[region].kind === "web";
      if (isWeb && svg.clientWidth < 500) continue; // no room between walls; the table beside has its colour
      const [dy, dx] = isWeb ? [-1, 0] : middle.normal;
      const away = 12 * pixel + state.factor * (0.5 - mesh.offset[middle.element]) * thicknessOf(middle.stack);
      const y = (middle.ends[0].y + middle.ends[1].y) / 2 + dy * away, x = (middle.ends[0].x + middle.ends[1].x) / 2 + dx * away;
      const anchor = Math.abs(dy) > 0.3 ? (dy < 0 ? "end" : "start") : "middle";
      const name = words.regions[region].part;
      // Kept inside the frame, by a guess at its width.
      const long = 6.6 * pixel * name.length, back = { start: 0, middle: 0.5, end: 1 }[anchor] * long;
      const from = Math.min(Math.max(y - back, state.box[0] + 4 * pixel), state.box[0] + state.box[2] - long - 4 * pixel);
      const spot = [from, -x - 8 * pixel, from + long, -x + 8 * pixel];
      if (taken.some((one) => one[0] < spot[2] && spot[0] < one[2] && one[1] < spot[3] && spot[1] < one[3])) continue;
      taken.push(spot);
      found.push(makeSvg("text", { x: from, y: -x + 4 * pixel, "font-size": 11.5 * pixel }, name));
    }
    return found;
  }

  function groupBy(list, key) {
    const groups = new Map();
    for (const item of list) groups.set(key(item), [...(groups.get(key(item)) ?? []), item]);
    return groups;
  }

  function scaleBar(left, top, width, height, pixel) {
    const most = 0.22 * width, power = 10 ** Math.floor(Math.log10(most));
    const length = [5, 2, 1].map((k) => k * power).find((x) => x <= most);
    const x = left + 14 * pixel, y = top + height - 12 * pixel;
    const name = length >= 1 ? `${length} m` : `${+(length * 1e3).toPrecision(2)} mm`;
    const factor = state.factor > 1 ? `; thickness × ${state.factor}` : "";
    return [
      makeSvg("line", { x1: x, x2: x + length, y1: y, y2: y, stroke: "currentColor", "stroke-width": 2 * pixel }),
      makeSvg("text", { x, y: y - 6 * pixel, "font-size": 12 * pixel }, name + factor),
    ];
  }

  function numbers() {
    const { z, cut } = state;
    const shape = nearest(words.shape, z), beam = nearest(words.beam, z);
    const rows = [["z", `${fixed(z)} m`], ["between", rowsRound(z)]];
    if (shape) {
      rows.push(["chord", `${fixed(shape.chord)} m`], ["twist", `${fixed(shape.twist, 2)}°`],
        ["thickness", `${fixed(shape.thickness)} m, ${fixed((100 * shape.thickness) / shape.chord, 1)} % of chord`]);
    }
    if (beam) {
      rows.push(["mass", `${significant(beam.mass)} kg/m`], ["EA", `${significant(beam.EA)} N`],
        ["EI smaller", `${significant(beam.EI_small)} N m²`], ["EI larger", `${significant(beam.EI_large)} N m²`], ["GJ", `${significant(beam.GJ)} N m²`]);
    }
    const regions = [...new Set(cut.walls.map((wall) => wall.region))].sort((a, b) => a - b).map((region) => {
      const list = cut.walls.filter((wall) => wall.region === region);
      const t = list.map((wall) => thicknessOf(wall.stack) * 1e3);
      const [least, most] = [Math.min(...t), Math.max(...t)].map((x) => +x.toFixed(3));
      const stacks = [...new Set(list.map((wall) => wall.stack + 1))];
      return [make("span", {}, swatch(words.regions[region].colour), ` ${regionName(region)}`),
        least === most ? most : `${least}–${most}`, stacks.length > 4 ? `${stacks.slice(0, 3).join(", ")}, … (${stacks.length})` : stacks.join(", ")];
    });
    byId("cut-numbers").replaceChildren(facts(rows), table(["region", "mm", "stacks"], regions, { numeric: [1] }),
      make("p", { class: "quiet" }, shape ? `Shape from the node ring at z = ${fixed(shape.z)} m` +
        (beam ? `, mass and stiffness from the element row at z = ${fixed(beam.z)} m.` : ".") : ""));
    const used = new Set(cut.walls.flatMap((wall) => (wall.stack < 0 ? [] : words.stacks[wall.stack].layers.map((layer) => layer[1]))));
    byId("cut-legend").replaceChildren(...[...used].sort().map((k) => make("span", {}, swatch(words.materials[k].colour), ` ${words.materials[k].name}`)));
  }

  function set(changes) {
    Object.assign(state, changes);
    if ("z" in changes) {
      state.z = Math.min(Math.max(state.z, low), high);
      state.cut = cutAt(mesh, state.z);
      slider.value = state.z;
      number.value = +state.z.toFixed(4);
      station.value = words.stations.includes(state.z) ? state.z : "";
      const present = new Set(state.cut.walls.map((wall) => String(wall.region)));
      if (!present.has(state.part)) state.part = "";
      byId("cut-part").replaceChildren(make("option", { value: "" }, "the whole section"),
        ...[...present].map(Number).sort((a, b) => a - b).map((k) => make("option", { value: k }, regionName(k))));
      byId("cut-part").value = state.part;
      numbers();
    }
    if ("z" in changes || "part" in changes || "factor" in changes) frame();
    draw();
  }

  function zoom(factor) {
    const [a, b, w, h] = state.box;
    state.box = [a + (w * (1 - 1 / factor)) / 2, b + (h * (1 - 1 / factor)) / 2, w / factor, h / factor];
    draw();
  }

  function wallAt(event) {
    const frameBox = svg.getBoundingClientRect();
    const y = state.box[0] + ((event.clientX - frameBox.left) / frameBox.width) * state.box[2];
    const x = -(state.box[1] + ((event.clientY - frameBox.top) / frameBox.height) * state.box[3]);
    let best = null, least = Infinity;
    for (const wall of state.cut.walls) {
      const depth = 0.5 * state.factor * thicknessOf(wall.stack) * (2 * mesh.offset[wall.element]);
      const [p, q] = wall.ends.map((end) => [end.y - depth * wall.normal[0], end.x - depth * wall.normal[1]]);
      const dy = q[0] - p[0], dx = q[1] - p[1];
      const t = Math.min(Math.max(((y - p[0]) * dy + (x - p[1]) * dx) / (dy * dy + dx * dx || 1), 0), 1);
      const distance = Math.hypot(y - p[0] - t * dy, x - p[1] - t * dx);
      if (distance < least) [best, least] = [wall, distance];
    }
    return best;
  }

  slider.addEventListener("input", () => set({ z: +slider.value }));
  number.addEventListener("change", () => set({ z: +number.value }));
  station.addEventListener("change", () => station.value && set({ z: +station.value }));
  byId("cut-factor").addEventListener("change", (event) => set({ factor: +event.target.value }));
  byId("cut-part").addEventListener("change", (event) => set({ part: event.target.value }));
  byId("cut-nearer").addEventListener("click", () => zoom(1.6));
  byId("cut-farther").addEventListener("click", () => zoom(1 / 1.6));
  byId("cut-controls").addEventListener("submit", (event) => event.preventDefault());
  let drag = null;
  svg.addEventListener("pointerdown", (event) => {
    drag = { x: event.clientX, y: event.clientY, box: state.box, moved: false };
    svg.setPointerCapture(event.pointerId);
  });
  svg.addEventListener("pointermove", (event) => {
    if (!drag) return;
    const dx = event.clientX - drag.x, dy = event.clientY - drag.y;
    if (Math.hypot(dx, dy) < 4 && !drag.moved) return;
    drag.moved = true;
    const pixel = state.box[2] / svg.clientWidth;
    state.box = [drag.box[0] - dx * pixel, drag.box[1] - dy * pixel, drag.box[2], drag.box[3]];
    draw();
  });
  svg.addEventListener("pointerup", (event) => {
    const wall = drag && !drag.moved ? wallAt(event) : null;
    drag = null;
    if (!wall) return;
    pick(wall.element);
    byId("cut-note").textContent = `. Picked: ${regionName(wall.region)}, element ${mesh.number[wall.element]}, ${millimetres(thicknessOf(wall.stack))}`;
  });
  svg.addEventListener("keydown", (event) => {
    const step = { ArrowLeft: [-0.1, 0], ArrowRight: [0.1, 0], ArrowUp: [0, -0.1], ArrowDown: [0, 0.1] }[event.key];
    if (step) state.box = [state.box[0] + step[0] * state.box[2], state.box[1] + step[1] * state.box[3], state.box[2], state.box[3]];
    else if (event.key === "+") return zoom(1.6);
    else if (event.key === "-") return zoom(1 / 1.6);
    else return undefined;
    event.preventDefault();
    return draw();
  });
  return { state, set, zoom, redraw: () => { frame(); draw(); } };
}

// Row of a table of lists that is nearest to z.
function nearest(columns, z) {
  const places = columns.z;
  if (!places.length) return null;
  let best = 0;
  places.forEach((at, k) => { if (Math.abs(at - z) < Math.abs(places[best] - z)) best = k; });
  return Object.fromEntries(Object.entries(columns).filter(([, list]) => Array.isArray(list)).map(([name, list]) => [name, list[best]]));
}
