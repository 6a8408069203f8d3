"""The one-file report in a browser: quiet, without network, nothing sticking out, fit for print and keyboard."""

import re
from importlib import resources

import pytest
from demo_names import DEMOS
from hostile import MARK, STRINGS, hostile_problem

from codesign import solve
from codesign.report.output import plain
from codesign.report.page.document import report_html

#: Views: a desk, a phone; and the width of the text of an A4 page in CSS pixels (180 mm).
DESK, PHONE, PAPER = (1280, 900), (390, 844), 680
#: Widths of tables that do not scroll on their own against the room they have.
_TOO_WIDE = """
return [...document.querySelectorAll('table')].filter(t => !t.closest('.scroller') && t.offsetParent !== null
  && t.scrollWidth > t.parentElement.clientWidth + 1).map(t => t.caption.textContent)
"""
#: Text cut off by a box that hides what does not fit.
_CLIPPED = """
const meant = 'svg, canvas, select, thead, .hidden, .live-hidden';
return [...document.querySelectorAll('main *')].filter(e => !e.closest(meant)
  && getComputedStyle(e).overflowX === 'hidden' && e.scrollWidth > e.clientWidth + 1).map(e => e.outerHTML.slice(0, 80))
"""


def written(html, folder):
    path = folder / "report.html"
    path.write_text(html, encoding="utf-8")
    return path


@pytest.fixture(scope="module")
def page(reported, tmp_path_factory):
    return written(reported("yellow-stain"), tmp_path_factory.mktemp("report"))


def test_helper_notices_errors_requests_and_overflow(browser, tmp_path):
    bad = "<!doctype html><img src='http://127.0.0.1:65000/x.png'><script>console.error('b')</script><pre>" + "w" * 400
    browser.open(written(bad, tmp_path), width=390)
    assert browser.requests() == ["http://127.0.0.1:65000/x.png"]
    assert any('"b"' in entry for entry in browser.console())
    assert browser.sideways() > 1000 and "PRE" in browser.sticking_out()[0]


@pytest.mark.parametrize("name", DEMOS)
def test_page_is_quiet_and_fits(name, browser, reported, tmp_path):
    browser.open(written(reported(name), tmp_path), width=DESK[0], height=DESK[1])
    assert browser.console() == []
    assert browser.requests() == []
    for width, height in (DESK, PHONE):
        browser.resize(width, height)
        browser.settle()
        assert (browser.sideways(), browser.sticking_out(), browser.run(_TOO_WIDE), browser.run(_CLIPPED)) == (
            0, [], [], [],
        ), width  # fmt: skip
        bottom = browser.run("return document.querySelector('.glance').getBoundingClientRect().bottom")
        assert bottom <= height, "the four answers are not on the first screen"
    browser.resize(PAPER)
    browser.scheme(media="print")
    browser.settle()
    assert (browser.sideways(), browser.sticking_out()) == (0, [])


def test_printed_pages_carry_title_and_number_and_no_controls(browser, page, tmp_path):
    from pypdf import PdfReader

    browser.open(page)
    pages = PdfReader(browser.pdf(tmp_path / "r.pdf")).pages
    texts = [" ".join(sheet.extract_text().split()) for sheet in pages]
    assert 4 <= len(pages) <= 16
    for number, (sheet, text) in enumerate(zip(pages, texts, strict=True), start=1):
        assert (round(sheet.mediabox.width), round(sheet.mediabox.height)) == (595, 842)
        assert "Yellow stain on white cloth" in text and f"{number} / {len(pages)}" in text
    whole = " ".join(texts)
    for hidden in ("Skip to", "Save as", "Try it", "Add an LED"):
        assert hidden not in whole
    for shown in ("What to set", "Radiation screening", "cloth-stain-yellow", "well_headroom", "required_cnr = 4.0"):
        assert shown in whole


def test_policy_stops_other_scripts_and_requests(browser, page):
    browser.open(page)
    browser.run(
        "const s = document.createElement('script'); s.textContent = 'window.stranger = 1'; document.body.append(s);"
        "const i = document.createElement('img'); i.src = 'http://127.0.0.1:65000/x.png'; document.body.append(i);"
    )
    assert browser.run("return window.stranger === undefined")
    blocked = [entry for entry in browser.console() if "Content Security Policy" in entry]
    assert len(blocked) == 2, "one for the script, one for the picture"


def test_first_stop_of_the_keyboard_skips_to_the_recipe(browser, page):
    browser.open(page)
    browser.cdp("Input.dispatchKeyEvent", type="keyDown", key="Tab", code="Tab", windowsVirtualKeyCode=9)
    assert browser.run("return document.activeElement.getAttribute('href')") == "#recipe"
    assert browser.run("return document.activeElement.getBoundingClientRect().left") >= 0


def test_dark_screens_get_dark_paper_and_print_stays_light(browser, page):
    colours = "const s = getComputedStyle(document.documentElement); return [s.backgroundColor, s.color]"

    def lightness(rgb):
        return sum(map(int, re.findall(r"\d+", rgb)[:3]))

    browser.open(page)
    ground, ink = map(lightness, browser.run(colours))
    assert ground > 600 > 300 > ink
    browser.scheme(dark=True)
    ground, ink = map(lightness, browser.run(colours))
    assert ground < 150 < 500 < ink
    browser.scheme(dark=True, media="print")
    assert lightness(browser.run(colours)[1]) < 300


def test_colours_come_from_the_house_only():
    css = (resources.files("codesign.report.page") / "assets" / "report.css").read_text(encoding="utf-8")
    assert "var(--ink)" in css
    assert not re.findall(r"#[0-9a-fA-F]{3,8}\b|rgba?\(|hsla?\(|\b(?:white|black|red|blue|gr[ae]y)\s*[;}]", css)


def test_hostile_texts_are_shown_as_they_are(browser, tmp_path):
    found = solve(hostile_problem(tmp_path), alternatives=1)
    browser.open(written(report_html(found, command=STRINGS["markup"]), tmp_path), width=390)
    title = plain(found.problem.spec.title)
    assert browser.console() == [] and browser.requests() == []
    assert browser.run("return document.querySelector('h1').textContent") == title
    assert browser.run("return document.title").startswith(title)
    assert browser.run(f"return document.body.innerText.split('{MARK}').length") > 20
    assert (browser.sideways(), browser.sticking_out()) == (0, [])
    direction = "return getComputedStyle(document.querySelector('h1 bdi')).unicodeBidi"
    assert browser.run(direction) == "isolate"
