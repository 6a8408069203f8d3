// State of the page and its wiring: controls change the setting, every change shows at the next frame.
(() => {
  "use strict";
  const live = globalThis.codesignLive;
  const { $, element, fill, number, percent, unit } = live;
  const LOWEST_SHOWN = 0.01; // limits met that are used less are folded away
  const REACHED = 0.999; // from this share on a limit counts as reached
  const FAITHFUL = 1e-6; // the page's CNR of the recipe must agree with the program's to this
  const SPOKEN_AFTER = 900; // ms of rest before the summary is read out

  class Page {
    constructor(data) {
      this.data = data;
      this.model = new live.Model(data);
      this.leds = new live.LedList(this.model, (id, ma, count) => this.setDrive(id, ma, count));
      this.spectra = new live.Spectra($("spectra"), this.model);
      this.before = new live.View($("view-start"));
      this.now = new live.View($("view-now"));
      this.allLimits = false;
      this.start = { name: "recipe", ...data.recipe };
      this.setting = this.settingOf(data.recipe);
      this.atStart = this.model.evaluate(this.setting);
      this.wire();
    }

    /** A setting of the file, in the problem's own surroundings or those in force. */
    settingOf(design, surroundings = this.ownSurroundings()) {
      const { camera, channel, gain_db, filter, f_number, exposure_us } = design;
      return {
        camera, channel, gain_db, filter, f_number, exposure_us,
        drive_ma: { ...design.drive_ma }, emitters: { ...design.emitters }, ...surroundings,
      };
    }

    ownSurroundings() {
      const { air_c, sensor_c } = this.data.temperature;
      return { air_c, sensor_c, ambient_factor: 1 };
    }

    surroundings() {
      const { air_c, sensor_c, ambient_factor } = this.setting;
      return { air_c, sensor_c, ambient_factor };
    }

    /** Whether temperatures and ambient light are those of the problem, for which alone the bound is proven. */
    atHome() {
      const own = this.ownSurroundings();
      return Object.keys(own).every((name) => own[name] === this.setting[name]);
    }

    // --- changes ---------------------------------------------------------------------------------------------------

    /** Change the setting; it shows at the next frame. */
    change(changes) {
      this.setting = { ...this.setting, ...changes };
      this.later();
    }

    later() {
      if (this.waiting) return;
      this.waiting = true;
      requestAnimationFrame(() => this.render());
    }

    setDrive(id, ma, count) {
      const drive_ma = { ...this.setting.drive_ma }, emitters = { ...this.setting.emitters };
      if (ma !== undefined && ma !== null) {
        if (ma > 0) drive_ma[id] = ma;
        else delete drive_ma[id];
      }
      const led = this.model.ledOf.get(id);
      if (this.data.build.free) {
        if (count !== undefined) emitters[id] = count;
        if ((drive_ma[id] ?? 0) > 0) emitters[id] ??= led.emitters;
        else if (!led.must_have) delete emitters[id];
      }
      this.setting = { ...this.setting, drive_ma, emitters };
      if (ma === 0) this.render(); // lines come and go at once, so that the focus finds its place
      else this.later();
    }

    /** Go to a design of the file, surroundings kept. */
    go(design) {
      this.setting = this.settingOf(design, this.surroundings());
      this.leds.reset([]);
      this.render();
    }

    setCamera(id) {
      const camera = this.model.cameraOf.get(id), channels = [...camera.channels.keys()];
      const channel = channels.includes(this.setting.channel) ? this.setting.channel : channels[0];
      const gains = camera.gains.map((gain) => gain.gain_db);
      const gain_db = gains.includes(this.setting.gain_db) ? this.setting.gain_db : gains[0];
      this.change({ camera: id, channel, gain_db });
    }

    // --- wiring ----------------------------------------------------------------------------------------------------

    wire() {
      const { data } = this;
      $("form").addEventListener("submit", (event) => event.preventDefault());
      $("to-recipe").addEventListener("click", () => this.go(data.recipe));
      $("to-optimum").addEventListener("click", () => this.go(data.optimum));
      $("own-surroundings").addEventListener("click", () => this.change(this.ownSurroundings()));
      $("other").addEventListener("change", () => this.go(this.known[Number($("other").value)]));
      $("camera").addEventListener("change", () => this.setCamera($("camera").value));
      $("channel").addEventListener("change", () => this.change({ channel: $("channel").value }));
      $("gain").addEventListener("change", () => this.change({ gain_db: Number($("gain").value) }));
      $("stop").addEventListener("change", () => this.change({ f_number: Number($("stop").value) }));
      $("filter").addEventListener("change", () => this.setFilter($("filter").value, ""));
      $("second").addEventListener("change", () => this.setFilter($("filter").value, $("second").value));
      $("more").addEventListener("click", () => {
        this.allLimits = !this.allLimits;
        this.render();
      });
      $("stretch").addEventListener("change", () => this.render());
      $("copy").addEventListener("click", () => this.copy());
      this.wireNumbers();
      this.known = data.alternatives.filter((other) => this.model.knows(other.filter));
      new ResizeObserver(() => this.later()).observe($("spectra"));
    }

    wireNumbers() {
      const camera = () => this.model.cameraOf.get(this.setting.camera);
      const quantity = (name, key, range) =>
        live.pair($(`${name}-slider`), $(name), {
          range: () => range,
          set: (value) => this.change(value === null ? {} : { [key]: value }),
        });
      quantity("air", "air_c", { low: -273.15, high: 150, open: true });
      quantity("sensor", "sensor_c", { low: -273.15, high: 150, open: true });
      quantity("ambient", "ambient_factor", { low: 0, high: 1e6 });
      live.pair($("exposure-slider"), $("exposure"), {
        range: () => ({ low: 0, high: 1e12, open: true }),
        set: (value) => this.change(value === null ? {} : { exposure_us: value }),
        fromSlider: (value) => {
          const { exposure_min_us: low, exposure_max_us: high, exposure_step_us: step } = camera();
          const wanted = low * (high / low) ** (Number(value) / 1000);
          return Math.max(live.inSteps(wanted, step), Math.min(step, low));
        },
      });
    }

    setFilter(first, second) {
      const pairs = this.model.partners(first), single = this.model.single(first);
      const partner = pairs.includes(second) ? second : single ? "" : pairs[0];
      this.change({ filter: partner ? this.model.stacked(first, partner) : first });
    }

    async copy() {
      const text = $("toml").value;
      let done = true;
      try {
        await navigator.clipboard.writeText(text);
      } catch {
        $("toml").focus();
        $("toml").select();
        done = document.execCommand("copy");
      }
      $("copied").textContent = done ? "Copied." : "Not copied by this browser: select the text and copy it.";
    }

    // --- showing ---------------------------------------------------------------------------------------------------

    render() {
      this.waiting = false;
      const { setting } = this, result = this.model.evaluate(setting);
      this.result = result;
      this.showControls(setting, result);
      this.showHeadline(result);
      this.showGreys(result);
      this.showLimits(result);
      this.showNoise(result);
      this.showViews(result);
      this.showSpectra(result, setting);
      this.showRecipe(setting);
    }

    showControls(setting, result) {
      const { data, model } = this, camera = model.cameraOf.get(setting.camera);
      this.leds.show(setting, result.leds);
      fill($("camera"), model.cameras.map((c) => [c.id, c.id]), setting.camera);
      fill($("channel"), [...camera.channels.keys()].map((name) => [name, name]), setting.channel);
      fill($("gain"), camera.gains.map((g) => [g.gain_db, `${number(g.gain_db)} dB`]), setting.gain_db);
      fill($("stop"), data.optics.f_numbers.map((stop) => [stop, `f/${number(stop)}`]), setting.f_number);
      const [first, second = ""] = setting.filter.split(live.JOINED), partners = model.partners(first);
      fill($("filter"), model.firsts().map((name) => [name, name]), first);
      const stack = [...(model.single(first) ? [["", "nothing"]] : []), ...partners.map((name) => [name, name])];
      fill($("second"), stack, second);
      $("second").hidden = $("second-label").hidden = !model.stackable;
      const { exposure_min_us: low, exposure_max_us: high } = camera;
      const place = Math.round((1000 * Math.log(setting.exposure_us / low)) / Math.log(high / low) || 0);
      live.show($("exposure-slider"), $("exposure"), Math.min(Math.max(place, 0), 1000), setting.exposure_us);
      $("exposure-slider").setAttribute("aria-valuetext", `${number(setting.exposure_us, 6)} microseconds`);
      for (const [name, key] of [["air", "air_c"], ["sensor", "sensor_c"], ["ambient", "ambient_factor"]])
        live.show($(`${name}-slider`), $(name), setting[key], setting[key]);
    }

    showHeadline(result) {
      const { data } = this, bound = data.bound.cnr, home = this.atHome(), missed = result.limits.filter((l) => !l.met);
      put("cnr", number(result.cnr));
      put("sign", result.cnr > 0 ? `target ${result.sign} than background` : "no usable contrast");
      const share = bound > 0 ? result.cnr / bound : 0;
      const words = data.bound.proven ? "the proven best" : "the bound proven so far";
      const best = `${words}, CNR ${number(bound, 5)}`;
      let text = `${percent(share)} of ${best}`;
      if (!home) text = `The bound, CNR ${number(bound, 5)}, holds for the problem's own surroundings, not for these`;
      else if (share > 1 && missed.length) text = `${percent(share)} of ${best}: only with limits missed`;
      put("share", text);
      put("required", data.required_cnr === null ? "" : this.requirement(result.cnr, data.required_cnr));
      put("errors", `${live.missed(result.error_rate)}, as many false alarms`);
      $("strip").classList.toggle("live-away", !home);
      this.showRail(result.cnr, bound);
      const count = result.limits.length;
      const verdict = missed.length === 0 ? `✓ all ${count} limits hold`
        : `✗ ${missed.length} of ${count} limits missed: ${missed.slice(0, 3).map((l) => l.name).join("; ")}${
          missed.length > 3 ? " …" : ""}`;
      put("verdict", verdict);
      $("verdict").classList.toggle("live-bad", missed.length > 0);
      this.speak(`CNR ${number(result.cnr, 3)}. ${home ? `${percent(share)} of ${words}. ` : ""}${verdict.slice(2)}.`);
    }

    requirement(cnr, required) {
      const times = cnr >= required ? `met, ${(cnr / required).toFixed(2)} times` : `NOT met, ${percent(1 - cnr / required)} short`;
      return `needed CNR ${number(required)}: ${times}`;
    }

    showRail(cnr, bound) {
      const end = Math.max(bound, this.data.required_cnr ?? 0, cnr) * 1.02 || 1;
      const at = (value) => `${(100 * value) / end}%`;
      $("fill").style.width = at(cnr);
      $("start-tick").style.left = at(bound);
      $("needed").hidden = this.data.required_cnr === null;
      if (this.data.required_cnr !== null) $("needed").style.left = at(this.data.required_cnr);
    }

    /** Read the summary out once things have come to rest. */
    speak(text) {
      clearTimeout(this.speaking);
      this.speaking = setTimeout(() => put("status", text), SPOKEN_AFTER);
    }

    showGreys(result) {
      const { data } = this, camera = this.model.cameraOf.get(this.setting.camera), full = 2 ** camera.bits - 1;
      const rows = result.surfaces.map((s) => ({
        cells: [`${s.id}, ${s.role}`, s.grey_dn.toFixed(1), percent(s.saturation_share)],
        share: s.saturation_share, kind: s.role, bad: s.saturation_share >= 1, mark: data.limits.well_headroom,
      }));
      table($("greys"), rows);
      const clipped = result.surfaces.some((s) => s.saturation_share >= 1);
      const limit = `The line in the bar is the allowed ${percent(data.limits.well_headroom)}`;
      put("greys-note", `${clipped ? "✗ A surface saturates. " : ""}Of ${full} grey values. ${limit}.`);
    }

    showLimits(result) {
      const order = result.limits.map((limit, k) => [limit, k]);
      order.sort(([a, i], [b, j]) => Number(a.met) - Number(b.met) || b.share - a.share || i - j);
      const shown = order.map(([limit]) => limit).filter((l) => this.allLimits || !l.met || l.share >= LOWEST_SHOWN);
      table($("limits"), shown.map((limit) => {
        const word = !limit.met ? "✗ missed: " : limit.share >= REACHED ? "► reached: " : "";
        const allowed = `${limit.floor ? "≥" : "≤"} ${number(limit.bound)} ${unit(limit.unit)}`;
        const cells = [word + limit.name, number(limit.value), allowed, percent(limit.share, 0.001)];
        return { cells, share: limit.share, bad: !limit.met, near: limit.met && limit.share >= REACHED };
      }));
      const folded = result.limits.length - shown.length;
      $("more").hidden = folded === 0 && !this.allLimits;
      put("more", this.allLimits ? "Fold the limits hardly used" : `Show ${folded} more, used below ${percent(LOWEST_SHOWN)}`);
      $("more").setAttribute("aria-expanded", String(this.allLimits));
    }

    showNoise(result) {
      const sum = result.noise.reduce((total, term) => total + term.target + term.background, 0);
      const terms = result.noise.filter((term) => term.target + term.background > 0);
      terms.sort((a, b) => b.target + b.background - a.target - a.background);
      table($("noise"), terms.map((term) => {
        const share = (term.target + term.background) / sum;
        const sigma = [term.target, term.background].map((variance) => number(Math.sqrt(variance), 3));
        return { cells: [term.name, ...sigma, percent(share, 0.001)], share };
      }));
      const { target, background } = result.pair;
      put("noise-note", result.pairs.length > 1 ? `, of the worst pair: ${target} against ${background}` : "");
    }

    showViews(result) {
      const stretched = $("stretch").checked;
      this.before.draw(this.atStart, stretched);
      this.now.draw(result, stretched);
      put("view-start-text", `the recipe, CNR ${number(this.atStart.cnr)}`);
      put("view-now-text", `now, CNR ${number(result.cnr)}`);
      const { pixels, frames } = this.data.averaging, many = pixels * frames > 1;
      const dot = many ? `${pixels} pixels of ${frames} frames averaged` : "one pixel";
      put("view-note", `Simulated, with all terms of the noise budget. One dot is one reading: ${dot}.`);
    }

    showSpectra(result, setting) {
      this.spectra.draw(result, setting);
      put("target-name", result.pair.target);
      put("background-name", result.pair.background);
      $("ambient-key").hidden = this.data.ambient === null;
    }

    showRecipe(setting) {
      const { result } = this, comments = [`Tried on the page for ${this.data.title} (${this.data.file})`];
      comments.push(`predicted CNR ${number(result.cnr, 6)}`);
      if (!this.atHome()) {
        const ambient = `ambient light times ${number(setting.ambient_factor)}`;
        comments.push(`at air ${number(setting.air_c)} deg C, sensor ${number(setting.sensor_c)} deg C, ${ambient},`);
        comments.push("which the problem states otherwise: set them there before cnr check");
      }
      const text = live.recipe(setting, comments);
      if ($("toml").value !== text) {
        $("toml").value = text;
        put("copied", "");
      }
      put("printed", `Shown at: ${text.split("\n").filter((line) => line && !line.startsWith("#")).join("; ")}`);
    }
  }

  /** Set text where it differs. */
  function put(id, text) {
    const place = $(id);
    if (place.textContent !== text) place.textContent = text;
  }

  /** Rows of cells with a bar; rows are kept, only what differs is written. */
  function table(body, rows) {
    while (body.children.length > rows.length) body.lastChild.remove();
    rows.forEach((row, k) => fillRow(body.children[k] ?? newRow(body, row.cells.length), row));
  }

  function newRow(body, count) {
    const row = element("tr");
    row.append(element("th", { scope: "row" }));
    for (let k = 1; k < count; k++) row.append(element("td", { class: "n" }));
    const bar = element("td", { class: "live-bars", "aria-hidden": "true" }), rail = element("span", { class: "live-bar" });
    rail.append(element("i"), element("b"));
    bar.append(rail);
    row.append(bar);
    body.append(row);
    return row;
  }

  function fillRow(row, { cells, share, bad = false, near = false, kind = "", mark = 0 }) {
    cells.forEach((text, k) => {
      if (row.children[k].textContent !== text) row.children[k].textContent = text;
    });
    const name = ["live-tr", bad && "live-bad", near && "live-near", kind && `live-of-${kind}`].filter(Boolean).join(" ");
    if (row.className !== name) row.className = name;
    const [fillBar, line] = row.lastChild.firstChild.children;
    fillBar.style.width = `${(100 * Math.min(Math.max(share, 0), 1)).toFixed(1)}%`;
    line.hidden = !mark;
    if (mark) line.style.left = `${100 * mark}%`;
  }

  function begin() {
    const page = new Page(JSON.parse($("data").textContent));
    live.page = page;
    fill($("other"), [["", "choose a runner-up"], ...page.known.map((d, k) => [k, `${d.camera}, ${d.filter}`])], "");
    $("other-label").hidden = page.known.length === 0;
    const left = Object.entries(page.data.left_out).filter(([, count]) => count > 0);
    if (left.length) put("parts-note", `To keep this file small, ${left.map(([kind, n]) => `${n} ${kind}`).join(", ")} of the catalogue are not in this list: those of the lowest bounds.`);
    $("bench").hidden = false;
    page.render();
    const off = Math.abs(page.atStart.cnr / page.data.recipe.cnr - 1);
    if (!(off <= FAITHFUL)) {
      put("failed", `This page's CNR of the recipe is off the program's by ${percent(off)}: trust the recipe above, not this page.`);
      $("failed").hidden = false;
    }
  }

  begin();
})();
