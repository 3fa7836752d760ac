// What stands over the drawing: where one looks from, the axes, a bar of length, names, the ring round an element.

function showOverlay({ state, places, eye, canvas }) {
  const { camera } = eye;
  const width = canvas.clientWidth, height = canvas.clientHeight;
  const onScreen = (point) => {
    const at = point.project(camera);
    return [(0.5 + 0.5 * at.x) * width, (0.5 - 0.5 * at.y) * height, Math.abs(at.x) <= 1 && Math.abs(at.y) <= 1];
  };

  byId("compass").textContent = state.view === "web" ? "What lies before this web is cut away; choose another view to see all again."
    : state.view ? `${VIEWS[state.view].name}: ${whatIsUp(state.view)}` : "";

  const [length, name] = roundLength((0.25 * width) / camera.zoom);
  byId("scale").style.width = `${length * camera.zoom}px`;
  byId("scale").firstElementChild.textContent = name;

  const ring = byId("ring");
  ring.toggleAttribute("hidden", state.picked < 0);
  if (state.picked >= 0) {
    const [x, y, isInside] = onScreen(places.centre(state.picked));
    ring.toggleAttribute("hidden", !isInside);
    ring.style.left = `${x}px`;
    ring.style.top = `${y}px`;
  }

  showTriad(state, camera);
  showTags(state, places, onScreen, width);
}

// A round length up to this one, and its name.
function roundLength(most) {
  const power = 10 ** Math.floor(Math.log10(most));
  const length = [5, 2, 1].map((k) => k * power).find((x) => x <= most) ?? power;
  return [length, length >= 1 ? `${length} m` : `${+(length * 1e3).toPrecision(3)} mm`];
}

// Names and a bar of length on a picture for paper, two pixels of which are one here.
function writeOn(pen, names, camera, width, height) {
  pen.scale(2, 2);
  pen.fillStyle = "#222222";
  pen.font = "11px sans-serif";
  pen.textBaseline = "middle";
  let last = -Infinity;
  for (const [name, y, z, kind] of names) {
    const at = new THREE.Vector3(0, y, z).project(camera);
    const left = (0.5 + 0.5 * at.x) * width;
    if (kind === "station" && left - last < 16) continue;
    if (kind === "station") last = left;
    pen.textAlign = kind ? "center" : "left";
    pen.fillText(name, kind ? left : Math.max(Math.min(left, width - 6.5 * name.length), 2), (0.5 - 0.5 * at.y) * height + (kind ? 8 * leadingSign : 0));
  }
  const [length, name] = roundLength((0.2 * width) / camera.zoom);
  pen.fillRect(width - 4 - length * camera.zoom, height - 5, length * camera.zoom, 1.5);
  pen.textAlign = "right";
  pen.fillText(name, width - 4, height - 13);
}

// The blade's axes as the eye sees them now.
function showTriad(state, camera) {
  const parts = [];
  byId("triad").toggleAttribute("hidden", state.shape === "flat");
  if (state.shape === "flat") return;
  for (const [name, axis] of [["x", [1, 0, 0]], ["y", [0, 1, 0]], ["z", [0, 0, 1]]]) {
    const way = new THREE.Vector3(...axis).applyQuaternion(camera.quaternion.clone().invert());
    const [x, y] = [18 * way.x, -18 * way.y];
    parts.push(makeSvg("line", { x2: x.toFixed(2), y2: y.toFixed(2) }));
    if (Math.hypot(x, y) > 4) parts.push(makeSvg("text", { x: (1.38 * x).toFixed(2), y: (1.38 * y + 3.5).toFixed(2) }, name));
  }
  byId("triad").replaceChildren(...parts);
}

// Names beside the developed skin's own parts, numbers at its stations.
function showTags(state, places, onScreen, width) {
  if (state.shape !== "flat") {
    byId("tags").replaceChildren();
    return;
  }
  let last = -Infinity;
  const tags = [];
  for (const [name, y, z, kind] of places.flatNames()) {
    const [left, top, isInside] = onScreen(new THREE.Vector3(0, y, z));
    if (kind === "station" && (left - last < 18 || !isInside)) continue;
    if (kind === "station") last = left;
    const tag = make("span", { class: `tag ${kind}` }, name);
    tag.style.left = `${kind ? left : Math.max(Math.min(left, width - 7 * name.length), 4)}px`;
    tag.style.top = `${top + (kind ? 10 * leadingSign : 0)}px`;
    tags.push(tag);
  }
  byId("tags").replaceChildren(...tags);
}
