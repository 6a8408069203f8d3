"""The live page in a browser: every control acts, nothing typed breaks it, recipes come out, nothing leaves it."""

import json
import re
from dataclasses import replace

import numpy as np
import pytest
from live_shell import by_library, special, written

from codesign import evaluate, load_recipe
from codesign.report.page.live import live_fragment

#: Every control of a page without build limits, by id.
SLIDERS = ("exposure", "air", "sensor", "ambient")
SELECTS = ("channel", "camera", "gain", "stop", "filter")


class Live:
    """The live page that is open, by what a person does and reads."""

    def __init__(self, browser) -> None:
        self.browser = browser

    def text(self, name: str) -> str:
        """What an element says now that all frames are drawn."""
        self.settle()
        return self.browser.run("return document.getElementById(`live-${arguments[0]}`).textContent", name)

    def settle(self) -> None:
        """Wait for the next frame."""
        self.browser.driver.execute_async_script("requestAnimationFrame(() => requestAnimationFrame(arguments[0]))")

    def rest(self) -> None:
        """Wait until the recipe is written out."""
        self.browser.driver.execute_async_script("setTimeout(arguments[0], 250)")

    def element(self, name: str):
        return self.browser.driver.find_element("id", f"live-{name}")

    def press(self, name: str, *keys: str) -> None:
        """Press keys on an element."""
        self.element(name).send_keys(*keys)

    def type(self, name: str, value: str) -> None:
        """Type a number in place of the one there."""
        from selenium.webdriver.common.keys import Keys

        self.element(name).send_keys(Keys.CONTROL, "a")
        self.element(name).send_keys(value)

    def click(self, name: str) -> None:
        self.browser.run("document.getElementById(`live-${arguments[0]}`).click()", name)
        self.settle()

    def choose(self, name: str, value: str) -> None:
        """Choose an entry of a list as a person does: value, then the event."""
        self.browser.run(
            "const list = document.getElementById(`live-${arguments[0]}`); list.value = arguments[1];"
            "list.dispatchEvent(new Event('change', {bubbles: true}))",
            name, value,
        )  # fmt: skip
        self.settle()

    @property
    def cnr(self) -> float:
        self.settle()
        return self.browser.run("return codesignLive.page.result.cnr")

    @property
    def setting(self) -> dict:
        self.settle()
        return json.loads(self.browser.run("return JSON.stringify(codesignLive.page.setting)"))


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    return tmp_path_factory.mktemp("live")


@pytest.fixture
def page(browser, solved, folder) -> Live:
    """The page of the bruise demo: several LEDs, filters, f-numbers, strobed, with ambient light."""
    browser.open(written(live_fragment(solved("bruise")), folder))
    return Live(browser)


# --- what it shows first -----------------------------------------------------------------------------------------


def test_page_opens_on_the_recipe_quietly(page, solved):
    solution = solved("bruise")
    assert page.cnr == pytest.approx(solution.recipe.cnr, rel=1e-9)
    assert page.text("cnr") == f"{solution.recipe.cnr:.4g}"
    assert page.text("share").endswith(f"of the proven best, CNR {solution.certificate.bound:.5g}")
    assert page.text("required").startswith("needed CNR 4: met")
    assert page.text("verdict") == f"✓ all {len(solution.recipe.limits)} limits hold"
    assert page.text("failed") == ""
    assert page.browser.console() == [] and page.browser.requests() == []


def test_it_works_in_the_report_under_its_policy(browser, reported, solved, tmp_path):
    path = tmp_path / "report.html"
    path.write_text(reported("bruise"), encoding="utf-8")
    browser.open(path)
    page = Live(browser)
    page.type("exposure", "500")
    assert page.cnr == pytest.approx(by_library(solved("bruise").problem, page.setting).cnr, rel=1e-9)
    assert page.browser.run("return document.getElementById('live-fill').getBoundingClientRect().width") > 10
    assert browser.console() == [] and browser.requests() == []


def test_optimum_and_recipe_can_be_gone_back_to(page, solved):
    solution = solved("bruise")
    page.click("to-optimum")
    assert page.cnr == pytest.approx(solution.optimum.cnr, rel=1e-9)
    page.type("exposure", "500")
    page.click("to-recipe")
    assert page.cnr == pytest.approx(solution.recipe.cnr, rel=1e-9)


def test_runner_up_is_a_start_too(page, solved):
    other = solved("bruise").alternatives[0]
    page.choose("other", "0")
    assert page.setting["camera"] == other.design.camera and page.setting["filter"] == other.design.filter
    assert page.cnr == pytest.approx(evaluate(solved("bruise").problem, other.design).cnr, rel=1e-9)


# --- controls ----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", SLIDERS)
def test_sliders_act_by_keyboard(page, name):
    from selenium.webdriver.common.keys import Keys

    cards = ("greys", "limits", "noise")
    before, shown = page.cnr, [page.text(card) for card in cards]
    page.press(f"{name}-slider", Keys.PAGE_UP)
    assert page.cnr != before
    assert [page.text(card) for card in cards] != shown


@pytest.mark.parametrize("name", SELECTS)
def test_lists_act(page, solved, name):
    before = page.setting
    options = page.browser.run(
        "return [...document.getElementById(`live-${arguments[0]}`).options].map(o => o.value)", name
    )
    other = next((value for value in options if value != page.element(name).get_attribute("value")), None)
    if other is None:
        assert len(options) == 1
        return
    page.choose(name, other)
    assert page.setting != before
    assert page.cnr == pytest.approx(by_library(solved("bruise").problem, page.setting).cnr, rel=1e-9)


def test_currents_act_by_slider_and_number(page, solved):
    from selenium.webdriver.common.keys import Keys

    led = next(iter(solved("bruise").recipe.design.drive_ma))
    slider = page.browser.driver.find_element("css selector", f"[aria-label='Current of {led}, slider']")
    slider.send_keys(Keys.ARROW_DOWN)
    step = solved("bruise").problem.spec.lighting.drive_step_ma
    assert page.setting["drive_ma"][led] == solved("bruise").recipe.design.drive_ma[led] - step
    page.type(f"led-{led}", "123.5")
    assert page.setting["drive_ma"][led] == 123.5
    assert page.cnr == pytest.approx(by_library(solved("bruise").problem, page.setting).cnr, rel=1e-9)


def test_led_can_be_added_and_taken_out_and_the_focus_goes_along(page):
    lit = set(page.setting["drive_ma"])
    led = page.element("add-led").get_attribute("value")
    page.click("add")
    assert page.browser.run("return document.activeElement.getAttribute('aria-label')") == f"Current of {led}, slider"
    page.type(f"led-{led}", "100")
    assert set(page.setting["drive_ma"]) == lit | {led}
    page.browser.driver.find_element("css selector", f"[aria-label='Take {led} out']").click()
    assert set(page.setting["drive_ma"]) == lit
    assert page.browser.run("return document.activeElement.id") == "live-add-led"


@pytest.mark.parametrize(
    ("name", "value", "words"),
    [("exposure", "-5", "above 0"), ("exposure", "", "must be a number"), ("air", "-300", "above -273.15 and at most"),
     ("led-nir-850-a", "1e9", "from 0 to"), ("ambient", "-1", "from 0")],
)  # fmt: skip
def test_number_that_cannot_be_is_refused_where_it_is_typed(page, name, value, words):
    before = page.setting
    page.type(name, value or "\ue003")
    if not value:
        page.browser.run(
            "const i = document.getElementById('live-exposure'); i.value=''; i.dispatchEvent(new Event('input'))"
        )
    field = page.element(name)
    assert field.get_attribute("aria-invalid") == "true"
    note = page.browser.driver.find_element("id", field.get_attribute("aria-describedby"))
    assert words in note.text
    assert page.setting == before or value  # digits typed on the way may count, the refused end does not
    page.browser.run("document.activeElement.blur()")
    page.settle()
    assert page.element(name).get_attribute("aria-invalid") is None
    force = {"exposure": "exposure_us", "air": "air_c", "ambient": "ambient_factor"}.get(name)
    value = page.setting[force] if force else page.setting["drive_ma"]["nir-850-a"]
    assert float(page.element(name).get_attribute("value")) == value


def test_every_control_is_reached_by_tab_and_named_and_its_focus_shows(page):
    from selenium.webdriver.common.keys import Keys

    page.browser.run("document.activeElement.blur(); window.scrollTo(0, 0)")
    wanted = page.browser.run(
        "return [...document.querySelectorAll('#live :is(input, select, button, textarea)')]"
        ".filter(e => e.checkVisibility() && !e.disabled).length"
    )
    body, reached = page.browser.driver.find_element("css selector", "body"), []
    body.send_keys(Keys.TAB)
    for _ in range(wanted + 5):
        found = page.browser.run(
            "const e = document.activeElement; if (!e.closest('#live')) return null;"
            "const named = e.labels?.length || e.getAttribute('aria-label') || e.textContent.trim();"
            "return [e.id || e.getAttribute('aria-label'), Boolean(named), getComputedStyle(e).outlineStyle]"
        )
        if found is None or (reached and found == reached[0]):
            break
        reached.append(found)
        page.browser.driver.switch_to.active_element.send_keys(Keys.TAB)
    assert len(reached) == wanted
    assert all(named and outline != "none" for _, named, outline in reached)


# --- what is proven, and what is not -----------------------------------------------------------------------------


@pytest.mark.parametrize(("name", "value"), [("air", "60"), ("sensor", "70"), ("ambient", "3")])
def test_bound_is_not_claimed_for_other_surroundings(page, name, value):
    page.type(name, value)
    assert "holds for the problem's own surroundings, not for these" in page.text("share")
    assert "live-away" in page.element("strip").get_attribute("class")
    page.click("own-surroundings")
    assert "of the proven best" in page.text("share")


def test_search_stopped_without_a_bound_claims_none(browser, solved, folder):
    solution = solved("bruise")
    stopped = replace(solution, certificate=replace(solution.certificate, bound=np.inf), status="stopped")
    browser.open(written(live_fragment(stopped), folder))
    assert "no bound was proven" in Live(browser).text("share")
    assert browser.console() == []


def test_more_than_the_bound_is_said_to_miss_limits(page):
    page.type("exposure", "6000")
    assert page.cnr > page.browser.run("return codesignLive.page.data.bound.cnr")
    assert page.text("share").endswith("only with limits missed")
    assert page.text("verdict").startswith("✗") and "limits missed: " in page.text("verdict")
    first = page.browser.run("return document.querySelector('#live-limits li').textContent")
    assert first.startswith("✗ missed: ")
    assert "✗ saturated: " in page.text("greys")
    assert page.text("sign") == "✗ not to be had: the camera saturates"


def test_summary_is_read_out_once_things_rest(page):
    page.type("exposure", "500")
    assert page.browser.run("return document.getElementById('live-status').getAttribute('aria-live')") == "polite"
    said = page.browser.driver.execute_async_script(
        "const done = arguments[0], place = document.getElementById('live-status'), heard = [];"
        "new MutationObserver(() => heard.push(place.textContent)).observe(place, {childList: true});"
        "const slider = document.getElementById('live-exposure-slider');"
        "for (let k = 0; k < 10; k++) setTimeout(() => { slider.value = 400 + k;"
        "  slider.dispatchEvent(new Event('input')) }, 20 * k);"
        "setTimeout(() => done(heard), 1500)"
    )
    assert len(said) == 1
    assert said[0].startswith("CNR ") and "limits" in said[0]


# --- pictures ----------------------------------------------------------------------------------------------------

_PIXELS = "return [...document.getElementById('live-view-now').getContext('2d').getImageData(0, 0, 168, 112).data]"


def test_dots_of_the_view_stand_still_and_show_the_predicted_means(page):
    once = page.browser.run(_PIXELS)
    page.browser.run("codesignLive.page.render()")
    assert page.browser.run(_PIXELS) == once
    page.click("stretch")
    grey = np.array(page.browser.run(_PIXELS)).reshape(112, 168, 4)[:, :, 0]
    shares = page.browser.run("return codesignLive.page.result.surfaces.map(s => s.saturation_share)")
    # The patch is dark or light as the surfaces are: target in the middle, background in the corners. Grey 0 to 255.
    assert grey[46:66, 74:94].mean() == pytest.approx(255 * shares[0], abs=1.0)
    assert grey[:15, :].mean() == pytest.approx(255 * shares[1], abs=1.0)


def test_spectra_follow_parts_and_drives(page):
    curves = (
        "return ['light', 'seen', 'target', 'below']"
        ".map(name => document.querySelector(`.live-plot .live-${name}`).getAttribute('d'))"
    )
    before = page.browser.run(curves)
    page.choose("filter", "none")
    after = page.browser.run(curves)
    assert [a == b for a, b in zip(before, after, strict=True)] == [True, False, True, False]
    label = page.browser.run("return document.querySelector('#live-spectra svg').getAttribute('aria-label')")
    assert re.search(r"LED light is strongest at 8\d\d nm", label)


# --- recipes -----------------------------------------------------------------------------------------------------


def carried_out(live: Live, tmp_path):
    """The recipe in the text area, read as `cnr check` reads it."""
    path = tmp_path / "tried.toml"
    live.rest()
    path.write_text(live.element("toml").get_attribute("value"), encoding="utf-8")
    return load_recipe(path)


def test_recipe_taken_along_is_read_by_check_and_does_the_same(page, solved, tmp_path):
    page.type("exposure", "777.25")
    page.choose("stop", "2.8")
    design = carried_out(page, tmp_path)
    performance = evaluate(solved("bruise").problem, design)
    assert design.exposure_us == 777.25 and design.f_number == 2.8
    assert performance.cnr == pytest.approx(page.cnr, rel=1e-9)


def test_copy_says_that_it_was_done(page):
    page.browser.cdp("Browser.grantPermissions", permissions=["clipboardReadWrite", "clipboardSanitizedWrite"])
    page.element("copy").click()
    page.settle()
    assert page.text("copied") == "Copied."
    read = "const done = arguments[0]; navigator.clipboard.readText().then(done, (e) => done(String(e)))"
    assert page.browser.driver.execute_async_script(read) == page.element("toml").get_attribute("value")


def test_recipe_with_shots_comes_out_and_each_shot_can_be_set(browser, folder, tmp_path):
    solution = special("shots")
    browser.open(written(live_fragment(solution), folder))
    page = Live(browser)
    page.click("shot-1")
    page.type("exposure", "1500")
    design = carried_out(page, tmp_path)
    assert [shot.exposure_us for shot in design.shots] == [solution.recipe.design.shots[0].exposure_us, 1500.0]
    assert evaluate(solution.problem, design).cnr == pytest.approx(page.cnr, rel=1e-9)
    assert "best weights here: shot 1" in page.text("weights")


def test_stacked_filters_and_numbers_of_emitters_can_be_set(browser, folder, tmp_path):
    built = special("built")
    browser.open(written(live_fragment(built), folder))
    page = Live(browser)
    page.choose("filter", "bp-450-30")
    page.choose("second", "sp-650")
    led = next(iter(page.setting["drive_ma"]))
    page.type(f"count-{led}", "2")
    design = carried_out(page, tmp_path)
    assert built.problem.filters.find(design.filter) is not None and "bp-450-30" in design.filter
    assert design.emitters[led] == 2
    performance = evaluate(built.problem, design)
    assert performance.cnr == pytest.approx(page.cnr, rel=1e-9)
    assert page.browser.run("return document.querySelectorAll('#live-pairs li').length") == 2


HOSTILE = '<img src=x onerror="document.title=1"></script>"\\\u202e\x7f\u2028é\'""" # [x]'


def test_names_are_text_wherever_they_come_out(browser, solved, folder, tmp_path):
    solution = solved("bruise")
    problem = solution.problem
    odd = replace(problem, spec=problem.spec.model_copy(update={"title": HOSTILE}), where=HOSTILE)
    browser.open(written(live_fragment(replace(solution, problem=odd)), folder))
    page = Live(browser)
    assert page.cnr == pytest.approx(solution.recipe.cnr, rel=1e-9)
    assert browser.run("return document.title") == "Live page"
    assert browser.run("return document.querySelectorAll('img').length") == 0
    # Names of channels may hold anything but +; the text must be TOML whatever they are.
    text = browser.run(
        "return codesignLive.recipe({...codesignLive.page.setting, channel: arguments[0]}, [arguments[0]])", HOSTILE
    )
    path = tmp_path / "odd.toml"
    path.write_text(text, encoding="utf-8")
    assert load_recipe(path).channel == HOSTILE.strip()
    assert browser.console() == []


# --- everywhere --------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("width", "dark"), [(320, False), (390, True), (800, False), (1280, True)])
def test_page_fits_narrow_and_wide_screens(browser, solved, folder, width, dark):
    browser.open(written(live_fragment(solved("thin-film")), folder), width=width, dark=dark)
    Live(browser).settle()
    assert browser.sideways() == 0, browser.sticking_out()
    clipped = browser.run(
        "return [...document.querySelectorAll('#live text')].filter(t => { const a = t.getBoundingClientRect(),"
        "b = t.ownerSVGElement.getBoundingClientRect(); return a.left < b.left - 1 || a.right > b.right + 1 }).length"
    )
    assert clipped == 0


def test_printed_page_says_the_settings_and_hides_the_controls(page):
    page.rest()
    page.browser.scheme(media="print")
    visible = "return document.getElementById(`live-${arguments[0]}`).checkVisibility()"
    assert not page.browser.run(visible, "form") and not page.browser.run(visible, "toml")
    assert page.browser.run(visible, "printed") and 'filter = "bp-850-60"' in page.text("printed")


def test_colours_are_only_those_of_the_house(solved):
    fragment = live_fragment(solved("bruise"))
    assert not re.search(r"#[0-9a-fA-F]{3,8}\b|rgba?\(|hsl", re.sub(r"#live-[a-z-]+", "", fragment.css))


def test_scripts_reach_for_nothing_outside_and_make_no_markup_of_text(solved):
    fragment = live_fragment(solved("bruise"))
    for script in fragment.scripts:
        assert not re.search(r"innerHTML|outerHTML|insertAdjacent|document\.write|eval\(|new Function", script)
        assert not re.search(
            r"fetch\(|XMLHttp|WebSocket|localStorage|sessionStorage|indexedDB|import\(|https?://(?!www\.w3\.org/2000/svg)",
            script,
        )
        assert "</script" not in script.lower() and "<!--" not in script
    assert "style=" not in fragment.html and " on" not in re.sub(r">[^<]*<", "><", fragment.html)
