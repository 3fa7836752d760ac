// What the page knows of one element, and the panel that tells it.

function elementFacts(mesh, e) {
  const { sides } = mesh;
  let z = 0, arc = 0;
  const rows = [], seams = [];
  for (let k = 0; k < sides; k++) {
    const node = mesh.cells[e * sides + k];
    z += mesh.points[3 * node + 2] / sides;
    arc += mesh.arc[e * sides + k] / sides;
    rows.push(mesh.row[node]);
    seams.push(mesh.seam[node]);
  }
  const region = words.regions[mesh.region[e]];
  const stack = mesh.stack[e] < 0 ? null : words.stacks[mesh.stack[e]];
  return {
    element: mesh.number[e], region, z, arc, stack, stackNumber: mesh.stack[e] + 1,
    between: region.kind === "web" || region.kind === "base" ? null : seamsRound(z, arc),
    rowsRound: rowsRound(z),
    thickness: stack ? stack.thickness : 0,
    layers: stack ? stack.layers.map(([ply, material, thickness, angle]) => ({
      ply: words.plies[ply], material: words.materials[material].name, colour: words.materials[material].colour, thickness, angle,
    })) : [],
    jacobian: mesh.jacobian[e], aspect: mesh.aspect[e],
  };
}

function seamsRound(z, arc) {
  let below = null, above = null;
  for (const { label, line } of words.seams) {
    const at = line.length ? arcAt(line, z) : NaN;
    if (at <= arc) below = label;
    else if (above === null) above = label;
  }
  return below && above ? `${below} and ${above}` : below ?? above;
}

function rowsRound(z) {
  let before = null, after = null;
  for (const row of words.rows) {
    if (row.z <= z) before = row;
    else after ??= row;
  }
  return before && after ? `${before.label} and ${after.label}` : (before ?? after)?.label ?? "–";
}

function layerTable(layers) {
  const named = ({ ply, material, colour }) => make("span", {}, make("b", { class: "ply-name" }, ply), make("br"),
    make("span", { class: "quiet" }, swatch(colour), " ", make("span", { class: "material" }, material)));
  const found = table(["", "ply and material", "mm", "angle °"], layers.map((layer, k) => [
    k + 1, named(layer), +(layer.thickness * 1e3).toPrecision(6), +layer.angle.toPrecision(6),
  ]), { numeric: [0, 2, 3], name: "layers" });
  found.className = "";
  return found;
}

function showPicked(mesh, e) {
  const found = elementFacts(mesh, e);
  const onWeb = found.region.kind === "web";
  byId("find-number").value = found.element;
  byId("picked").replaceChildren(
    make("p", {}, swatch(found.region.colour), " ", make("b", {}, found.region.name)),
    facts([
      ["element", found.element],
      ["side", sideName(found.region.side)],
      ["z", `${fixed(found.z)} m`],
      [onWeb ? "height" : "arc", onWeb ? `${fixed(found.arc)} m over the pressure foot`
        : `${fixed(Math.abs(found.arc))} m from the leading edge`],
      ...(found.between ? [["seams", found.between]] : []),
      ["rows", found.rowsRound],
      ["stack", found.stack ? `${found.stackNumber} · ${found.stack.content}` : "none"],
      ["thickness", found.stack ? `${millimetres(found.thickness)} in ${found.layers.length} layers` : "–"],
      ["shape", `scaled Jacobian ${fixed(found.jacobian, 3)}, aspect ${fixed(found.aspect, 2)}`],
    ]),
    found.stack ? make("p", { class: "quiet" }, `From the ${onWeb ? "fore face aft" : "mould face inwards"}:`) : "",
    found.stack ? layerTable(found.layers) : "",
  );
}
