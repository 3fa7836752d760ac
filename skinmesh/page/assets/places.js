// Where the corners of the elements are drawn: on the blade, or on the developed skin with the webs beside it.

// Sign of y at the leading edge.
const leadingSign = words.hand === "counter-clockwise" ? 1 : -1;

function makePlaces(mesh) {
  const { sides, size } = mesh;
  const n = size * sides;
  const blade = new Float32Array(n * 3);
  for (let i = 0; i < n; i++) {
    const node = 3 * mesh.cells[i];
    blade[3 * i] = mesh.points[node];
    blade[3 * i + 1] = mesh.points[node + 1];
    blade[3 * i + 2] = mesh.points[node + 2];
  }

  // On the developed skin z runs along and the arc across, webs follow beyond the suction side.
  const gap = 0.12 * (words.skin_arc[1] - words.skin_arc[0]);
  const webStart = {};
  let next = words.skin_arc[1] + gap;
  words.regions.forEach((region, k) => {
    if (region.kind !== "web") return;
    webStart[k] = next;
    next += (words.web_heights[k] ?? 0) + gap;
  });
  const across = -leadingSign;
  let flatPlaces = null;
  const flat = () => {
    if (flatPlaces) return flatPlaces;
    flatPlaces = new Float32Array(n * 3);
    for (let i = 0; i < n; i++) {
      const start = webStart[mesh.region[Math.floor(i / sides)]] ?? 0;
      flatPlaces[3 * i + 1] = across * (start + mesh.arc[i]);
      flatPlaces[3 * i + 2] = blade[3 * i + 2];
    }
    return flatPlaces;
  };

  const now = { places: blade, centres: new Float32Array(size * 3), box: { low: [0, 0, 0], high: [0, 0, 0] }, isFlat: false };
  function choose(shape) {
    now.isFlat = shape === "flat";
    now.places = now.isFlat ? flat() : blade;
    now.centres.fill(0);
    now.box = { low: [Infinity, Infinity, Infinity], high: [-Infinity, -Infinity, -Infinity] };
    for (let i = 0; i < n; i++) {
      const e = 3 * Math.floor(i / sides);
      for (let d = 0; d < 3; d++) {
        const v = now.places[3 * i + d];
        now.centres[e + d] += v / sides;
        if (v < now.box.low[d]) now.box.low[d] = v;
        if (v > now.box.high[d]) now.box.high[d] = v;
      }
    }
  }

  // Height of every web at each z where it has nodes, root first.
  function webTops() {
    const found = {};
    for (let i = 0; i < n; i++) {
      const k = mesh.region[Math.floor(i / sides)];
      if (!(k in webStart)) continue;
      const tops = (found[k] ??= new Map());
      const z = blade[3 * i + 2];
      tops.set(z, Math.max(tops.get(z) ?? 0, mesh.arc[i]));
    }
    return Object.entries(found).map(([k, tops]) => [k, [...tops].sort((a, b) => a[0] - b[0])]);
  }

  // Seams and rows on the developed skin, feet and ends of the webs beside it, as pairs of ends.
  function flatLines() {
    const ends = [];
    for (const { line: points } of words.seams) {
      for (let k = 1; k < points.length; k++) {
        ends.push(0, across * points[k - 1][1], points[k - 1][0], 0, across * points[k][1], points[k][0]);
      }
    }
    for (const { z } of words.rows) {
      const reach = words.seams.length ? [words.seams[0], words.seams.at(-1)].map(({ line: p }) => arcAt(p, z)) : [0, 0];
      ends.push(0, across * reach[0], z, 0, across * reach[1], z);
    }
    for (const [k, tops] of webTops()) {
      const y = (arc) => across * (webStart[k] + arc);
      const [first, last] = [tops[0], tops.at(-1)];
      ends.push(0, y(0), first[0], 0, y(0), last[0]);
      for (const [z, top] of [first, last]) ends.push(0, y(0), z, 0, y(top), z);
      for (let i = 1; i < tops.length; i++) ends.push(0, y(tops[i - 1][1]), tops[i - 1][0], 0, y(tops[i][1]), tops[i][0]);
    }
    return new Float32Array(ends);
  }

  // Names of the webs beside the developed skin, and numbers of the stations, as [words, y, z, kind].
  function flatNames() {
    const [least] = words.skin_arc;
    const numbers = words.stations.map((z, k) => {
      const edge = words.seams.length ? arcAt(words.seams[0].line, z) : least;
      return [String(k).padStart(2, "0"), across * edge, z, "station"];
    });
    return [
      ...Object.entries(webStart).map(([k, start]) => [regionName(+k), across * (start - 0.3 * gap), now.box.low[2], ""]),
      ...numbers,
    ];
  }

  // On the developed skin a direction is carried over by the element's own two edges through its first corner.
  function carried(e, direction) {
    if (!now.isFlat) return direction;
    const from = (places) => {
      const c = [0, 1, sides - 1].map((k) => [0, 1, 2].map((d) => places[3 * (e * sides + k) + d]));
      return [1, 2].map((k) => c[k].map((x, d) => x - c[0][d]));
    };
    const [a, b] = from(blade);
    const [fa, fb] = from(now.places);
    const dot = (p, q) => p[0] * q[0] + p[1] * q[1] + p[2] * q[2];
    const aa = dot(a, a), ab = dot(a, b), bb = dot(b, b), da = dot(direction, a), db = dot(direction, b);
    const det = aa * bb - ab * ab || 1;
    const s = (da * bb - db * ab) / det, t = (db * aa - da * ab) / det;
    return fa.map((x, d) => s * x + t * fb[d]);
  }

  const centre = (e) => new THREE.Vector3(now.centres[3 * e], now.centres[3 * e + 1], now.centres[3 * e + 2]);
  const edge = (e) => Math.hypot(...[0, 1, 2].map((d) => blade[3 * e * sides + d] - blade[3 * e * sides + 3 + d]));
  return { now, choose, centre, edge, carried, flatLines, flatNames };
}

// Arc of a seam at z, from its points.
function arcAt(points, z) {
  let k = points.findIndex(([at]) => at >= z);
  if (k < 0) k = points.length - 1;
  if (k <= 0) return points.length ? points[0][1] : 0;
  const [z0, s0] = points[k - 1], [z1, s1] = points[k];
  return z1 === z0 ? s1 : s0 + ((z - z0) / (z1 - z0)) * (s1 - s0);
}
