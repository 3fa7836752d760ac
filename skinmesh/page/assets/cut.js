// A plane of constant z through the elements: their lines, joints, and every layer as a four-sided figure.

// Elements crossed at z, each with both ends of its line in (y, x), and its normal there.
function cutAt(mesh, wantedZ) {
  const { sides, points, cells } = mesh;
  const [low, high] = mesh.zRange;
  // A hair beside z, so that no corner lies on the plane.
  const span = high - low;
  const z = Math.min(Math.max(wantedZ, low + 2e-6 * span), high - 2e-6 * span) + 1.234e-7 * span;
  const walls = [];
  for (let e = 0; e < mesh.size; e++) {
    const first = e * sides;
    let above = 0;
    for (let k = 0; k < sides; k++) above += points[3 * cells[first + k] + 2] > z ? 1 : 0;
    if (above === 0 || above === sides) continue;
    const ends = [];
    for (let k = 0; k < sides; k++) {
      const a = cells[first + k], b = cells[first + ((k + 1) % sides)];
      const za = points[3 * a + 2] - z, zb = points[3 * b + 2] - z;
      if (za > 0 === zb > 0) continue;
      const t = za / (za - zb);
      ends.push({
        key: `${Math.min(a, b)} ${Math.max(a, b)}`,
        y: points[3 * a + 1] + t * (points[3 * b + 1] - points[3 * a + 1]),
        x: points[3 * a] + t * (points[3 * b] - points[3 * a]),
      });
    }
    if (ends.length !== 2) continue;
    const [p, q] = ends;
    const length = Math.hypot(q.y - p.y, q.x - p.x) || 1e-12;
    // Across the line, on the side of e3.
    let normal = [-(q.x - p.x) / length, (q.y - p.y) / length];
    if (normal[0] * mesh.e3[3 * e + 1] + normal[1] * mesh.e3[3 * e] < 0) normal = normal.map((v) => -v);
    walls.push({ element: e, region: mesh.region[e], stack: mesh.stack[e], ends, normal, length });
  }
  joinWalls(walls);
  return { z: wantedZ, walls };
}

// Neighbours of one sheet share a mitred end, which leaves both as thick as they are; sharp corners stay open.
function joinWalls(walls) {
  const meeting = new Map();
  for (const wall of walls) {
    const kind = words.regions[wall.region].kind;
    const sheet = kind === "web" || kind === "base" ? wall.region : "skin";
    for (const end of wall.ends) {
      const place = `${sheet} ${end.key}`;
      if (!meeting.has(place)) meeting.set(place, []);
      meeting.get(place).push(wall);
    }
    wall.sheet = sheet;
  }
  for (const wall of walls) {
    wall.across = wall.ends.map((end) => {
      const other = meeting.get(`${wall.sheet} ${end.key}`).find((one) => one !== wall);
      if (!other) return wall.normal;
      const dot = wall.normal[0] * other.normal[0] + wall.normal[1] * other.normal[1];
      return dot < 0.3 ? wall.normal : [0, 1].map((d) => (wall.normal[d] + other.normal[d]) / (1 + dot));
    });
  }
}

// Places where walls of different sheets meet: web feet, corners of a blunt trailing edge.
function jointsOf(walls) {
  const sheets = new Map();
  for (const wall of walls) {
    for (const end of wall.ends) {
      if (!sheets.has(end.key)) sheets.set(end.key, { y: end.y, x: end.x, sheets: new Set() });
      sheets.get(end.key).sheets.add(wall.sheet);
    }
  }
  return [...sheets.values()].filter((place) => place.sheets.size > 1);
}

// Layers of a wall as corners (y, x), the e3 face first; `factor` exaggerates the thickness about the reference surface.
function layersOf(mesh, wall, factor) {
  if (wall.stack < 0) return [];
  const stack = words.stacks[wall.stack];
  let height = (0.5 - mesh.offset[wall.element]) * stack.thickness;
  const at = (k, h) => [0, 1].map((d) => [wall.ends[k].y, wall.ends[k].x][d] + factor * h * wall.across[k][d]);
  return stack.layers.map(([ply, material, thickness]) => {
    const top = height;
    height -= thickness;
    return { ply, material, thickness, corners: [at(0, top), at(1, top), at(1, height), at(0, height)] };
  });
}
