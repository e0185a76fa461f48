// The page of `offplane view`: choices, maps, readout, region; pixel.js shows a pixel.
import { readColours, scaleOf, text } from "./scale.js";
import { Panel, Sky } from "./map.js";
import { showPixel } from "./pixel.js";

const $ = id => document.getElementById(id);

// What can be compared: inferred map, truths by name, kinds of scale.
const quantities = {
  field: { label: "magnetic field", inferred: "B", unit: "G", kind: "linear", estimated: true,
    truths: { sky: "B_SKY", emission: "B_EMIS", wave: "B_WAVE", total: "BTOT_SKY" } },
  speed: { label: "phase speed", inferred: "SPEED", unit: "km/s", kind: "linear", estimated: true,
    truths: { sky: "SPEED_SKY", wave: "SPEED_WAVE" } },
  density: { label: "electron density", inferred: "NE", unit: "cm⁻³", kind: "log",
    truths: { sky: "NE_SKY", emission: "NE_EMIS" } },
  direction: { label: "direction", inferred: "ANGLE", unit: "deg", kind: "angle", truths: { sky: "ANGLE_SKY" } },
};
const truthLabels = { sky: "at the plane of the sky", emission: "weighted by emission", wave: "weighted by wave power", total: "whole field vector" };

let run, sky, panels, asked = 0;
const cache = new Map();

async function get(path) {
  const r = await fetch(path);
  if (!r.ok) throw new Error((await r.text()).trim());
  return r;
}

const about = name => run.maps.find(m => m.name === name);

// load fetches a map once.
function load(name) {
  if (!cache.has(name)) {
    const m = about(name);
    cache.set(name, get(`data/map/${m.file}/${m.name}`).then(async r => {
      const b = await r.arrayBuffer();
      return m.ints ? new Int32Array(b) : new Float32Array(b);
    }));
  }
  return cache.get(name);
}

function fill(select, options) {
  const was = select.value;
  select.replaceChildren(...options.map(([value, label]) => new Option(label, value)));
  if (options.some(o => o[0] === was)) select.value = was;
}

// names returns the maps that the choices ask for.
function names() {
  const q = quantities[$("quantity").value], e = $("estimator").value;
  const other = q.estimated && e !== run.estimators[0] ? "_" + e.toUpperCase() : "";
  return { q, inferred: q.inferred + other, truth: q.truths[$("truth").value], ratio: q.kind === "angle" ? "difference" : "ratio" };
}

const shown = {}; // data of the panels

async function choose() {
  const q = quantities[$("quantity").value];
  fill($("truth"), Object.keys(q.truths).filter(t => about(q.truths[t])).map(t => [t, `${q.truths[t]}: ${truthLabels[t]}`]));
  $("estimator").disabled = !q.estimated;
  const turn = ++asked, n = names(), [truth, inferred, other] = await Promise.all([load(n.truth), load(n.inferred), load($("other").value)]);
  if (turn !== asked) return; // another choice was made meanwhile
  const inField = x => x.filter((_, i) => sky.field[i]);
  const shared = scaleOf(n.q.kind, [[inField(truth), 0.005], [inField(inferred), 0.03]]);
  const ratio = Float32Array.from(inferred, (v, i) => {
    if (n.q.kind !== "angle") return v > 0 && truth[i] > 0 ? v / truth[i] : NaN;
    const d = v - truth[i];
    return d - 180 * Math.round(d / 180);
  });
  Object.assign(shown, { truth, inferred, ratio, other });
  panels.truth.show("true", n.truth, truth, shared, `${n.q.label} [${n.q.unit}]`);
  const estimator = n.q.estimated ? `, estimator ${$("estimator").value}` : "";
  panels.inferred.show("inferred", n.inferred + estimator, inferred, shared, `${n.q.label} [${n.q.unit}]`);
  panels.ratio.show(n.q.kind === "angle" ? "inferred − true" : "inferred / true", `${n.inferred} / ${n.truth}`.replace(" / ", n.q.kind === "angle" ? " − " : " / "),
    ratio, scaleOf(n.q.kind === "angle" ? "difference" : "ratio", []), n.q.kind === "angle" ? "difference [deg]" : "ratio, logarithmic");
  const m = about($("other").value);
  const kind = /^ANGLE/.test(m.name) && !/ERR/.test(m.name) ? "angle" : /^NE/.test(m.name) && m.unit ? "log" : "linear";
  panels.other.show(m.file, m.name, other, scaleOf(kind, [[inField(other), 0.02]]), `${m.about || m.name} ${m.unit ? `[${m.unit}]` : ""}`);
  if (sky.cursor) readout(...sky.cursor);
}

// meaning tells the names of codes or bits.
function meaning(m, v) {
  if (!m.codes) return String(v);
  const bits = m.name.startsWith("FLAG");
  const hits = m.codes.filter(c => bits ? v & c.Value : v === c.Value).map(c => c.Name);
  return `${v}${hits.length ? ` (${hits.join(", ")})` : ""}`;
}

function readout(x, y) {
  const i = sky.at(x, y), p = sky.polar(x, y);
  const place = `pixel (${x + 1}, ${y + 1})  X ${p.tx.toFixed(1)}″ Y ${p.ty.toFixed(1)}″  ${p.r.toFixed(3)} R☉, position angle ${p.pa.toFixed(1)}°`;
  if (i < 0 || !sky.field[i]) {
    $("readout").textContent = `${place}: outside the field`;
    return;
  }
  const n = names(), m = about($("other").value), unit = n.q.unit;
  const flags = shown.flag ? shown.flag[i] : 0;
  const other = m.ints ? meaning(m, shown.other[i]) : `${text(shown.other[i], 4)} ${m.unit}`;
  $("readout").textContent = `${place}:  ${n.truth} ${text(shown.truth[i], 4)} ${unit}, ${n.inferred} ${text(shown.inferred[i], 4)} ${unit}, ` +
    `${n.ratio} ${text(shown.ratio[i], 4)}; ${m.name} ${other}` + (flags ? `; FLAG ${meaning(about("FLAG"), flags)}` : "");
}

async function explain(x, y) {
  const section = $("pixel"), turn = ++explain.turn;
  section.hidden = false;
  section.setAttribute("aria-busy", "true");
  $("place").textContent = `Pixel (${x + 1}, ${y + 1})`;
  if (!section.dataset.pixel) $("verdict").textContent = "The corona is being built; the first answer takes some seconds.";
  const started = performance.now();
  try {
    const p = await (await get(`data/pixel?x=${x + 1}&y=${y + 1}`)).json();
    if (turn !== explain.turn) return;
    sky.marks = { island: p.curves.island || [], track: p.curves.track || [] };
    sky.overlay();
    showPixel(p, run.folder, () => $("estimator").value);
    section.dataset.pixel = `${x + 1},${y + 1}`;
    section.dataset.milliseconds = Math.round(performance.now() - started);
  } catch (e) {
    if (turn !== explain.turn) return;
    $("place").textContent = "No answer for this pixel";
    $("verdict").textContent = e.message;
    delete section.dataset.pixel;
  } finally {
    if (turn === explain.turn) section.removeAttribute("aria-busy");
  }
}
explain.turn = 0;

let chosen = null; // query of the region

function box(x0, y0, x1, y1) {
  chosen = { x0: x0 + 1, y0: y0 + 1, x1: x1 + 1, y1: y1 + 1 };
  sky.region = (x, y) => x >= x0 && x <= x1 && y >= y0 && y <= y1;
  statistics(`pixels ${x0 + 1}–${x1 + 1} × ${y0 + 1}–${y1 + 1}`);
}

function sector() {
  const v = Object.fromEntries(["r0", "r1", "pa0", "pa1"].map(k => [k, +$("sector").elements[k].value]));
  chosen = v;
  const turn = a => a - 360 * Math.floor(a / 360);
  sky.region = (x, y) => {
    const p = sky.polar(x, y);
    return p.r >= v.r0 && p.r < v.r1 && (v.pa1 >= v.pa0 + 360 || turn(p.pa - v.pa0) < turn(v.pa1 - v.pa0));
  };
  statistics(`${v.r0}–${v.r1} R☉, position angle ${v.pa0}–${v.pa1}°`);
}

async function statistics(label) {
  sky.overlay();
  const out = $("statistics");
  try {
    const s = await (await get("data/region?" + new URLSearchParams({ ...chosen, estimator: $("estimator").value }))).json();
    const rows = [];
    for (const [quantity, truths] of Object.entries(s.ratios))
      for (const [truth, v] of Object.entries(truths)) if (v) rows.push([`${quantity} / ${truth} truth`, v]);
    if (s.angle_error_deg) rows.push(["|direction − truth| [deg]", s.angle_error_deg]);
    const t = document.createElement("table");
    t.createCaption().textContent = `${label}: ${s.pixels.valid} of ${s.pixels.total} pixels valid (${s.pixels.total ? (100 * s.pixels.valid_fraction).toFixed(1) : 0} %), estimator ${$("estimator").value}`;
    const head = t.createTHead().insertRow();
    for (const h of ["inferred / true", "median", "its 68 %", "16 %", "84 %", "2.5 %", "97.5 %", "pixels"]) head.append(Object.assign(document.createElement("th"), { textContent: h }));
    const body = t.createTBody();
    for (const [name, v] of rows) {
      const r = body.insertRow();
      r.dataset.name = name;
      r.dataset.median = v.median;
      for (const cell of [name, text(v.median, 4), v.median_low == null ? "–" : `${text(v.median_low, 4)}–${text(v.median_high, 4)}`, text(v.p16, 4), text(v.p84, 4), text(v.p2_5, 4), text(v.p97_5, 4), v.count]) r.insertCell().textContent = cell;
    }
    const scroll = Object.assign(document.createElement("div"), { className: "scroll" });
    const clear = Object.assign(document.createElement("button"), { type: "button", textContent: "clear" });
    clear.onclick = () => { chosen = sky.region = null; out.replaceChildren(); sky.overlay(); };
    scroll.append(t);
    out.replaceChildren(scroll, clear);
    out.dataset.label = label;
  } catch (e) {
    out.textContent = e.message;
  }
}

async function begin() {
  run = await (await get("data/run")).json();
  readColours(new Uint8Array(await (await get("data/colours")).arrayBuffer()));
  document.title = `offplane view: ${run.scenario}`;
  $("scenario").textContent = `${run.scenario} (${run.folder})`;
  for (const s of run.sentences) $("sentences").append(Object.assign(document.createElement("p"), { textContent: s }));
  const structure = await load("STRUCTURE");
  sky = new Sky(run.grid, Uint8Array.from(structure, v => v !== 0));
  shown.flag = about("FLAG") && await load("FLAG");
  fill($("quantity"), Object.entries(quantities).filter(([, q]) => about(q.inferred) && about(q.truths.sky)).map(([k, q]) => [k, q.label]));
  fill($("estimator"), run.estimators.map(e => [e, e]));
  fill($("other"), run.maps.map(m => [m.name, `${m.file}: ${m.name}`]));
  if (about("COHERENCE")) $("other").value = "COHERENCE";
  panels = Object.fromEntries(["truth", "inferred", "ratio", "other"].map(k => [k, new Panel(sky, $("maps"))]));
  Object.assign(sky, { moved: readout, explain, selected: box });
  for (const id of ["quantity", "truth", "other"]) $(id).onchange = choose;
  $("estimator").onchange = () => { choose(); if (chosen) statistics($("statistics").dataset.label); showPixel.again(); };
  $("in").onclick = () => sky.zoom(2);
  $("out").onclick = () => sky.zoom(0.5);
  $("sector").onsubmit = e => { e.preventDefault(); sector(); };
  const h = run.heights, f = $("sector").elements;
  Object.assign(f.r0, { value: h.length ? h[0][0] : 1 });
  Object.assign(f.r1, { value: h.length ? h[h.length - 1][1] : 2 });
  f.pa0.value = 0;
  f.pa1.value = 360;
  for (const name of run.files) $("files").append(Object.assign(document.createElement("a"), { href: "files/" + name, textContent: name, download: name }), " ");
  if (run.files.length) $("files").prepend("Files of the run: ");
  await choose();
  let width = innerWidth;
  addEventListener("resize", () => {
    if (innerWidth === width) return; // a phone's bars come and go
    width = innerWidth;
    sky.draw();
    showPixel.again();
  });
  document.body.dataset.ready = "yes";
}

begin().catch(e => {
  $("readout").className = "error";
  $("readout").textContent = e.message;
});
