// State of the page and its wiring: controls change the setting, every change shows at the next frame.
(() => {
  "use strict";
  const live = globalThis.codesignLive;
  const { $, element, fill, number, percent, unit } = live;
  const LOWEST_SHOWN = 0.01; // limits met that are used less are folded away
  const MOST_LIMITS = 14; // limits met that are listed before the rest is folded away
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
      if (ma !== null) {
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
    go(design, other = "") {
      this.setting = this.settingOf(design, this.surroundings());
      this.leds.reset([]);
      $("other").value = other;
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
      $("other").addEventListener("change", () => {
        const { value } = $("other");
        if (value) this.go(this.known[Number(value)], value);
      });
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
        fromSlider: (value) => this.exposureAt(value),
      });
    }

    /** Exposure at a place of the slider, whose ends are the camera's shortest and longest. [us] */
    exposureAt(place) {
      const { exposure_min_us: low, exposure_max_us: high, exposure_step_us: step } = this.camera();
      return Math.max(live.inSteps(low * (high / low) ** (Number(place) / 1000), step), Math.min(step, low));
    }

    /** Place of the slider for an exposure; null where it stands right already. */
    placeOf(exposure) {
      if (this.exposureAt($("exposure-slider").value) === exposure) return null;
      const { exposure_min_us: low, exposure_max_us: high } = this.camera();
      const place = Math.round((1000 * Math.log(exposure / low)) / Math.log(high / low));
      return Math.min(Math.max(place || 0, 0), 1000);
    }

    camera() {
      return this.model.cameraOf.get(this.setting.camera);
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
      const { data, model } = this, camera = this.camera();
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
      live.show($("exposure-slider"), $("exposure"), this.placeOf(setting.exposure_us), setting.exposure_us);
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
      const reached = share < 1 ? `${Math.floor(share * 1e4) / 100} %` : percent(share); // never rounded up to all of it
      let text = `${reached} of ${best}`;
      if (!home) text = `The bound, CNR ${number(bound, 5)}, holds for the problem's own surroundings, not for these`;
      else if (share > 1 && missed.length) text = `${reached} of ${best}: only with limits missed`;
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
      this.speak(`CNR ${number(result.cnr, 3)}. ${home ? `${reached} of ${words}. ` : ""}${verdict.slice(2)}.`);
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
      const { data } = this, camera = this.camera(), full = 2 ** camera.bits - 1;
      const mark = data.limits.well_headroom;
      meters($("greys"), result.surfaces.map((s) => {
        const clipped = s.saturation_share >= 1;
        const name = `${clipped ? "✗ saturated: " : ""}${s.id}, ${s.role}`;
        const kind = clipped ? "live-bad" : `live-of-${s.role}`;
        return { name, more: `grey value ${s.grey_dn.toFixed(1)}`, share: s.saturation_share, kind, mark };
      }));
      put("greys-note", `Grey values to ${full}; percent of saturation, the stroke marks the ${percent(mark)} allowed.`);
    }

    showLimits(result) {
      const order = result.limits.map((limit, k) => [limit, k]);
      order.sort(([a, i], [b, j]) => Number(a.met) - Number(b.met) || b.share - a.share || i - j);
      const worth = (limit, k) => !limit.met || (k < MOST_LIMITS && limit.share >= LOWEST_SHOWN);
      const shown = order.map(([limit]) => limit).filter((limit, k) => this.allLimits || worth(limit, k));
      meters($("limits"), shown.map((limit) => {
        const reached = limit.met && limit.share >= REACHED, word = !limit.met ? "✗ missed: " : reached ? "► reached: " : "";
        const allowed = `${limit.floor ? "≥" : "≤"} ${number(limit.bound)} ${unit(limit.unit)}`.trim();
        const kind = !limit.met ? "live-bad" : reached ? "live-near" : "";
        return { name: word + limit.name, more: `${number(limit.value)} (${allowed})`, share: limit.share, kind };
      }));
      const folded = result.limits.length - shown.length;
      $("more").hidden = folded === 0 && !this.allLimits;
      put("more", this.allLimits ? "Fold the limits used less" : `Show the ${folded} limits used less`);
      $("more").setAttribute("aria-expanded", String(this.allLimits));
    }

    showNoise(result) {
      const sum = result.noise.reduce((total, term) => total + term.target + term.background, 0);
      const terms = result.noise.filter((term) => term.target + term.background > 0);
      terms.sort((a, b) => b.target + b.background - a.target - a.background);
      meters($("noise"), terms.map((term) => {
        const [target, background] = [term.target, term.background].map((v) => number(Math.sqrt(v), 3));
        const more = `σ ${target} and ${background} e⁻`;
        return { name: term.name, more, share: (term.target + term.background) / sum };
      }));
      const { target, background } = result.pair, worst = result.pairs.length > 1 ? "of the worst pair, " : "";
      put("noise-note", `Percent of the variance; σ, the standard deviation, ${worst}at ${target} and ${background}.`);
    }

    showViews(result) {
      const stretched = $("stretch").checked;
      if (this.stretched !== stretched) this.before.draw(this.atStart, stretched);
      this.stretched = stretched;
      this.now.draw(result, stretched);
      put("view-start-text", `the recipe, CNR ${number(this.atStart.cnr)}`);
      put("view-now-text", `now, CNR ${number(result.cnr)}`);
      const { pixels, frames } = this.data.averaging, many = pixels * frames > 1;
      const parts = [[pixels, "pixels"], [frames, "frames"]].filter(([count]) => count > 1);
      const dot = many ? `${parts.map((part) => part.join(" ")).join(" × ")} averaged` : "one pixel";
      put("view-note", `Simulated, with all terms of the noise budget. One dot is one reading: ${dot}.`);
    }

    showSpectra(result, setting) {
      this.spectra.draw(result, setting);
      const { grid } = this.model, { diffuse, all, seen } = result.light;
      const [one, other] = [result.pair.i, result.pair.j].map((k) => this.model.surfaces[k].mean);
      const most = (values) => `${grid[values.reduce((best, v, i) => (v > values[best] ? i : best), 0)].toFixed(0)} nm`;
      const difference = all.map((v, i) => Math.abs(v * (one[i] - other[i])));
      const words = [["LED light is strongest at", diffuse], ["filter and camera respond most at", seen]];
      words.push(["most of the difference comes from", difference]);
      const label = words.map(([text, values]) => `${text} ${most(values)}`).join("; ");
      if (this.spectra.svg.getAttribute("aria-label") !== label) this.spectra.svg.setAttribute("aria-label", label);
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

  /** Lines with a bar each; lines are kept, only what differs is written. */
  function meters(list, rows) {
    while (list.children.length > rows.length) list.lastChild.remove();
    rows.forEach((row, k) => fillLine(list.children[k] ?? newLine(list), row));
  }

  function newLine(list) {
    const line = element("li"), bar = element("span", { class: "live-bar", "aria-hidden": "true" });
    bar.append(element("i"), element("b"));
    line.append(...["name", "more", "much"].map((part) => element("span", { class: `live-${part}` })), bar);
    list.append(line);
    return line;
  }

  function fillLine(line, { name, more, share, much = percent(share, 0.001), kind = "", mark = 0 }) {
    const [first, second, third, bar] = line.children, [fillBar, limit] = bar.children;
    for (const [place, text] of [[first, name], [second, more], [third, much]])
      if (place.textContent !== text) place.textContent = text;
    if (line.className !== kind) line.className = kind;
    fillBar.style.width = `${(100 * Math.min(Math.max(share, 0), 1)).toFixed(1)}%`;
    limit.hidden = !mark;
    if (mark) limit.style.left = `${100 * mark}%`;
  }

  function begin() {
    const page = new Page(JSON.parse($("data").textContent));
    live.page = page;
    fill($("other"), [["", "choose a runner-up"], ...page.known.map((d, k) => [k, `${d.camera}, ${d.filter}`])], "");
    $("other-label").hidden = page.known.length === 0;
    const left = Object.entries(page.data.left_out).filter(([, count]) => count > 0);
    if (left.length) put("parts-note", `To keep this file small, ${left.map(([kind, n]) => `${n} ${kind}`).join(", ")} of the catalogue are not in this list: those of the lowest bounds.`);
    if (page.data.ambient === null) {
      $("ambient").disabled = $("ambient-slider").disabled = true;
      $("dark-note").hidden = false;
    }
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
