// What the page says of a result: headline, grey values, limits, noise, pictures, recipe.
(() => {
  "use strict";
  const live = globalThis.codesignLive;
  const { $, element, number, percent, unit } = live;
  const LOWEST_SHOWN = 0.01; // limits met that are used less are folded away
  const MOST_LIMITS = 14; // limits met that are listed before the rest is folded away
  const REACHED = 0.999; // from this share on a limit counts as reached
  const FEWEST_LINES = 8, MOST_LINES = 24; // of the recipe in view
  const SPOKEN_AFTER = 900; // ms of rest before the summary is read out

  /** Set text where it differs. */
  function put(id, text) {
    const place = $(id);
    if (place.textContent !== text) place.textContent = text;
  }

  // --- lines with a bar --------------------------------------------------------------------------------------------

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

  // --- headline ----------------------------------------------------------------------------------------------------

  function headline(page, result) {
    const { data } = page, missed = result.limits.filter((limit) => !limit.met);
    put("cnr", number(result.cnr));
    const lost = result.surfaces.some((s) => s.role !== "guard" && s.saturation_share >= 1);
    const seen = result.cnr > 0 ? `target ${result.sign} than background` : "no usable contrast";
    put("sign", lost ? "✗ not to be had: the camera saturates" : seen);
    $("sign").classList.toggle("live-lost", lost);
    put("share", againstBound(page, result, missed));
    put("required", data.required_cnr === null ? "" : requirement(result.cnr, data.required_cnr));
    put("change", againstStart(page, result));
    put("errors", `${live.missed(result.error_rate)}, as many false alarms`);
    const weights = Object.entries(result.weights).map(([name, w]) => `${name} ${w < 0 ? "−" : "+"}${Math.abs(w).toFixed(4)}`);
    put("weights", weights.length ? `best weights here: ${weights.join(", ")}` : "");
    $("strip").classList.toggle("live-away", !page.atHome());
    rail(page, result.cnr);
    const count = result.limits.length, more = missed.length > 3 ? " …" : "";
    const names = missed.slice(0, 3).map((limit) => limit.name).join("; ");
    const verdict = missed.length ? `${missed.length} of ${count} limits missed: ${names}${more}` : `all ${count} limits hold`;
    put("verdict", `${missed.length ? "✗" : "✓"} ${verdict}`);
    $("verdict").classList.toggle("live-bad", missed.length > 0);
    speak(page, `CNR ${number(result.cnr, 3)}. ${$("share").textContent}. ${verdict}.`);
  }

  /** The CNR as a share of the bound, which holds for the problem's own surroundings only. */
  function againstBound(page, result, missed) {
    const { cnr: bound, proven } = page.data.bound;
    if (bound === null) return "no bound was proven before the search was stopped";
    const share = bound > 0 ? result.cnr / bound : 0, best = `CNR ${number(bound, 5)}`;
    if (!page.atHome()) return `The bound, ${best}, holds for the problem's own surroundings, not for these`;
    const reached = share < 1 ? `${Math.floor(share * 1e4) / 100} %` : percent(share); // never rounded up to all of it
    const caveat = share > 1 && missed.length ? ": only with limits missed" : "";
    return `${reached} of ${proven ? "the proven best" : "the bound proven so far"}, ${best}${caveat}`;
  }

  /** How the CNR compares with the recipe's, once it differs. */
  function againstStart(page, result) {
    const start = page.atStart.cnr, change = result.cnr / start - 1;
    if (!(Math.abs(change) > 1e-9)) return "";
    return `${percent(Math.abs(change), 0.001)} ${change < 0 ? "below" : "above"} the recipe's ${number(start)}`;
  }

  function requirement(cnr, required) {
    const met = `met, ${(cnr / required).toFixed(2)} times`, short = `NOT met, ${percent(1 - cnr / required)} short`;
    return `needed CNR ${number(required)}: ${cnr >= required ? met : short}`;
  }

  function rail(page, cnr) {
    const { bound, required_cnr: required } = page.data, end = Math.max(bound.cnr ?? 0, required ?? 0, cnr) * 1.02 || 1;
    const at = (value) => `${(100 * value) / end}%`;
    $("fill").style.width = at(cnr);
    $("bound-tick").hidden = bound.cnr === null;
    if (bound.cnr !== null) $("bound-tick").style.left = at(bound.cnr);
    $("needed").hidden = required === null;
    if (required !== null) $("needed").style.left = at(required);
  }

  /** Read the summary out once things have come to rest. */
  function speak(page, text) {
    clearTimeout(page.speaking);
    page.speaking = setTimeout(() => put("status", text), SPOKEN_AFTER);
  }

  // --- cards -------------------------------------------------------------------------------------------------------

  function greys(page, result) {
    const full = 2 ** page.camera().bits - 1, mark = page.data.limits.well_headroom;
    meters($("greys"), result.surfaces.map((s) => {
      const clipped = s.saturation_share >= 1, name = `${clipped ? "✗ saturated: " : ""}${s.id}, ${s.role}`;
      const kind = clipped ? "live-bad" : `live-of-${s.role}`;
      return { name, more: `grey value ${s.grey_dn.toFixed(1)}`, share: s.saturation_share, kind, mark };
    }));
    put("greys-note", `Grey values to ${full}; percent of saturation, the stroke marks the ${percent(mark)} allowed.`);
  }

  function pairs(page, result) {
    $("pairs-box").hidden = result.pairs.length < 2;
    if (result.pairs.length < 2) return;
    const most = Math.max(...result.pairs.map((pair) => pair.cnr)), turned = result.sign === "brighter" ? 1 : -1;
    meters($("pairs"), [...result.pairs].sort((a, b) => a.cnr - b.cnr).map((pair) => {
      const opposite = pair.signal_e * turned < 0, more = opposite ? "✗ the other way round" : "";
      const name = `${pair.target} against ${pair.background}`, share = most > 0 ? pair.cnr / most : 0;
      return { name, more, share, much: number(pair.cnr), kind: opposite ? "live-bad" : "" };
    }));
  }

  function limits(page, result) {
    const order = result.limits.map((limit, k) => [limit, k]);
    order.sort(([a, i], [b, j]) => Number(a.met) - Number(b.met) || b.share - a.share || i - j);
    const worth = (limit, k) => !limit.met || (k < MOST_LIMITS && limit.share >= LOWEST_SHOWN);
    const shown = order.map(([limit]) => limit).filter((limit, k) => page.allLimits || worth(limit, k));
    meters($("limits"), shown.map((limit) => {
      const reached = limit.met && limit.share >= REACHED, word = !limit.met ? "✗ missed: " : reached ? "► reached: " : "";
      const allowed = `${limit.floor ? "≥" : "≤"} ${number(limit.bound)} ${unit(limit.unit)}`.trim();
      const kind = !limit.met ? "live-bad" : reached ? "live-near" : "";
      return { name: word + limit.name, more: `${number(limit.value)} (${allowed})`, share: limit.share, kind };
    }));
    const folded = result.limits.length - shown.length;
    $("more").hidden = folded === 0 && !page.allLimits;
    put("more", page.allLimits ? "Fold the limits used less" : `Show ${folded} more, used less`);
    $("more").setAttribute("aria-expanded", String(page.allLimits));
  }

  function noise(page, result) {
    const sum = result.noise.reduce((total, term) => total + term.target + term.background, 0);
    const terms = result.noise.filter((term) => term.target + term.background > 0);
    terms.sort((a, b) => b.target + b.background - a.target - a.background);
    meters($("noise"), terms.map((term) => {
      const [target, background] = [term.target, term.background].map((v) => number(Math.sqrt(v), 3));
      const more = `σ ${target} and ${background} e⁻`;
      return { name: term.name, more, share: (term.target + term.background) / sum };
    }));
    const { target, background } = result.pair, worst = result.pairs.length > 1 ? "of the worst pair, " : "";
    const of = Object.keys(result.weights).length ? " of the weighted sum" : "";
    put("noise-note", `Percent of the variance${of}; σ, the standard deviation, ${worst}at ${target} and ${background}.`);
  }

  function views(page, result) {
    const weighted = Object.keys(result.weights).length > 0, stretched = weighted || $("stretch").checked;
    $("stretch-label").hidden = weighted; // a weighted sum has no black and no saturation
    if (page.stretched !== stretched) page.before.draw(page.atStart, stretched);
    page.stretched = stretched;
    page.now.draw(result, stretched);
    put("view-start-text", `the recipe, CNR ${number(page.atStart.cnr)}`);
    put("view-now-text", `now, CNR ${number(result.cnr)}`);
    const { pixels, frames } = page.data.averaging;
    const parts = [[pixels, "pixels"], [frames, "frames"]].filter(([count]) => count > 1);
    const dot = parts.length ? `${parts.map((part) => part.join(" ")).join(" × ")} averaged` : "one pixel";
    const sum = weighted ? " Shown is the weighted sum of the readings." : "";
    put("view-note", `Simulated, with all terms of the noise budget. One dot is one reading: ${dot}.${sum}`);
  }

  function spectra(page, result) {
    page.spectra.draw(result, page.setting, page.shot);
    const { grid } = page.model, { diffuse, seen } = result.light, at = live.differenceOf(page.model, result);
    const most = (values) => `${grid[values.reduce((best, v, i) => (v > values[best] ? i : best), 0)].toFixed(0)} nm`;
    const difference = grid.map((_, i) => Math.abs(at(i)));
    const words = [["LED light is strongest at", diffuse[page.shot]], ["filter and camera respond most at", seen[0]]];
    words.push(["most of the difference comes from", difference]);
    const label = words.map(([text, values]) => `${text} ${most(values)}`).join("; ");
    if (page.spectra.svg.getAttribute("aria-label") !== label) page.spectra.svg.setAttribute("aria-label", label);
    put("target-name", result.pair.target);
    put("background-name", result.pair.background);
  }

  function recipe(page, result) {
    const { setting, data } = page, comments = [`Tried on the page for ${data.title} (${data.file})`];
    comments.push(`predicted CNR ${number(result.cnr, 6)}`);
    if (!page.atHome()) {
      const ambient = `ambient light times ${number(setting.ambient_factor)}`;
      comments.push(`at air ${number(setting.air_c)} deg C, sensor ${number(setting.sensor_c)} deg C, ${ambient},`);
      comments.push("which the problem states otherwise: set them there before cnr check");
    }
    const text = live.recipe(setting, comments);
    if ($("toml").value !== text) {
      $("toml").value = text;
      const rows = Math.min(Math.max(text.split("\n").length, FEWEST_LINES), MOST_LINES);
      if ($("toml").rows !== rows) $("toml").rows = rows;
      put("copied", "");
    }
    put("printed", `Shown at: ${text.split("\n").filter((line) => line && !line.startsWith("#")).join("; ")}`);
  }

  Object.assign(live, { put, parts: { headline, greys, pairs, limits, noise, views, spectra, recipe } });
})();
