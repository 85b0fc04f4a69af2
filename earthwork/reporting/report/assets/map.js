/* The map of the report: surfaces on a canvas, read under the pointer, cut along a line. No library, no network.

   Data: the JSON in #map-data (see docs/report.md). Elevations are held in metres; `data.length` says how to show them.
   Places are (column, row) in cells of the overview; the view maps them to the canvas. */
(async function () {
  "use strict";
  const root = document.getElementById("map");
  const source = document.getElementById("map-data");
  if (!root || !source) return;
  const $ = (selector) => root.querySelector(selector);
  const data = JSON.parse(source.textContent);
  const grid = data.grid, rows = grid.rows, columns = grid.columns, count = rows * columns;
  const canvas = $("canvas.map-sheet"), ink = canvas.getContext("2d");
  const chart = $("canvas.section-sheet"), pen = chart.getContext("2d");
  const message = $(".map-message");
  const aspect = grid.cell_north / grid.cell_east;

  // --- planes -----------------------------------------------------------------------------------------------------

  async function inflate(text) {
    const bytes = Uint8Array.from(atob(text), (c) => c.charCodeAt(0));
    const stream = new Blob([bytes]).stream().pipeThrough(new DecompressionStream("deflate"));
    return new Uint8Array(await new Response(stream).arrayBuffer());
  }

  async function unpack(plane) {
    const raw = await inflate(plane.data), out = new Int32Array(count);
    for (let r = 0, k = 0; r < rows; r++) {
      for (let c = 0; c < columns; c++, k++) {
        const folded = raw[k] | (raw[count + k] << 8) | (raw[2 * count + k] << 16) | (raw[3 * count + k] << 24);
        let value = folded & 1 ? -((folded + 1) >>> 1) : folded >>> 1;
        if (c) value += out[k - 1];
        if (r) value += out[k - columns];
        if (c && r) value -= out[k - columns - 1];
        out[k] = value;
      }
    }
    return { of: (k) => (out[k] + plane.offset) * plane.step, raw: out, offset: plane.offset };
  }

  if (typeof DecompressionStream === "undefined") {
    message.textContent = "This browser is too old for the interactive map; the printed map below shows the same.";
    return;
  }
  const planes = {};
  await Promise.all(Object.entries(data.planes).map(async ([name, plane]) => { planes[name] = await unpack(plane); }));

  const known = (k) => k >= 0 && planes.stratum.raw[k] + planes.stratum.offset >= 0;
  const at = {
    existing: (k) => planes.existing.of(k),
    stripped: (k) => planes.existing.of(k) - planes.strip.of(k),
    depth: (k) => planes.depth.of(k),
    subgrade: (k) => at.stripped(k) + planes.depth.of(k),
    finished: (k) => at.subgrade(k) + planes.section.of(k),
    bottom: (k) => Math.min(at.stripped(k), at.subgrade(k)) - planes.refill.of(k),
    thickness: (k) => Math.max(planes.depth.of(k), 0) + planes.refill.of(k),
    material: (k) => data.materials[planes.stratum.raw[k] + planes.stratum.offset] || "",
    fill: (k) => (planes.fill ? planes.fill.raw[k] + planes.fill.offset : 0),
  };

  // --- outlines ---------------------------------------------------------------------------------------------------

  function points(deltas) {
    const line = [];
    for (let i = 0, c = 0, r = 0; i < deltas.length; i += 2) {
      c += deltas[i]; r += deltas[i + 1];
      line.push([c / 16, r / 16]);
    }
    return line;
  }
  const outlines = data.outlines.map((o) => ({ ...o, rings: o.rings.map(points) }));
  const arrows = data.arrows.map((a) => ({ ...a, path: points(a.path) })).sort((a, b) => a.mass - b.mass);
  const heaviest = Math.max(1, ...arrows.map((a) => a.mass));

  function inside(outline, c, r) {
    let odd = false;
    for (const ring of outline.rings) {
      for (let i = 0, j = ring.length - 1; i < ring.length; j = i++) {
        const [x1, y1] = ring[i], [x2, y2] = ring[j];
        if (y1 > r !== y2 > r && c < ((x2 - x1) * (r - y1)) / (y2 - y1) + x1) odd = !odd;
      }
    }
    return odd;
  }

  // --- numbers ----------------------------------------------------------------------------------------------------

  const length = (m, places = 2) => {
    const text = Math.abs(m / data.length.si).toFixed(places);
    return (m < 0 && Number(text) !== 0 ? "−" : "") + text;
  };
  const withUnit = (m) => length(m) + " " + data.length.unit;
  const depthText = (d) =>
    Math.abs(d) < data.least ? "no change" : (d > 0 ? "F " : "C ") + withUnit(Math.abs(d)) + (d > 0 ? " fill" : " cut");
  const cell = (c, r) =>
    c >= 0 && r >= 0 && c < columns && r < rows ? Math.floor(r) * columns + Math.floor(c) : -1;
  const east = (c) => grid.west + c * grid.cell_east, north = (r) => grid.north - r * grid.cell_north;

  // --- pictures of the layers -------------------------------------------------------------------------------------

  const rgb = (hex) => [1, 3, 5].map((i) => parseInt(hex.slice(i, i + 2), 16));

  function classOf(scale, value) {
    let i = 0;
    while (i < scale.bounds.length && value > scale.bounds[i]) i++;
    return i;
  }

  function shade(k, field) {
    const c = k % columns, left = c ? k - 1 : k, right = c < columns - 1 ? k + 1 : k;
    const up = k >= columns ? k - columns : k, down = k < count - columns ? k + columns : k;
    if (!known(left) || !known(right) || !known(up) || !known(down)) return 0.85;
    const m = grid.ground_m;
    const dx = (field(right) - field(left)) / ((right - left || 1) * grid.cell_east * m);
    const dy = (field(up) - field(down)) / (((down - up) / columns || 1) * grid.cell_north * m);
    const lit = (-0.5 * dx * 2 + 0.5 * dy * 2 * -1 + 0.7) / Math.sqrt(1 + 4 * (dx * dx + dy * dy));
    return Math.min(1, Math.max(0.3, 0.2 + lit));
  }

  const painters = {
    depth: (k) => data.scales.depth.rgb[classOf(data.scales.depth, at.depth(k))],
    thickness: (k) => data.scales.thickness.rgb[classOf(data.scales.thickness, at.thickness(k))],
    material: (k) => data.scales.material.rgb[planes.stratum.raw[k] + planes.stratum.offset],
    existing: (k) => { const s = 255 * shade(k, at.existing); return [s, s, s * 0.97]; },
    finished: (k) => { const s = 255 * shade(k, at.finished); return [s, s, s * 0.97]; },
    lifts: (k) => {
      const state = liftState(k);
      return state ? data.scales.lifts.rgb[state - 1] : data.scales.lifts.none;
    },
  };
  for (const scale of Object.values(data.scales)) {
    scale.rgb = scale.colors.map(rgb);
    if (scale.outside) scale.none = rgb(scale.outside);
  }

  // 1 waits, 2 partly built, 3 at grade, 4 this lift
  function liftState(k) {
    const fill = at.fill(k);
    if (!fill || at.thickness(k) <= 0) return 0;
    const bottom = at.bottom(k), top = at.subgrade(k), now = data.lifts[lift - 1];
    if (now && now.fill === fill && bottom < now.top && top > now.bottom) return 4;
    const level = levels[fill] === undefined ? -Infinity : levels[fill];
    return bottom >= level ? 1 : top > level ? 2 : 3;
  }
  let lift = data.lifts.length, levels = {};
  function setLift(n) {
    lift = n; levels = {};
    for (let i = 0; i < n; i++) levels[data.lifts[i].fill] = data.lifts[i].top;
    pictures.delete("lifts");
  }

  // each picture with smaller copies of itself, so that a whole site draws as fast and as smooth as a corner of it
  const pictures = new Map();
  function picture(name) {
    if (pictures.has(name)) return pictures.get(name);
    const image = new ImageData(columns, rows), px = image.data, paint = painters[name];
    for (let k = 0; k < count; k++) {
      if (!known(k)) continue;
      const color = paint(k);
      px[4 * k] = color[0]; px[4 * k + 1] = color[1]; px[4 * k + 2] = color[2]; px[4 * k + 3] = 255;
    }
    const levelsOf = halved(image);
    pictures.set(name, levelsOf);
    return levelsOf;
  }
  function cutMask() {
    if (pictures.has("cut mask")) return pictures.get("cut mask");
    const image = new ImageData(columns, rows);
    for (let k = 0; k < count; k++) if (known(k) && at.depth(k) < -data.least) image.data[4 * k + 3] = 255;
    pictures.set("cut mask", halved(image));
    return pictures.get("cut mask");
  }
  function halved(image) {
    const first = sheet(image.width, image.height);
    first.getContext("2d").putImageData(image, 0, 0);
    const all = [first];
    while (Math.max(all[all.length - 1].width, all[all.length - 1].height) > 256) {
      const last = all[all.length - 1];
      const next = sheet(Math.ceil(last.width / 2), Math.ceil(last.height / 2));
      next.getContext("2d").drawImage(last, 0, 0, last.width / 2, last.height / 2);
      all.push(next);
    }
    return all;
  }
  function sheet(width, height) {
    const made = document.createElement("canvas");
    made.width = width; made.height = height;
    return made;
  }

  // --- the view ---------------------------------------------------------------------------------------------------

  let width = 0, height = 0, ratio = 1, scale = 1, left = 0, top = 0;
  let layer = "depth", cross = null, section = null, drawing = false, asked = false, fitted = true;
  const shown = new Set();
  const toX = (c) => (c - left) * scale, toY = (r) => (r - top) * scale * aspect;
  const toColumn = (x) => x / scale + left, toRow = (y) => y / (scale * aspect) + top;

  function fit() {
    fitted = true;
    scale = Math.min(width / columns, height / (rows * aspect)) * 0.98;
    left = (columns - width / scale) / 2; top = (rows - height / (scale * aspect)) / 2;
  }
  function zoom(by, x = width / 2, y = height / 2) {
    const c = toColumn(x), r = toRow(y);
    const least = Math.min(width / columns, height / (rows * aspect)) * 0.5;
    scale = Math.min(Math.max(scale * by, least), 80);
    fitted = false;
    left = c - x / scale; top = r - y / (scale * aspect);
    draw();
  }
  function pan(dx, dy) { fitted = false; left -= dx / scale; top -= dy / (scale * aspect); draw(); }
  function resize() {
    const box = canvas.getBoundingClientRect(), middle = [toColumn(width / 2), toRow(height / 2)];
    ratio = Math.min(window.devicePixelRatio || 1, 2);
    width = box.width; height = box.height;
    canvas.width = Math.round(width * ratio); canvas.height = Math.round(height * ratio);
    chart.width = Math.round(chart.clientWidth * ratio); chart.height = Math.round(chart.clientHeight * ratio);
    if (fitted) fit();
    else { left = middle[0] - width / 2 / scale; top = middle[1] - height / 2 / (scale * aspect); }
    draw();
  }
  function draw() {
    if (asked) return;
    asked = true;
    requestAnimationFrame(() => { asked = false; paint(); });
  }

  const css = (name) => getComputedStyle(document.documentElement).getPropertyValue(name).trim();

  function place(levelsOf, to = ink) {
    let i = 0;
    while (i < levelsOf.length - 1 && scale * ratio * 2 ** (i + 1) <= 1) i++;
    const used = levelsOf[i], size = 2 ** i;
    to.imageSmoothingEnabled = scale * ratio < 1.5;
    to.drawImage(used, toX(0), toY(0), used.width * size * scale, used.height * size * scale * aspect);
  }

  function paint() {
    ink.setTransform(ratio, 0, 0, ratio, 0, 0);
    ink.clearRect(0, 0, width, height);
    place(picture(layer));
    if (layer === "depth") hatch();
    if (shown.has("contours")) contours(layer === "existing" ? at.existing : at.finished);
    for (const outline of outlines) if (shown.has(outline.layer)) drawOutline(outline);
    if (shown.has("haul")) {
      // from the lightest up; what is next to nothing waits until one comes closer
      const least = heaviest * Math.min(0.004, 0.004 / (scale * columns / width) ** 2);
      for (const arrow of arrows) if (arrow.mass >= least) drawArrow(arrow);
    }
    if (layer === "depth" || layer === "thickness") spots();
    for (const outline of outlines) if (shown.has(outline.layer) && outline.closed) nameOutline(outline);
    if (section) drawSection();
    if (cross) drawCross();
    drawScale();
    paintSection();
  }

  // Cut is hatched at 45 degrees: brown and teal are equally light.
  let lines = null;
  function hatch() {
    if (!lines) {
      lines = sheet(8, 8);
      const p = lines.getContext("2d");
      p.strokeStyle = "rgba(60, 30, 5, 0.55)"; p.lineWidth = 1;
      for (const d of [-8, 0, 8]) { p.beginPath(); p.moveTo(d, 8); p.lineTo(d + 8, 0); p.stroke(); }
    }
    const over = sheet(canvas.width, canvas.height), p = over.getContext("2d");
    p.setTransform(ratio, 0, 0, ratio, 0, 0);
    place(cutMask(), p);
    p.globalCompositeOperation = "source-in";
    p.fillStyle = p.createPattern(lines, "repeat");
    p.fillRect(0, 0, width, height);
    ink.drawImage(over, 0, 0, width, height);
  }

  function halo(text, x, y, options = {}) {
    ink.font = options.font || "12px system-ui, sans-serif";
    ink.textAlign = options.align || "center"; ink.textBaseline = "middle";
    ink.lineWidth = 3; ink.lineJoin = "round"; ink.strokeStyle = "rgba(255,255,255,0.9)"; ink.fillStyle = "#1F1F1F";
    ink.strokeText(text, x, y); ink.fillText(text, x, y);
  }

  function spots() {
    const every = 112, first = [every - (((left * scale) % every) + every) % every,
      every - (((top * scale * aspect) % every) + every) % every];
    for (let y = first[1] - every / 2; y < height; y += every) {
      for (let x = first[0] - every / 2; x < width; x += every) {
        const k = cell(toColumn(x), toRow(y));
        if (!known(k)) continue;
        const value = layer === "depth" ? at.depth(k) : at.thickness(k);
        if (Math.abs(value) < Math.max(data.least, 0.05 * data.length.si)) continue;
        halo((layer === "depth" ? (value > 0 ? "F " : "C ") : "") + length(Math.abs(value), 1), x, y);
      }
    }
  }

  const styles = {
    limits: ["#1F1F1F", [8, 5], 1.6], zones: ["#4A4A48", [], 1.3], pads: ["#1F1F1F", [], 1.8],
    buildings: ["#4A4A48", [3, 3], 1.2], barriers: ["#8A1C1C", [2, 4], 1.6],
  };
  function trace(line) {
    ink.beginPath();
    line.forEach(([c, r], i) => (i ? ink.lineTo(toX(c), toY(r)) : ink.moveTo(toX(c), toY(r))));
  }
  function drawOutline(outline) {
    const [color, dash, thick] = styles[outline.layer] || styles.zones;
    for (const ring of outline.rings) {
      trace(ring);
      ink.setLineDash([]); ink.strokeStyle = "rgba(255,255,255,0.75)"; ink.lineWidth = thick + 2; ink.stroke();
      ink.setLineDash(dash); ink.strokeStyle = color; ink.lineWidth = thick; ink.stroke();
    }
    ink.setLineDash([]);
  }
  function nameOutline(outline) {
    if (!outline.name || !outline.rings.length) return;
    const ring = outline.rings[0];
    const [lo, hi] = [0, 1].map((i) => [Math.min, Math.max].map((f) => f(...ring.map((p) => p[i])))).reduce(
      (a, [l, h]) => [[...a[0], l], [...a[1], h]], [[], []]);
    const x = toX((lo[0] + hi[0]) / 2), y = toY((lo[1] + hi[1]) / 2);
    const room = (hi[0] - lo[0]) * scale - 8, font = "600 12px system-ui, sans-serif";
    ink.font = font;
    const lines = [""];
    for (const word of outline.name.split(/\s+/)) {
      const longer = (lines[lines.length - 1] + " " + word).trim();
      if (ink.measureText(longer).width <= Math.max(room, 60) || !lines[lines.length - 1]) lines[lines.length - 1] = longer;
      else lines.push(word);
    }
    if (room < 34 || lines.length * 14 > (hi[1] - lo[1]) * scale * aspect + 14) return;
    lines.forEach((line, i) => {
      let text = line;
      while (text.length > 3 && ink.measureText(text).width > Math.max(room, 60)) text = text.slice(0, -2) + "…";
      halo(text, x, y + 14 * (i - (lines.length - 1) / 2) + (layer === "depth" ? 9 : 0), { font });
    });
  }
  function drawArrow(arrow) {
    const color = data.arrow_colors[arrow.kind], line = arrow.path;
    const thick = 0.8 + 5 * Math.sqrt(arrow.mass / heaviest);
    ink.lineCap = "round";
    for (const [style, w] of [["rgba(255,255,255,0.8)", thick + 2], [color, thick]]) {
      trace(line); ink.strokeStyle = style; ink.lineWidth = w; ink.stroke();
    }
    const [c2, r2] = line[line.length - 1], [c1, r1] = line[Math.max(line.length - 2, 0)];
    const angle = Math.atan2(toY(r2) - toY(r1), toX(c2) - toX(c1)), size = 5 + thick;
    ink.fillStyle = color; ink.beginPath(); ink.moveTo(toX(c2), toY(r2));
    for (const turn of [2.6, -2.6]) ink.lineTo(toX(c2) + size * Math.cos(angle + turn), toY(r2) + size * Math.sin(angle + turn));
    ink.fill(); ink.lineCap = "butt";
  }
  function contours(field) {
    const steps = [0.1, 0.2, 0.5, 1, 2, 5, 10, 20].map((s) => s * data.length.si);
    const jump = Math.max(1, Math.round(2 / scale));
    const step = steps.find((s) => (s / data.relief) * Math.max(height, width) > 14) || steps[steps.length - 1];
    ink.strokeStyle = "rgba(60,50,40,0.65)"; ink.lineWidth = 0.8; ink.beginPath();
    const c0 = Math.max(0, Math.floor(left)), c1 = Math.min(columns - 1 - jump, Math.ceil(toColumn(width)));
    const r0 = Math.max(0, Math.floor(top)), r1 = Math.min(rows - 1 - jump, Math.ceil(toRow(height)));
    for (let r = r0; r <= r1; r += jump) for (let c = c0; c <= c1; c += jump) {
      const ks = [r * columns + c, r * columns + c + jump, (r + jump) * columns + c + jump, (r + jump) * columns + c];
      if (!ks.every(known)) continue;
      const z = ks.map(field), xy = [[0, 0], [jump, 0], [jump, jump], [0, jump]];
      const low = Math.ceil(Math.min(...z) / step), high = Math.floor(Math.max(...z) / step);
      for (let n = low; n <= high; n++) {
        const level = n * step, hits = [];
        for (let i = 0; i < 4; i++) {
          const j = (i + 1) % 4;
          if (z[i] < level === z[j] < level) continue;
          const t = (level - z[i]) / (z[j] - z[i]);
          hits.push([c + 0.5 + xy[i][0] + t * (xy[j][0] - xy[i][0]), r + 0.5 + xy[i][1] + t * (xy[j][1] - xy[i][1])]);
        }
        for (let i = 0; i + 1 < hits.length; i += 2) {
          ink.moveTo(toX(hits[i][0]), toY(hits[i][1])); ink.lineTo(toX(hits[i + 1][0]), toY(hits[i + 1][1]));
        }
      }
    }
    ink.stroke();
    $(".contour-step").textContent = `Contours every ${withUnit(step)}.`;
  }
  function drawCross() {
    const x = toX(cross[0]), y = toY(cross[1]);
    for (const [style, w] of [["#fff", 4], ["#1F1F1F", 1.6]]) {
      ink.strokeStyle = style; ink.lineWidth = w; ink.beginPath();
      ink.moveTo(x - 11, y); ink.lineTo(x + 11, y); ink.moveTo(x, y - 11); ink.lineTo(x, y + 11); ink.stroke();
    }
  }
  function drawScale() {
    const metres = (120 / scale) * grid.cell_east * grid.ground_m / data.length.si;
    const power = 10 ** Math.floor(Math.log10(metres));
    const nice = [5, 2, 1].map((m) => m * power).find((v) => v <= metres) || power;
    const wide = (nice * data.length.si) / (grid.cell_east * grid.ground_m) * scale, x = 14, y = height - 16;
    ink.fillStyle = "rgba(255,255,255,0.85)"; ink.fillRect(x - 8, y - 22, wide + 62, 32);
    ink.fillStyle = "#1F1F1F"; ink.fillRect(x, y, wide, 4);
    halo(`${nice.toLocaleString("en")} ${data.length.unit}`, x, y - 10, { align: "left" });
    ink.beginPath(); ink.moveTo(x + wide + 30, y - 16); ink.lineTo(x + wide + 36, y + 4); ink.lineTo(x + wide + 30, y - 1);
    ink.lineTo(x + wide + 24, y + 4); ink.fill();
    halo("N", x + wide + 45, y - 9);
  }

  // --- reading ----------------------------------------------------------------------------------------------------

  const out = {};
  for (const item of root.querySelectorAll("[data-read]")) out[item.dataset.read] = item;

  function read(c, r) {
    cross = [c, r];
    const k = cell(c, r), is = known(k);
    const put = (name, text) => { if (out[name]) out[name].textContent = text; };
    put("place", `${east(c).toFixed(1)} E, ${north(r).toFixed(1)} N`);
    put("depth", is ? depthText(at.depth(k)) : "no data here");
    for (const name of ["existing", "stripped", "bottom", "subgrade", "finished", "thickness"]) {
      put(name, is ? withUnit(at[name](k)) : "–");
    }
    put("material", is ? at.material(k) || "–" : "–");
    for (const name of ["zones", "pads"]) {
      const found = outlines.filter((o) => o.layer === name && o.closed && inside(o, c, r));
      put(name, found.map((o) => o.name + (o.note ? ` (${o.note})` : "")).join(", ") || "–");
    }
    $("[name=easting]").value = east(c).toFixed(2);
    $("[name=northing]").value = north(r).toFixed(2);
  }

  // --- section ----------------------------------------------------------------------------------------------------

  const surfaces = [
    ["existing", "existing ground", "#5B3410", []], ["bottom", "removal bottom", "#B5501A", [6, 4]],
    ["subgrade", "subgrade", "#07433F", []], ["finished", "finished grade", "#1F1F1F", [2, 3]],
  ];
  let profile = [];

  // Between the centres of four cells with data a surface is read bilinearly, else at the cell itself.
  function sample(name, c, r) {
    const c0 = Math.floor(c - 0.5), r0 = Math.floor(r - 0.5), u = c - 0.5 - c0, v = r - 0.5 - r0;
    const ks = [[c0, r0], [c0 + 1, r0], [c0, r0 + 1], [c0 + 1, r0 + 1]].map(([x, y]) => cell(x + 0.5, y + 0.5));
    if (ks.every(known)) {
      const z = ks.map(at[name]);
      return (z[0] * (1 - u) + z[1] * u) * (1 - v) + (z[2] * (1 - u) + z[3] * u) * v;
    }
    const k = cell(c, r);
    return known(k) ? at[name](k) : NaN;
  }
  function setSection(a, b) {
    section = [a, b];
    const dx = (b[0] - a[0]) * grid.cell_east * grid.ground_m, dy = (b[1] - a[1]) * grid.cell_north * grid.ground_m;
    const whole = Math.hypot(dx, dy), steps = Math.min(800, Math.max(20, Math.ceil(2 * Math.hypot(b[0] - a[0], b[1] - a[1]))));
    profile = [];
    for (let i = 0; i <= steps; i++) {
      const t = i / steps, c = a[0] + t * (b[0] - a[0]), r = a[1] + t * (b[1] - a[1]);
      const point = { at: t * whole };
      for (const [name] of surfaces) point[name] = sample(name, c, r);
      profile.push(point);
    }
    const body = $(".section-table tbody");
    body.textContent = "";
    for (let i = 0; i <= 10; i++) {
      const point = profile[Math.round((i * steps) / 10)], line = body.insertRow();
      const head = document.createElement("th");
      head.scope = "row"; head.textContent = length(point.at, 1); line.append(head);
      for (const [name] of surfaces) line.insertCell().textContent = isNaN(point[name]) ? "–" : length(point[name]);
    }
    $(".section").hidden = false;
    resize();
  }
  function drawSection() {
    const [a, b] = section;
    for (const [style, w] of [["#fff", 5], ["#1F1F1F", 2]]) {
      ink.strokeStyle = style; ink.lineWidth = w; trace([a, b]); ink.stroke();
    }
    for (const [p, name] of [[a, "A"], [b, "B"]]) halo(name, toX(p[0]), toY(p[1]) - 12, { font: "700 14px system-ui, sans-serif" });
  }
  let chartX = null;
  function paintSection() {
    if (!section || !profile.length) return;
    const w = chart.clientWidth, h = chart.clientHeight, text = css("--ink") || "#1F1F1F", faint = css("--rule") || "#ccc";
    pen.setTransform(ratio, 0, 0, ratio, 0, 0);
    pen.clearRect(0, 0, w, h);
    const box = { x: 56, y: 12, w: w - 72, h: h - 44 }, whole = profile[profile.length - 1].at || 1;
    const values = profile.flatMap((p) => surfaces.map(([n]) => p[n])).filter((v) => !isNaN(v));
    if (!values.length) return;
    let low = Math.min(...values), high = Math.max(...values);
    const pad = Math.max(0.08 * (high - low), 0.2);
    low -= pad; high += pad;
    const X = (d) => box.x + (d / whole) * box.w, Y = (z) => box.y + ((high - z) / (high - low)) * box.h;
    pen.font = "12px system-ui, sans-serif"; pen.fillStyle = text; pen.strokeStyle = faint; pen.lineWidth = 1;
    for (const [from, to, vertical] of [[low, high, true], [0, whole, false]]) {
      const span = (to - from) / data.length.si, power = 10 ** Math.floor(Math.log10(span / 4));
      const step = [1, 2, 5, 10].map((m) => m * power).find((s) => span / s <= 6);
      for (let n = Math.ceil(from / data.length.si / step); n * step <= to / data.length.si; n++) {
        const v = n * step * data.length.si;
        pen.beginPath();
        if (vertical) { pen.moveTo(box.x, Y(v)); pen.lineTo(box.x + box.w, Y(v)); } else { pen.moveTo(X(v), box.y); pen.lineTo(X(v), box.y + box.h); }
        pen.stroke();
        pen.textAlign = vertical ? "right" : "center"; pen.textBaseline = vertical ? "middle" : "top";
        const label = +(n * step).toFixed(6) + "";
        if (vertical) pen.fillText(label, box.x - 6, Y(v)); else pen.fillText(label, X(v), box.y + box.h + 6);
      }
    }
    pen.textAlign = "right"; pen.textBaseline = "bottom";
    pen.fillText(`${data.length.unit} along A–B; heights ${(((box.h / (high - low)) / (box.w / whole))).toFixed(1)} times`, box.x + box.w, h - 1);
    for (const [name, , color, dash] of surfaces) {
      pen.strokeStyle = css(`--line-${name}`) || color; pen.setLineDash(dash); pen.lineWidth = 2; pen.beginPath();
      let down = false;
      for (const p of profile) {
        if (isNaN(p[name])) { down = false; continue; }
        if (down) pen.lineTo(X(p.at), Y(p[name])); else pen.moveTo(X(p.at), Y(p[name]));
        down = true;
      }
      pen.stroke();
    }
    pen.setLineDash([]);
    if (chartX !== null) {
      pen.strokeStyle = text; pen.lineWidth = 1; pen.beginPath(); pen.moveTo(chartX, box.y); pen.lineTo(chartX, box.y + box.h); pen.stroke();
    }
    chart.reader = (x) => profile[Math.round(Math.min(Math.max((x - box.x) / box.w, 0), 1) * (profile.length - 1))];
  }
  chart.addEventListener("pointermove", (event) => {
    if (!chart.reader) return;
    chartX = event.offsetX;
    const p = chart.reader(chartX), t = p.at / (profile[profile.length - 1].at || 1), [a, b] = section;
    $(".section-read").textContent = `${length(p.at, 1)} ${data.length.unit}: ` +
      surfaces.map(([n, title]) => `${title} ${isNaN(p[n]) ? "–" : length(p[n])}`).join(", ");
    read(a[0] + t * (b[0] - a[0]), a[1] + t * (b[1] - a[1]));
    draw();
  });

  // --- hands ------------------------------------------------------------------------------------------------------

  const held = new Map();
  let moved = false, start = null;
  const here = (event) => [event.offsetX, event.offsetY];

  canvas.addEventListener("pointerdown", (event) => {
    canvas.setPointerCapture(event.pointerId);
    held.set(event.pointerId, here(event));
    moved = false;
    if (drawing && held.size === 1) start = [toColumn(event.offsetX), toRow(event.offsetY)];
  });
  canvas.addEventListener("pointermove", (event) => {
    const [x, y] = here(event), before = held.get(event.pointerId);
    if (!before) { read(toColumn(x), toRow(y)); draw(); return; }
    if (Math.hypot(x - before[0], y - before[1]) < 3 && !moved) return;
    moved = true;
    if (held.size === 2) {
      const other = [...held].find(([id]) => id !== event.pointerId)[1];
      const was = Math.hypot(before[0] - other[0], before[1] - other[1]), is = Math.hypot(x - other[0], y - other[1]);
      zoom(is / (was || 1), (x + other[0]) / 2, (y + other[1]) / 2);
    } else if (drawing && start) {
      setSection(start, [toColumn(x), toRow(y)]);
    } else {
      pan(x - before[0], y - before[1]);
    }
    held.set(event.pointerId, [x, y]);
  });
  function release(event) {
    if (!held.delete(event.pointerId)) return;
    const place = [toColumn(event.offsetX), toRow(event.offsetY)];
    if (drawing && start && moved && held.size === 0) { setSection(start, place); endDrawing(); } else if (!moved) {
      read(...place);
      if (drawing) point(place);
    }
    draw();
  }
  canvas.addEventListener("pointerup", release);
  canvas.addEventListener("pointercancel", (event) => held.delete(event.pointerId));
  canvas.addEventListener("wheel", (event) => {
    if (!event.ctrlKey && !event.metaKey && document.activeElement !== canvas) return; // the page scrolls
    event.preventDefault();
    zoom(Math.exp(-event.deltaY * 0.0015), event.offsetX, event.offsetY);
  }, { passive: false });
  canvas.addEventListener("dblclick", (event) => { if (!drawing) zoom(2, event.offsetX, event.offsetY); });

  let firstEnd = null;
  function point(place) {
    if (!firstEnd) { firstEnd = place; message.textContent = "Section: now the other end."; return; }
    setSection(firstEnd, place);
    endDrawing();
  }
  function endDrawing() {
    drawing = false; start = null; firstEnd = null;
    $("[data-do=section]").setAttribute("aria-pressed", "false");
    message.textContent = "Section drawn from A to B; it stands under the map.";
  }

  const actions = {
    in: () => zoom(1.5), out: () => zoom(1 / 1.5), fit: () => { fit(); draw(); },
    section: () => {
      drawing = !drawing; firstEnd = null; start = null;
      $("[data-do=section]").setAttribute("aria-pressed", String(drawing));
      message.textContent = drawing ? "Section: drag a line, or choose two points (Enter at the cross)." : "";
    },
  };
  for (const button of root.querySelectorAll("[data-do]")) button.addEventListener("click", () => actions[button.dataset.do]());

  canvas.addEventListener("keydown", (event) => {
    const step = event.shiftKey ? 20 : 4, moves = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, -1], ArrowDown: [0, 1] };
    const keys = { "+": actions.in, "=": actions.in, "-": actions.out, "0": actions.fit, s: actions.section };
    if (moves[event.key]) {
      const [dx, dy] = moves[event.key], from = cross || [toColumn(width / 2), toRow(height / 2)];
      const to = [from[0] + (dx * step) / scale, from[1] + (dy * step) / (scale * aspect)];
      read(...to);
      const x = toX(to[0]), y = toY(to[1]);
      if (x < 20 || x > width - 20) pan(-dx * width / 3, 0);
      if (y < 20 || y > height - 20) pan(0, -dy * height / 3);
      draw();
    } else if (event.key === "Enter" && cross) {
      if (drawing) point(cross); else message.textContent = `${out.place.textContent}: ${out.depth.textContent}`;
      draw();
    } else if (event.key === "Escape" && drawing) {
      actions.section();
    } else if (keys[event.key]) {
      keys[event.key]();
    } else return;
    event.preventDefault();
  });

  $("form.go").addEventListener("submit", (event) => {
    event.preventDefault();
    const c = (Number($("[name=easting]").value) - grid.west) / grid.cell_east;
    const r = (grid.north - Number($("[name=northing]").value)) / grid.cell_north;
    if (!isFinite(c) || !isFinite(r)) return;
    read(c, r);
    if (toX(c) < 0 || toX(c) > width || toY(r) < 0 || toY(r) > height) {
      left = c - width / 2 / scale; top = r - height / 2 / (scale * aspect); fitted = false;
    }
    message.textContent = `${out.place.textContent}: ${out.depth.textContent}`;
    draw();
  });

  function choose(name) {
    layer = name;
    for (const legend of root.querySelectorAll("[data-legend]")) legend.hidden = legend.dataset.legend !== name;
    const slider = $(".lift-row");
    if (slider) slider.hidden = name !== "lifts";
    draw();
  }
  for (const input of root.querySelectorAll("input[name=layer]")) {
    input.addEventListener("change", () => choose(input.value));
    if (input.checked) layer = input.value;
  }
  for (const input of root.querySelectorAll("input[name=over]")) {
    const set = () => {
      if (input.checked) shown.add(input.value); else shown.delete(input.value);
      const key = $(".haul-key");
      if (key) key.hidden = !shown.has("haul");
      if (!shown.has("contours")) $(".contour-step").textContent = "";
      draw();
    };
    input.addEventListener("change", set);
    set();
  }
  const slider = $("[name=lift]");
  if (slider) {
    const set = () => {
      setLift(Number(slider.value));
      $(".lift-text").textContent = lift ? data.lifts[lift - 1].label : "before the first lift";
      draw();
    };
    slider.addEventListener("input", set);
    set();
  }

  new ResizeObserver(resize).observe(canvas);
  resize();
  choose(layer);
  root.classList.add("ready");
})();
