// The eye: fixed views, turning, moving and zooming. Only the public parts of three.js are used.

const VIEWS = {
  suction: { from: [1, 0, 0], name: "Suction side" }, pressure: { from: [-1, 0, 0], name: "Pressure side" },
  leading: { from: [0, leadingSign, 0], name: "Leading edge" }, trailing: { from: [0, -leadingSign, 0], name: "Trailing edge" },
  root: { from: [0, 0, -1], name: "From the root" }, oblique: { from: [0.8, 0.42 * leadingSign, -0.62], name: "Oblique" },
  flat: { from: [1, 0, 0], name: "Developed skin" },
};

// The way up that puts the root on the left; from the root itself the suction side is up, as in a cut.
function upOf(from) {
  const up = new THREE.Vector3(...from).cross(new THREE.Vector3(0, 0, 1));
  return up.length() < 1e-6 ? up.set(1, 0, 0) : up.normalize();
}

function whatIsUp(view) {
  const { x, y } = upOf(VIEWS[view].from);
  if (view === "flat") return `root on the left, ${leadingSign < 0 ? "pressure" : "suction"} side above, leading edge between; numbers are stations; webs seen from the leading edge`;
  if (view === "oblique") return "root in front";
  if (view === "root") return `suction side up, leading edge on the ${leadingSign < 0 ? "left" : "right"}`;
  const part = Math.abs(x) > Math.abs(y) ? `${x > 0 ? "suction" : "pressure"} side` : `${Math.sign(y) === leadingSign ? "leading" : "trailing"} edge`;
  return `${part} up, root on the left`;
}

function makeEye(canvas, places, { moved, settled }) {
  const camera = new THREE.OrthographicCamera(-1, 1, 1, -1, -1e4, 1e4);
  let controls = null;
  let isHeld = false;
  let wheel = false; // only after a click, so that the wheel goes on scrolling the page
  canvas.addEventListener("focus", () => { wheel = true; controls.enableZoom = true; });
  canvas.addEventListener("blur", () => { wheel = false; controls.enableZoom = false; });

  // OrbitControls keeps the way up that it was made with, so each way up has its own.
  function setUp(up) {
    if (controls && camera.up.distanceTo(up) < 1e-9) return;
    const target = controls ? controls.target.clone() : new THREE.Vector3();
    controls?.dispose();
    camera.up.copy(up);
    controls = new THREE.OrbitControls(camera, canvas);
    controls.enableDamping = false;
    controls.enableZoom = wheel;
    controls.target.copy(target);
    controls.addEventListener("start", () => { isHeld = true; });
    controls.addEventListener("change", () => moved(isHeld));
    controls.addEventListener("end", () => { isHeld = false; settled(); });
  }
  setUp(upOf(VIEWS.suction.from));

  // A view of this direction with the whole blade inside the frame.
  function look(view) {
    const { low: lowest, high: highest } = places.now.box;
    const low = new THREE.Vector3(...lowest), high = new THREE.Vector3(...highest);
    const from = new THREE.Vector3(...VIEWS[view].from).normalize();
    setUp(upOf(VIEWS[view].from));
    controls.target.copy(low).add(high).multiplyScalar(0.5);
    const reach = Math.max(high.distanceTo(low), 1);
    camera.position.copy(controls.target).addScaledVector(from, 2 * reach);
    camera.near = -4 * reach;
    camera.far = 8 * reach;
    camera.lookAt(controls.target);
    camera.updateMatrixWorld();
    let width = 0, height = 0;
    for (let k = 0; k < 8; k++) {
      const corner = new THREE.Vector3(...[0, 1, 2].map((d) => ((k >> d) & 1 ? highest : lowest)[d])).applyMatrix4(camera.matrixWorldInverse);
      width = Math.max(width, Math.abs(corner.x));
      height = Math.max(height, Math.abs(corner.y));
    }
    camera.zoom = 0.47 * Math.min((camera.right - camera.left) / width, (camera.top - camera.bottom) / height);
    camera.updateProjectionMatrix();
    controls.update();
  }

  function zoom(factor) {
    camera.zoom *= factor;
    camera.updateProjectionMatrix();
  }

  function frame(width, height) {
    [camera.left, camera.right, camera.top, camera.bottom] = [-width / 2, width / 2, height / 2, -height / 2];
    camera.updateProjectionMatrix();
  }

  // Radians about the way up, and towards it; not beyond it.
  function turn(dx, dy) {
    const arm = camera.position.clone().sub(controls.target);
    const polar = arm.angleTo(camera.up);
    const side = camera.up.clone().cross(arm).normalize();
    arm.applyAxisAngle(side, Math.min(Math.max(polar - dy, 0.02), Math.PI - 0.02) - polar).applyAxisAngle(camera.up, -dx);
    camera.position.copy(controls.target).add(arm);
    camera.lookAt(controls.target);
    controls.update();
  }

  function moveTo(point) {
    camera.position.add(point).sub(controls.target);
    controls.target.copy(point);
    controls.update();
  }

  function move(dx, dy) {
    const shift = new THREE.Vector3(dx / camera.zoom, dy / camera.zoom, 0).applyQuaternion(camera.quaternion);
    moveTo(controls.target.clone().add(shift));
  }

  const place = () => ({ up: camera.up.clone(), position: camera.position.clone(), target: controls.target.clone(), zoom: camera.zoom, near: camera.near, far: camera.far });
  function restore(kept) {
    setUp(kept.up);
    controls.target.copy(kept.target);
    camera.position.copy(kept.position);
    Object.assign(camera, { zoom: kept.zoom, near: kept.near, far: kept.far });
    camera.updateProjectionMatrix();
    controls.update();
  }

  return { camera, target: () => controls.target, look, zoom, frame, turn, move, moveTo, place, restore };
}
