// The forward model of the page: what any setting does, in the equations of `codesign.design.evaluate`.
// Light is integrated over wavelength directly. A setting is
// {camera, channel, gain_db, filter, f_number, exposure_us, drive_ma: {id: mA}, emitters: {id: count},
//  shots: [{exposure_us, drive_ma}], air_c, sensor_c, ambient_factor}; channels joined by + are read together.
(() => {
  "use strict";
  const live = globalThis.codesignLive;
  const { interpolate, shape, balance } = live;
  const JOINED = " + "; // between the ids of two stacked filters
  const JOINT = "+"; // between the names of channels read together
  const KEPT = 8; // combinations of camera, channel, filter and f-number whose sensitivity is kept
  const TOLERANCE = 1e-6; // a limit counts as met up to this share over its bound

  /** Numbers packed as base64 of little-endian binary: {f8: text} or {f4: text}; a plain list stays as it is. */
  function unpack(packed) {
    if (Array.isArray(packed)) return Float64Array.from(packed);
    const [kind, text] = Object.entries(packed)[0];
    const bytes = Uint8Array.from(atob(text), (c) => c.charCodeAt(0));
    return kind === "f8" ? new Float64Array(bytes.buffer) : new Float32Array(bytes.buffer);
  }

  const byId = (parts) => new Map(parts.map((part) => [part.id, part]));

  /** Complementary error function for x >= 0: power series, then continued fraction from below. */
  function erfc(x) {
    if (x < 2.5) {
      let term = x, sum = x;
      for (let k = 1; Math.abs(term) > 1e-17 * Math.abs(sum); k++) {
        term *= (2 * x * x) / (2 * k + 1);
        sum += term;
      }
      return 1 - (2 / Math.sqrt(Math.PI)) * Math.exp(-x * x) * sum;
    }
    let tail = 0;
    for (let k = 120; k > 0; k--) tail = k / 2 / (x + tail);
    return Math.exp(-x * x) / Math.sqrt(Math.PI) / (x + tail);
  }

  const dot = (a, b) => {
    let sum = 0;
    for (let i = 0; i < a.length; i++) sum += a[i] * b[i];
    return sum;
  };

  class Model {
    constructor(data) {
      this.data = data;
      this.grid = unpack(data.grid_nm);
      this.chain = unpack(data.chain);
      this.ambient = data.ambient ? unpack(data.ambient) : new Float64Array(this.grid.length);
      this.surfaces = data.surfaces.map((s) => ({ ...s, mean: unpack(s.mean), clutter: this.rows(s.clutter) }));
      this.leds = data.leds.map((led) => ({
        ...led,
        curve: led.curve && { nm: unpack(led.curve.nm), values: unpack(led.curve.values) },
      }));
      this.cameras = data.cameras.map((camera) => ({
        ...camera,
        channels: new Map(camera.channels.map((c) => [c.name, unpack(c.qe)])),
      }));
      this.filters = data.filters.map((filter) => ({ ...filter, curves: filter.curves.map(unpack) }));
      this.ledOf = byId(this.leds);
      this.cameraOf = byId(this.cameras);
      this.filterOf = byId(this.filters);
      this.singles = new Set(data.filter_choices.single.map((k) => data.filters[k].id));
      const { pairs } = data.filter_choices;
      this.pairBits = pairs ? Uint8Array.from(atob(pairs), (c) => c.charCodeAt(0)) : null;
      this.kept = new Map(); // light of each LED at its last junction temperature
      this.behind = new Map(); // what cameras see behind filters, the last few combinations asked for
    }

    rows(packed) {
      if (!packed) return [];
      const all = unpack(packed), n = this.grid.length;
      return Array.from({ length: all.length / n }, (_, k) => all.subarray(k * n, (k + 1) * n));
    }

    /** Whether a filter of that name, single or two stacked, is among those the page carries. */
    knows(filter) {
      return filter.split(JOINED).every((name) => this.filterOf.has(name));
    }

    // --- which filters ---------------------------------------------------------------------------------------------

    /** Whether some filters may be stacked. */
    get stackable() {
      return this.pairBits !== null;
    }

    /** Whether a filter may be used alone. */
    single(name) {
      return this.singles.has(name);
    }

    /** Filters that may be stacked with one. */
    partners(name) {
      if (!this.pairBits) return [];
      const n = this.filters.length, row = this.filters.findIndex((filter) => filter.id === name) * n;
      const bit = (k) => (this.pairBits[(row + k) >> 3] >> (7 - ((row + k) & 7))) & 1;
      return this.filters.filter((_, k) => bit(k)).map((filter) => filter.id);
    }

    /** Filters to choose from first: alone or with another. */
    firsts() {
      const names = this.filters.map((filter) => filter.id);
      return names.filter((name) => this.single(name) || this.partners(name).length > 0);
    }

    /** Name of two filters stacked, in the order of the catalogue. */
    stacked(first, second) {
      const place = (name) => this.filters.findIndex((filter) => filter.id === name);
      return (place(first) < place(second) ? [first, second] : [second, first]).join(JOINED);
    }

    // --- the chain -------------------------------------------------------------------------------------------------

    /** Electron rate per unit of spectral irradiance times reflectance, and filter times QE; the last few are kept. */
    sensitivity(setting, channel) {
      const { camera, filter, f_number: stop } = setting, key = JSON.stringify([camera, channel, filter, stop]);
      if (!this.behind.has(key)) {
        if (this.behind.size >= KEPT) this.behind.delete(this.behind.keys().next().value);
        this.behind.set(key, this.newSensitivity(this.cameraOf.get(camera), channel, filter, stop));
      }
      return this.behind.get(key);
    }

    newSensitivity(camera, channel, filter, stop) {
      const working = stop * (1 + this.data.optics.magnification);
      const scale = camera.pixel_area_m2 / (4 * working * working);
      const curves = filter.split(JOINED).map((name) => this.transmittance(this.filterOf.get(name), stop));
      const seen = Float64Array.from(camera.channels.get(channel));
      for (const curve of curves) for (let i = 0; i < seen.length; i++) seen[i] *= curve[i];
      return { seen, weight: seen.map((value, i) => scale * this.chain[i] * value) };
    }

    transmittance(filter, stop) {
      if (filter.curves.length === 1) return filter.curves[0];
      return filter.curves[this.data.optics.f_numbers.indexOf(stop)];
    }

    /** Power and light [W] of one emitter of an LED at a current [mA], at its reference temperature. */
    operating(led, ma) {
      const amps = ma * 1e-3, share = interpolate(amps, led.current_a, led.relative_flux);
      return { electrical: interpolate(amps, led.current_a, led.power_w), share, reference: led.flux_w * share };
    }

    /** Power, light and junction temperature of one emitter of each lit LED; `junctions` holds those known already. */
    ledStates(setting, duty, junctions = null) {
      const lit = Object.entries(setting.drive_ma).filter(([, ma]) => ma > 0);
      return lit.map(([id, ma]) => {
        const led = this.ledOf.get(id), { electrical, share, reference } = this.operating(led, ma);
        let [junction, factor] = balance(led, setting.air_c, duty, electrical, reference);
        if (junctions) {
          junction = junctions.get(id);
          factor = Math.max(0, 1 + led.flux_coefficient_per_k * (junction - led.reference_c));
        }
        const emitters = setting.emitters?.[id] ?? led.emitters;
        return {
          id, led, share, emitters, drive_ma: ma, electrical_w: electrical, optical_w: reference * factor,
          junction_c: junction,
        };
      });
    }

    /** Spectral irradiance at the object by one LED at rated current and a junction temperature. */
    irradiance(led, junction) {
      const kept = this.kept.get(led.id);
      if (kept && kept.junction === junction) return kept.light;
      const light = kept ? kept.light : new Float64Array(this.grid.length);
      const rise = junction - led.reference_c;
      shape(led, this.grid, led.peak_shift_nm + led.shift_nm_per_k * rise, light);
      const scale = led.flux_w * Math.max(0, 1 + led.flux_coefficient_per_k * rise) * led.delivery_per_m2;
      for (let i = 0; i < light.length; i++) light[i] *= scale;
      this.kept.set(led.id, { junction, light });
      return light;
    }

    /** Light of all LEDs at the object: as from a diffuser, and weighted for mirror-like reflection. */
    mixture(states) {
      const n = this.grid.length, diffuse = new Float64Array(n), gloss = new Float64Array(n);
      for (const state of states) {
        const light = this.irradiance(state.led, state.junction_c);
        const part = (state.share * state.emitters) / state.led.emitters, shine = part * state.led.specular_weight;
        for (let i = 0; i < n; i++) {
          diffuse[i] += light[i] * part;
          gloss[i] += light[i] * shine;
        }
      }
      return { diffuse, gloss };
    }

    /** Electrons of every surface by origin, and its clutter amplitudes. */
    electrons(setting, channel, states, t, dark) {
      const { weight, seen } = this.sensitivity(setting, channel), n = weight.length;
      const { diffuse, gloss } = this.mixture(states);
      const rig = new Float64Array(n), around = new Float64Array(n), all = new Float64Array(n);
      const shine = new Float64Array(n); // what a mirror would send
      let mirrored = 0;
      for (let i = 0; i < n; i++) {
        rig[i] = weight[i] * diffuse[i];
        around[i] = weight[i] * this.ambient[i] * setting.ambient_factor;
        all[i] = rig[i] + around[i];
        shine[i] = weight[i] * gloss[i];
        mirrored += shine[i];
      }
      const surfaces = this.surfaces.map((surface) => ({
        led_e: (dot(surface.mean, rig) + surface.specular * mirrored) * t,
        ambient_e: dot(surface.mean, around) * t,
        dark_e: dark * t,
        clutter: surface.clutter.map((row) => dot(row, all) * t),
      }));
      return { surfaces, diffuse, all, shine, seen };
    }

    // --- noise -----------------------------------------------------------------------------------------------------

    /** Variance at one surface by term. [e-^2] */
    noise(camera, gain, e) {
      const { pixels, frames } = this.data.averaging, samples = pixels * frames;
      const photo = (camera.prnu * (e.led_e + e.ambient_e)) ** 2;
      return {
        "read noise": gain.read_noise_e ** 2 / samples,
        "quantisation": 1 / 12 / gain.conversion_gain_dn_per_e ** 2 / samples,
        "light shot noise": e.led_e / samples,
        "ambient shot noise": e.ambient_e / samples,
        "dark shot noise": e.dark_e / samples,
        "dark fixed pattern": camera.dsnu_e ** 2 / pixels,
        "photo-response fixed pattern": photo / pixels,
        "surface clutter": e.clutter.reduce((sum, value) => sum + value * value, 0),
      };
    }

    // --- everything ------------------------------------------------------------------------------------------------

    /** What the parts and the exposure of a setting mean for every reading. */
    context(setting) {
      const camera = this.cameraOf.get(setting.camera), t = setting.exposure_us * 1e-6;
      const gain = camera.gains.find((g) => Math.abs(g.gain_db - setting.gain_db) < 1e-9);
      const top = (2 ** camera.bits - 1 - camera.black_level_dn) / gain.conversion_gain_dn_per_e;
      return {
        setting, camera, gain, t,
        duty: this.data.strobe ? t * this.data.timing.frame_rate_hz : 1,
        dark: camera.dark_e_per_s * 2 ** ((setting.sensor_c - camera.dark_reference_c) / camera.dark_doubling_k),
        saturation: Math.min(gain.full_well_e, top),
        level: live.pulseLevel(this, t),
      };
    }

    /** What a setting does: CNR, surfaces, noise, pairs, use of every limit, LEDs. */
    evaluate(setting) {
      if (setting.shots?.length || setting.channel.includes(JOINT)) return live.evaluateCombined(this, setting);
      const context = this.context(setting), states = this.ledStates(setting, context.duty);
      const light = this.electrons(setting, setting.channel, states, context.t, context.dark);
      const surfaces = this.readings(light.surfaces, context);
      const budgets = light.surfaces.map((e) => this.noise(context.camera, context.gain, e));
      const contrast = this.contrast(surfaces, budgets), { i, j } = contrast.pair;
      const spread = [j, i].map((k) => Math.sqrt(total(budgets[k])));
      return {
        ...contrast, surfaces, duty: context.duty, level: context.level, leds: states, weights: {},
        error_rate: errorRate(contrast.cnr),
        limits: [...live.limitUses(this, { ...context, states, surfaces }), ...live.buildLimits(this, context)],
        light: { diffuse: [light.diffuse], seen: [light.seen], all: light.all, shine: light.shine },
        picture: { mean: [j, i].map((k) => surfaces[k].total_e), spread, top: context.saturation },
      };
    }

    /** What the camera reads on each surface. */
    readings(electrons, context) {
      return this.surfaces.map((surface, i) => reading(surface, electrons[i], context));
    }

    /** All pairs of target and background; the worst under the common sign that serves best. */
    contrast(surfaces, budgets) {
      const pairs = [];
      for (const [i, target] of surfaces.entries()) {
        if (target.role !== "target") continue;
        for (const [j, background] of surfaces.entries()) {
          if (background.role !== "background") continue;
          const signal = target.total_e - background.total_e;
          const variance = (total(budgets[i]) + total(budgets[j])) / 2;
          const cnr = variance > 0 ? Math.abs(signal) / Math.sqrt(variance) : 0;
          pairs.push({ i, j, target: target.id, background: background.id, signal_e: signal, cnr });
        }
      }
      const signed = pairs.map((pair) => (pair.signal_e > 0 ? pair.cnr : -pair.cnr));
      const direction = Math.min(...signed) >= -Math.max(...signed) ? 1 : -1;
      const turned = signed.map((value) => direction * value);
      const worst = turned.indexOf(Math.min(...turned)), pair = pairs[worst];
      const noise = Object.keys(budgets[pair.i]).map((name) => ({
        name, target: budgets[pair.i][name], background: budgets[pair.j][name],
      }));
      const sign = direction > 0 ? "brighter" : "darker";
      return { cnr: Math.max(turned[worst], 0), sign, signal_e: pair.signal_e, pair, pairs, noise };
    }
  }

  const total = (budget) => Object.values(budget).reduce((sum, value) => sum + value, 0);

  /** Share of misses, equal to that of false alarms, with the threshold midway. */
  const errorRate = (cnr) => erfc(cnr / Math.sqrt(8)) / 2;

  function reading(surface, e, { camera, gain, saturation }) {
    const sum = e.led_e + e.ambient_e + e.dark_e;
    const level = camera.black_level_dn + gain.conversion_gain_dn_per_e * sum;
    return {
      id: surface.id, role: surface.role, led_e: e.led_e, ambient_e: e.ambient_e, dark_e: e.dark_e, total_e: sum,
      grey_dn: Math.min(level, 2 ** camera.bits - 1), saturation_share: sum / saturation,
    };
  }

  Object.assign(live, { Model, JOINED, JOINT, TOLERANCE, errorRate });
})();
