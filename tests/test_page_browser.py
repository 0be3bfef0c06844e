"""The page driven in a real browser, headless: moved, copied, read with the keyboard only, and looked at for width.

Needs the system's Chromium with its driver (Debian: chromium, chromium-driver) and selenium; skipped where one is
missing. What the moved page says is held against `tolerance run` of the scenario text that it gives.
"""

from __future__ import annotations

import json
import shutil
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.special import ndtr, ndtri

from tests.page_examples import (
    EVERY_SHAPE,
    HOSTILE,
    SCENARIOS,
    SMALL,
    board_page,
    example_page,
    scenario_of,
    ten_layers,
    written,
)
from tolerance.paged import Page
from tolerance.scenario import Amount, load
from tolerance.study.decide import tighten
from tolerance.study.run import run

webdriver = pytest.importorskip("selenium.webdriver", reason="selenium is not installed")
CHROMIUM, DRIVER = shutil.which("chromium"), shutil.which("chromedriver")
pytestmark = [
    pytest.mark.skipif(CHROMIUM is None or DRIVER is None, reason="no Chromium with its driver on this machine"),
    pytest.mark.filterwarnings("ignore::ResourceWarning"),
]

PROMISED = 0.002  # absolute: how well `tolerance run` reproduces a yield of the page
PATIENCE = 60.0  # seconds
KEYS = {"tab": "\ue004", "right": "\ue014", "left": "\ue012", "enter": "\ue007", "space": "\ue00d", "control": "\ue009"}

Open = Callable[[Page], Any]


@pytest.fixture(scope="module")
def chromium() -> Iterator[Any]:
    from selenium.webdriver.chrome.service import Service

    options = webdriver.ChromeOptions()
    options.binary_location = CHROMIUM
    for argument in ("--headless=new", "--no-sandbox", "--disable-gpu", "--disable-dev-shm-usage",
                     "--window-size=1280,900"):
        options.add_argument(argument)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    driver = webdriver.Chrome(options=options, service=Service(DRIVER))
    yield driver
    driver.quit()


@pytest.fixture
def opened(chromium: Any, tmp_path: Path) -> Iterator[Open]:
    """Opens a page from disk; afterwards there must be no error on its console, and nothing fetched but the file."""
    paths: list[Path] = []

    def open_page(page: Page) -> Any:
        paths.append(written(page, tmp_path))
        chromium.get_log("browser")
        chromium.get_log("performance")
        chromium.get(paths[-1].as_uri())
        settle(chromium)
        return chromium

    yield open_page
    complaints = [entry for entry in chromium.get_log("browser") if entry["level"] in ("SEVERE", "WARNING")]
    assert complaints == []
    messages = [json.loads(entry["message"])["message"] for entry in chromium.get_log("performance")]
    fetched = [message["params"]["request"]["url"] for message in messages
               if message["method"] == "Network.requestWillBeSent"]
    assert fetched == [path.as_uri() for path in paths]


def settle(browser: Any) -> None:
    end = time.monotonic() + PATIENCE
    while browser.execute_script("return document.body.dataset.state") != "settled":
        assert time.monotonic() < end, browser.get_log("browser")
        time.sleep(0.02)


def put(browser: Any, **moved: Any) -> None:
    """Move the page from the run's state: whole lists, or pairs of number and value."""
    state = browser.execute_script("return tolerancePage.board.start()")
    for name, value in moved.items():
        if isinstance(value, dict):
            for number, one in value.items():
                state[name][number] = one
        else:
            state[name] = value
    browser.execute_script("tolerancePage.put(arguments[0])", state)
    settle(browser)


def told(browser: Any) -> tuple[float, list[float]]:
    """Yield of all lines together, and of each."""
    found = browser.execute_script(
        "const told = tolerancePage.judged();"
        "return [told.together.value, told.lines.map(line => line.yield.value)]")
    return found[0], found[1]


def hold_against_run(browser: Any) -> None:
    """What the page says, against `tolerance run` of what it copies."""
    together, lines = told(browser)
    result = run(scenario_of(browser.execute_script("return tolerancePage.scenario()")))
    assert together == pytest.approx(result.inside.value, abs=PROMISED)
    assert lines == pytest.approx([line.inside.value for line in result.lines], abs=PROMISED)


def test_unmoved_it_says_what_the_run_says(opened: Open) -> None:
    page = board_page("tram-stop-display-4-layer")
    browser = opened(page)
    together, lines = told(browser)
    assert together == page.result.inside.value
    assert lines == [line.inside.value for line in page.result.lines]
    hold_against_run(browser)


@pytest.mark.parametrize("moved", [
    {"factors": [2.0]}, {"factors": {0: 0.6, 3: 1.7}, "moves": {0: 0.3, 2: -0.4, 3: 0.2}, "widths": {0: -4, 2: 3},
                         "limit": 1.2, "limits": [1.0, 1.0, 1.25]},
], ids=["all doubled", "all kinds at once"])
def test_moved_it_says_what_the_copied_scenario_runs_to(opened: Open, moved: dict[str, Any]) -> None:
    browser = opened(board_page("tram-stop-display-4-layer"))
    number = browser.execute_script("return tolerancePage.data.variations.length")
    if isinstance(moved.get("factors"), list):
        moved = {**moved, "factors": moved["factors"] * number}
    put(browser, **moved)
    assert not browser.execute_script("return tolerancePage.board.refusals(tolerancePage.state()).length")
    hold_against_run(browser)


@pytest.mark.parametrize("moved", [
    {"factors": {0: 0.7, 1: 1.5, 2: 0.8, 3: 1.3, 5: 0.8, 6: 1.6, 8: 1.4}},
    {"moves": {0: 0.4, 1: -0.2, 2: 0.1, 3: 0.3, 4: -0.5, 5: 0.2, 6: 0.3, 7: -0.2}},
    {"widths": {0: 5, 1: -8, 2: 3}, "limit": 1.3, "limits": [1.0, 0.8, 1.0], "factors": {0: 1.4}},
], ids=["tolerances", "means", "widths and limits"])
def test_every_shape_and_kind_of_line_moves_as_it_runs(opened: Open, moved: dict[str, Any]) -> None:
    browser = opened(example_page(EVERY_SHAPE))
    put(browser, **moved)
    assert browser.execute_script("return tolerancePage.board.refusals(tolerancePage.state())") == []
    hold_against_run(browser)


def test_readings_are_moved_too(opened: Open) -> None:
    browser = opened(board_page("owl-box-camera-4-layer"))
    measured = browser.execute_script(
        "return tolerancePage.data.variations.map((each, number) => each.readings ? number : -1).filter(n => n >= 0)")
    put(browser, moves={measured[0]: 0.2}, factors={measured[1]: 0.6})
    text = browser.execute_script("return tolerancePage.scenario()")
    assert [each.shape for each in scenario_of(text).variations if each.shape == "measured"] == ["measured"] * (
        len(measured) - 1)
    hold_against_run(browser)


def test_the_cheapest_way_is_that_of_tighten(opened: Open) -> None:
    """Cost and offers as `tolerance tighten` proves them (its own front, over every set of offers)."""
    scenario = load(SCENARIOS / "tram-stop-display-4-layer.toml")
    offers = tighten(scenario).offers
    assert offers is not None
    assert offers.cheapest is not None
    browser = opened(board_page("tram-stop-display-4-layer"))
    found = browser.execute_script("const found = tolerancePage.offers().found; return [found.cost, found.mask]")
    assert found == [offers.cheapest.cost, sum(1 << number for number in offers.cheapest.offers)]


def test_normal_arithmetic_of_the_script(opened: Open) -> None:
    """Against scipy's normal distribution, far into both tails."""
    browser = opened(example_page(SMALL))
    places = np.concatenate([np.linspace(-8.0, 8.0, 161), [-30.0, 30.0]])
    shares = browser.execute_script("return arguments[0].map(Arithmetic.normalShare)", places.tolist())
    assert shares == pytest.approx(ndtr(places), rel=1e-13, abs=1e-300)
    below = np.concatenate([np.logspace(-12, -0.31, 60), np.linspace(0.5, 0.99, 20)])
    quantiles = browser.execute_script("return arguments[0].map(share => Arithmetic.normalQuantile(share))",
                                       below.tolist())
    assert quantiles == pytest.approx(ndtri(below), rel=1e-12, abs=1e-13)


def test_it_says_where_the_fit_ends(opened: Open) -> None:
    browser = opened(example_page(EVERY_SHAPE))
    warning = "return document.getElementById('beyond').hidden"
    assert browser.execute_script(warning)
    put(browser, factors={0: 1.2})
    assert browser.execute_script(warning)
    put(browser, factors={6: 2.0}, moves={6: 0.9})
    assert not browser.execute_script(warning)
    assert "P2.dk" in browser.execute_script("return document.getElementById('beyond').textContent")


def test_what_no_scenario_may_say_is_refused(opened: Open) -> None:
    """A half-width held with a Cpk must stay above the shift: the scenario format's own rule."""
    browser = opened(example_page(EVERY_SHAPE))
    slide = ("const slider = document.getElementById(arguments[0]); slider.value = arguments[1];"
             "slider.dispatchEvent(new Event('input')); slider.dispatchEvent(new Event('change'))")
    browser.execute_script(slide, "factor-5", "0.4")
    browser.execute_script(slide, "move-5", "0.8")
    assert browser.execute_script("return tolerancePage.state().moves[5]") == 0
    assert "P2.thickness" in browser.execute_script("return document.getElementById('refusal').textContent")
    assert float(browser.execute_script("return document.getElementById('move-5').value")) == 0.0
    settle(browser)


def test_keyboard_alone(opened: Open) -> None:
    """Tab to a slider, move it, undo it, move it again, reset, and copy: what a mouse does, without one."""
    from selenium.webdriver.common.action_chains import ActionChains

    browser = opened(board_page("tram-stop-display-4-layer"))

    def press(*keys: str) -> None:
        ActionChains(browser).send_keys(*(KEYS[key] for key in keys)).perform()

    def focus(identity: str) -> None:
        for _ in range(200):
            press("tab")
            if browser.execute_script("return document.activeElement.id") == identity:
                return
        pytest.fail(f"{identity} cannot be reached with the keyboard")

    start = told(browser)
    focus("limit")
    press(*["left"] * 20)
    settle(browser)
    assert browser.execute_script("return document.getElementById('limit').getAttribute('aria-valuetext')") \
        == "8 %, given 10 %"
    assert told(browser)[0] < start[0]
    ActionChains(browser).key_down(KEYS["control"]).send_keys("z").key_up(KEYS["control"]).perform()
    settle(browser)
    assert browser.execute_script("return tolerancePage.state().limit") == pytest.approx(0.81)  # one key, one step
    focus("reset")
    press("enter")
    settle(browser)
    assert told(browser) == start
    focus("factor-0")
    press("right", "right")
    settle(browser)
    focus("copy")
    press("space")
    text = browser.execute_script("return document.getElementById('text').value")
    assert text == browser.execute_script("return tolerancePage.scenario()")
    assert scenario_of(text).variations[0].tolerance == Amount(26.52e-6, relative=False)  # two steps of 1 % over 26 um
    named = browser.execute_script(
        "return [...document.querySelectorAll('input, button, textarea')].filter(each =>"
        "!(each.labels?.length || each.textContent.trim())).length")
    assert named == 0


@pytest.mark.parametrize("width", [360, 768, 1920])
@pytest.mark.parametrize("case", ["ten layers", "small", "twenty long names"])
def test_no_width_scrolls_sideways(opened: Open, width: int, case: str) -> None:
    make: dict[str, Callable[[], Page]] = {
        "ten layers": ten_layers, "small": lambda: example_page(SMALL),
        "twenty long names": lambda: example_page(twenty_lines())}
    browser = opened(make[case]())
    browser.execute_cdp_cmd("Emulation.setDeviceMetricsOverride",
                            {"width": width, "height": 900, "deviceScaleFactor": 1, "mobile": False})
    try:
        assert browser.execute_script("return document.documentElement.scrollWidth") <= width
    finally:
        browser.execute_cdp_cmd("Emulation.clearDeviceMetricsOverride", {})


def twenty_lines() -> str:
    """The small board with twenty lines of long names."""
    head, rest = SMALL.split("[[lines]]")
    line, variation = rest.split("[[variations]]")
    names = [f"transceiver number {number} receive termination reference feed over the second plane" for number in
             range(20)]
    lines = "".join("[[lines]]" + line.replace("beacon", name) for name in names)
    return f"{head}{lines}[[variations]]{variation}"


def test_hostile_text_does_nothing(opened: Open) -> None:
    escaped = HOSTILE.replace("\\", "\\\\").replace('"', '\\"')
    browser = opened(example_page(SMALL.replace("Kite reel, 2 layers", escaped).replace('"beacon"', f'"{escaped}"')))
    assert browser.execute_script("return typeof window.broken") == "undefined"
    assert browser.execute_script("return document.querySelector('h1').textContent") == HOSTILE
    assert browser.execute_script("return document.querySelector('h3').textContent") == HOSTILE
    put(browser, factors={0: 0.5})
    assert scenario_of(browser.execute_script("return tolerancePage.scenario()")).title == HOSTILE
