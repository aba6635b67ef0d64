"""The report in a real browser: hover, click, slider, keys; nothing hostile runs; no network."""

from __future__ import annotations

import os
import shutil
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from wavekin.io import load, save
from wavekin.io.command import main
from wavekin.io.ready import ready_case
from wavekin.io.report import save_report
from wavekin.io.store import read_words

HOSTILE = "</script><script>document.title='taken'</script><img src=x onerror=\"document.title='taken'\">"


@pytest.fixture(scope="module")
def page(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("report")
    case = ready_case("two_slugs")
    save(case.track(), folder / "a.h5", case=case)
    assert main(["report", str(folder / "a.h5"), "-o", str(folder / "a.html")]) == 0
    assert main(["report", str(folder / "a.h5"), "-o", str(folder / "a.html")]) == 2
    words = read_words(folder / "a.h5") | {"title": HOSTILE, "caution": HOSTILE, "case_text": HOSTILE}
    save_report(load(folder / "a.h5"), folder / "hostile.html", words)
    return folder / "a.html"


def test_page_needs_no_network_and_escapes_everything(page: Path) -> None:
    text = page.read_text()
    assert "http://" not in text and "https://" not in text and "src=" not in text
    assert "Content-Security-Policy" in text and "Caution:" in text
    hostile = (page.parent / "hostile.html").read_text()
    assert HOSTILE not in hostile and "<img" not in hostile and hostile.count("<script") == 2


@pytest.fixture(scope="module")
def browser(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Any]:
    binary, driver = shutil.which("chromium"), shutil.which("chromedriver")
    if not (binary and driver):
        if os.environ.get("CI") == "true":
            pytest.fail("no chromium and chromedriver; .ci/run installs them")
        pytest.skip("no chromium and chromedriver on this machine (Debian packages chromium and chromium-driver)")
    from selenium import webdriver
    from selenium.webdriver.chrome.service import Service

    options = webdriver.ChromeOptions()
    options.binary_location = binary
    for flag in (
        "--headless=new", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run",
        "--disable-dev-shm-usage",
        "--disable-background-networking", "--disable-component-update", "--disable-sync", "--window-size=1100,1400",
        f"--user-data-dir={tmp_path_factory.mktemp('chromium')}",
    ):  # fmt: skip
        options.add_argument(flag)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL"})
    drive = webdriver.Chrome(options=options, service=Service(driver))
    yield drive
    drive.quit()


def test_hover_click_slider_and_keys(page: Path, browser: Any) -> None:
    from selenium.webdriver.common.action_chains import ActionChains
    from selenium.webdriver.common.by import By
    from selenium.webdriver.common.keys import Keys

    browser.get(page.as_uri())
    plane, told = browser.find_element(By.ID, "plane"), browser.find_element(By.ID, "told")
    assert "Point at a front" in told.text
    size = plane.size
    # the lead shock leaves x = 0.0 at t = 0 and is at x = 1.07 at t = 0.8: a point on it, from the page's own extent
    extent = browser.execute_script("return data.extent")
    shock = browser.execute_script("return pieces(fronts.kind.findIndex((k, i) => k === 0 && fronts.ended[i] < 0))[0];")
    x, t = 0.5 * (shock[0] + shock[2]), 0.5 * (shock[1] + shock[3])
    px = 64 + (x - extent[0]) / (extent[1] - extent[0]) * (size["width"] - 76)
    py = size["height"] - 40 - t / 0.8 * (size["height"] - 50)
    ActionChains(browser).move_to_element_with_offset(
        plane, int(px - size["width"] / 2), int(py - size["height"] / 2)
    ).perform()
    assert told.text.startswith("front ") and "speed" in told.text
    ActionChains(browser).click().perform()
    chosen = int(plane.get_attribute("data-chosen"))
    case = load(page.with_suffix(".h5"))
    from wavekin.lineage import Graph

    assert int(plane.get_attribute("data-lit")) == len(Graph(case).ancestors(chosen))
    slider = browser.find_element(By.ID, "time")
    slider.send_keys(Keys.HOME)
    assert "t = 0," in browser.find_element(By.ID, "when").text
    assert float(browser.find_element(By.ID, "profile").get_attribute("data-t")) == 0.0
    slider.send_keys(Keys.ARROW_RIGHT)
    assert "t = 0.0133333," in browser.find_element(By.ID, "when").text
    browser.execute_script("arguments[0].focus()", plane)
    before = browser.execute_script("return view.x1 - view.x0")
    plane.send_keys("+")
    assert browser.execute_script("return view.x1 - view.x0") < before
    plane.send_keys("0")
    plane.send_keys(Keys.ARROW_RIGHT)
    plane.send_keys(Keys.ENTER)
    assert told.text.startswith("front ")
    plane.send_keys(Keys.ESCAPE)
    assert plane.get_attribute("data-chosen") == ""
    assert [entry for entry in browser.get_log("browser") if entry["level"] == "SEVERE"] == []


def test_hostile_title_stays_text(page: Path, browser: Any) -> None:
    browser.get((page.parent / "hostile.html").as_uri())
    assert browser.title == HOSTILE
    assert browser.execute_script("return document.querySelectorAll('img').length") == 0
    assert [entry for entry in browser.get_log("browser") if entry["level"] == "SEVERE"] == []
