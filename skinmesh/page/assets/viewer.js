// The blade and the developed skin, drawn by three.js: the same elements in two sets of places.

function makeViewer(mesh) {
  const { sides, size } = mesh;
  const canvas = byId("view"), stage = byId("stage");
  THREE.ColorManagement.enabled = false;
  // The drawing is kept after it was shown, so that it can be printed, saved and read back.
  const renderer = new THREE.WebGLRenderer({ canvas, antialias: true, preserveDrawingBuffer: true });
  renderer.outputColorSpace = THREE.LinearSRGBColorSpace;
  renderer.setPixelRatio(Math.min(window.devicePixelRatio, 2));
  const scene = new THREE.Scene();
  scene.add(new THREE.AmbientLight(0xffffff, 0.74 * Math.PI));
  const lamp = new THREE.DirectionalLight(0xffffff, 0.32 * Math.PI);
  scene.add(lamp);

  const state = { shape: "blade", view: "suction", by: "region", ply: 0, edges: false, arrows: "", hidden: new Set(), picked: -1 };
  const places = makePlaces(mesh);
  const geometry = new THREE.BufferGeometry();
  geometry.setAttribute("position", new THREE.BufferAttribute(places.now.places, 3));
  const bytes = new Uint8Array(size * sides * 4).fill(255);
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
  const edgeLines = line("#555555"), borderLines = line("#222222"), flatLines = line("#222222");
  const arrowLines = { e1: line(words.colours.axes[0]), e3: line(words.colours.axes[2]), fibre: line("#d6006e") };
  const drawArrows = makeArrows(mesh, places, arrowLines);
  const showArrows = () => drawArrows(state, visible, eye.camera, canvas.clientWidth, canvas.clientHeight);
  const eye = makeEye(canvas, places, {
    moved(byHand) {
      if (byHand) state.view = "";
      render();
    },
    settled() { if (state.arrows) { showArrows(); render(); } },
  });
  let visible = new Int32Array(0);

  function showElements() {
    visible = Int32Array.from({ length: size }, (_, e) => e);
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
    flatLines.visible = isFlat;
    if (!isFlat) {
      borderLines.geometry.dispose();
      borderLines.geometry = new THREE.BufferGeometry();
      borderLines.geometry.setAttribute("position", new THREE.BufferAttribute(mesh.points, 3));
      const pairs = state.by === "stack" ? mesh.stack_borders : mesh.region_borders;
      borderLines.geometry.setIndex(new THREE.BufferAttribute(Uint32Array.from(pairs), 1));
    } else if (!flatLines.geometry.getAttribute("position")) {
      flatLines.geometry.setAttribute("position", new THREE.BufferAttribute(places.flatLines(), 3));
    }
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

  // Several changes at once are drawn once.
  let waiting = 0;
  function render() {
    waiting ||= requestAnimationFrame(draw);
  }

  function draw() {
    cancelAnimationFrame(waiting);
    waiting = 0;
    expose();
    showOverlay({ state, places, eye, canvas });
  }

  // In light from behind the eye's left shoulder.
  function expose() {
    const { camera } = eye;
    const [right, up] = [[1, 0, 0], [0, 1, 0]].map((axis) => new THREE.Vector3(...axis).applyQuaternion(camera.quaternion));
    lamp.position.copy(camera.position).sub(eye.target()).normalize().addScaledVector(right, -0.2).addScaledVector(up, 0.35);
    renderer.render(scene, camera);
  }

  function look(view) {
    state.view = state.shape === "flat" ? "flat" : view;
    eye.look(state.view);
    showArrows();
    render();
  }

  function zoom(factor) {
    eye.zoom(factor);
    showArrows();
    render();
  }

  function resize() {
    const width = stage.clientWidth, height = stage.clientHeight;
    if (!width || !height || (width === eye.camera.right - eye.camera.left && height === eye.camera.top - eye.camera.bottom)) return;
    renderer.setSize(width, height, false);
    eye.frame(width, height);
    if (VIEWS[state.view]) look(state.view); // nobody has turned or moved it: it still fits
    render();
  }

  function theme() {
    const style = getComputedStyle(document.documentElement);
    renderer.setClearColor(style.getPropertyValue("--canvas").trim());
    const dark = matchMedia("(prefers-color-scheme: dark)").matches;
    arrowLines.e3.material.color.set(dark ? "#f4f4f0" : "#111111");
    // Outlines that pale and dark colours stand out of on either ground.
    borderLines.material.color.set(dark ? "#0b0d10" : "#222222");
    render();
  }

  function pickAt(x, y) {
    const frame = canvas.getBoundingClientRect();
    const ray = new THREE.Raycaster();
    ray.setFromCamera(new THREE.Vector2((2 * (x - frame.left)) / frame.width - 1, 1 - (2 * (y - frame.top)) / frame.height), eye.camera);
    ray.near = Math.max(eye.camera.near, 0);
    geometry.computeBoundingSphere();
    const hit = ray.intersectObject(surface, false)[0];
    return hit ? visible[Math.floor(hit.faceIndex / (sides - 2))] : -1;
  }

  // The view that faces an element, with it in the middle.
  function goTo(e) {
    const at = places.centre(e);
    const { e3 } = axesOf(mesh, e);
    const facing = (view) => VIEWS[view].from.reduce((sum, x, d) => sum + x * e3[d], 0);
    const views = ["suction", "pressure", "leading", "trailing"];
    look(views.reduce((best, view) => (facing(view) > facing(best) ? view : best)));
    eye.moveTo(at);
    if (words.regions[mesh.region[e]].kind === "web" && state.shape !== "flat") {
      // What lies before the web is cut away until another view is chosen.
      eye.camera.near = eye.camera.position.distanceTo(at) - 0.03;
      state.view = "web";
    } else state.view = "";
    eye.zoom(Math.max(1, 22 / Math.max(places.edge(e), 1e-6) / eye.camera.zoom));
    showArrows();
    render();
  }

  // Pictures of the blade for paper: a canvas for each view, on white, as wide as given.
  function stills(views, width) {
    const kept = { eye: eye.place(), state: { ...state }, ratio: renderer.getPixelRatio() };
    const screen = [eye.camera.right - eye.camera.left, eye.camera.top - eye.camera.bottom];
    const dark = arrowLines.e3.material.color.clone();
    arrowLines.e3.material.color.set("#111111");
    renderer.setClearColor("#ffffff");
    renderer.setPixelRatio(2);
    const found = views.map((view) => {
      const isNow = view === "now";
      if (!isNow) set({ shape: view === "flat" ? "flat" : "blade" });
      const { low, high } = places.now.box;
      // As tall as the blade is in this view, whose pitch axis runs across.
      const tall = isNow ? (width * screen[1]) / screen[0] : Math.min(Math.max((1.15 * width * Math.max(high[0] - low[0], high[1] - low[1])) / (high[2] - low[2]), 90), 0.6 * width);
      renderer.setSize(width, tall, false);
      eye.frame(width, tall);
      if (isNow) eye.zoom(width / screen[0]);
      else look(view);
      expose();
      const copy = make("canvas", { width: 2 * width, height: Math.round(2 * tall) });
      const pen = copy.getContext("2d");
      pen.drawImage(canvas, 0, 0);
      writeOn(pen, view === "flat" ? places.flatNames() : [], eye.camera, width, tall);
      if (isNow) eye.restore(kept.eye);
      return [view, copy];
    });
    renderer.setPixelRatio(kept.ratio);
    renderer.setSize(screen[0], screen[1], false);
    eye.frame(...screen);
    set({ shape: kept.state.shape });
    Object.assign(state, kept.state);
    eye.restore(kept.eye);
    state.view = kept.state.view;
    theme();
    arrowLines.e3.material.color.copy(dark);
    showArrows();
    draw();
    return found;
  }

  function set(changes) {
    Object.assign(state, changes);
    if ("shape" in changes) {
      places.choose(state.shape);
      geometry.setAttribute("position", new THREE.BufferAttribute(places.now.places, 3));
    }
    if ("shape" in changes || "hidden" in changes) showElements();
    if ("edges" in changes) showEdges();
    if ("shape" in changes || "by" in changes || "hidden" in changes) showBorders();
    if ("by" in changes || "ply" in changes) paint();
    if ("shape" in changes) look("suction");
    showArrows();
    render();
  }

  return {
    state, look, zoom, resize, theme, pickAt, draw, render, set, goTo, stills,
    visible: () => visible,
    // Wait until the picture is there.
    settle: () => renderer.getContext().finish(),
    turn(dx, dy) { state.view = ""; eye.turn(dx, dy); showArrows(); render(); },
    move(dx, dy) { state.view = ""; eye.move(dx, dy); showArrows(); render(); },
  };
}
