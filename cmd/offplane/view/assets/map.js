// Maps of the sky with one cursor, one zoom and one selection.
import { colour, drawBar, grey } from "./scale.js";

// A Sky is what linked maps share. Pixels are zero-based, y upward.
export class Sky {
  constructor(grid, field) {
    this.grid = grid;
    this.field = field; // 1 in the field
    this.panels = [];
    this.cursor = null; // [x, y]
    this.marks = null; // what was explained: {island, track}
    this.region = null; // test of a pixel
    this.whole = this.bounds();
    this.box = this.whole;
  }

  // bounds is the least square of pixels around the field, with a margin.
  bounds() {
    const { nx, ny } = this.grid;
    let x0 = nx, y0 = ny, x1 = 0, y1 = 0;
    for (let i = 0; i < nx * ny; i++) {
      if (!this.field[i]) continue;
      const x = i % nx, y = Math.floor(i / nx);
      x0 = Math.min(x0, x); x1 = Math.max(x1, x);
      y0 = Math.min(y0, y); y1 = Math.max(y1, y);
    }
    const w = x1 - x0 + 5, h = y1 - y0 + 5;
    return { x: x0 - 2, y: y0 - 2, w, h };
  }

  at(x, y) {
    const { nx, ny } = this.grid;
    return x < 0 || y < 0 || x >= nx || y >= ny ? -1 : y * nx + x;
  }

  // polar returns height [solar radii], position angle [deg] and solar X, Y [arcsec].
  polar(x, y) {
    const g = this.grid, a = g.roll_deg * Math.PI / 180;
    const dx = x + 1 - g.centre_x, dy = y + 1 - g.centre_y;
    const west = g.step_rsun * (Math.cos(a) * dx - Math.sin(a) * dy), north = g.step_rsun * (Math.sin(a) * dx + Math.cos(a) * dy);
    const arcsec = 180 * 3600 / Math.PI, u = west / g.distance_rsun, v = north / g.distance_rsun;
    return {
      r: Math.hypot(west, north), pa: (Math.atan2(-west, north) * 180 / Math.PI + 360) % 360,
      tx: Math.atan(u) * arcsec, ty: Math.atan2(v, Math.hypot(1, u)) * arcsec,
    };
  }

  zoom(factor) {
    const b = this.box, [cx, cy] = this.cursor || [b.x + b.w / 2, b.y + b.h / 2];
    const w = Math.max(8, Math.min(this.whole.w, b.w / factor)), h = w * this.whole.h / this.whole.w;
    const clamp = (v, lo, hi) => Math.max(lo, Math.min(hi, v));
    this.box = w === this.whole.w ? this.whole : {
      x: clamp(cx - w / 2, this.whole.x, this.whole.x + this.whole.w - w),
      y: clamp(cy - h / 2, this.whole.y, this.whole.y + this.whole.h - h), w, h,
    };
    this.draw();
  }

  reset() {
    this.box = this.whole;
    this.draw();
  }

  move(x, y) {
    if (this.cursor && this.cursor[0] === x && this.cursor[1] === y) return;
    this.cursor = [x, y];
    const b = this.box;
    if (x < b.x || y < b.y || x > b.x + b.w || y > b.y + b.h) this.zoom(1);
    this.overlay();
    this.moved(x, y);
  }

  draw() { this.panels.forEach(p => p.draw()); }
  overlay() { this.panels.forEach(p => p.over()); }
  moved() {} // set by the page
  explain() {}
  selected() {}
}

// A Panel is one map.
export class Panel {
  constructor(sky, parent) {
    this.sky = sky;
    this.root = document.createElement("div");
    this.root.className = "map";
    this.title = document.createElement("h3");
    this.canvas = document.createElement("canvas");
    this.canvas.className = "sky";
    this.canvas.tabIndex = 0;
    this.canvas.setAttribute("role", "img");
    this.bar = document.createElement("canvas");
    this.root.append(this.title, this.canvas, this.bar);
    parent.append(this.root);
    this.picture = document.createElement("canvas");
    this.listen();
    sky.panels.push(this);
  }

  show(name, sub, data, scale, unit) {
    Object.assign(this, { name, data, scale, unit });
    this.title.textContent = name + " ";
    const span = document.createElement("span");
    span.textContent = sub;
    this.title.append(span);
    this.canvas.setAttribute("aria-label", `map: ${name} ${sub}, ${unit}. Arrow keys move the cursor, Enter explains the pixel.`);
    this.paint();
    this.draw();
  }

  // paint turns the whole map into a picture, once for each change of data.
  paint() {
    const { nx, ny } = this.sky.grid;
    this.picture.width = nx;
    this.picture.height = ny;
    const c = this.picture.getContext("2d"), image = c.createImageData(nx, ny), words = new Uint32Array(image.data.buffer);
    for (let i = 0; i < nx * ny; i++) {
      if (!this.sky.field[i]) continue;
      const v = this.data ? this.data[i] : NaN;
      words[(ny - 1 - Math.floor(i / nx)) * nx + i % nx] = Number.isFinite(v) ? colour(this.scale, v) : grey;
    }
    c.putImageData(image, 0, 0);
  }

  draw() {
    if (!this.scale) return;
    const b = this.sky.box, w = this.canvas.clientWidth, dpr = devicePixelRatio || 1;
    this.k = w / b.w; // CSS pixels a pixel
    const h = Math.round(b.h * this.k);
    this.canvas.style.height = h + "px";
    this.canvas.width = Math.round(w * dpr);
    this.canvas.height = Math.round(h * dpr);
    this.canvas.dataset.box = [b.x, b.y, b.w, b.h];
    drawBar(this.bar, this.scale, this.unit);
    this.over();
  }

  // px returns the place of the centre of a pixel on the canvas.
  px(x, y) {
    const b = this.sky.box;
    return [(x - b.x + 0.5) * this.k, (b.y + b.h - y - 0.5) * this.k];
  }

  over() {
    if (!this.k) return;
    const { grid: g, box: b, cursor, marks, region } = this.sky, dpr = devicePixelRatio || 1;
    const c = this.canvas.getContext("2d"), w = this.canvas.width / dpr, h = this.canvas.height / dpr;
    c.setTransform(dpr, 0, 0, dpr, 0, 0);
    c.clearRect(0, 0, w, h);
    c.imageSmoothingEnabled = this.k * dpr < 1;
    const [sx, sy] = this.px(-0.5, g.ny - 0.5);
    c.drawImage(this.picture, sx, sy, g.nx * this.k, g.ny * this.k);
    const [ox, oy] = this.px(g.centre_x - 1, g.centre_y - 1);
    c.strokeStyle = "#1a1a1a";
    c.lineWidth = 1;
    c.beginPath();
    c.arc(ox, oy, this.k / g.step_rsun, 0, 2 * Math.PI);
    c.stroke();
    this.compass(c);
    if (region) this.shade(c, region);
    if (this.drag) {
      const [x, y] = this.drag, [u, v] = this.to;
      c.setLineDash([4, 3]);
      c.strokeRect(Math.min(x, u), Math.min(y, v), Math.abs(u - x), Math.abs(v - y));
      c.setLineDash([]);
    }
    if (marks) this.mark(c, marks);
    if (cursor) {
      const [x, y] = this.px(...cursor), s = Math.max(this.k, 5);
      c.strokeStyle = "#fff";
      c.lineWidth = 3;
      for (let pass = 0; pass < 2; pass++) {
        c.strokeRect(x - s / 2, y - s / 2, s, s);
        c.beginPath();
        for (const [dx, dy] of [[1, 0], [-1, 0], [0, 1], [0, -1]]) {
          c.moveTo(x + dx * (s / 2 + 2), y + dy * (s / 2 + 2));
          c.lineTo(x + dx * (s / 2 + 9), y + dy * (s / 2 + 9));
        }
        c.stroke();
        c.strokeStyle = "#d00";
        c.lineWidth = 1;
      }
    }
  }

  // compass draws north and east in the corner; the image may be rolled.
  compass(c) {
    const a = this.sky.grid.roll_deg * Math.PI / 180, x = 34, y = 34;
    c.fillStyle = c.strokeStyle = "#1a1a1a";
    c.font = "bold 11px 'DejaVu Sans', sans-serif";
    c.textAlign = "center";
    c.textBaseline = "middle";
    for (const [letter, dx, dy] of [["N", Math.sin(a), -Math.cos(a)], ["E", -Math.cos(a), -Math.sin(a)]]) {
      c.beginPath();
      c.moveTo(x, y);
      c.lineTo(x + 16 * dx, y + 16 * dy);
      c.stroke();
      c.fillText(letter, x + 24 * dx, y + 24 * dy);
    }
  }

  // shade greys out what is not in the region.
  shade(c, inside) {
    const b = this.sky.box, { nx } = this.sky.grid;
    c.fillStyle = "rgba(255,255,255,.65)";
    for (let y = Math.max(0, Math.floor(b.y)); y < b.y + b.h; y++)
      for (let x = Math.max(0, Math.floor(b.x)); x < b.x + b.w; x++) {
        const i = this.sky.at(x, y);
        if (i < 0 || !this.sky.field[i] || inside(x, y)) continue;
        // Whole screen pixels: no seams between neighbours.
        const [l, t] = this.px(x - 0.5, y + 0.5).map(Math.round), [r, u] = this.px(x + 0.5, y - 0.5).map(Math.round);
        c.fillRect(l, t, r - l, u - t);
      }
  }

  mark(c, { island, track }) {
    c.fillStyle = "rgba(255,255,255,.55)";
    for (const m of island) {
      if (!m.inside) continue;
      const [x, y] = this.px(m.x_pixel - 1, m.y_pixel - 1);
      c.fillRect(x - this.k / 4, y - this.k / 4, this.k / 2, this.k / 2);
    }
    for (const [style, width] of [["#fff", 4], ["#1a1a1a", 1.8]]) {
      c.strokeStyle = style;
      c.lineWidth = width;
      c.beginPath();
      track.forEach((t, i) => c[i ? "lineTo" : "moveTo"](...this.px(t.x_pixel - 1, t.y_pixel - 1)));
      c.stroke();
    }
  }

  listen() {
    const c = this.canvas;
    const pixel = e => {
      const b = this.sky.box;
      return [Math.floor(b.x + e.offsetX / this.k), Math.floor(b.y + b.h - e.offsetY / this.k)];
    };
    c.addEventListener("pointerdown", e => {
      if (e.button !== 0) return;
      this.from = [e.offsetX, e.offsetY];
      if (e.pointerType === "mouse") c.setPointerCapture(e.pointerId);
    });
    c.addEventListener("pointermove", e => {
      this.sky.move(...pixel(e));
      if (!this.from || e.pointerType !== "mouse") return;
      this.to = [e.offsetX, e.offsetY];
      if (Math.hypot(this.to[0] - this.from[0], this.to[1] - this.from[1]) > 5) this.drag = this.from;
      if (this.drag) this.over();
    });
    c.addEventListener("pointercancel", () => { this.from = this.drag = null; });
    c.addEventListener("pointerup", e => {
      if (!this.from) return;
      const drag = this.drag;
      this.from = this.drag = null;
      if (!drag) {
        this.sky.move(...pixel(e));
        this.sky.explain(...this.sky.cursor);
        return;
      }
      const [x, y] = pixel({ offsetX: drag[0], offsetY: drag[1] }), [u, v] = pixel(e);
      this.sky.selected(Math.min(x, u), Math.min(y, v), Math.max(x, u), Math.max(y, v));
    });
    c.addEventListener("keydown", e => {
      const step = e.shiftKey ? 10 : 1, s = this.sky;
      const [x, y] = s.cursor || [Math.floor(s.box.x + s.box.w / 2), Math.floor(s.box.y + s.box.h / 2)];
      const inside = (u, v) => s.at(u, v) >= 0 && s.move(u, v);
      const does = {
        ArrowLeft: () => inside(x - step, y), ArrowRight: () => inside(x + step, y),
        ArrowUp: () => inside(x, y + step), ArrowDown: () => inside(x, y - step),
        Enter: () => s.explain(x, y), "+": () => s.zoom(2), "=": () => s.zoom(2), "-": () => s.zoom(0.5), "0": () => s.reset(),
      }[e.key];
      if (!does || e.ctrlKey || e.metaKey || e.altKey) return;
      e.preventDefault();
      does();
    });
  }
}
