// Scales: how numbers become colours, and the marks beside them.

export const colours = {}; // name: 256 RGBA words

const tables = ["sequential", "diverging", "cyclic"];
export const grey = 0xff9e9e9e; // pixels of the field without a value

export function readColours(bytes) {
  tables.forEach((name, k) => {
    colours[name] = Uint32Array.from({ length: 256 }, (_, i) => {
      const at = 3 * (256 * k + i);
      return (0xff000000 | bytes[at + 2] << 16 | bytes[at + 1] << 8 | bytes[at]) >>> 0;
    });
  });
}

export function css(word) {
  return `rgb(${word & 255},${word >> 8 & 255},${word >> 16 & 255})`;
}

// quantile of finite numbers, sorted.
function quantile(x, p) {
  return x[Math.min(x.length - 1, Math.max(0, Math.round(p * (x.length - 1))))];
}

// span covers the bulk of several samples: [values, share cut at either end].
function span(samples, log) {
  let lo = Infinity, hi = -Infinity;
  for (const [values, cut] of samples) {
    const x = Float32Array.from(values.filter(v => Number.isFinite(v) && (!log || v > 0))).sort();
    if (x.length === 0) continue;
    lo = Math.min(lo, quantile(x, cut));
    hi = Math.max(hi, quantile(x, 1 - cut));
  }
  return lo <= hi ? [lo, hi] : [log ? 1 : 0, log ? 10 : 1];
}

// scaleOf makes a scale of a kind: linear, log, ratio (a half to two), angle (0 to 180),
// difference (-90 to 90), about (0, symmetric).
export function scaleOf(kind, samples) {
  if (kind === "ratio") return { lo: 0.5, hi: 2, log: true, table: "diverging", ticks: [0.5, 0.7, 1, 1.4, 2] };
  if (kind === "angle") return { lo: 0, hi: 180, table: "cyclic", ticks: [0, 45, 90, 135, 180] };
  if (kind === "difference") return { lo: -90, hi: 90, table: "diverging", ticks: [-90, -45, 0, 45, 90] };
  let [lo, hi] = span(samples, kind === "log");
  if (kind === "about") {
    hi = Math.max(-lo, hi) || 1;
    return { lo: -hi, hi, table: "diverging", ticks: marks(-hi, hi, 4) };
  }
  if (kind === "log") {
    if (!(hi > lo)) hi = lo * 1.5;
    return { lo, hi, log: true, table: "sequential", ticks: logMarks(lo, hi) };
  }
  if (lo > 0 && lo < 0.3 * hi) lo = 0;
  if (!(hi > lo)) hi = lo + (Math.abs(lo) || 1) * 0.1;
  return { lo, hi, table: "sequential", ticks: marks(lo, hi, 4) };
}

// place returns where v lies on the scale: 0 at lo, 1 at hi.
export function place(s, v) {
  return s.log ? (v > 0 ? Math.log(v / s.lo) / Math.log(s.hi / s.lo) : NaN) : (v - s.lo) / (s.hi - s.lo);
}

export function colour(s, v) {
  const t = place(s, v);
  return Number.isNaN(t) ? grey : colours[s.table][Math.max(0, Math.min(255, Math.floor(t * 256)))];
}

export function marks(lo, hi, n) {
  const raw = (hi - lo) / n, p = 10 ** Math.floor(Math.log10(raw));
  const step = [1, 2, 5, 10].map(m => m * p).find(m => m >= raw * (1 - 1e-9));
  const out = [];
  for (let k = Math.ceil(lo / step - 1e-6); k * step <= hi + step * 1e-6; k++) out.push(+(k * step).toPrecision(6));
  return out;
}

function logMarks(lo, hi) {
  const out = [];
  for (let e = Math.floor(Math.log10(lo)); e <= Math.log10(hi); e++)
    for (const m of hi / lo > 100 ? [1] : [1, 2, 5]) {
      const v = m * 10 ** e;
      if (v >= lo * (1 - 1e-9) && v <= hi * (1 + 1e-9)) out.push(v);
    }
  return out;
}

const digits = "⁰¹²³⁴⁵⁶⁷⁸⁹";

// text prints a number with so many significant digits; nothing is a dash.
export function text(v, precision = 3) {
  if (v === null || v === undefined || !Number.isFinite(v)) return "–";
  const size = Math.abs(v);
  if (size !== 0 && (size >= 1e5 || size < 1e-3)) {
    const [m, e] = v.toExponential(precision - 1).split("e");
    const power = String(Math.abs(+e)).replace(/\d/g, d => digits[d]);
    return `${/^-?1(\.0*)?$/.test(m) ? m.replace(/1.*/, "") : m + "×"}10${+e < 0 ? "⁻" : ""}${power}`.replace("-", "−");
  }
  return String(+v.toPrecision(precision)).replace("-", "−");
}

// drawBar draws the colour bar of a scale.
export function drawBar(canvas, s, unit) {
  const dpr = devicePixelRatio || 1, w = canvas.clientWidth, h = 44;
  canvas.width = w * dpr;
  canvas.height = h * dpr;
  canvas.style.height = h + "px";
  const c = canvas.getContext("2d");
  c.scale(dpr, dpr);
  const left = 16, wide = w - 32;
  for (let i = 0; i < wide; i++) {
    c.fillStyle = css(colours[s.table][Math.floor(256 * i / wide)]);
    c.fillRect(left + i, 2, 1.5, 12);
  }
  c.fillStyle = "#1a1a1a";
  c.font = "11px 'DejaVu Sans', sans-serif";
  c.textAlign = "center";
  let end = -Infinity;
  for (const t of s.ticks) {
    const x = left + place(s, t) * wide, label = text(t), half = c.measureText(label).width / 2;
    c.fillRect(x - 0.5, 14, 1, 4);
    const at = Math.max(half, Math.min(w - half, x));
    if (at - half < end + 5) continue;
    c.fillText(label, at, 28);
    end = at + half;
  }
  c.fillText(unit, w / 2, 41, w - 4);
}
