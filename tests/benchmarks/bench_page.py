"""The report in a browser: size of the file, time to open it, and work of each update of its live page."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from bench_registry import Figure, benchmark, timed
from browser import Browser
from live_shell import by_library, by_page, differences, random_settings
from parametric_catalog import parametric_catalog, parametric_problem

from codesign import solve
from codesign.report.page.document import report_html

#: Bars hold from this number of LEDs on.
FULL_LEDS = 60
#: Largest file, longest loading, longest update; and how far the page may be from the library.
LARGEST_BYTES, LOADED_MS, UPDATE_MS, ALLOWED = 3e6, 1000.0, 16.0, 1e-6

#: Lights all LEDs, then changes one thing after another and lays the page out; times in ms. [median, 95 % below]
_UPDATES = """
const page = codesignLive.page, { model } = page, count = arguments[0];
page.setting = { ...page.setting, drive_ma: Object.fromEntries(model.leds.map((led) => [led.id, 100])) };
page.render();
const timed = (change) => {
  const times = [];
  for (let k = 0; k < count; k++) {
    const started = performance.now();
    page.setting = { ...page.setting, ...change(k) };
    page.render();
    document.body.offsetHeight;
    times.push(performance.now() - started);
  }
  times.sort((a, b) => a - b);
  return [times[count >> 1], times[Math.floor(0.95 * count)]];
};
const drive = (k) => ({ drive_ma: { ...page.setting.drive_ma, [model.leds[k % model.leds.length].id]: 50 + k } });
const parts = (k) => ({ filter: model.filters[k % model.filters.length].id,
  camera: model.cameras[k % model.cameras.length].id });
return [timed(drive), timed((k) => ({ air_c: 20 + k / 10 })), timed(parts)];
"""


@benchmark(
    tiny={"leds": 4, "filters": 3, "cameras": 2, "samples": 3, "repeats": 3},
    full={"leds": FULL_LEDS, "filters": 50, "cameras": 8, "samples": 8, "repeats": 100},
)
def live_page(folder: Path, *, leds: int, filters: int, cameras: int, samples: int, repeats: int) -> list[Figure]:
    """The whole report of a catalogue, filters at the sensor, ambient light; every LED lit while it is measured."""
    catalog = parametric_catalog(folder, leds=leds, filters=filters, cameras=cameras, samples=samples)
    ambient = [{"illuminant": "D65", "illuminance_lx": 300}]
    problem = parametric_problem(
        catalog,
        folder,
        scene={"target": "target", "background": "background", "ambient": ambient},
        optics={"f_numbers": [2.8, 4.0, 5.6], "magnification": 0.1, "filter_position": "sensor"},
    )
    solution = solve(problem, gap=0.01, alternatives=2)
    page, seconds = timed(report_html, solution)
    path = folder / "report.html"
    path.write_text(page, encoding="utf-8")
    full = leds >= FULL_LEDS
    size = path.stat().st_size
    figures = [
        Figure(what="report written", value=seconds, unit="s"),
        Figure(what="report, size", value=size / 1e6, unit="MB", at_most=LARGEST_BYTES / 1e6),
    ]
    try:
        browser = Browser(folder)
    except pytest.skip.Exception as reason:
        return [*figures, Figure(what=f"not measured: {reason}", value=0.0, unit="")]
    try:
        return [*figures, *_in_browser(browser, path, problem, repeats, full)]
    finally:
        browser.close()


def _in_browser(browser: Browser, path: Path, problem, repeats: int, full: bool) -> list[Figure]:
    loads = []
    for _ in range(min(repeats, 5)):
        browser.open(path)
        loads.append(browser.run("return performance.getEntriesByType('navigation')[0].loadEventEnd"))
    settings = list(random_settings(problem, 5, np.random.default_rng(1)))
    found = zip(by_page(browser, settings), settings, strict=True)
    off = max(max(differences(page, by_library(problem, setting)).values()) for page, setting in found)
    figures = [
        Figure(what="report loaded", value=float(np.median(loads)), unit="ms", at_most=LOADED_MS if full else None),
        Figure(what="largest difference from the library", value=off, unit="1", at_most=ALLOWED),
    ]
    for what, (median, most) in zip(
        ("one current", "air", "filter, camera"), browser.run(_UPDATES, repeats), strict=True
    ):
        bar = UPDATE_MS if full else None
        figures.append(Figure(what=f"{what}: update, median", value=median, unit="ms", at_most=bar))
        figures.append(Figure(what=f"{what}: 95 of 100 updates within", value=most, unit="ms"))
    return figures
