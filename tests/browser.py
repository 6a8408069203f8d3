"""A headless browser for tests of pages: what a page logs, asks of the network, shows and prints.

Tests take the fixture ``browser`` of ``conftest.py``; one browser serves the whole run, a page is loaded per test::

    def test_page_is_quiet(browser, tmp_path):
        browser.open(tmp_path / "report.html", width=390)
        assert browser.console() == [] and browser.requests() == []
"""

from __future__ import annotations

import base64
import json
import os
import shutil
from pathlib import Path
from typing import Any

import pytest

#: Programs that will do, first found first.
BROWSERS = ("chromium", "chromium-browser", "google-chrome", "google-chrome-stable", "chrome")
DRIVERS = ("chromedriver", "chromium.chromedriver")
FLAGS = (
    "--headless",
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--disable-dev-shm-usage",
    "--hide-scrollbars",
    "--force-device-scale-factor=1",
)
#: A4 in the unit of the print command. [inch]
A4 = {"paperWidth": 8.27, "paperHeight": 11.69}

#: Elements that stick out of the page, innermost first; boxes that scroll on their own may.
_STICKING_OUT = """
const edge = document.documentElement.clientWidth + 0.5, found = [];
const scrollsAlone = e => e.tagName === 'SELECT' || /(auto|scroll|hidden|clip)/.test(getComputedStyle(e).overflowX);
for (const element of document.body.querySelectorAll('*')) {
  const box = element.getBoundingClientRect();
  const right = scrollsAlone(element) ? box.right : Math.max(box.right, box.left + element.scrollWidth);
  if (box.width === 0 || right <= edge) continue;
  let parent = element, scrolls = false;
  while ((parent = parent.parentElement) && parent !== document.body)
    if (scrollsAlone(parent)) scrolls = true;
  if (!scrolls) found.push(element.tagName + '.' + element.getAttribute('class') + ': '
    + (element.textContent || '').trim().slice(0, 40));
}
return found.reverse().slice(0, 5);
"""


def _program(names: tuple[str, ...]) -> str | None:
    return next((found for name in names if (found := shutil.which(name))), None)


class Browser:
    """One headless browser; skips the test that asks for it where there is none, and says what is missing."""

    def __init__(self, folder: Path) -> None:
        webdriver = pytest.importorskip("selenium.webdriver", reason="selenium is not installed")
        program, driver = _program(BROWSERS), _program(DRIVERS)
        if program is None or driver is None:
            pytest.skip(f"no {'Chromium browser' if program is None else 'chromedriver'} on this machine")
        options = webdriver.ChromeOptions()
        options.binary_location = program
        for flag in (*FLAGS, f"--user-data-dir={folder / 'profile'}"):
            options.add_argument(flag)
        options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
        service = webdriver.ChromeService(executable_path=driver, log_output=os.devnull)
        self.driver = webdriver.Chrome(options=options, service=service)
        self.driver.set_page_load_timeout(60)
        self.url = ""
        self._console: list[dict[str, Any]] = []
        self._events: list[dict[str, Any]] = []

    def open(self, path: str | Path, *, width: int = 1280, height: int = 900, dark: bool = False) -> None:
        """Load a file, with nothing left from the page before; ``width`` and ``height`` in CSS pixels."""
        self.driver.get("about:blank")
        self.resize(width, height)
        self.scheme(dark=dark)
        self._collect()
        self._console.clear()
        self._events.clear()
        self.url = Path(path).resolve().as_uri()
        self.driver.get(self.url)

    def resize(self, width: int, height: int = 900) -> None:
        """Set the size of the view; narrower than any window can be is possible."""
        size = {"width": width, "height": height, "deviceScaleFactor": 1, "mobile": False}
        self.cdp("Emulation.setDeviceMetricsOverride", **size)

    def scheme(self, *, dark: bool = False, media: str = "") -> None:
        """Ask for dark or light colours; ``media="print"`` shows the page as printed."""
        feature = {"name": "prefers-color-scheme", "value": "dark" if dark else "light"}
        self.cdp("Emulation.setEmulatedMedia", media=media, features=[feature])

    def cdp(self, command: str, **arguments: Any) -> dict[str, Any]:
        """Send a command of the browser's debugging protocol."""
        return self.driver.execute_cdp_cmd(command, arguments)

    def run(self, script: str, *arguments: Any) -> Any:
        """Run a script in the page (a function body: say ``return``)."""
        return self.driver.execute_script(script, *arguments)

    def _collect(self) -> None:
        self._console += self.driver.get_log("browser")
        self._events += [json.loads(entry["message"])["message"] for entry in self.driver.get_log("performance")]

    def console(self) -> list[str]:
        """What the page logged since it was opened, breaches of its security policy included."""
        self._collect()
        return [f"{entry['level']}: {entry['message']}" for entry in self._console]

    def requests(self) -> list[str]:
        """Addresses the page asked for since it was opened, but for itself and data it carries."""
        self._collect()
        sent = [e["params"] for e in self._events if e["method"] == "Network.requestWillBeSent"]
        urls = [event["request"]["url"] for event in sent]
        return [url for url in urls if url.split("#")[0] != self.url and not url.startswith(("data:", "about:"))]

    def sideways(self) -> int:
        """How far the page can be scrolled sideways. [CSS pixel]"""
        script = "const page = document.documentElement; return page.scrollWidth - page.clientWidth"
        return int(self.run(script))

    def sticking_out(self) -> list[str]:
        """Elements wider than the page, for messages of tests."""
        return self.run(_STICKING_OUT)

    def screenshot(self, path: str | Path, *, whole: bool = True) -> Path:
        """Write a PNG of the whole page, or of what is in view."""
        shot = self.cdp("Page.captureScreenshot", format="png", captureBeyondViewport=whole)
        Path(path).write_bytes(base64.b64decode(shot["data"]))
        return Path(path)

    def settle(self) -> None:
        """Wait until fonts are there and the page is drawn."""
        frames = "requestAnimationFrame(() => requestAnimationFrame(done))"
        self.driver.execute_async_script(f"const [done] = arguments; document.fonts.ready.then(() => {frames})")

    def pdf(self, path: str | Path, **options: Any) -> Path:
        """Print to a file, on A4 unless the page says otherwise."""
        self.settle()
        wanted = {"printBackground": False, "preferCSSPageSize": True, **A4, **options}
        Path(path).write_bytes(base64.b64decode(self.cdp("Page.printToPDF", **wanted)["data"]))
        return Path(path)

    def close(self) -> None:
        """End the browser."""
        self.driver.quit()
