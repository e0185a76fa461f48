// What explain tells of a pixel: words, tables, curves.
import { colour, drawBar, marks, place, scaleOf, text } from "./scale.js";

const $ = id => document.getElementById(id);
const ink = "#1a1a1a", blue = "#0072b2", orange = "#e69f00", green = "#009e73", red = "#d55e00", purple = "#cc79a7";

let last = null;

// showPixel shows an answer; estimator returns the one that is chosen.
export function showPixel(p, folder, estimator) {
  last = [p, folder, estimator];
  const at = p.pixel;
  $("place").textContent = `Pixel (${at.x_pixel}, ${at.y_pixel}): ${text(at.height_rsun, 4)} R☉, position angle ${at.position_angle_deg.toFixed(1)}°, ${at.structure} field lines`;
  $("verdict").textContent = p.verdict;
  const command = `offplane explain ${quote(folder)} --at ${at.solar_x_arcsec.toFixed(1)},${at.solar_y_arcsec.toFixed(1)}`;
  $("command").textContent = command;
  $("copy").textContent = "copy";
  $("copy").onclick = async () => {
    try {
      await navigator.clipboard.writeText(command);
      $("copy").textContent = "copied";
    } catch {
      getSelection().selectAllChildren($("command")); // the browser says no: ready for the keyboard
    }
  };
  identity(p);
  values(p);
  plots(p, estimator());
}
showPixel.again = () => last && showPixel(...last);

// quote makes a word of a path for a shell.
function quote(s) {
  return /^[\w@%+=:,./-]+$/.test(s) ? s : `'${s.replaceAll("'", `'\\''`)}'`;
}

function element(tag, parent, props = {}) {
  const e = Object.assign(document.createElement(tag), props);
  parent.append(e);
  return e;
}

function table(parent, caption, head, rows) {
  const box = element("div", parent, { className: "scroll" });
  const t = element("table", box);
  t.createCaption().textContent = caption;
  const h = t.createTHead().insertRow();
  for (const name of head) element("th", h, { textContent: name });
  const body = t.createTBody();
  for (const row of rows) {
    const r = body.insertRow();
    for (const cell of row) {
      const td = r.insertCell();
      if (typeof cell === "function") cell(td);
      else td.textContent = cell;
    }
  }
  return t;
}

// bar draws a factor as a bar from 1, on a logarithmic scale of that reach.
function bar(ln, reach) {
  return td => {
    td.className = "bar";
    const c = element("canvas", td, { width: 288, height: 36 }), g = c.getContext("2d");
    const x = ln === null ? 0 : Math.max(-1, Math.min(1, ln / reach)) * 140;
    g.fillStyle = ln < 0 ? blue : red;
    g.fillRect(Math.min(144, 144 + x), 8, Math.abs(x), 20);
    g.fillStyle = ink;
    g.fillRect(143, 0, 2, 36);
  };
}

// identity shows the split of ln(B/B_SKY) and its causes.
function identity(p) {
  const root = $("identity"), id = p.identity;
  root.replaceChildren();
  const parts = [["speed", id.ln_speed], ["density, square root", id.half_ln_density], ["assumed composition", id.half_ln_mu],
    ["density the wave feels", id.minus_half_ln_kink], ["B / B_SKY", id.ln_field]];
  const all = [...parts.map(x => x[1]), ...p.causes.map(c => c.ln_factor)].filter(Number.isFinite);
  const reach = Math.max(Math.log(1.1), ...all.map(Math.abs));
  const factor = ln => text(ln === null ? NaN : Math.exp(ln), 3);
  const t = table(root, "Identity: factors of B / B_SKY", ["part", "factor", ""], parts.map(([name, ln]) => [name, factor(ln), bar(ln, reach)]));
  t.id = "parts";
  table(root, "Causes, largest first", ["cause", "factor", ""], p.causes.filter(c => c.ln_factor === null || Math.abs(c.ln_factor) >= 5e-4)
    .map(c => [td => {
      element("b", td, { textContent: c.name });
      element("div", td, { className: "note", textContent: c.text });
    }, text(c.factor, 3), bar(c.ln_factor, reach)]));
  for (const f of p.flags) element("p", root, { className: "note", textContent: `Flag ${f.name}: ${f.about}${f.detail ? ` (${f.detail})` : ""}` });
  for (const c of p.cautions) element("p", root, { className: "note", textContent: `Caution: ${c}` });
}

// values shows inferred and true numbers.
function values(p) {
  const root = $("values"), t = p.truth, v = p.inferred;
  root.replaceChildren();
  const rows = [
    ["field [G]", v.field_G, v.field_err_G, t.field_sky_G, t.field_emission_G, t.field_wave_G],
    ["speed [km/s]", v.speed_km_s, v.speed_err_km_s, t.speed_sky_km_s, null, t.speed_wave_km_s],
    ["density [cm⁻³]", v.n_e_cm3, v.n_e_err_cm3, t.n_e_sky_cm3, t.n_e_emission_cm3, null],
    ["direction [deg]", v.angle_deg, v.angle_err_deg, t.angle_sky_deg, null, null],
  ];
  const shown = table(root, "Inferred and true", ["", "inferred", "error", "true, x = 0", "emission", "wave"], rows.map(r => [r[0], ...r.slice(1).map(x => text(x, 4))]));
  shown.id = "numbers";
  shown.dataset.field = v.field_G;
  table(root, "Estimators", ["", "speed [km/s]", "error", "B [G]", "plane wave", "along the track", "own waves, one plane"],
    p.estimators.map(e => [e.name, text(e.speed_km_s, 4), text(e.speed_err_km_s, 2), text(e.field_G, 3), text(e.plane_wave, 3), text(e.plane_wave_path, 3), text(e.one_plane_run, 3)]));
  element("p", root, { className: "note", textContent: "The last three: what the estimator makes of a plane wave, of one that bends with the true speeds and directions, and of the run's own waves on one plane without noise, over the true speed." });
  const k = p.track, s = p.line_of_sight;
  element("p", root, { className: "note", textContent: `Track: ${k.points} points, ${text(k.length_Mm)} Mm, ${text(k.wavelengths, 2)} wavelengths; ${text(k.off_field_deg, 2)}° off the field; island of ${k.island_pixels} pixels.` });
  element("p", root, { className: "note", textContent: `Half the emission within ${text(s.depth50_rsun, 2)} R☉ of the plane of the sky, half the wave power within ${text(s.wave_depth50_rsun, 2)} R☉.` });
}

// plots draws the curves. Those of the last answer are dropped.
function plots(p, chosen) {
  const root = $("plots"), c = p.curves, s = c.line_of_sight;
  root.replaceChildren();
  const x = "x, toward the observer [R☉]"; // 0 at the plane of the sky
  const keep = near(s);
  const cut = a => a.filter((_, i) => keep[i]);
  const X = cut(s.x_rsun);
  curves(root, "Line of sight: where light and waves come from", X, [
    ["1074.7 nm", cut(s.emission_per_rsun), blue], ["1079.8 nm", cut(s.emission_line2_per_rsun), orange, [6, 4]], ["wave power", cut(s.wave_power_per_rsun), red]], x, "share [1/R☉]");
  curves(root, "Line of sight: electron density", X, [["true", cut(s.n_e_cm3), blue], ["inferred", X.map(() => p.inferred.n_e_cm3), ink, [6, 4]]], x, "[cm⁻³]", { log: true });
  curves(root, "Line of sight: field in the plane of the sky", X, [["true", cut(s.field_sky_component_G), blue], ["inferred", X.map(() => p.inferred.field_G), ink, [6, 4]]], x, "[G]");
  if (!c.doppler.time_s || c.doppler.time_s.length === 0) {
    element("p", root, { textContent: "This pixel has no series." });
    return;
  }
  curves(root, "Doppler shift in the band (positive: away)", c.doppler.time_s.map(t => t / 60), [["Doppler shift", c.doppler.doppler_km_s, blue]], "time [min]", "[km/s]");
  island(root, c);
  if (!c.track || c.track.length < 2) {
    element("p", root, { textContent: "The island gave no track." });
    return;
  }
  const speed = (p.estimators.find(e => e.name === chosen) || p.estimators[0]).speed_km_s;
  timeDistance(root, c.time_distance, speed, p.truth.speed_wave_km_s);
  kOmega(root, c.k_omega, speed, p.truth.speed_wave_km_s);
  lags(root, c.lags.find(l => l.name === chosen) || c.lags[0], speed, p.truth.speed_wave_km_s);
}

// near marks the samples that hold all but a little of light and waves.
function near(s) {
  const top = a => Math.max(...a.map(v => v || 0));
  const e = top(s.emission_per_rsun), w = top(s.wave_power_per_rsun);
  const reach = Math.max(0.2, ...s.x_rsun.map((x, i) => s.emission_per_rsun[i] > 0.01 * e || s.wave_power_per_rsun[i] > 0.01 * w ? Math.abs(x) : 0));
  return s.x_rsun.map(x => Math.abs(x) <= reach * 1.1 + 1e-9);
}

// curves draws lines with uPlot: [label, values, colour, dashes or "points"].
function curves(root, title, x, lines, xlabel, ylabel, { log = false } = {}) {
  const box = element("div", root, { className: "plot" });
  element("h3", box, { textContent: title });
  const number = (_, v) => v === null || v === undefined ? "–" : text(v, 4);
  new uPlot({
    width: box.clientWidth, height: 230, padding: [8, 8, 0, 0],
    cursor: { drag: { x: true, y: false } },
    scales: { x: { time: false }, y: log ? { distr: 3 } : {} },
    axes: [{ label: xlabel, labelSize: 18, size: 34, values: (_, t) => t.map(v => text(v, 6)) },
      { label: ylabel, labelSize: 18, size: 58, values: (_, t) => t.map(v => v === null ? "" : text(v, log ? 1 : 6)) }],
    series: [{ label: "at", value: number }, ...lines.map(([label, , stroke, style]) => ({
      label, stroke, value: number, width: 1.6, dash: Array.isArray(style) ? style : undefined, spanGaps: false,
      ...style === "points" ? { paths: () => null, points: { show: true, size: 6, fill: stroke } } : { points: { show: x.length === 1 } },
    }))],
  }, [x, ...lines.map(l => l[1])], box);
}

// A heat map with axes on an own canvas. rows[k][i] lies at (xs[i], ys[k]).
function heat(root, title, xs, ys, rows, scale, unit, xlabel, ylabel, lines = [], square = false) {
  const box = element("div", root, { className: "plot" });
  element("h3", box, { textContent: title });
  const canvas = element("canvas", box, { className: "heat" }), barCanvas = element("canvas", box, { className: "heat" });
  canvas.setAttribute("role", "img");
  canvas.setAttribute("aria-label", `${title}: ${ylabel} against ${xlabel}`);
  const dpr = devicePixelRatio || 1, w = box.clientWidth, h = 230, left = 52, bottom = 36, top = 6, right = 10;
  canvas.width = w * dpr;
  canvas.height = h * dpr;
  canvas.style.height = h + "px";
  const c = canvas.getContext("2d");
  c.scale(dpr, dpr);
  const inner = h - top - bottom, wide = square ? Math.min(w - left - right, inner * xs.length / ys.length) : w - left - right;
  const half = a => a.length > 1 ? (a[a.length - 1] - a[0]) / (a.length - 1) / 2 : 0.5;
  const x0 = xs[0] - half(xs), x1 = xs[xs.length - 1] + half(xs), y0 = ys[0] - half(ys), y1 = ys[ys.length - 1] + half(ys);
  const px = v => left + (v - x0) / (x1 - x0) * wide, py = v => h - bottom - (v - y0) / (y1 - y0) * inner;
  const raster = new OffscreenCanvas(xs.length, ys.length), rc = raster.getContext("2d");
  const image = rc.createImageData(xs.length, ys.length), words = new Uint32Array(image.data.buffer);
  rows.forEach((row, k) => row.forEach((v, i) => {
    if (v !== null && v !== undefined) words[(ys.length - 1 - k) * xs.length + i] = colour(scale, v);
  }));
  rc.putImageData(image, 0, 0);
  c.imageSmoothingEnabled = false;
  c.drawImage(raster, px(x0), py(y1), px(x1) - px(x0), py(y0) - py(y1));
  c.save();
  c.beginPath();
  c.rect(left, top, wide, inner);
  c.clip();
  for (const l of lines) {
    for (const [style, width] of [["rgba(255,255,255,.8)", 4], [l.colour, 1.8]]) {
      c.strokeStyle = style;
      c.lineWidth = width;
      c.setLineDash(l.dash || []);
      c.beginPath();
      l.points.forEach(([x, y], i) => c[i ? "lineTo" : "moveTo"](px(x), py(y)));
      c.stroke();
    }
  }
  c.restore();
  c.setLineDash([]);
  c.strokeStyle = c.fillStyle = ink;
  c.lineWidth = 1;
  c.strokeRect(left, top, wide, inner);
  c.font = "12px 'DejaVu Sans', sans-serif";
  c.textAlign = "center";
  for (const t of marks(x0, x1, Math.max(2, Math.ceil(wide / 80)))) {
    c.fillRect(px(t), h - bottom, 1, 4);
    c.fillText(text(t, 6), px(t), h - bottom + 16);
  }
  c.fillText(xlabel, left + wide / 2, h - 4);
  c.textAlign = "right";
  for (const t of marks(y0, y1, 5)) {
    c.fillRect(left - 4, py(t), 4, 1);
    c.fillText(text(t, 6), left - 7, py(t) + 4);
  }
  c.textAlign = "center";
  c.translate(12, top + inner / 2);
  c.rotate(-Math.PI / 2);
  c.fillText(ylabel, 0, 0);
  drawBar(barCanvas, scale, unit);
  for (const l of lines) if (l.label) element("span", box, { className: "note", textContent: `${l.dash ? "- - " : "— "}${l.label}  ` }).style.color = l.colour;
  return box;
}

// island shows the coherence with the pixel, and the track.
function island(root, c) {
  if (!c.island || c.island.length === 0) return;
  const xs = c.island.map(m => m.x_pixel), ys = c.island.map(m => m.y_pixel);
  const x0 = Math.min(...xs), y0 = Math.min(...ys), nx = Math.max(...xs) - x0 + 1, ny = Math.max(...ys) - y0 + 1;
  const rows = Array.from({ length: ny }, () => Array(nx).fill(null));
  for (const m of c.island) rows[m.y_pixel - y0][m.x_pixel - x0] = m.coherence;
  const at = (from, n) => Array.from({ length: n }, (_, i) => from + i);
  heat(root, "Coherence with this pixel, and the track", at(x0, nx), at(y0, ny), rows, { ...scaleOf("linear", []), lo: 0, hi: 1, ticks: [0, 0.5, 1] },
    "coherence", "pixel, x", "pixel, y", [{ colour: ink, points: (c.track || []).map(t => [t.x_pixel, t.y_pixel]) }], true);
}

const parts = { doppler_km_s: "all waves", outward_km_s: "outward waves", inward_km_s: "inward waves" };
let part = "doppler_km_s";

// timeDistance shows the waves on the track with lines of the measured and the true speed.
function timeDistance(root, t, speed, truth) {
  const d = t.distance_Mm, time = t.time_s.map(s => s / 60), cadence = time[1] - time[0];
  const n = Math.min(time.length, Math.round(60 / cadence)), from = Math.floor((time.length - n) / 2), to = from + n;
  const holder = element("div", root, { className: "plot" });
  const select = element("select", holder);
  select.setAttribute("aria-label", "waves of the time-distance map");
  for (const [k, label] of Object.entries(parts)) if (t[k] && t[k].length) select.add(new Option(label, k, false, k === part));
  const draw = () => {
    while (select.nextSibling) select.nextSibling.remove();
    const rows = t[select.value].map(r => r.slice(from, to)), middle = time[(from + to) >> 1];
    const sign = select.value === "inward_km_s" ? -1 : 1;
    const line = (v, colour, dash, label) => v ? [{ colour, dash, label, points: d.map(x => [middle + sign * x * 1000 / v / 60, x]) }] : [];
    heat(holder, "Time-distance map along the track", time.slice(from, to), d, rows, scaleOf("about", [[rows.flat(), 0.005]]), "Doppler shift [km/s]: red away, blue toward",
      "time [min]", "along the track, outward [Mm]", [...line(speed, ink, null, `measured ${text(speed)} km/s`), ...line(truth, purple, [6, 4], `true (waves) ${text(truth)} km/s`)]);
  };
  select.onchange = () => { part = select.value; draw(); };
  draw();
}

// kOmega shows the power on the track with lines of constant phase speed.
function kOmega(root, k, speed, truth) {
  if (!k.power_km2_s2 || k.power_km2_s2.length === 0) return;
  const f = k.frequency_mHz, fs = f.filter(v => v <= 8); // they ascend
  const reach = 2 * Math.PI * 6 / (0.25 * (truth || 400)); // waves of 6 mHz at a quarter of the speed
  const order = k.wavenumber_rad_Mm.map((v, i) => [v, i]).filter(o => Math.abs(o[0]) <= reach).sort((a, b) => a[0] - b[0]);
  const ks = order.map(o => o[0]);
  // Frequency upward, wavenumber along x.
  const top = Math.max(...k.power_km2_s2.flat().map(v => v || 0));
  const rows = fs.map((_, j) => order.map(o => k.power_km2_s2[o[1]][j] / top));
  const scale = { lo: 1e-4, hi: 1, log: true, table: "sequential", ticks: [1e-4, 1e-3, 1e-2, 1e-1, 1] };
  const line = (v, colour, dash, label) => v ? [{ colour, dash, label, points: [0, 10].map(q => [2 * Math.PI * q / v, q]) }] : [];
  heat(root, "Power against wavenumber and frequency", ks, fs, rows, scale, "power over its peak", "wavenumber, outward positive [rad/Mm]", "frequency [mHz]",
    [...line(speed, ink, null, `measured ${text(speed)} km/s`), ...line(truth, purple, [6, 4], `true (waves) ${text(truth)} km/s`)]);
}

// lags shows lags with their line; of a fit of both waves what it explains at each speed.
function lags(root, l, speed, truth) {
  if (!l) return;
  if (l.explained && l.explained.length) {
    const keep = l.speeds_km_s.map(v => v <= 4 * (truth || 1000)), cut = a => a.filter((_, i) => keep[i]);
    const x = cut(l.speeds_km_s), y = cut(l.explained);
    const at = v => x.map((u, i) => v && Math.abs(u - v) === Math.min(...x.map(q => Math.abs(q - v))) ? y[i] : null);
    curves(root, `Estimator ${l.name}: share of the power that it explains`, x, [["share", y, blue], ["measured", at(speed), ink, "points"], ["true (waves)", at(truth), purple, "points"]], "phase speed [km/s]", "share");
    return;
  }
  if (!l.lag_s || l.lag_s.length < 2) {
    element("p", root, { textContent: `Estimator ${l.name}: no lags.` });
    return;
  }
  const d = l.distance_Mm;
  curves(root, `Estimator ${l.name}: lags along the track`, d, [["lag", l.lag_s, blue, "points"],
    ["fit", d.map(x => l.slope_s_Mm === null ? null : l.slope_s_Mm * x + l.intercept_s), ink],
    ["true speed", d.map(x => truth ? 1000 * x / truth : null), purple, [6, 4]]], "along the track, outward [Mm]", "lag [s]");
}
