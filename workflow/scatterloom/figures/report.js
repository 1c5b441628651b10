"use strict";
// The interactive view: one curve, or two to compare, over angle or over size.
(function () {
  const data = JSON.parse(document.getElementById("view-data").textContent);
  const NS = "http://www.w3.org/2000/svg";
  const W = 720, H = 400, LEFT = 76, RIGHT = 16, TOP = 16, BOTTOM = 52;
  const COLOURS = ["#0058a3", "#c04a00"], DASHES = ["", "7 4"];
  const byId = (id) => document.getElementById(id);
  const numbers = (text) => {
    const raw = atob(text), bytes = new Uint8Array(raw.length);
    for (let i = 0; i < raw.length; i++) bytes[i] = raw.charCodeAt(i);
    return new Float32Array(bytes.buffer);
  };
  const packed = {};
  for (const name of ["matrix", "matrix_error", "scalar", "scalar_error", "mean", "mean_error"]) {
    packed[name] = numbers(data[name]);
  }
  const nAngle = data.angles_deg.length, nElement = data.elements.length;
  const nSize = data.radius_um[0].length, nWave = data.wavelengths_um.length;
  const short = (v) => (v === 0 ? "0" : Number(v.toPrecision(4)).toString());
  const isPopulation = (who) => who >= data.particles.length;

  function fill(select, entries) {
    select.replaceChildren(...entries.map(([value, text]) => {
      const option = document.createElement("option");
      option.value = value;
      option.textContent = text;
      return option;
    }));
  }

  const who = [...data.particles.map((name, i) => [i, name]),
    ...data.populations.map((name, i) => [data.particles.length + i, "population " + name])];
  const waves = data.wavelengths_um.map((w, i) => [i, short(w) + " um"]);
  const what = [...data.elements.map((e, i) => [i, e === "11" ? "F11" : "F" + e + "/F11"]),
    ...(data.elements.includes("12") ? [["p", "-F12/F11 (polarization)"]] : []),
    ...data.scalars.map((name, i) => ["s" + i, name + " (over size)"])];
  const controls = ["a", "b"].map((key) => ({
    who: byId("view-who-" + key), wave: byId("view-wave-" + key), size: byId("view-size-" + key),
  }));
  const quantity = byId("view-what"), scale = byId("view-scale"), compare = byId("view-compare");
  for (const own of controls) {
    fill(own.who, who);
    fill(own.wave, waves);
  }
  fill(quantity, what);
  controls[1].wave.value = String(nWave - 1);

  function listSizes(own) {
    const w = Number(own.wave.value), before = own.size.value;
    fill(own.size, data.radius_um[w].map((r, s) =>
      [s, "r " + short(r) + " um (x " + short(data.size_parameter[w][s]) + ")"]));
    own.size.value = before === "" ? String(Math.floor(nSize / 2)) : before;
  }

  // The curve of one set of controls: x, y, half width, label.
  function curve(own) {
    const w = Number(own.wave.value), s = Number(own.size.value), p = Number(own.who.value);
    const chosen = quantity.value, out = { x: [], y: [], e: [], label: "" };
    const name = who[p][1], wave = waves[w][1];
    if (chosen[0] === "s") {
      const k = Number(chosen.slice(1)), n = data.scalars.length;
      out.label = name + ", " + wave;
      if (isPopulation(p)) return out;
      for (let i = 0; i < nSize; i++) {
        const at = ((p * nWave + w) * nSize + i) * n + k;
        push(out, data.radius_um[w][i], packed.scalar[at], packed.scalar_error[at], 1);
      }
      return out;
    }
    const sign = chosen === "p" ? -1 : 1;
    const k = chosen === "p" ? data.elements.indexOf("12") : Number(chosen);
    const mean = isPopulation(p), from = mean ? "mean" : "matrix";
    const first = mean ? (((p - data.particles.length) * nWave + w) * nElement + k) * nAngle
      : (((p * nWave + w) * nSize + s) * nElement + k) * nAngle;
    out.label = name + ", " + wave + (mean ? "" : ", r " + short(data.radius_um[w][s]) + " um");
    for (let i = 0; i < nAngle; i++) {
      push(out, data.angles_deg[i], packed[from][first + i], packed[from + "_error"][first + i],
        sign);
    }
    return out;
  }

  function push(out, x, y, e, sign) {
    if (!Number.isFinite(y)) return;
    out.x.push(x);
    out.y.push(sign * y);
    out.e.push(Number.isFinite(e) ? e : 0);
  }

  let curves = [], range = null, full = null, cursor = 0;
  const drawing = byId("view-drawing"), readout = byId("view-readout");
  const overSize = () => quantity.value[0] === "s";
  const logarithmic = () => scale.value === "log" && curves.every((c) => c.y.every((v) => v > 0));

  function extent() {
    const xs = curves.flatMap((c) => c.x);
    const lows = curves.flatMap((c) => c.y.map((v, i) => v - c.e[i]));
    const highs = curves.flatMap((c) => c.y.map((v, i) => v + c.e[i]));
    if (!xs.length) return { x: [0, 1], y: [0, 1] };
    let low = Math.min(...lows), high = Math.max(...highs);
    if (logarithmic()) {
      low = Math.min(...curves.flatMap((c) => c.y));
      return { x: [Math.min(...xs), Math.max(...xs)], y: [low / 1.3, high * 1.3] };
    }
    const room = 0.05 * (high - low || 1);
    return { x: [Math.min(...xs), Math.max(...xs)], y: [low - room, high + room] };
  }

  const toLog = (v) => Math.log10(Math.max(v, 1e-300));
  function place(x, y) {
    const [x0, x1] = range.x, log = logarithmic();
    const [y0, y1] = log ? range.y.map(toLog) : range.y, v = log ? toLog(y) : y;
    return [LEFT + (W - LEFT - RIGHT) * (x - x0) / (x1 - x0 || 1),
      H - BOTTOM - (H - TOP - BOTTOM) * (v - y0) / (y1 - y0 || 1)];
  }

  function ticks(low, high, log) {
    if (log && high / low > 8) {
      const out = [];
      for (let k = Math.ceil(toLog(low)); k <= toLog(high); k++) out.push(10 ** k);
      if (out.length >= 2) return out;
    }
    const raw = (high - low) / 6, unit = 10 ** Math.floor(Math.log10(raw || 1));
    const step = [1, 2, 5, 10].map((m) => m * unit).find((s) => s >= raw) || unit;
    const out = [];
    for (let v = Math.ceil(low / step) * step; v <= high + 1e-9 * step; v += step) {
      out.push(Number(v.toPrecision(12)));
    }
    return out;
  }

  function add(parent, tag, attributes, text) {
    const node = document.createElementNS(NS, tag);
    for (const [key, value] of Object.entries(attributes)) node.setAttribute(key, value);
    if (text !== undefined) node.textContent = text;
    parent.appendChild(node);
    return node;
  }

  function draw() {
    drawing.replaceChildren();
    add(drawing, "rect", { x: 0, y: 0, width: W, height: H, fill: "#ffffff" });
    const clip = add(add(drawing, "defs", {}), "clipPath", { id: "view-clip" });
    add(clip, "rect", { x: LEFT, y: TOP, width: W - LEFT - RIGHT, height: H - TOP - BOTTOM });
    const log = logarithmic(), grey = { stroke: "#d5d5d5", "stroke-width": 1 };
    const style = { "font-size": 13, fill: "#1c1c1c", "font-family": "DejaVu Sans, sans-serif" };
    for (const v of ticks(range.x[0], range.x[1], false)) {
      const [x] = place(v, range.y[0]);
      add(drawing, "line", { x1: x, x2: x, y1: TOP, y2: H - BOTTOM, ...grey });
      add(drawing, "text", { x, y: H - BOTTOM + 18, "text-anchor": "middle", ...style }, short(v));
    }
    for (const v of ticks(range.y[0], range.y[1], log)) {
      const y = place(range.x[0], v)[1];
      if (y < TOP - 1 || y > H - BOTTOM + 1) continue;
      add(drawing, "line", { x1: LEFT, x2: W - RIGHT, y1: y, y2: y, ...grey });
      add(drawing, "text", { x: LEFT - 6, y: y + 4, "text-anchor": "end", ...style }, short(v));
    }
    add(drawing, "rect", { x: LEFT, y: TOP, width: W - LEFT - RIGHT, height: H - TOP - BOTTOM,
      fill: "none", stroke: "#444444" });
    const words = overSize() ? "radius (um)" : "scattering angle (deg)";
    add(drawing, "text", { x: (LEFT + W - RIGHT) / 2, y: H - 12, "text-anchor": "middle", ...style },
      words);
    const title = quantity.options[quantity.selectedIndex].textContent.replace(" (over size)", "");
    add(drawing, "text", { x: 16, y: (TOP + H - BOTTOM) / 2, "text-anchor": "middle", ...style,
      transform: "rotate(-90 16 " + (TOP + H - BOTTOM) / 2 + ")" }, title);
    const inside = add(drawing, "g", { "clip-path": "url(#view-clip)" });
    curves.forEach((c, n) => {
      if (!c.x.length) return;
      const upper = c.x.map((x, i) => place(x, c.y[i] + c.e[i]).join(","));
      const floor = range.y[0] / 10;
      const lower = c.x.map((x, i) => place(x, log ? Math.max(c.y[i] - c.e[i], floor)
        : c.y[i] - c.e[i]).join(",")).reverse();
      add(inside, "polygon", { points: [...upper, ...lower].join(" "), fill: COLOURS[n],
        "fill-opacity": 0.25 });
      add(inside, "polyline", { points: c.x.map((x, i) => place(x, c.y[i]).join(",")).join(" "),
        fill: "none", stroke: COLOURS[n], "stroke-width": 1.8, "stroke-dasharray": DASHES[n] });
    });
    // Most curves fall: at the right there is room.
    curves.forEach((c, n) => {
      const wide = 40 + 7.2 * c.label.length, x = W - RIGHT - wide - 8, y = TOP + 16 + 18 * n;
      add(drawing, "rect", { x: x - 4, y: y - 10, width: wide + 8, height: 19, fill: "#ffffff",
        "fill-opacity": 0.85 });
      add(drawing, "line", { x1: x, x2: x + 32, y1: y, y2: y, stroke: COLOURS[n],
        "stroke-width": 2.2, "stroke-dasharray": DASHES[n] });
      add(drawing, "text", { x: x + 38, y: y + 4, ...style }, c.label);
    });
    mark(inside);
  }

  function mark(inside) {
    const main = curves[0];
    if (!main || !main.x.length) {
      readout.textContent = "No values: a population has none over size, or the cell was not solved.";
      return;
    }
    cursor = Math.min(cursor, main.x.length - 1);
    const x = main.x[cursor];
    const [at] = place(x, main.y[cursor]);
    add(inside, "line", { x1: at, x2: at, y1: TOP, y2: H - BOTTOM, stroke: "#444444",
      "stroke-dasharray": "2 3" });
    const parts = [];
    curves.forEach((c, n) => {
      if (!c.x.length) return;
      let i = 0;
      c.x.forEach((v, k) => { if (Math.abs(v - x) < Math.abs(c.x[i] - x)) i = k; });
      const [px, py] = place(c.x[i], c.y[i]);
      add(inside, "circle", { cx: px, cy: py, r: 4.5, fill: COLOURS[n], stroke: "#ffffff" });
      parts.push(c.label + ": " + short(c.y[i]) + " ± " + Number(c.e[i].toPrecision(2)));
    });
    readout.textContent = (overSize() ? "radius " + short(x) + " um" : short(x) + " deg") + ". "
      + parts.join("; ");
  }

  function refresh(keep) {
    document.querySelectorAll(".view-second").forEach((n) => { n.hidden = !compare.checked; });
    controls.forEach((own) => {
      own.size.disabled = overSize() || isPopulation(Number(own.who.value));
    });
    curves = (compare.checked ? controls : controls.slice(0, 1)).map(curve);
    full = extent();
    if (!keep || !range) range = { x: [...full.x], y: [...full.y] };
    draw();
  }

  function zoom(factor, atX, atY) {
    const log = logarithmic();
    const squeeze = ([low, high], at) => {
      const middle = at === undefined ? (low + high) / 2 : at;
      return [middle - (middle - low) * factor, middle + (high - middle) * factor];
    };
    const x = squeeze(range.x, atX);
    range.x = [Math.max(x[0], full.x[0]), Math.min(x[1], full.x[1])];
    const y = squeeze(log ? range.y.map(toLog) : range.y, atY === undefined || !log ? atY : toLog(atY));
    range.y = log ? y.map((v) => 10 ** v) : y;
    draw();
  }

  function pan(dx, dy) {
    const log = logarithmic(), wide = range.x[1] - range.x[0];
    const shift = Math.max(full.x[0] - range.x[0], Math.min(dx * wide, full.x[1] - range.x[1]));
    range.x = range.x.map((v) => v + shift);
    const y = log ? range.y.map(toLog) : range.y, tall = y[1] - y[0];
    range.y = y.map((v) => (log ? 10 ** (v + dy * tall) : v + dy * tall));
    draw();
  }

  function valueAt(event) {
    const box = drawing.getBoundingClientRect();
    const u = ((event.clientX - box.left) / box.width * W - LEFT) / (W - LEFT - RIGHT);
    const v = (H - BOTTOM - (event.clientY - box.top) / box.height * H) / (H - TOP - BOTTOM);
    const log = logarithmic(), y = log ? range.y.map(toLog) : range.y;
    const at = y[0] + v * (y[1] - y[0]);
    return [range.x[0] + u * (range.x[1] - range.x[0]), log ? 10 ** at : at];
  }

  function reset() {
    range = { x: [...full.x], y: [...full.y] };
    draw();
  }

  let held = null;
  drawing.addEventListener("pointermove", (event) => {
    if (held) {
      const box = drawing.getBoundingClientRect();
      const dx = (held[0] - event.clientX) / box.width, dy = (event.clientY - held[1]) / box.height;
      held = [event.clientX, event.clientY];
      pan(dx, dy);
      return;
    }
    const main = curves[0], [x] = valueAt(event);
    if (!main || !main.x.length) return;
    let best = 0;
    main.x.forEach((v, i) => { if (Math.abs(v - x) < Math.abs(main.x[best] - x)) best = i; });
    if (best !== cursor) { cursor = best; draw(); }
  });
  drawing.addEventListener("pointerdown", (event) => { held = [event.clientX, event.clientY]; });
  window.addEventListener("pointerup", () => { held = null; });
  drawing.addEventListener("wheel", (event) => {
    event.preventDefault();
    zoom(event.deltaY > 0 ? 1.25 : 0.8, ...valueAt(event));
  }, { passive: false });
  drawing.addEventListener("keydown", (event) => {
    const move = { ArrowLeft: -1, ArrowRight: 1, PageDown: -10, PageUp: 10 }[event.key];
    const count = curves[0] ? curves[0].x.length : 0;
    if (move) cursor = Math.max(0, Math.min(count - 1, cursor + move));
    else if (event.key === "Home") cursor = 0;
    else if (event.key === "End") cursor = Math.max(0, count - 1);
    else if (event.key === "+" || event.key === "=") zoom(0.8);
    else if (event.key === "-") zoom(1.25);
    else if (event.key === "0") reset();
    else return;
    event.preventDefault();
    draw();
  });

  function save(name, href) {
    const link = document.createElement("a");
    link.download = name;
    link.href = href;
    link.click();
  }
  byId("view-csv").addEventListener("click", () => {
    const axis = overSize() ? "radius_um" : "angle_deg", lines = [axis + ",value,half_width,curve"];
    for (const c of curves) {
      c.x.forEach((x, i) => lines.push([x, c.y[i], c.e[i], '"' + c.label + '"'].join(",")));
    }
    save("curve.csv", "data:text/csv;charset=utf-8," + encodeURIComponent(lines.join("\n") + "\n"));
  });
  byId("view-png").addEventListener("click", () => {
    const copy = drawing.cloneNode(true), image = new Image();
    copy.setAttribute("xmlns", NS);
    copy.setAttribute("width", 2 * W);
    copy.setAttribute("height", 2 * H);
    image.onload = () => {
      const canvas = document.createElement("canvas");
      canvas.width = 2 * W;
      canvas.height = 2 * H;
      canvas.getContext("2d").drawImage(image, 0, 0);
      save("curve.png", canvas.toDataURL("image/png"));
    };
    image.src = "data:image/svg+xml;charset=utf-8,"
      + encodeURIComponent(new XMLSerializer().serializeToString(copy));
  });
  byId("view-in").addEventListener("click", () => zoom(0.8));
  byId("view-out").addEventListener("click", () => zoom(1.25));
  byId("view-reset").addEventListener("click", reset);
  compare.addEventListener("change", () => refresh(false));
  quantity.addEventListener("change", () => {
    scale.value = quantity.value === "0" ? "log" : "linear";
    cursor = 0;
    refresh(false);
  });
  scale.addEventListener("change", () => refresh(false));
  for (const own of controls) {
    own.wave.addEventListener("change", () => { listSizes(own); refresh(false); });
    for (const select of [own.who, own.size]) {
      select.addEventListener("change", () => refresh(false));
    }
    listSizes(own);
  }
  byId("view-note").textContent = data.note;
  byId("view").hidden = false;
  refresh(false);
}());
