// Controls of the page: a slider beside a number, lists of parts, and a line for each LED that is lit.
(() => {
  "use strict";
  const live = globalThis.codesignLive;
  const $ = (id) => document.getElementById(`live-${id}`);

  function element(name, attributes = {}, text = "") {
    const made = document.createElement(name);
    for (const [key, value] of Object.entries(attributes)) made.setAttribute(key, value);
    made.textContent = text;
    return made;
  }

  /** Put the entries [value, text] into a list and choose one; nothing is touched that is right already. */
  function fill(select, entries, value) {
    const now = entries.map(([entry, text]) => `${entry}\n${text}`).join("\n\n");
    if (select.entries !== now) {
      select.replaceChildren(...entries.map(([entry, text]) => element("option", { value: entry }, text)));
      select.entries = now;
    }
    if (select.value !== String(value)) select.value = String(value);
  }

  /** Say what is wrong with a number typed, or take it back. */
  function complain(input, message) {
    input.setCustomValidity(message);
    input.toggleAttribute("aria-invalid", Boolean(message));
    if (message) input.setAttribute("aria-invalid", "true");
    let note = input.complaint;
    if (!note && message) {
      note = input.complaint = element("span", { class: "live-complaint", id: `${input.id}-complaint` });
      input.closest(".live-line").append(note);
      input.setAttribute("aria-describedby", note.id);
    }
    if (note) note.textContent = message;
  }

  /** Number typed into a field, or null with a complaint where it is not one of [low, high]. */
  function typed(input, low, high, open = false) {
    const value = input.value.trim() === "" ? NaN : Number(input.value);
    const good = Number.isFinite(value) && value <= high && (open ? value > low : value >= low);
    const [least, most] = [low, high].map((end) => live.number(end, 6));
    const range = open ? `above ${least} and at most ${most}` : `from ${least} to ${most}`;
    complain(input, good ? "" : `must be a number ${range}`);
    return good ? value : null;
  }

  /** Show a value in a slider (null: it stands right) and a number field, but not in a field somebody is typing in. */
  function show(slider, input, position, value) {
    if (position !== null && slider.value !== String(position)) slider.value = position;
    if (document.activeElement !== input || input.validity.valid) {
      const text = String(Number(value.toPrecision(12)));
      if (Number(input.value) !== Number(text)) input.value = text;
    }
    if (document.activeElement !== input) complain(input, "");
  }

  /** A whole number of steps without the dust of binary fractions. */
  const inSteps = (value, step) => Number((Math.round(value / step) * step).toPrecision(12));

  /** Slider and number for one quantity; `range()` gives {low, high, open}, `set(value)` takes what was chosen. */
  function pair(slider, input, { range, set, fromSlider = Number }) {
    slider.addEventListener("input", () => {
      complain(input, "");
      set(fromSlider(slider.value));
    });
    input.addEventListener("input", () => {
      const { low, high, open } = range(), value = typed(input, low, high, open);
      if (value !== null) set(value);
    });
    input.addEventListener("blur", () => set(null)); // shows the value in force where the one typed was refused
  }

  // --- LEDs --------------------------------------------------------------------------------------------------------

  /** Lines of the LEDs shown: those lit and those added, by wavelength. */
  class LedList {
    constructor(model, change) {
      this.model = model;
      this.change = change;
      this.lines = new Map();
      this.shown = new Set();
      $("add").addEventListener("click", () => this.add($("add-led").value));
    }

    /** Show just these LEDs. */
    reset(ids) {
      this.shown = new Set(ids);
    }

    add(id) {
      if (!id) return;
      this.shown.add(id);
      this.change(id, 0);
      this.lines.get(id).slider.focus();
    }

    line(led) {
      const box = element("div", { class: "live-line live-led" }), name = `live-led-${led.id}`;
      const label = element("label", { for: name }, led.id);
      const peak = element("span", { class: "live-peak" }, `${live.number(led.peak_nm)} nm`);
      const step = this.model.data.drive_step_ma, index = this.model.leds.indexOf(led);
      const top = Math.max(...this.model.data.pulse_levels.map((level) => level.current_ma[index]));
      const slider = element("input", {
        type: "range", min: 0, max: top, step, "aria-label": `Current of ${led.id}, slider`,
      });
      const input = element("input", { type: "number", id: name, min: 0, step: "any", inputmode: "decimal" });
      const off = element("button", { type: "button", class: "live-off", "aria-label": `Take ${led.id} out` }, "×");
      const note = element("span", { class: "live-note" });
      label.append(" ", peak, element("span", { class: "live-hidden" }, " current in mA"));
      box.append(label, slider, input, element("span", { class: "live-unit" }, "mA"), off, note);
      const made = { box, slider, input, note, led, index };
      if (this.model.data.build.free) box.append(this.count(led, made));
      pair(slider, input, {
        range: () => ({ low: 0, high: led.largest_ma }),
        set: (value) => this.change(led.id, value),
        fromSlider: (value) => Math.min(inSteps(Number(value), step), top),
      });
      off.addEventListener("click", () => {
        this.shown.delete(led.id);
        this.change(led.id, 0);
        $("add-led").focus();
      });
      return made;
    }

    /** Number of emitters, where that is free. */
    count(led, made) {
      const name = `live-count-${led.id}`, box = element("span", { class: "live-count" });
      made.count = element("input", { type: "number", id: name, min: 1, max: led.emitters, step: 1 });
      made.count.addEventListener("input", () => {
        const value = typed(made.count, 1, led.emitters);
        if (value !== null && Number.isInteger(value)) this.change(led.id, null, value);
        else if (value !== null) complain(made.count, "must be a whole number");
      });
      made.count.addEventListener("blur", () => this.change(led.id, null));
      box.append(element("label", { for: name }, "emitters"), " ", made.count);
      return box;
    }

    /** Bring lines, values and the list of others up to date; `level` is the pulse rating that holds. */
    show(setting, states, level) {
      const { leds } = this.model;
      for (const [id, ma] of Object.entries(setting.drive_ma)) if (ma > 0) this.shown.add(id);
      const wanted = leds.filter((led) => this.shown.has(led.id)).sort((a, b) => a.peak_nm - b.peak_nm);
      const lines = wanted.map((led) => {
        if (!this.lines.has(led.id)) this.lines.set(led.id, this.line(led));
        return this.lines.get(led.id);
      });
      const place = $("leds"), boxes = lines.map((line) => line.box);
      if (place.children.length !== boxes.length || boxes.some((box, k) => place.children[k] !== box))
        place.replaceChildren(...boxes);
      const reached = new Map(states.map((state) => [state.id, state]));
      for (const line of lines) this.showLine(line, setting, reached.get(line.led.id), level.current_ma[line.index]);
      const others = leds.filter((led) => !this.shown.has(led.id)).sort((a, b) => a.peak_nm - b.peak_nm);
      const entries = others.map((led) => [led.id, `${led.id} (${live.number(led.peak_nm)} nm)`]);
      const chosen = others.some((led) => led.id === $("add-led").value) ? $("add-led").value : (others[0]?.id ?? "");
      fill($("add-led"), entries, chosen);
      $("add-led").disabled = $("add").disabled = others.length === 0;
    }

    showLine(line, setting, state, top) {
      const ma = setting.drive_ma[line.led.id] ?? 0;
      show(line.slider, line.input, ma, ma);
      line.slider.setAttribute("aria-valuetext", `${live.number(ma)} mA`);
      if (line.count && document.activeElement !== line.count) {
        line.count.value = setting.emitters[line.led.id] ?? line.led.emitters;
        complain(line.count, "");
      }
      const emitters = line.count ? "" : `× ${line.led.emitters}, `;
      const heat = state ? `junction ${state.junction_c.toFixed(1)} °C` : "off";
      const now = this.model.data.pulse_levels.length > 1 ? " now" : ""; // ratings differ by exposure
      const text = `${emitters}${heat}, ${ma > top * (1 + live.TOLERANCE) ? "✗ only " : ""}up to ${live.number(top)} mA${now}`;
      if (line.note.textContent !== text) line.note.textContent = text;
    }
  }

  Object.assign(live, { $, element, fill, pair, show, complain, inSteps, LedList });
})();
