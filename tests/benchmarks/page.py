"""How soon the page answers: a tolerance that reaches every line is moved, on a board of eight lines.

`python -m tests.benchmarks.page`. Needs Chromium with its driver, and selenium. Printed: milliseconds from a move to
the first answer on the screen (the page's own clock), on how many coupons, and until all coupons have been counted.
"""

from __future__ import annotations

import shutil
import statistics
import tempfile
import time
from pathlib import Path

from tests.page_examples import SCENARIOS, written
from tolerance.scenario import load
from tolerance.study.page import page
from tolerance.study.run import run

LINES = 8
MOVES = 15
PAUSE = 3.0  # seconds between moves, in which the page counts to the end


def main() -> None:
    from selenium import webdriver
    from selenium.webdriver.chrome.service import Service

    scenario = load(SCENARIOS / "weir-module-10-layer.toml")
    scenario = scenario.model_copy(update={"lines": scenario.lines[:LINES]})
    reaches_most = next(number for number, each in enumerate(scenario.variations) if each.of == ("C*.dk",))
    options = webdriver.ChromeOptions()
    options.binary_location = shutil.which("chromium") or ""
    for argument in ("--headless=new", "--no-sandbox", "--disable-gpu", "--disable-dev-shm-usage"):
        options.add_argument(argument)
    browser = webdriver.Chrome(options=options, service=Service(shutil.which("chromedriver")))
    try:
        with tempfile.TemporaryDirectory() as folder:
            path = written(page(scenario, run(scenario)), Path(folder))
            print(f"{path.stat().st_size / 1000:.0f} kB")
            browser.get(path.as_uri())
            time.sleep(2 * PAUSE)
            times = []
            for move in range(MOVES):
                browser.execute_script(
                    "const state = tolerancePage.state(); state.factors[arguments[0]] = arguments[1];"
                    "tolerancePage.put(state)", reaches_most, 0.5 + 0.05 * move)
                time.sleep(PAUSE)
                last = browser.execute_script("return tolerancePage.lastMove")
                times.append(last["milliseconds"])
                print(f"first answer {last['milliseconds']:.0f} ms on {last['coupons']:,} coupons, "
                      f"all after {last['settledIn']:.0f} ms")
            print(f"median of the first answers {statistics.median(times):.0f} ms, longest {max(times):.0f} ms")
    finally:
        browser.quit()


if __name__ == "__main__":
    main()
