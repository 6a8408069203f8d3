// Use of every limit at a setting, in the names, units and order of `codesign.limit_use`.
(() => {
  "use strict";
  const live = globalThis.codesignLive;

  /** What every limit tells: {name, unit, value, bound, share: 1 at the limit, floor: met from above, met}. */
  const finish = (limit) => ({ floor: false, ...limit, met: limit.share <= 1 + live.TOLERANCE });

  function use(name, unit, value, bound) {
    return { name, unit, value, bound, share: bound > 0 ? value / bound : value <= 0 ? 0 : Infinity };
  }

  /** The pulse rating that holds at an exposure [s]; ratings without an end have `longest_s` null. */
  function pulseLevel(model, t) {
    const levels = model.data.pulse_levels;
    return levels.find((level) => level.longest_s === null || t <= level.longest_s * (1 + 1e-9)) ?? levels.at(-1);
  }

  // --- the exposure alone ------------------------------------------------------------------------------------------

  function timeLimits(model, { setting, camera, gain, t, dark, saturation, level }) {
    const { timing, motion, limits, optics } = model.data, us = setting.exposure_us * 1e-6 * 1e6, found = [];
    const below = (name, unit, value, bound) => found.push({ name, unit, value, bound, share: value / bound });
    const above = (name, unit, value, bound) =>
      found.push({ name, unit, value, bound, share: bound / value, floor: true });
    below("camera longest exposure", "us", us, camera.exposure_max_us);
    above("camera shortest exposure", "us", us, camera.exposure_min_us);
    if (timing.exposure_max_us !== null) below("wanted longest exposure", "us", us, timing.exposure_max_us);
    if (timing.exposure_min_us !== null) above("wanted shortest exposure", "us", us, timing.exposure_min_us);
    if (motion) {
      const speed = motion.speed_mm_per_s * 1e-3, pitch = camera.pixel_pitch_um * 1e-6;
      below("motion blur", "pixel", ((speed * optics.magnification) / pitch) * t, motion.max_blur_px);
    }
    if (timing.frame_rate_hz !== null)
      below("frame period", "ms", 1e3 * t + camera.readout_ms, 1e3 / timing.frame_rate_hz);
    if (level.longest_s !== null) below(level.cause, "us", us, level.longest_s * 1e6);
    if (limits.dark_well_share !== null)
      below("dark signal in the well", "e-", dark * t, limits.dark_well_share * saturation);
    if (limits.dark_noise_share !== null)
      below("dark shot noise", "e-^2", dark * t, limits.dark_noise_share * gain.read_noise_e ** 2);
    return found;
  }

  // --- sums over the LEDs, and single LEDs ---------------------------------------------------------------------------

  function powerLimits(model, { states, duty }) {
    const { limits } = model.data;
    const power = states.reduce((sum, s) => sum + s.emitters * s.electrical_w, 0);
    const heat = states.reduce((sum, s) => sum + s.emitters * (s.electrical_w - s.optical_w), 0);
    const found = [];
    if (limits.rig_heat_w !== null) found.push(use("rig heat", "W", heat * duty, limits.rig_heat_w));
    if (limits.supply_w !== null) found.push(use("supply power", "W", power * duty, limits.supply_w));
    if (limits.supply_peak_w !== null) found.push(use("supply peak power", "W", power, limits.supply_peak_w));
    for (const { name, unit, bound } of model.data.eye_limits) {
      const light = states.reduce((sum, s) => sum + s.emitters * s.optical_w * s.led.at_the_eye[name], 0);
      found.push(use(name, unit, light * duty, bound));
    }
    return found;
  }

  function ledLimits(model, { setting, states, level }) {
    const air = setting.air_c;
    return states.flatMap((state) => {
      const index = model.leds.indexOf(state.led), top = state.led.junction_limit_c;
      const share = top > air ? (state.junction_c - air) / (top - air) : Infinity;
      return [
        use(`current, ${state.id}`, "mA", state.drive_ma, level.current_ma[index]),
        { name: `junction, ${state.id}`, unit: "deg C", value: state.junction_c, bound: top, share },
      ];
    });
  }

  function depthLimit(model, { setting, camera }) {
    const { required_depth_mm: wanted, magnification: m } = model.data.optics;
    if (wanted === null) return [];
    const depth = ((2 * setting.f_number * camera.pixel_pitch_um * 1e-6 * (1 + m)) / m ** 2) * 1e3;
    return [{ name: "depth of field", unit: "mm", value: depth, bound: wanted, share: wanted / depth, floor: true }];
  }

  // --- what may be built ---------------------------------------------------------------------------------------------

  /** Units of an LED in use: what is stated or all where lit or bought, and one at least where it must be had. */
  function unitsInUse(model, setting, led) {
    const stated = setting.emitters?.[led.id], most = model.data.build.free ? led.emitters : 1;
    const used = (setting.drive_ma[led.id] ?? 0) > 0 || stated !== undefined;
    const units = used ? (model.data.build.free ? (stated ?? most) : most) : 0;
    return Math.max(units, led.must_have ? 1 : 0);
  }

  function buildLimits(model, { setting, camera }) {
    const { build } = model.data;
    if (!build.limited) return [];
    const units = model.leds.map((led) => unitsInUse(model, setting, led));
    const sum = (cost) => model.leds.reduce((total, led, i) => total + (units[i] > 0 ? cost(led, units[i]) : 0), 0);
    const emitters = (led, count) => (build.free ? count : count * led.emitters);
    const found = [];
    if (build.max_led_channels !== null) found.push(use("LED channels", "", sum(() => 1), build.max_led_channels));
    if (build.board_slots !== null) found.push(use("board slots", "", sum(emitters), build.board_slots));
    if (build.price_budget !== null) {
      const glass = setting.filter.split(live.JOINED).map((name) => model.filterOf.get(name).price);
      const parts = camera.price + glass.reduce((total, price) => total + price, 0);
      found.push(use("price", "", parts + sum((led, count) => emitters(led, count) * led.price), build.price_budget));
    }
    return found.map(finish);
  }

  /** Every limit but those on what may be built. */
  function limitUses(model, context) {
    const bound = model.data.limits.well_headroom * context.saturation;
    return [
      ...context.surfaces.map((surface) => use(`well, ${surface.id}`, "e-", surface.total_e, bound)),
      ...timeLimits(model, context),
      ...powerLimits(model, context),
      ...ledLimits(model, context),
      ...depthLimit(model, context),
    ].map(finish);
  }

  Object.assign(live, { limitUses, buildLimits, timeLimits, finish, pulseLevel });
})();
