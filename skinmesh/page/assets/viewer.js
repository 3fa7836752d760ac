// The blade and the developed skin, drawn by three.js: the same elements in two sets of places.

const HIGH = 32767;

function makeViewer(mesh) {
  const { sides, size } = mesh;
  const canvas = byId("view");
  const stage = byId("stage");
  THREE.ColorManagement.enabled = false;
  const renderer = new THREE.WebGLRenderer({ canvas, antialias: true, preserveDrawingBuffer: true });
  renderer.outputColorSpace = THREE.LinearSRGBColorSpace;
  renderer.setPixelRatio(Math.min(window.devicePixelRatio, 2));
  const scene = new THREE.Scene();
  const camera = new THREE.OrthographicCamera(-1, 1, 1, -1, -1e4, 1e4);
  const up = words.hand === "counter-clockwise" ? 1 : -1;
  camera.up.set(0, up, 0);
  scene.add(new THREE.AmbientLight(0xffffff, 0.74 * Math.PI));
  const lamp = new THREE.DirectionalLight(0xffffff, 0.32 * Math.PI);
  scene.add(lamp);

  // Places: on the blade as they are; on the developed skin z along, arc across, webs beside the skin.
  const n = size * sides;
  const place = new Float32Array(n * 3);
  for (let i = 0; i < n; i++) {
    const node = 3 * mesh.cells[i];
    place[3 * i] = mesh.points[node];
    place[3 * i + 1] = mesh.points[node + 1];
    place[3 * i + 2] = mesh.points[node + 2];
  }
  const gap = 0.12 * (words.skin_arc[1] - words.skin_arc[0]);
  const webStart = {};
  let next = words.skin_arc[1] + gap;
  words.regions.forEach((region, k) => {
    if (region.kind !== "web") return;
    webStart[k] = next;
    next += (words.web_heights[k] ?? 0) + gap;
  });
  const across = -up;
  let flatPlace = null;
  const flat = () => {
    if (flatPlace) return flatPlace;
    flatPlace = new Float32Array(n * 3);
    for (let i = 0; i < n; i++) {
      const start = webStart[mesh.region[Math.floor(i / sides)]] ?? 0;
      flatPlace[3 * i + 1] = across * (start + mesh.arc[i]);
      flatPlace[3 * i + 2] = place[3 * i + 2];
    }
    return flatPlace;
  };
  const centres = new Float32Array(size * 3);
  const findCentres = (places) => {
    centres.fill(0);
    for (let i = 0; i < n; i++) for (let d = 0; d < 3; d++) centres[3 * Math.floor(i / sides) + d] += places[3 * i + d] / sides;
  };

  const geometry = new THREE.BufferGeometry();
  geometry.setAttribute("position", new THREE.BufferAttribute(place, 3));
  const bytes = new Uint8Array(n * 4).fill(255);
  const colours = new THREE.BufferAttribute(bytes, 4, true);
  geometry.setAttribute("color", colours);
  const surface = new THREE.Mesh(geometry, new THREE.MeshLambertMaterial({
    vertexColors: true, flatShading: true, side: THREE.DoubleSide, polygonOffset: true, polygonOffsetFactor: 1, polygonOffsetUnits: 1,
  }));
  surface.frustumCulled = false;
  scene.add(surface);
  const line = (colour) => {
    const lines = new THREE.LineSegments(new THREE.BufferGeometry(), new THREE.LineBasicMaterial({ color: colour }));
    lines.frustumCulled = false;
    scene.add(lines);
    return lines;
  };
  const edgeLines = line("#555555");
  const borderLines = line("#222222");
  const seamLines = line("#222222");
  const arrowLines = { e1: line(words.colours.axes[0]), e3: line(words.colours.axes[2]), fibre: line("#d6006e") };

  const state = { shape: "blade", by: "region", ply: 0, edges: false, arrows: "", hidden: new Set(), picked: -1 };
  let visible = new Int32Array(0);
  const box = { low: [0, 0, 0], high: [0, 0, 0] };

  function showElements() {
    visible = mesh.region.length ? Int32Array.from({ length: size }, (_, e) => e) : visible;
    if (state.hidden.size) visible = visible.filter((e) => !state.hidden.has(mesh.region[e]));
    const each = (sides - 2) * 3;
    const index = new Uint32Array(visible.length * each);
    visible.forEach((e, k) => {
      const first = e * sides;
      for (let t = 0; t < sides - 2; t++) {
        index[k * each + 3 * t] = first;
        index[k * each + 3 * t + 1] = first + t + 1;
        index[k * each + 3 * t + 2] = first + t + 2;
      }
    });
    geometry.setIndex(new THREE.BufferAttribute(index, 1));
    showEdges();
  }

  function showEdges() {
    edgeLines.visible = state.edges;
    if (!state.edges) return;
    const index = new Uint32Array(visible.length * sides * 2);
    // Neighbours run along their common edge in opposite ways: one of them draws it. Those that have no neighbour are
    // drawn as borders, unless regions are hidden.
    const isWhole = state.hidden.size === 0;
    let at = 0;
    for (const e of visible) {
      for (let k = 0; k < sides; k++) {
        if (isWhole && mesh.cells[e * sides + k] > mesh.cells[e * sides + ((k + 1) % sides)]) continue;
        index[at++] = e * sides + k;
        index[at++] = e * sides + ((k + 1) % sides);
      }
    }
    edgeLines.geometry.setAttribute("position", geometry.getAttribute("position"));
    edgeLines.geometry.setIndex(new THREE.BufferAttribute(index.slice(0, at), 1));
  }

  function showBorders() {
    const isFlat = state.shape === "flat";
    borderLines.visible = !isFlat && state.hidden.size === 0;
    seamLines.visible = isFlat;
    if (!isFlat) {
      borderLines.geometry.dispose();
      borderLines.geometry = new THREE.BufferGeometry();
      borderLines.geometry.setAttribute("position", new THREE.BufferAttribute(mesh.points, 3));
      const pairs = state.by === "stack" ? mesh.stack_borders : mesh.region_borders;
      borderLines.geometry.setIndex(new THREE.BufferAttribute(Uint32Array.from(pairs), 1));
    } else if (!seamLines.geometry.getAttribute("position")) {
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
      // Webs have no seams on the skin: both feet and both ends are drawn.
      for (const [k, tops] of Object.entries(webTops())) {
        const y = (arc) => across * (webStart[k] + arc);
        const [first, last] = [tops[0], tops.at(-1)];
        ends.push(0, y(0), first[0], 0, y(0), last[0]);
        for (const [z, top] of [first, last]) ends.push(0, y(0), z, 0, y(top), z);
        for (let i = 1; i < tops.length; i++) ends.push(0, y(tops[i - 1][1]), tops[i - 1][0], 0, y(tops[i][1]), tops[i][0]);
      }
      seamLines.geometry.setAttribute("position", new THREE.BufferAttribute(new Float32Array(ends), 3));
    }
  }

  // Height of every web at each z where it has nodes, root first.
  function webTops() {
    const found = {};
    for (let i = 0; i < n; i++) {
      const k = mesh.region[Math.floor(i / sides)];
      if (!(k in webStart)) continue;
      const tops = (found[k] ??= new Map());
      const z = place[3 * i + 2];
      tops.set(z, Math.max(tops.get(z) ?? 0, mesh.arc[i]));
    }
    return Object.fromEntries(Object.entries(found).map(([k, tops]) => [k, [...tops].sort((a, b) => a[0] - b[0])]));
  }

  // Names beside the developed skin's own parts.
  function showTags() {
    if (state.shape !== "flat") {
      byId("tags").replaceChildren();
      return;
    }
    const [least, most] = words.skin_arc;
    const aft = box.high[2] - 0.16 * (box.high[2] - box.low[2]);
    const spots = [["pressure side", 0.9 * least, aft], ["leading edge", 0, aft], ["suction side", 0.9 * most, aft],
      ...Object.entries(webStart).map(([k, start]) => [regionName(+k), start - 0.3 * gap, box.low[2]])];
    const at = new THREE.Vector3();
    byId("tags").replaceChildren(...spots.map(([name, y, z]) => {
      at.set(0, across * y, z).project(camera);
      const tag = make("span", { class: "tag" }, name);
      tag.style.left = `${Math.max(Math.min((0.5 + 0.5 * at.x) * canvas.clientWidth, canvas.clientWidth - 7 * name.length), 4)}px`;
      tag.style.top = `${(0.5 - 0.5 * at.y) * canvas.clientHeight}px`;
      return tag;
    }));
  }

  function paint() {
    const chosen = paintOf(mesh, state.by, state.ply);
    for (let e = 0; e < size; e++) {
      const [r, g, b] = chosen.of(e);
      for (let i = 4 * e * sides, end = i + 4 * sides; i < end; i += 4) {
        bytes[i] = r;
        bytes[i + 1] = g;
        bytes[i + 2] = b;
      }
    }
    colours.needsUpdate = true;
    byId("legend").replaceChildren(chosen.legend() ?? "");
  }

  // One arrow in every cell of a grid as wide as an arrow on the screen, so that they stay apart at every zoom.
  function showArrows() {
    const kinds = { e1: ["e1"], e3: ["e3"], both: ["e1", "e3"], fibre: ["fibre"] }[state.arrows] ?? [];
    for (const [name, lines] of Object.entries(arrowLines)) lines.visible = kinds.includes(name);
    byId("thinned").textContent = "";
    if (!kinds.length) return;
    const cell = 34 / camera.zoom;
    const taken = new Map();
    const width = canvas.clientWidth / 2, height = canvas.clientHeight / 2;
    camera.updateMatrixWorld();
    const point = new THREE.Vector3();
    for (const e of visible) {
      if (kinds[0] === "fibre" && angleOf(e) === null) continue;
      point.set(centres[3 * e], centres[3 * e + 1], centres[3 * e + 2]);
      const key = `${Math.floor(point.x / cell)} ${Math.floor(point.y / cell)} ${Math.floor(point.z / cell)} ${words.regions[mesh.region[e]].side}`;
      if (taken.has(key)) continue;
      point.applyMatrix4(camera.matrixWorldInverse);
      if (Math.abs(point.x * camera.zoom) > width || Math.abs(point.y * camera.zoom) > height) continue;
      taken.set(key, e);
    }
    arrowLines.fibre.material.color.set(state.by === "region" ? "#000000" : "#d6006e");
    for (const kind of kinds) {
      const ends = [];
      for (const e of taken.values()) addArrow(ends, e, kind, 0.75 * cell);
      const lines = arrowLines[kind];
      lines.geometry.dispose();
      lines.geometry = new THREE.BufferGeometry();
      lines.geometry.setAttribute("position", new THREE.BufferAttribute(new Float32Array(ends), 3));
    }
    byId("thinned").textContent = `Arrows on ${grouped(taken.size)} of ${grouped(visible.length)} elements; zoom in for more. ` +
      "e1 is orange, e3 is the ink's colour, fibres are thick lines.";
  }

  const angleOf = (e) => {
    const layer = mesh.stack[e] < 0 ? null : words.stacks[mesh.stack[e]].layers.find((one) => one[0] === state.ply);
    return layer ? layer[3] : null;
  };

  function axesOf(e) {
    const e1 = [0, 1, 2].map((d) => mesh.e1[3 * e + d] / HIGH);
    const e3 = [0, 1, 2].map((d) => mesh.e3[3 * e + d] / HIGH);
    const e2 = [0, 1, 2].map((d) => e3[(d + 1) % 3] * e1[(d + 2) % 3] - e3[(d + 2) % 3] * e1[(d + 1) % 3]);
    return { e1, e2, e3 };
  }

  // On the developed skin a direction is carried over by the element's own two edges through its first corner.
  function flattened(e, direction) {
    if (state.shape !== "flat") return direction;
    const corner = (places, k) => [0, 1, 2].map((d) => places[3 * (e * sides + k) + d]);
    const from = (places) => {
      const c = [0, 1, sides - 1].map((k) => corner(places, k));
      return [1, 2].map((k) => c[k].map((x, d) => x - c[0][d]));
    };
    const [a, b] = from(place);
    const [fa, fb] = from(flat());
    const dot = (p, q) => p[0] * q[0] + p[1] * q[1] + p[2] * q[2];
    const aa = dot(a, a), ab = dot(a, b), bb = dot(b, b), da = dot(direction, a), db = dot(direction, b);
    const det = aa * bb - ab * ab || 1;
    const s = (da * bb - db * ab) / det, t = (db * aa - da * ab) / det;
    return fa.map((x, d) => s * x + t * fb[d]);
  }

  function addArrow(ends, e, kind, length) {
    const { e1, e2, e3 } = axesOf(e);
    let way = kind === "e3" ? e3 : e1;
    if (kind === "fibre") {
      const angle = (angleOf(e) * Math.PI) / 180;
      way = e1.map((x, d) => Math.cos(angle) * x + Math.sin(angle) * e2[d]);
    }
    let lift = e3, cross = kind === "e3" ? e1 : e2;
    if (state.shape === "flat") {
      if (kind === "e3") return;
      way = flattened(e, way);
      lift = [1, 0, 0];
      cross = [0, -way[2], way[1]];
    }
    const at = [0, 1, 2].map((d) => centres[3 * e + d] + 0.02 * length * lift[d]);
    const start = kind === "fibre" ? at.map((x, d) => x - 0.5 * length * way[d]) : at;
    const tip = start.map((x, d) => x + length * way[d]);
    ends.push(...start, ...tip);
    if (kind === "fibre") {
      // Lines are a pixel wide: two more beside it make it stand out.
      const beside = state.shape === "flat" ? [0, -way[2], way[1]] : [0, 1, 2].map((d) => e3[(d + 1) % 3] * way[(d + 2) % 3] - e3[(d + 2) % 3] * way[(d + 1) % 3]);
      for (const s of [-0.8, 0.8]) for (const end of [start, tip]) ends.push(...end.map((x, d) => x + (s / camera.zoom) * beside[d]));
      return;
    }
    for (const s of [-1, 1]) ends.push(...tip, ...tip.map((x, d) => x - 0.28 * length * way[d] + s * 0.14 * length * cross[d]));
  }

  // Several changes at once are drawn once.
  let waiting = 0;
  function render() {
    waiting ||= requestAnimationFrame(draw);
  }

  function draw() {
    cancelAnimationFrame(waiting);
    waiting = 0;
    lamp.position.copy(camera.position).sub(controls.target).normalize();
    lamp.position.y += 0.35 * up;
    lamp.position.z -= 0.2;
    renderer.render(scene, camera);
    showScale();
    showRing();
    showTags();
  }

  function showScale() {
    const most = 0.25 * canvas.clientWidth / camera.zoom;
    const power = 10 ** Math.floor(Math.log10(most));
    const length = [5, 2, 1].map((k) => k * power).find((x) => x <= most) ?? power;
    byId("scale").style.width = `${length * camera.zoom}px`;
    byId("scale").firstElementChild.textContent = length >= 1 ? `${length} m` : `${+(length * 1e3).toPrecision(3)} mm`;
  }

  function showRing() {
    const ring = byId("ring");
    ring.toggleAttribute("hidden", state.picked < 0);
    if (state.picked < 0) return;
    const e = state.picked;
    const at = new THREE.Vector3(centres[3 * e], centres[3 * e + 1], centres[3 * e + 2]).project(camera);
    const outside = Math.abs(at.x) > 1 || Math.abs(at.y) > 1;
    ring.toggleAttribute("hidden", outside);
    ring.style.left = `${(0.5 + 0.5 * at.x) * canvas.clientWidth}px`;
    ring.style.top = `${(0.5 - 0.5 * at.y) * canvas.clientHeight}px`;
  }

  const controls = new THREE.OrbitControls(camera, canvas);
  controls.enableDamping = false;
  controls.enableZoom = false; // only after a click, so that the wheel goes on scrolling the page
  controls.addEventListener("change", render);
  controls.addEventListener("end", () => { if (state.arrows) { showArrows(); render(); } });
  canvas.addEventListener("focus", () => { controls.enableZoom = true; });
  canvas.addEventListener("blur", () => { controls.enableZoom = false; });

  const DIRECTIONS = {
    suction: [1, 0, 0], pressure: [-1, 0, 0], leading: [0, up, 0.0001], trailing: [0, -up, 0.0001], root: [0, 0, -1], oblique: [0.8, 0.42 * up, -0.62],
  };

  // A view of this direction with the whole blade inside the frame.
  function look(name) {
    const direction = new THREE.Vector3(...DIRECTIONS[state.shape === "flat" ? "suction" : name]).normalize();
    // The edges are looked at with the suction side up.
    camera.up.set(...(name === "leading" || name === "trailing") && state.shape !== "flat" ? [1, 0, 0] : [0, up, 0]);
    controls.object.up.copy(camera.up);
    const low = new THREE.Vector3(...box.low), high = new THREE.Vector3(...box.high);
    controls.target.copy(low).add(high).multiplyScalar(0.5);
    const reach = Math.max(high.distanceTo(low), 1);
    camera.position.copy(controls.target).addScaledVector(direction, 2 * reach);
    camera.near = -4 * reach;
    camera.far = 8 * reach;
    camera.lookAt(controls.target);
    camera.updateMatrixWorld();
    let width = 0, height = 0;
    for (let k = 0; k < 8; k++) {
      const corner = new THREE.Vector3(...[0, 1, 2].map((d) => ((k >> d) & 1 ? box.high : box.low)[d]));
      corner.applyMatrix4(camera.matrixWorldInverse);
      width = Math.max(width, Math.abs(corner.x));
      height = Math.max(height, Math.abs(corner.y));
    }
    camera.zoom = 0.47 * Math.min(canvas.clientWidth / width, canvas.clientHeight / height);
    camera.updateProjectionMatrix();
    // OrbitControls keeps the way up that it was made with.
    controls._quat?.setFromUnitVectors(camera.up, new THREE.Vector3(0, 1, 0));
    if (controls._quatInverse) controls._quatInverse.copy(controls._quat).invert();
    controls.update();
    byId("compass").textContent = state.shape === "flat"
      ? "Root on the left; lines are seams and rows; webs below, pressure foot up." : "";
    showArrows();
    render();
  }

  function zoom(factor) {
    camera.zoom *= factor;
    camera.updateProjectionMatrix();
    showArrows();
    render();
  }

  function resize() {
    const width = stage.clientWidth, height = stage.clientHeight;
    if (!width || !height || (width === camera.right - camera.left && height === camera.top - camera.bottom)) return;
    renderer.setSize(width, height, false);
    [camera.left, camera.right, camera.top, camera.bottom] = [-width / 2, width / 2, height / 2, -height / 2];
    camera.updateProjectionMatrix();
    render();
  }

  function theme() {
    const style = getComputedStyle(document.documentElement);
    renderer.setClearColor(style.getPropertyValue("--canvas").trim());
    const dark = matchMedia("(prefers-color-scheme: dark)").matches;
    arrowLines.e3.material.color.set(dark ? "#f4f4f0" : "#111111");
    render();
  }

  function pickAt(x, y) {
    const frame = canvas.getBoundingClientRect();
    const ray = new THREE.Raycaster();
    ray.setFromCamera(new THREE.Vector2((2 * (x - frame.left)) / frame.width - 1, 1 - (2 * (y - frame.top)) / frame.height), camera);
    ray.near = Math.max(camera.near, 0);
    geometry.computeBoundingSphere();
    const hit = ray.intersectObject(surface, false)[0];
    return hit ? visible[Math.floor(hit.faceIndex / (sides - 2))] : -1;
  }

  const api = {
    state, look, zoom, resize, theme, pickAt, draw, render, axesOf,
    visible: () => visible,
    set(changes) {
      Object.assign(state, changes);
      if ("shape" in changes) {
        const places = state.shape === "flat" ? flat() : place;
        geometry.setAttribute("position", new THREE.BufferAttribute(places, 3));
        findCentres(places);
        box.low = [Infinity, Infinity, Infinity];
        box.high = [-Infinity, -Infinity, -Infinity];
        for (let i = 0; i < places.length; i++) {
          box.low[i % 3] = Math.min(box.low[i % 3], places[i]);
          box.high[i % 3] = Math.max(box.high[i % 3], places[i]);
        }
      }
      if ("shape" in changes || "hidden" in changes) showElements();
      if ("edges" in changes) showEdges();
      if ("shape" in changes || "by" in changes || "hidden" in changes) showBorders();
      if ("by" in changes || "ply" in changes) paint();
      if ("shape" in changes) look("suction");
      showArrows();
      render();
    },
    // Wait until the picture is there.
    settle: () => renderer.getContext().finish(),
    goTo(e) {
      const at = new THREE.Vector3(centres[3 * e], centres[3 * e + 1], centres[3 * e + 2]);
      const { kind } = words.regions[mesh.region[e]];
      const { e3 } = axesOf(e);
      const facing = (name) => DIRECTIONS[name].reduce((sum, x, d) => sum + x * e3[d], 0);
      const views = ["suction", "pressure", "leading", "trailing"];
      if (state.shape !== "flat") look(views.reduce((best, name) => (facing(name) > facing(best) ? name : best)));
      camera.position.add(at).sub(controls.target);
      controls.target.copy(at);
      if (kind === "web" && state.shape !== "flat") {
        // What lies before the web is cut away until another view is chosen.
        camera.near = camera.position.distanceTo(at) - 0.03;
        byId("compass").textContent = "What lies before this web is cut away; choose another view to see all again.";
      }
      const corner = 3 * e * sides;
      const edge = Math.hypot(...[0, 1, 2].map((d) => place[corner + d] - place[corner + 3 + d]));
      camera.zoom = Math.max(camera.zoom, 22 / Math.max(edge, 1e-6));
      camera.updateProjectionMatrix();
      controls.update();
      showArrows();
      render();
    },
    turn(dx, dy) {
      controls._rotateLeft?.(dx);
      controls._rotateUp?.(dy);
      controls.update();
      showArrows();
    },
    move(dx, dy) {
      const shift = new THREE.Vector3(dx / camera.zoom, dy / camera.zoom, 0).applyQuaternion(camera.quaternion);
      camera.position.add(shift);
      controls.target.add(shift);
      controls.update();
      showArrows();
      render();
    },
  };
  return api;
}

// Arc of a seam at z, from its points.
function arcAt(points, z) {
  let k = points.findIndex(([at]) => at >= z);
  if (k < 0) k = points.length - 1;
  if (k <= 0) return points.length ? points[0][1] : 0;
  const [z0, s0] = points[k - 1], [z1, s1] = points[k];
  return z1 === z0 ? s1 : s0 + ((z - z0) / (z1 - z0)) * (s1 - s0);
}
