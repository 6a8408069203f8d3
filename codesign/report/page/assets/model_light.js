// LEDs: their spectra as the junction warms, and the temperature at which heat and flux agree.
(() => {
  "use strict";
  const live = (globalThis.codesignLive ??= {});

  /** Piecewise linear, ends held. */
  function interpolate(x, xs, ys) {
    const last = xs.length - 1;
    if (x <= xs[0]) return ys[0];
    if (x >= xs[last]) return ys[last];
    let k = 1;
    while (xs[k] <= x) k++;
    return ys[k - 1] + ((ys[k] - ys[k - 1]) * (x - xs[k - 1])) / (xs[k] - xs[k - 1]);
  }

  /** Relative spectrum of unit area on the grid, shifted [1/nm]: Ohno's model, or a measured curve, 0 outside. */
  function shape(led, grid, shift, out) {
    if (led.curve) return measured(led.curve, grid, shift, out);
    const { peak_nm: peak, width_nm: width, density } = led.model;
    for (let i = 0; i < grid.length; i++) {
      const x = (grid[i] - shift - peak) / width, square = x * x;
      if (square >= 700) { out[i] = 0; continue; }
      const g = Math.exp(-square), g2 = g * g;
      out[i] = (density * (g + 2 * g2 * g2 * g)) / 3;
    }
    return out;
  }

  function measured(curve, grid, shift, out) {
    const { nm, values } = curve, last = nm.length - 1;
    let k = 1;
    for (let i = 0; i < grid.length; i++) {
      const x = grid[i] - shift;
      if (x < nm[0] - 1e-6 || x > nm[last] + 1e-6) { out[i] = 0; continue; }
      while (k < last && nm[k] <= x) k++;
      const share = Math.min(Math.max((x - nm[k - 1]) / (nm[k] - nm[k - 1]), 0), 1);
      out[i] = values[k - 1] * (1 - share) + values[k] * share;
    }
    return out;
  }

  /** Temperature at which heat and flux agree, and flux there relative to the reference. */
  function balance(led, air, duty, electrical, reference) {
    const resistance = led.resistance_k_per_w * duty;
    const c = led.flux_coefficient_per_k, ref = led.reference_c;
    const stiffness = 1 + resistance * reference * c;
    if (stiffness > 0) {
      const junction = (air + resistance * (electrical - reference * (1 - c * ref))) / stiffness;
      const factor = Math.max(0, 1 + c * (junction - ref));
      if (factor > 0) return [junction, factor];
    }
    return [air + resistance * electrical, 0];
  }

  Object.assign(live, { interpolate, shape, balance });
})();
