// Several readings combined by the best linear weights: channels of one exposure, or shots of one frame, in the
// equations of `codesign.design_combined`.
(() => {
  "use strict";
  const live = globalThis.codesignLive;
  const TOGETHER = ["frame period", "pulse width", "pulse duty"]; // hold for all shots of a frame together

  /** Temperature of each LED lit in any shot, from its heat averaged over the shots. */
  function sharedJunctions(model, setting, shots) {
    const found = new Map(), ids = new Set();
    for (const shot of shots) for (const [id, ma] of Object.entries(shot.drive_ma)) if (ma > 0) ids.add(id);
    for (const id of ids) {
      const led = model.ledOf.get(id);
      let power = 0, flux = 0;
      for (const shot of shots) {
        const { electrical, reference } = model.operating(led, shot.drive_ma[id] ?? 0);
        const { duty } = model.context({ ...setting, ...shot });
        power += duty * electrical;
        flux += duty * reference;
      }
      found.set(id, live.balance(led, setting.air_c, 1, power, flux)[0]);
    }
    return found;
  }

  /** Solution of a small system by elimination with the largest pivot. */
  function solved(matrix, right) {
    const n = right.length, a = matrix.map((row, k) => [...row, right[k]]);
    for (let k = 0; k < n; k++) {
      const pivot = a.slice(k).reduce((best, row, i) => (Math.abs(row[k]) > Math.abs(a[best][k]) ? k + i : best), k);
      [a[k], a[pivot]] = [a[pivot], a[k]];
      for (let i = k + 1; i < n; i++) {
        const factor = a[i][k] / a[k][k];
        for (let j = k; j <= n; j++) a[i][j] -= factor * a[k][j];
      }
    }
    const x = Array(n).fill(0);
    for (let k = n - 1; k >= 0; k--) x[k] = (a[k][n] - sum(a[k].slice(k + 1, n), (v, i) => v * x[k + 1 + i])) / a[k][k];
    return x;
  }

  const sum = (values, term) => values.reduce((total, value, k) => total + term(value, k), 0);

  /** Best linear weights, of length 1, the largest positive. */
  function bestWeights(differences, covariance) {
    const raw = solved(covariance, differences), length = Math.hypot(...raw);
    if (!(length > 0)) return raw;
    const largest = raw.reduce((best, v) => (Math.abs(v) > Math.abs(best) ? v : best), 0);
    return raw.map((v) => (v / length) * Math.sign(largest));
  }

  const FIXED_PATTERN = ["dark fixed pattern", "photo-response fixed pattern"];

  /**
   * Standard deviations of the independent causes of each term that readings have in common, by name: they add up with
   * the weights before they are squared. The surface always; the fixed pattern between shots, which the same pixels take.
   */
  function lasting(budget, clutter, samePixels) {
    const pattern = samePixels ? FIXED_PATTERN.map((name) => [name, [Math.sqrt(budget[name])]]) : [];
    return Object.fromEntries([...pattern, ["surface clutter", clutter]]);
  }

  /** Mean of the covariances of target and background over the readings. */
  function covariance(readings) {
    return readings.map((one, a) => readings.map((other, b) => {
      const both = [0, 1].map((s) => sum(Object.entries(one.budgets[s]), ([name, variance]) => {
        const amplitudes = one.lasting[s][name];
        if (amplitudes) return sum(amplitudes, (v, k) => v * other.lasting[s][name][k]);
        return a === b ? variance : 0;
      }));
      return (both[0] + both[1]) / 2;
    }));
  }

  /** Variance of the weighted sum by term, at target and background. */
  function combinedNoise(readings, weights) {
    return Object.keys(readings[0].budgets[0]).map((name) => {
      const [target, background] = [0, 1].map((s) => {
        const amplitudes = readings[0].lasting[s][name];
        if (!amplitudes) return sum(readings, (r, m) => weights[m] ** 2 * r.budgets[s][name]);
        return sum(amplitudes, (_, k) => sum(readings, (r, m) => weights[m] * r.lasting[s][name][k]) ** 2);
      });
      return { name, target, background };
    });
  }

  /** Each LED once: its largest current, and power averaged over all exposures. */
  function meanStates(shots, lit) {
    if (lit.length === 1) return lit[0];
    const seconds = sum(shots, (shot) => shot.exposure_us), found = new Map();
    lit.forEach((states, k) => {
      for (const state of states) {
        const share = shots[k].exposure_us / seconds, before = found.get(state.id);
        const mean = (name) => (before?.[name] ?? 0) + share * state[name];
        const top = before && before.drive_ma >= state.drive_ma ? before : state;
        found.set(state.id, { ...top, electrical_w: mean("electrical_w"), optical_w: mean("optical_w") });
      }
    });
    return [...found.values()];
  }

  /** Use of every limit; with shots those on single exposures by shot, sums over the frame once. */
  function limitsOfShots(model, whole, parts) {
    const apart = [], sums = new Map(), means = ["rig heat", "supply power"];
    means.push(...model.data.eye_limits.map((limit) => limit.name));
    parts.forEach((context, k) => {
      for (const use of live.limitUses(model, context)) {
        if (means.includes(use.name)) {
          const value = use.value + (sums.get(use.name)?.value ?? 0);
          sums.set(use.name, live.finish({ ...use, value, share: value / use.bound }));
        } else if (use.name.startsWith("junction") || use.name === "depth of field") sums.set(use.name, use);
        else if (use.name.startsWith("well")) apart.push(use);
        else if (!TOGETHER.includes(use.name)) apart.push({ ...use, name: `${use.name}, shot ${k + 1}` });
      }
    });
    const together = live.timeLimits(model, whole).filter((limit) => TOGETHER.includes(limit.name)).map((limit) => {
      const readouts = limit.name === "frame period" ? (parts.length - 1) * whole.camera.readout_ms : 0;
      const value = limit.value + readouts; // a readout after each shot
      return live.finish({ ...limit, value, share: value / limit.bound });
    });
    return [...apart, ...together, ...sums.values()];
  }

  /** As `Model.evaluate`, for settings whose channels or shots are combined. */
  function evaluateCombined(model, setting) {
    const shots = setting.shots?.length ? setting.shots : [{ exposure_us: setting.exposure_us, drive_ma: setting.drive_ma }];
    const whole = model.context({ ...setting, exposure_us: sum(shots, (shot) => shot.exposure_us) });
    const junctions = sharedJunctions(model, setting, shots), channels = setting.channel.split(live.JOINT);
    const parts = shots.map((shot) => {
      const own = { ...setting, ...shot }, context = { ...model.context(own), level: whole.level };
      return { ...context, states: model.ledStates(own, context.duty, junctions) };
    });
    const readings = parts.flatMap((part, k) => channels.map((channel) => {
      const light = model.electrons(setting, channel, part.states, part.t, part.dark);
      const name = setting.shots?.length ? `shot ${k + 1}` : channel;
      const surfaces = model.readings(light.surfaces, part).map((s) => ({ ...s, id: `${s.id}, ${name}` }));
      const budgets = [0, 1].map((s) => model.noise(part.camera, part.gain, light.surfaces[s]));
      const common = budgets.map((budget, s) => lasting(budget, light.surfaces[s].clutter, !!setting.shots?.length));
      return { name, light, surfaces, budgets, lasting: common, t: part.t };
    }));
    const differences = readings.map((r) => r.surfaces[0].total_e - r.surfaces[1].total_e);
    const weights = bestWeights(differences, covariance(readings)), noise = combinedNoise(readings, weights);
    const difference = sum(weights, (w, m) => w * differences[m]);
    const variance = sum(noise, (term) => term.target + term.background) / 2;
    const cnr = variance > 0 ? Math.abs(difference) / Math.sqrt(variance) : 0;
    const [target, background] = model.surfaces, surfaces = readings.flatMap((r) => r.surfaces);
    const pair = { i: 0, j: 1, target: target.id, background: background.id, signal_e: difference, cnr };
    parts.forEach((part, k) => (part.surfaces = setting.shots?.length ? readings[k].surfaces : surfaces));
    const limits = setting.shots?.length ? limitsOfShots(model, whole, parts) : live.limitUses(model, parts[0]);
    const [all, shine] = ["all", "shine"].map((part) =>
      model.grid.map((_, i) => sum(readings, (r, m) => weights[m] * r.t * r.light[part][i])));
    return {
      cnr, sign: difference > 0 ? "brighter" : "darker", signal_e: difference, pair, pairs: [pair], noise, surfaces,
      duty: whole.duty, level: whole.level, leds: meanStates(shots, parts.map((part) => part.states)),
      weights: Object.fromEntries(readings.map((r, m) => [r.name, weights[m]])),
      error_rate: live.errorRate(cnr), limits: [...limits, ...live.buildLimits(model, whole)],
      light: {
        diffuse: parts.map((_, k) => readings[k * channels.length].light.diffuse), all, shine,
        seen: seenOf(readings, channels),
      },
      picture: { ...pictureOf(readings, weights, noise), top: Infinity },
    };
  }

  const seenOf = (readings, channels) => readings.slice(0, channels.length).map((r) => r.light.seen);

  /** Weighted sum at background and target. */
  function pictureOf(readings, weights, noise) {
    const mean = [1, 0].map((s) => sum(readings, (r, m) => weights[m] * r.surfaces[s].total_e));
    const spread = ["background", "target"].map((side) => Math.sqrt(sum(noise, (term) => term[side])));
    return { mean, spread };
  }

  Object.assign(live, { evaluateCombined });
})();
