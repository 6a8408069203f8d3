// Pictures of the page: spectra as SVG, and what the camera sees as grey dots.
(() => {
  "use strict";
  const live = globalThis.codesignLive;
  const NS = "http://www.w3.org/2000/svg";

  function svg(name, attributes, parent) {
    const element = document.createElementNS(NS, name);
    for (const [key, value] of Object.entries(attributes)) element.setAttribute(key, value);
    parent?.append(element);
    return element;
  }

  /** A round step that cuts a span into about so many parts. */
  function roundStep(span, count) {
    const raw = span / count, power = 10 ** Math.floor(Math.log10(raw));
    return power * [1, 2, 5, 10].find((k) => k * power >= raw);
  }

  // --- spectra -----------------------------------------------------------------------------------------------------

  const LEFT = 34, RIGHT = 18, TOP = 8, MAIN = 190, GAP = 34, STRIP = 64, BOTTOM = 36;
  const HEIGHT = TOP + MAIN + GAP + STRIP + BOTTOM, LARGEST_NUMBER_OF_POINTS = 900;
  const BLIND = 0.005; // share of its peak below which a camera's response is not worth drawing
  const CURVES = ["light", "ambient", "seen", "background", "target"];

  /** Difference of electrons of target and background at each grid point, in any unit; mirror-like light included. */
  function differenceOf(model, result) {
    const { all, shine } = result.light, { i, j } = result.pair, [one, other] = [model.surfaces[i], model.surfaces[j]];
    const gloss = one.specular - other.specular;
    return (k) => all[k] * (one.mean[k] - other.mean[k]) + shine[k] * gloss;
  }

  /** First and last grid point at which any camera responds to speak of. */
  function reach(model) {
    let first = model.grid.length - 1, last = 0;
    for (const camera of model.cameras)
      for (const qe of camera.channels.values()) {
        const least = BLIND * qe.reduce((a, b) => Math.max(a, b), 0), seen = (value) => value > least;
        first = Math.min(first, Math.max(qe.findIndex(seen), 0));
        last = Math.max(last, qe.findLastIndex(seen));
      }
    return first < last ? [first, last] : [0, model.grid.length - 1];
  }

  /** Curves over wavelength above, and the difference of electrons by wavelength below. */
  class Spectra {
    constructor(box, model) {
      this.box = box;
      this.model = model;
      [this.first, this.last] = reach(model);
      this.low = model.grid[this.first];
      this.high = model.grid[this.last];
      this.stride = Math.max(1, Math.ceil((this.last - this.first) / LARGEST_NUMBER_OF_POINTS));
      this.svg = svg("svg", { role: "img", height: HEIGHT });
      box.prepend(this.svg);
      this.frame = svg("g", {}, this.svg);
      const paths = [...CURVES, "above", "below"];
      this.path = Object.fromEntries(paths.map((name) => [name, svg("path", { class: `live-${name}` }, this.svg)]));
      this.largest = Math.max(1, ...model.surfaces.map((s) => s.mean.reduce((a, b) => Math.max(a, b), 0)));
      this.width = 0;
    }

    x(nm) {
      return LEFT + ((nm - this.low) / (this.high - this.low)) * (this.width - LEFT - RIGHT);
    }

    /** Take the width of the box and lay the axes out anew where it has changed; returns whether it has. */
    fit() {
      const width = Math.max(Math.floor(this.box.clientWidth), 260);
      if (width === this.width) return false;
      this.width = width;
      this.svg.setAttribute("viewBox", `0 0 ${width} ${HEIGHT}`);
      this.svg.setAttribute("width", width);
      this.drawn = {};
      this.places = [];
      for (let i = this.first; i <= this.last; i += this.stride)
        this.places.push(`L${Math.round(this.x(this.model.grid[i]) * 10) / 10} `);
      this.frame.replaceChildren();
      const bottom = TOP + MAIN, zero = bottom + GAP + STRIP / 2, end = bottom + GAP + STRIP;
      const step = roundStep(this.high - this.low, width / 90);
      for (let nm = Math.ceil(this.low / step) * step; nm <= this.high; nm += step) {
        svg("line", { class: "live-grid", x1: this.x(nm), x2: this.x(nm), y1: TOP, y2: end }, this.frame);
        this.text(nm, this.x(nm), end + 15, "middle");
      }
      for (const share of [0, 0.5, 1]) {
        const y = bottom - share * MAIN;
        svg("line", { class: "live-grid", x1: LEFT, x2: width - RIGHT, y1: y, y2: y }, this.frame);
        this.text(live.number(share * this.largest, 2), LEFT - 5, y + 4, "end");
      }
      svg("line", { class: "live-zero", x1: LEFT, x2: width - RIGHT, y1: zero, y2: zero }, this.frame);
      this.text("wavelength [nm]", (LEFT + width - RIGHT) / 2, end + 31, "middle");
      this.text("difference, up: target brighter", LEFT, bottom + GAP - 8, "start");
      return true;
    }

    text(content, x, y, anchor) {
      svg("text", { x, y, "text-anchor": anchor, class: "live-text" }, this.frame).textContent = content;
    }

    /** Points of a curve of values 0 to `top`, between two heights. */
    line(value, top, base, height) {
      const scale = top > 0 ? height / top : 0, { places } = this;
      let text = "";
      for (let i = this.first, k = 0; i <= this.last; i += this.stride, k++)
        text += places[k] + Math.round((base - value(i) * scale) * 10) / 10;
      return `M${text.slice(1)}`;
    }

    closed(value, top, base, height) {
      const ends = `L${this.x(this.high).toFixed(1)} ${base}L${this.x(this.low).toFixed(1)} ${base}Z`;
      return this.line(value, top, base, height) + ends;
    }

    /** Draw a path anew where what it shows, named by `key`, has changed. */
    put(name, key, points) {
      if (key !== null && this.drawn[name] === key) return;
      this.drawn[name] = key;
      this.path[name].setAttribute("d", points());
    }

    /** Draw a result; of several shots the light of one. */
    draw(result, setting, shot) {
      if (!this.width) this.fit(); // later when the page says so: asking for the width costs a layout
      const { model, largest: top } = this, base = TOP + MAIN, { seen } = result.light;
      const diffuse = result.light.diffuse[shot];
      const { i: one, j: other } = result.pair, target = model.surfaces[one].mean, back = model.surfaces[other].mean;
      const around = (i) => model.ambient[i] * setting.ambient_factor;
      const difference = differenceOf(model, result);
      let brightest = 0, largest = 0;
      for (let i = this.first; i <= this.last; i++) {
        brightest = Math.max(brightest, diffuse[i], around(i));
        largest = Math.max(largest, Math.abs(difference(i)));
      }
      const { camera, channel, filter, f_number, ambient_factor } = setting;
      const parts = JSON.stringify([camera, channel, filter, f_number]), zero = base + GAP + STRIP / 2;
      this.put("light", null, () => this.closed((i) => diffuse[i], brightest, base, MAIN));
      this.put("ambient", `${brightest} ${ambient_factor}`, () => this.line(around, brightest, base, MAIN));
      this.put("seen", parts, () => seen.map((curve) => this.line((i) => curve[i], top, base, MAIN)).join(""));
      this.put("target", one, () => this.line((i) => target[i], top, base, MAIN));
      this.put("background", other, () => this.line((i) => back[i], top, base, MAIN));
      this.put("above", null, () => this.closed((i) => Math.max(difference(i), 0), largest, zero, STRIP / 2));
      this.put("below", null, () => this.closed((i) => Math.min(difference(i), 0), largest, zero, STRIP / 2));
    }
  }

  // --- what the camera sees ----------------------------------------------------------------------------------------

  const SEED = 20240229; // the same dots every time, so that nothing flickers while a slider is dragged

  /** Standard normal numbers, the same at every call. */
  function normals(count) {
    let state = SEED;
    const uniform = () => {
      state = (state + 0x6d2b79f5) | 0;
      let t = Math.imul(state ^ (state >>> 15), 1 | state);
      t = (t + Math.imul(t ^ (t >>> 7), 61 | t)) ^ t;
      return ((t ^ (t >>> 14)) >>> 0) / 4294967296;
    };
    const found = new Float32Array(count);
    for (let k = 0; k < count; k += 2) {
      const radius = Math.sqrt(-2 * Math.log(1 - uniform())), angle = 2 * Math.PI * uniform();
      found[k] = radius * Math.cos(angle);
      if (k + 1 < count) found[k + 1] = radius * Math.sin(angle);
    }
    return found;
  }

  /** A patch of uneven outline in the middle: 1 inside, 0 outside. */
  function patch(width, height) {
    const inside = new Uint8Array(width * height);
    for (let y = 0; y < height; y++)
      for (let x = 0; x < width; x++) {
        const u = (x - width / 2) / (0.3 * width), v = (y - height / 2) / (0.3 * height), angle = Math.atan2(v, u);
        const edge = 1 + 0.12 * Math.sin(3 * angle + 0.7) + 0.07 * Math.sin(5 * angle + 2);
        inside[y * width + x] = Math.hypot(u, v) < edge ? 1 : 0;
      }
    return inside;
  }

  /** One picture: target patch on background, at the mean electrons and noise predicted. */
  class View {
    constructor(canvas) {
      this.canvas = canvas;
      this.context = canvas.getContext("2d");
      this.image = this.context.createImageData(canvas.width, canvas.height);
      this.noise = normals(canvas.width * canvas.height);
      this.inside = patch(canvas.width, canvas.height);
    }

    draw(result, stretched) {
      const { mean, spread, top } = result.picture, reach = 4 * Math.max(...spread);
      const low = stretched ? Math.min(...mean, top) - reach : 0; // a surface that saturates is white
      const high = stretched ? Math.min(Math.max(...mean) + reach, top) : top;
      const scale = 255 / Math.max(high - low, 1e-12), data = this.image.data;
      for (let k = 0; k < this.inside.length; k++) {
        const side = this.inside[k], electrons = Math.min(mean[side] + spread[side] * this.noise[k], top);
        data[4 * k] = data[4 * k + 1] = data[4 * k + 2] = (electrons - low) * scale; // clamped to 0 .. 255
        data[4 * k + 3] = 255;
      }
      this.context.putImageData(this.image, 0, 0);
      const shown = stretched ? "stretched contrast" : "black to saturation";
      this.canvas.setAttribute("aria-label", `Target patch on background, CNR ${live.number(result.cnr)}, ${shown}`);
    }
  }

  Object.assign(live, { Spectra, View, differenceOf });
})();
