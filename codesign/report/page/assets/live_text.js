// Words and numbers of the page: the same few digits as the printed recipe, and recipes as TOML.
(() => {
  "use strict";
  const live = globalThis.codesignLive;
  const UNITS = { us: "µs", "e-": "e⁻", "e-^2": "e⁻²", "deg C": "°C", "W/m2": "W/m²" };

  /** A number in few digits, without powers of ten in everyday ranges. */
  function number(value, digits = 4) {
    if (!Number.isFinite(value)) return "none";
    if (Math.abs(value) >= 10 ** digits && Math.abs(value) < 1e9) return value.toFixed(0);
    const text = value.toPrecision(digits);
    const [mantissa, power] = text.split("e");
    const short = mantissa.includes(".") ? mantissa.replace(/\.?0+$/, "") : mantissa;
    return power ? `${short}e${power}` : short;
  }

  /** A share as percent; what is below `least` is said to be so. */
  function percent(share, least = 0) {
    const value = 100 * share;
    if (!(value <= 9999)) return "> 9999 %";
    if (share > 0 && share < least) return `< ${number(100 * least)} %`;
    if (value >= 999.5) return `${value.toFixed(0)} %`;
    return value >= 0.1 || value === 0 ? `${value.toFixed(1)} %` : `${number(value, 1)} %`;
  }

  const unit = (name) => UNITS[name] ?? name;

  function missed(rate) {
    if (rate < 1e-12) return "fewer than one in 10¹² missed";
    return rate >= 0.01 ? `${percent(rate)} missed` : `1 in ${number(1 / rate, 3)} missed`;
  }

  // --- recipes -----------------------------------------------------------------------------------------------------

  /** A TOML basic string: a JSON string, but for the delete character. */
  const quoted = (text) => JSON.stringify(text).replaceAll("\x7f", "\\u007f");
  const key = (id) => (/^[A-Za-z0-9_-]+$/.test(id) ? id : quoted(id));
  const float = (value) => (Number.isInteger(value) && Math.abs(value) < 1e15 ? value.toFixed(1) : String(value));
  /** One line of a comment: no control or direction characters. */
  const comment = (text) => `# ${text.replace(/[\p{C}\p{Zl}\p{Zp}]+/gu, " ")}`;

  const value = (item) => (typeof item === "string" ? quoted(item) : float(item));
  const drives = (title, shot) => [
    title, ...Object.entries(shot.drive_ma).filter(([, ma]) => ma > 0).map(([id, ma]) => `${key(id)} = ${float(ma)}`),
  ];

  /** A setting as the text of a recipe file, headed by comment lines; numbers keep all their digits. */
  function recipe(setting, comments) {
    const shots = setting.shots ?? [], counts = Object.entries(setting.emitters ?? {});
    const words = ["camera", "channel", "gain_db", "filter", "f_number", ...(shots.length ? [] : ["exposure_us"])];
    return [
      ...comments.map(comment),
      ...words.map((word) => `${word} = ${value(setting[word])}`),
      ...(shots.length ? [] : ["", ...drives("[drive_ma]", setting)]),
      ...(counts.length ? ["", "[emitters]", ...counts.map(([id, count]) => `${key(id)} = ${count}`)] : []),
      ...shots.flatMap((shot) => ["", "[[shot]]", `exposure_us = ${value(shot.exposure_us)}`, ...drives("[shot.drive_ma]", shot)]),
      "",
    ].join("\n");
  }

  Object.assign(live, { number, percent, unit, missed, recipe });
})();
