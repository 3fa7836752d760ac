// Where a browser has no WebGL: both sides and the developed skin as still pictures, drawn flat, the farthest first.

function plainPictures(mesh, width) {
  const places = makePlaces(mesh);
  const paint = paintOf(mesh, "region", 0);
  const { sides, size } = mesh;
  return ["suction", "pressure", "flat"].map((view) => {
    places.choose(view === "flat" ? "flat" : "blade");
    const { places: at, box } = places.now;
    // z runs to the right; what is up and what is near are the view's.
    const from = VIEWS[view].from[0], up = -from;
    const scale = (0.96 * width) / (box.high[2] - box.low[2]);
    const height = Math.ceil(scale * (box.high[1] - box.low[1]) * 1.1 + 12);
    const middle = 0.5 * (box.low[1] + box.high[1]);
    // On the blade what faces the eye, the farthest first; laid flat nothing hides another.
    const isFlat = places.now.isFlat;
    const near = new Float32Array(size);
    for (let i = 0; i < size * sides; i++) near[Math.floor(i / sides)] += from * at[3 * i];
    const order = Array.from({ length: size }, (_, e) => e).filter((e) => isFlat || from * mesh.e3[3 * e] > 0);
    order.sort((e, f) => (isFlat ? mesh.region[e] - mesh.region[f] : near[e] - near[f]));
    const picture = make("canvas", { width: 2 * width, height: 2 * height });
    // Where there is no WebGL there is no graphics card either: drawn in memory at once.
    const pen = picture.getContext("2d", { willReadFrequently: true });
    pen.scale(2, 2);
    pen.fillStyle = "#ffffff";
    pen.fillRect(0, 0, width, height);
    pen.lineWidth = 0.4;
    let tone = null;
    const flush = () => {
      if (tone === null) return;
      pen.fillStyle = pen.strokeStyle = tone;
      pen.fill();
      pen.stroke();
    };
    for (const e of order) {
      const next = `rgb(${paint.of(e).join(" ")})`;
      if (next !== tone) {
        flush();
        pen.beginPath();
        tone = next;
      }
      for (let k = e * sides; k < (e + 1) * sides; k++) {
        const [x, y] = [0.02 * width + scale * (at[3 * k + 2] - box.low[2]), 0.5 * height - scale * up * (at[3 * k + 1] - middle)];
        if (k === e * sides) pen.moveTo(x, y);
        else pen.lineTo(x, y);
      }
      pen.closePath();
    }
    flush();
    return make("figure", {}, picture, make("figcaption", {}, `${VIEWS[view].name}: ${whatIsUp(view).replace(" numbers are stations;", "")}`));
  });
}
