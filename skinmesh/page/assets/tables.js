// Stacks, checks, warnings, seams and rows, inputs.

function showHead() {
  const f = words.facts;
  const shape = f.sides === 4 ? "quadrilaterals" : "triangles";
  const parts = [`${fixed(f.length, 2)} m`, `${grouped(f.elements)} ${shape}`, `${grouped(f.nodes)} nodes`, `${significant(f.area)} m²`];
  if (f.mass !== null) parts.push(`${significant(f.mass)} kg`, `centre of mass at z = ${fixed(f.centre[2])} m`);
  parts.push(`${words.regions.length} regions`, `${words.stacks.length} stacks`, `${words.hand}, nodes on the ${words.surface} surface`);
  byId("facts").textContent = parts.join(" · ");
  byId("caution").textContent = words.caution;
}

const fromTo = ([low, high], digits = 6) => (low === high ? `${+low.toPrecision(digits)}` : `${+low.toPrecision(digits)} to ${+high.toPrecision(digits)}`);

function showPlies(choose) {
  const rows = words.ply_table.map((one) => [
    make("a", { class: "el", href: "#blade", onclick: () => choose(words.plies.indexOf(one.ply)) }, one.ply), one.materials.join(", "),
    make("span", { class: "angles" }, ...one.angles.flatMap((a) => [swatch(`rgb(${toneOfAngle([a]).join(" ")})`), ` ${degrees(a)} `])), fromTo(one.thickness.map((t) => 1e3 * t)), fromTo(one.layers), one.regions.join(", "),
    fixed(one.z[0]), fixed(one.z[1]), significant(one.area), significant(one.mass),
  ]);
  if (words.hand === "counter-clockwise" && rows.length) {
    byId("ply-hand").textContent = "This blade is counter-clockwise: its laminate is mirrored, and angles have the other sign than in the blade file.";
  }
  byId("ply-table").replaceChildren(rows.length
    ? table(["ply", "material", "angle", "a layer, mm", "layers", "regions", "from z m", "to z m", "area m²", "kg"], rows, { numeric: [3, 4, 6, 7, 8, 9], name: "plies" })
    : make("p", {}, "The blade file has no plies."));
}

function showStacks() {
  const head = make("div", { class: "stack" }, make("summary", { class: "quiet" },
    ...["stack", "content", "layers", "mm", "kg/m²", "elements", "laminate code"].map((name) => make("span", {}, name))));
  const entries = words.stacks.map((stack, k) => {
    const entry = make("details", { class: "stack" }, make("summary", {},
      ...[k + 1, stack.content, stack.layers.length, +(stack.thickness * 1e3).toPrecision(6), significant(stack.areal_mass), grouped(stack.elements ?? 0), stack.code]
        .map((cell) => make("span", {}, cell))));
    entry.addEventListener("toggle", () => {
      if (!entry.open || entry.children.length > 1) return;
      entry.append(layerTable(stack.layers.map(([ply, material, thickness, angle]) => ({
        ply: words.plies[ply], material: words.materials[material].name, colour: words.materials[material].colour, thickness, angle,
      }))));
    });
    return entry;
  });
  byId("stack-list").replaceChildren(...(entries.length ? [head, ...entries] : [make("p", {}, "The blade file has no plies.")]));
}

function showChecks(goTo) {
  const word = { pass: "✓ pass", warn: "! warn", fail: "✗ fail", "not made": "– not made" };
  const rank = { fail: 0, warn: 1, "not made": 2, pass: 3 };
  const rows = [...words.findings].sort((a, b) => rank[a.verdict] - rank[b.verdict]).map((one) => {
    const numbers = one.worst_elements?.slice(0, 3) ?? [];
    const links = numbers.flatMap((n) => [" ", make("a", { class: "el", href: "#blade", onclick: () => goTo(n) }, String(n))]);
    return [make("span", { class: `verdict ${one.verdict.split(" ")[0]}` }, word[one.verdict] ?? one.verdict), one.check, one.measured,
      [one.limit, one.source && `(${one.source})`].filter(Boolean).join(" "), make("span", {}, one.where ?? "", ...(links.length ? [" Show:", ...links] : []))];
  });
  const counts = Object.keys(rank).map((v) => [words.findings.filter((one) => one.verdict === v).length, v]);
  byId("check-table").replaceChildren(
    make("p", {}, `${counts.map(([n, v]) => `${n} ${v}`).join(", ")}. A check that could not be made is no pass.`),
    table(["verdict", "check", "measured", "limit (from)", "worst at"], rows, { name: "cards" }));
  byId("warnings").replaceChildren(words.warnings.length
    ? make("div", {}, make("h3", { class: "warn" }, `Warnings of the build: ${words.warnings.length}`), make("ul", {}, ...words.warnings.map((w) => make("li", {}, w))))
    : make("p", {}, "The build had no warnings."),
  words.ply_end[0] > 0 ? make("p", {}, `Ply ends were moved to element rows by at most ${millimetres(+words.ply_end[0].toPrecision(3))} (${words.ply_end[1]}).`) : "");
  showTrial();
}

function showTrial() {
  const { trial } = words;
  if (!trial) {
    byId("trial").replaceChildren(make("p", { class: "quiet" }, "No trial run in a solver stands beside this mesh."));
    return;
  }
  const percent = (x) => (x === null || x === undefined ? "–" : `${(100 * x).toFixed(2)} %`);
  const rows = [
    ["mass, kg", significant(trial.mass.solver), significant(trial.mass.mesh), percent(trial.mass.difference)],
    ...trial.static.map((c) => [`${c.case}: ${c.compared}`, significant(c.solver), significant(c.theory), percent(c.difference)]),
    ...trial.modes.map((m) => [`frequency, ${m.kind}, Hz`, significant(m.solver_Hz), significant(m.theory_Hz), percent(m.difference)]),
  ];
  byId("trial").replaceChildren(make("h3", {}, `Trial run in ${trial.solver.name} ${trial.solver.version ?? ""}`),
    table(["case", "solver", "theory", "difference"], rows, { numeric: [1, 2, 3] }),
    make("p", trial.failures.length ? { class: "fail" } : {}, trial.failures.length ? `Failed: ${trial.failures.join("; ")}` : "The trial reported no failure."),
    trial.remarks.length ? make("ul", { class: "quiet" }, ...trial.remarks.map((remark) => make("li", {}, remark))) : "");
}

function showLines() {
  byId("line-tables").replaceChildren(
    make("div", {}, make("h3", {}, "Seams, from the pressure trailing edge over the nose"), table(["", "seam", "arc at the root m", "at the tip m"],
      words.seams.map(({ label, line }, k) => [k, label, line.length ? fixed(line[0][1]) : "–", line.length ? fixed(line.at(-1)[1]) : "–"]), { numeric: [0, 2, 3] })),
    make("div", {}, make("h3", {}, "Rows, root first"), table(["", "row", "z m"], words.rows.map(({ label, z }, k) => [k, label, fixed(z)]), { numeric: [0, 2] })));
}

function showInputs() {
  byId("input-table").replaceChildren(
    table(["file", "SHA-256"], words.inputs.map(({ file, sha256 }) => [file, make("code", {}, sha256)])),
    make("p", {}, Object.entries(words.versions).map(([name, version]) => `${name} ${version}`).join(" · ")),
    make("p", { class: "caution" }, words.caution));
}
