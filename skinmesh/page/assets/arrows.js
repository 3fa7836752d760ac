// Arrows of e1 and e3, and the fibres of one ply, at a density that the screen can carry.

const HIGH = 32767;

function axesOf(mesh, e) {
  const e1 = [0, 1, 2].map((d) => mesh.e1[3 * e + d] / HIGH);
  const e3 = [0, 1, 2].map((d) => mesh.e3[3 * e + d] / HIGH);
  const e2 = [0, 1, 2].map((d) => e3[(d + 1) % 3] * e1[(d + 2) % 3] - e3[(d + 2) % 3] * e1[(d + 1) % 3]);
  return { e1, e2, e3 };
}

// Angles of a ply in each stack, every one once, in the order of the layers.
function anglesOf(ply) {
  return words.stacks.map((stack) => [...new Set(stack.layers.filter((layer) => layer[0] === ply).map((layer) => layer[3]))]);
}

function makeArrows(mesh, places, lines) {
  // One arrow in every cell of a grid as wide as an arrow on the screen, so that they stay apart at every zoom.
  function show(state, visible, camera, width, height) {
    const kinds = { e1: ["e1"], e3: ["e3"], both: ["e1", "e3"], fibre: ["fibre"] }[state.arrows] ?? [];
    for (const [name, drawn] of Object.entries(lines)) drawn.visible = kinds.includes(name);
    byId("thinned").textContent = "";
    if (!kinds.length) return;
    const cell = 34 / camera.zoom;
    const angles = anglesOf(state.ply);
    const taken = new Map();
    camera.updateMatrixWorld();
    for (const e of visible) {
      if (kinds[0] === "fibre" && !(angles[mesh.stack[e]] ?? []).length) continue;
      const point = places.centre(e);
      const key = `${Math.floor(point.x / cell)} ${Math.floor(point.y / cell)} ${Math.floor(point.z / cell)} ${words.regions[mesh.region[e]].side}`;
      if (taken.has(key)) continue;
      point.applyMatrix4(camera.matrixWorldInverse);
      if (Math.abs(point.x * camera.zoom) > width / 2 || Math.abs(point.y * camera.zoom) > height / 2) continue;
      taken.set(key, e);
    }
    lines.fibre.material.color.set(state.by === "region" ? "#000000" : "#d6006e");
    for (const kind of kinds) {
      const ends = [];
      for (const e of taken.values()) {
        if (kind !== "fibre") addArrow(ends, e, kind, 0.75 * cell, 1 / camera.zoom);
        else for (const angle of angles[mesh.stack[e]]) addFibre(ends, e, angle, 0.75 * cell, 1 / camera.zoom);
      }
      lines[kind].geometry.dispose();
      lines[kind].geometry = new THREE.BufferGeometry();
      lines[kind].geometry.setAttribute("position", new THREE.BufferAttribute(new Float32Array(ends), 3));
    }
    byId("thinned").textContent = `Arrows on ${grouped(taken.size)} of ${grouped(visible.length)} elements; zoom in for more. ` +
      "e1 is orange, e3 is the ink's colour, fibres are thick lines.";
  }

  function addArrow(ends, e, kind, length) {
    const { e1, e2, e3 } = axesOf(mesh, e);
    let way = kind === "e3" ? e3 : e1;
    let lift = e3, cross = kind === "e3" ? e1 : e2;
    if (places.now.isFlat) {
      if (kind === "e3") return;
      way = places.carried(e, way);
      lift = [1, 0, 0];
      cross = [0, -way[2], way[1]];
    }
    const start = [0, 1, 2].map((d) => places.now.centres[3 * e + d] + 0.02 * length * lift[d]);
    const tip = start.map((x, d) => x + length * way[d]);
    ends.push(...start, ...tip);
    for (const s of [-1, 1]) ends.push(...tip, ...tip.map((x, d) => x - 0.28 * length * way[d] + s * 0.14 * length * cross[d]));
  }

  // A line through the middle; lines are a pixel wide, and two more beside it make it stand out.
  function addFibre(ends, e, degrees, length, pixel) {
    const { e1, e2, e3 } = axesOf(mesh, e);
    const angle = (degrees * Math.PI) / 180;
    let way = e1.map((x, d) => Math.cos(angle) * x + Math.sin(angle) * e2[d]);
    let lift = e3, beside = [0, 1, 2].map((d) => e3[(d + 1) % 3] * way[(d + 2) % 3] - e3[(d + 2) % 3] * way[(d + 1) % 3]);
    if (places.now.isFlat) {
      way = places.carried(e, way);
      lift = [1, 0, 0];
      beside = [0, -way[2], way[1]];
    }
    const middle = [0, 1, 2].map((d) => places.now.centres[3 * e + d] + 0.02 * length * lift[d]);
    const both = [-0.5, 0.5].map((s) => middle.map((x, d) => x + s * length * way[d]));
    for (const s of [0, -0.8, 0.8]) for (const end of both) ends.push(...end.map((x, d) => x + s * pixel * beside[d]));
  }

  return show;
}
