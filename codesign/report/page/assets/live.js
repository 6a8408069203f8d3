// State of the page and its wiring: controls change the setting, every change shows at the next frame.
(() => {
  "use strict";
  const live = globalThis.codesignLive;
  const { $, element, fill, number, percent, put } = live;
  const FAITHFUL = 1e-6; // the page's CNR of the recipe must agree with the program's to this
  const REST = 120; // ms without a change before the recipe is written out
  const MANY_LEDS = 8; // lines of LEDs from which on those out of view are not laid out

  class Page {
    constructor(data) {
      this.data = data;
      this.model = new live.Model(data);
      this.leds = new live.LedList(this.model, (id, ma, count) => this.setDrive(id, ma, count));
      this.spectra = new live.Spectra($("spectra"), this.model);
      this.before = new live.View($("view-start"));
      this.now = new live.View($("view-now"));
      this.known = data.alternatives.filter((other) => this.model.knows(other.filter));
      this.allLimits = false;
      this.shot = 0; // the one that the controls of light and exposure show
      this.setting = this.settingOf(data.recipe, this.ownSurroundings());
      this.atStart = this.model.evaluate(this.setting);
      this.wire();
    }

    /** A design of the file in some surroundings. */
    settingOf(design, surroundings) {
      const { camera, channel, gain_db, filter, f_number, exposure_us } = design;
      const shots = design.shots.map((shot) => ({ ...shot, drive_ma: { ...shot.drive_ma } }));
      const { drive_ma, emitters } = design, copies = { drive_ma: { ...drive_ma }, emitters: { ...emitters }, shots };
      return { camera, channel, gain_db, filter, f_number, exposure_us, ...copies, ...surroundings };
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

    camera() {
      return this.model.cameraOf.get(this.setting.camera);
    }

    /** The setting whose light and exposure the controls show: of several shots one. */
    shown() {
      return { ...this.setting, ...this.setting.shots[this.shot] };
    }

    // --- changes ---------------------------------------------------------------------------------------------------

    /** Change the setting; it shows at the next frame. */
    change(changes) {
      this.setting = { ...this.setting, ...changes };
      this.later();
    }

    /** Change light or exposure of the shot shown, or of the only one. */
    changeShot(changes) {
      const { shots } = this.setting;
      this.change(shots.length ? { shots: shots.map((s, k) => (k === this.shot ? { ...s, ...changes } : s)) } : changes);
    }

    later() {
      if (this.waiting) return;
      this.waiting = true;
      requestAnimationFrame(() => this.render());
    }

    /** Set the current [mA] or the number of emitters of an LED; null leaves the current as it is. */
    setDrive(id, ma, count) {
      const drive_ma = { ...this.shown().drive_ma }, emitters = { ...this.setting.emitters };
      if (ma !== null && ma > 0) drive_ma[id] = ma;
      else if (ma !== null) delete drive_ma[id];
      if (this.data.build.free) {
        const led = this.model.ledOf.get(id);
        if (count !== undefined) emitters[id] = count;
        if ((drive_ma[id] ?? 0) > 0) emitters[id] ??= led.emitters;
        else if (!led.must_have) delete emitters[id];
        this.change({ emitters });
      }
      this.changeShot({ drive_ma });
      if (ma === 0) this.render(); // lines come and go at once, so that the focus finds its place
    }

    /** Go to a design of the file, surroundings kept; `other` is its place among the runners-up. */
    go(design, other = "") {
      this.setting = this.settingOf(design, this.surroundings());
      this.leds.reset([]);
      $("other").value = other;
      this.render();
    }

    /** Channels of a camera to choose from: one of them, or all read together. */
    channels(camera) {
      const names = [...camera.channels.keys()];
      return this.data.joined_channels ? [names.join(live.JOINT)] : names;
    }

    setCamera(id) {
      const camera = this.model.cameraOf.get(id), channels = this.channels(camera);
      const channel = channels.includes(this.setting.channel) ? this.setting.channel : channels[0];
      const gains = camera.gains.map((gain) => gain.gain_db);
      const gain_db = gains.includes(this.setting.gain_db) ? this.setting.gain_db : gains[0];
      this.change({ camera: id, channel, gain_db });
    }

    setFilter(first, second) {
      const pairs = this.model.partners(first), single = this.model.single(first);
      const partner = pairs.includes(second) ? second : single ? "" : pairs[0];
      this.change({ filter: partner ? this.model.stacked(first, partner) : first });
    }

    // --- wiring ----------------------------------------------------------------------------------------------------

    wire() {
      const { data } = this, on = (id, event, action) => $(id).addEventListener(event, action);
      on("form", "submit", (event) => event.preventDefault());
      on("to-recipe", "click", () => this.go(data.recipe));
      on("to-optimum", "click", () => this.go(data.optimum));
      on("own-surroundings", "click", () => this.change(this.ownSurroundings()));
      on("other", "change", () => $("other").value && this.go(this.known[Number($("other").value)], $("other").value));
      on("camera", "change", () => this.setCamera($("camera").value));
      on("channel", "change", () => this.change({ channel: $("channel").value }));
      on("gain", "change", () => this.change({ gain_db: Number($("gain").value) }));
      on("stop", "change", () => this.change({ f_number: Number($("stop").value) }));
      on("filter", "change", () => this.setFilter($("filter").value, ""));
      on("second", "change", () => this.setFilter($("filter").value, $("second").value));
      on("stretch", "change", () => this.render());
      on("copy", "click", () => this.copy());
      on("more", "click", () => {
        this.allLimits = !this.allLimits;
        this.render();
      });
      this.wireNumbers();
      this.wireShots();
      new ResizeObserver(() => this.spectra.fit() && this.later()).observe($("spectra"));
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
        set: (value) => (value === null ? this.later() : this.changeShot({ exposure_us: value })),
        fromSlider: (value) => this.exposureAt(value),
      });
    }

    wireShots() {
      this.data.recipe.shots.forEach((_, k) => {
        const choice = element("input", { type: "radio", name: "live-shot", id: `live-shot-${k}` });
        const label = element("label", { for: choice.id }, `shot ${k + 1}`);
        choice.checked = k === 0;
        choice.addEventListener("change", () => {
          this.shot = k;
          this.leds.reset([]);
          this.render();
        });
        $("shots").append(choice, label);
      });
      $("shots").hidden = this.data.recipe.shots.length === 0;
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

    async copy() {
      live.parts.recipe(this, this.result);
      let done = true;
      try {
        await navigator.clipboard.writeText($("toml").value);
      } catch {
        $("toml").focus();
        $("toml").select();
        done = document.execCommand("copy");
      }
      put("copied", done ? "Copied." : "Not copied by this browser: select the text and copy it.");
    }

    // --- showing ---------------------------------------------------------------------------------------------------

    render() {
      this.waiting = false;
      const result = this.model.evaluate(this.setting);
      this.result = result;
      this.showControls(result);
      for (const [name, show] of Object.entries(live.parts)) if (name !== "recipe") show(this, result);
      clearTimeout(this.writing); // long text is costly to lay out: once a moment of rest comes
      this.writing = setTimeout(() => live.parts.recipe(this, this.result), REST);
    }

    showControls(result) {
      const { data, model, setting } = this, camera = this.camera(), shown = this.shown();
      this.leds.show(shown, result.leds, result.level);
      $("leds").classList.toggle("live-many", $("leds").children.length > MANY_LEDS);
      fill($("camera"), model.cameras.map((c) => [c.id, c.id]), setting.camera);
      fill($("channel"), this.channels(camera).map((name) => [name, name.replaceAll(live.JOINT, " + ")]), setting.channel);
      fill($("gain"), camera.gains.map((g) => [g.gain_db, `${number(g.gain_db)} dB`]), setting.gain_db);
      fill($("stop"), data.optics.f_numbers.map((stop) => [stop, `f/${number(stop)}`]), setting.f_number);
      const [first, second = ""] = setting.filter.split(live.JOINED), partners = model.partners(first);
      fill($("filter"), model.firsts().map((name) => [name, name]), first);
      fill($("second"), [...(model.single(first) ? [["", "nothing"]] : []), ...partners.map((name) => [name, name])], second);
      live.show($("exposure-slider"), $("exposure"), this.placeOf(shown.exposure_us), shown.exposure_us);
      $("exposure-slider").setAttribute("aria-valuetext", `${number(shown.exposure_us, 6)} microseconds`);
      const surroundings = [
        ["air", "air_c", "degrees Celsius"], ["sensor", "sensor_c", "degrees Celsius"],
        ["ambient", "ambient_factor", "times"],
      ];
      for (const [name, key, unit] of surroundings) {
        live.show($(`${name}-slider`), $(name), setting[key], setting[key]);
        $(`${name}-slider`).setAttribute("aria-valuetext", `${number(setting[key])} ${unit}`);
      }
    }
  }

  function begin() {
    const page = new Page(JSON.parse($("data").textContent)), { data, model } = page;
    live.page = page;
    fill($("other"), [["", "choose a runner-up"], ...page.known.map((d, k) => [k, `${d.camera}, ${d.filter}`])], "");
    $("other-label").hidden = page.known.length === 0;
    $("second").hidden = $("second-label").hidden = !model.stackable;
    put("parts-note", data.left_out);
    if (data.ambient === null) {
      $("ambient").disabled = $("ambient-slider").disabled = true;
      $("dark-note").hidden = false;
      $("ambient-key").hidden = true;
    }
    $("bench").hidden = false;
    page.render();
    const { cnr } = page.atStart, off = cnr === data.recipe.cnr ? 0 : Math.abs(cnr / data.recipe.cnr - 1);
    if (!(off <= FAITHFUL)) {
      const words = `This page's CNR of the recipe is off the program's by ${percent(off)}`;
      put("failed", `${words}: trust the recipe above, not this page.`);
      $("failed").hidden = false;
    }
  }

  begin();
})();
