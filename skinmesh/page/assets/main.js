// Put the parts together.

const trouble = (text) => {
  byId("trouble").hidden = false;
  byId("trouble").textContent = text;
};

function showControls(viewer, mesh) {
  const regions = byId("regions");
  const boxes = words.regions.map((region, k) => {
    const box = make("input", { type: "checkbox", checked: true, value: String(k) });
    const label = make("label", {}, box, swatch(region.colour), make("span", {}, region.name));
    box.addEventListener("change", () => { label.className = box.checked ? "" : "off"; update(); });
    regions.append(label);
    return box;
  });
  const update = () => viewer.set({ hidden: new Set(boxes.filter((box) => !box.checked).map((box) => +box.value)) });
  const all = (checked) => () => {
    boxes.forEach((box) => { box.checked = checked; box.parentElement.className = checked ? "" : "off"; });
    update();
  };
  byId("all-regions").addEventListener("click", all(true));
  byId("no-regions").addEventListener("click", all(false));
  byId("ply").append(...words.plies.map((name, k) => make("option", { value: k }, name)));
  byId("colour-by").addEventListener("change", (event) => viewer.set({ by: event.target.value }));
  byId("ply").addEventListener("change", (event) => {
    if (viewer.state.arrows !== "fibre" && byId("colour-by").value !== "angle") byId("colour-by").value = "cover";
    viewer.set({ ply: +event.target.value, by: byId("colour-by").value });
  });
  byId("arrows").addEventListener("change", (event) => viewer.set({ arrows: event.target.value }));
  byId("edges").addEventListener("change", (event) => viewer.set({ edges: event.target.checked }));
  byId("controls").addEventListener("submit", (event) => event.preventDefault());
  for (const radio of document.querySelectorAll("input[name=shape]")) {
    radio.addEventListener("change", () => radio.checked && viewer.set({ shape: radio.value }));
  }
  for (const button of document.querySelectorAll("[data-view]")) {
    button.addEventListener("click", () => {
      if (viewer.state.shape === "flat") {
        document.querySelector("input[name=shape][value=blade]").checked = true;
        viewer.set({ shape: "blade" });
      }
      viewer.look(button.dataset.view);
    });
  }
  for (const button of document.querySelectorAll("[data-zoom]")) button.addEventListener("click", () => viewer.zoom(+button.dataset.zoom));
}

function showPicking(viewer, mesh) {
  const canvas = byId("view");
  const pick = (e) => {
    viewer.state.picked = e;
    showPicked(mesh, e);
    viewer.render();
  };
  const goTo = (number) => {
    const e = pickNumber(mesh, number, pick);
    if (e >= 0) viewer.goTo(e);
  };
  let down = null;
  canvas.addEventListener("pointerdown", (event) => { down = [event.clientX, event.clientY]; });
  canvas.addEventListener("pointerup", (event) => {
    if (down && event.button === 0 && Math.hypot(event.clientX - down[0], event.clientY - down[1]) < 4) {
      const e = viewer.pickAt(event.clientX, event.clientY);
      if (e >= 0) pick(e);
    }
    down = null;
  });
  canvas.addEventListener("keydown", (event) => {
    const step = { ArrowLeft: [1, 0], ArrowRight: [-1, 0], ArrowUp: [0, 1], ArrowDown: [0, -1] }[event.key];
    if (step && event.shiftKey) viewer.move(-40 * step[0], 40 * step[1]);
    else if (step) viewer.turn(0.1 * step[0], 0.1 * step[1]);
    else if (event.key === "+" || event.key === "=") viewer.zoom(1.3);
    else if (event.key === "-") viewer.zoom(1 / 1.3);
    else return;
    event.preventDefault();
  });
  byId("find").addEventListener("submit", (event) => {
    event.preventDefault();
    goTo(Number.parseInt(byId("find-number").value, 10));
  });
  byId("go-picked").addEventListener("click", () => viewer.state.picked >= 0 && viewer.goTo(viewer.state.picked));
  return { pick, goTo };
}

// Paper shows the blade from both sides and laid flat, in the colours chosen; a view turned by hand comes first.
function showOnPaper(viewer) {
  const views = () => [...(viewer.state.view in VIEWS ? [] : ["now"]), "suction", "pressure", "flat"];
  const caption = (view) => (view === "now" ? "As on the screen" : `${VIEWS[view].name}: ${whatIsUp(view)}`);
  window.addEventListener("beforeprint", () => {
    if (byId("stills").childElementCount) return;
    byId("stills").append(...viewer.stills(views(), 1000).map(([view, picture]) =>
      make("figure", {}, picture, make("figcaption", {}, caption(view)))));
  });
  window.addEventListener("afterprint", () => byId("stills").replaceChildren());
}

// What remains without WebGL: still pictures, and elements by number.
function showPlainly(mesh) {
  document.body.classList.add("plain");
  byId("stills").append(...plainPictures(mesh, 1000));
  byId("legend").replaceChildren(paintOf(mesh, "region", 0).legend());
  byId("picked").firstElementChild.textContent = "Type the number of an element, or click a wall of the cut.";
  const pick = (e) => showPicked(mesh, e);
  const goTo = (number) => pickNumber(mesh, number, pick);
  byId("find").addEventListener("submit", (event) => {
    event.preventDefault();
    goTo(Number.parseInt(byId("find-number").value, 10));
  });
  return { pick, goTo };
}

function pickNumber(mesh, number, pick) {
  const e = mesh.number.indexOf(number);
  if (e >= 0) pick(e);
  else byId("picked").replaceChildren(make("p", {}, `There is no element ${number}.`));
  return e;
}

async function start() {
  showHead();
  const mesh = await readMesh();
  let viewer;
  try {
    viewer = makeViewer(mesh);
  } catch (error) {
    trouble(`This browser cannot draw in three dimensions (WebGL); the blade stands here in still pictures. It says: ${error.message}`);
  }
  let picking;
  if (!viewer) picking = showPlainly(mesh);
  else {
    showControls(viewer, mesh);
    picking = showPicking(viewer, mesh);
    showOnPaper(viewer);
    viewer.resize();
    viewer.set({ by: "region", ply: 0, shape: "blade" });
    viewer.theme();
    viewer.draw();
    viewer.settle();
    new ResizeObserver(() => viewer.resize()).observe(byId("stage"));
    matchMedia("(prefers-color-scheme: dark)").addEventListener("change", viewer.theme);
  }
  document.documentElement.dataset.drawn = String(Math.round(performance.now()));
  // The rest may wait until the blade is on the screen.
  await new Promise((done) => setTimeout(done));
  const cut = makeCut(mesh, picking.pick);
  words.span = mesh.zRange;
  const mark = showCharts();
  cut.set({ z: words.stations.length ? words.stations[words.stations.length >> 1] : (mesh.zRange[0] + mesh.zRange[1]) / 2 });
  mark(cut.state.z);
  for (const id of ["cut-slider", "cut-z", "cut-station"]) {
    for (const kind of ["input", "change"]) byId(id).addEventListener(kind, () => mark(cut.state.z));
  }
  new ResizeObserver(() => cut.redraw()).observe(byId("cut-view"));
  showPlies((ply) => {
    byId("ply").value = ply;
    byId("colour-by").value = "cover";
    viewer?.set({ ply, by: "cover" });
  });
  showStacks();
  showChecks(picking.goTo);
  showLines();
  showInputs();
  window.skinmeshPage = { words, mesh, viewer, cut, cutAt, layersOf, jointsOf, elementFacts, ...picking };
  document.documentElement.dataset.ready = String(Math.round(performance.now()));
}

start().catch((error) => {
  trouble(`This page could not be drawn: ${error.message}`);
  throw error;
});
