"""The sheet in a browser without network: every chart drawn, nothing in the console, nothing wider than the window."""

import os
import shutil

import pytest

from study import charts, sheet
from study.chart_file import Numbers, write_chart
from tests.study import sample_study, sample_tables

CHROMIUM, DRIVER = (shutil.which(name) for name in ("chromium", "chromedriver"))
FLAGS = ("--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run",
         "--disable-background-networking", "--disable-component-update", "--disable-sync",
         "--host-resolver-rules=MAP * ~NOTFOUND")  # fmt: skip

pytestmark = pytest.mark.skipif(
    not (CHROMIUM and DRIVER) and not os.environ.get("HOLDTIGHT_REQUIRE_BROWSER"),
    reason="Chromium is not installed",
)


@pytest.fixture(scope="module")
def page(tmp_path_factory):
    text = sheet.render(
        sample_tables.tables(12), study=sample_study.study(), geometry=sample_study.geometry(),
        tolerances=sample_study.tolerances(), alignment=sample_study.alignment(),
    )  # fmt: skip
    path = tmp_path_factory.mktemp("sheet") / "sheet.html"
    path.write_text(text, encoding="utf-8")
    return path.as_uri()


@pytest.fixture(scope="module")
def browser(tmp_path_factory):
    from selenium import webdriver
    from selenium.webdriver.chrome.service import Service

    options = webdriver.ChromeOptions()
    options.binary_location = CHROMIUM or "/usr/bin/chromium"
    for flag in (*FLAGS, f"--user-data-dir={tmp_path_factory.mktemp('profile')}"):
        options.add_argument(flag)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL"})
    driver = webdriver.Chrome(options=options, service=Service(DRIVER or "/usr/bin/chromedriver"))
    yield driver
    driver.quit()


def opened(browser, page, width):
    from selenium.webdriver.support.ui import WebDriverWait

    # a headless window has a least width of its own; the device's is free
    browser.execute_cdp_cmd("Emulation.setDeviceMetricsOverride",
                            {"width": width, "height": 900, "deviceScaleFactor": 1, "mobile": False})  # fmt: skip
    browser.get(page)
    WebDriverWait(browser, 60).until(
        lambda b: b.execute_script("return document.documentElement.dataset.charts")
    )


def problems(browser):
    return [entry for entry in browser.get_log("browser") if entry["level"] in ("SEVERE", "WARNING")]


@pytest.mark.parametrize("width", [1200, 400])
def test_every_chart_is_drawn_without_a_complaint(browser, page, width):
    opened(browser, page, width)
    empty = browser.execute_script(
        "return [...document.querySelectorAll('.chart')].filter(box => box.dataset.drawn !== 'yes' ||"
        " box.querySelectorAll('svg path, svg text').length < 5).map(box => box.id)"
    )
    assert empty == []
    assert (
        browser.execute_script("return document.querySelectorAll('.chart svg').length")
        == 3 + 1 + 24 + 4 + 4 + 1 + 1
    )
    assert problems(browser) == []


@pytest.mark.parametrize("width", [1200, 700, 400, 320])
def test_page_is_not_wider_than_the_window(browser, page, width):
    opened(browser, page, width)
    assert browser.execute_script("return innerWidth") == width
    assert browser.execute_script(
        "return document.documentElement.scrollWidth - document.documentElement.clientWidth") <= 0  # fmt: skip


def test_charts_that_fit_stay_inside_their_boxes(browser, page):
    opened(browser, page, 400)
    wide = browser.execute_script(
        "return [...document.querySelectorAll('.fit svg')].filter(svg => svg.getBoundingClientRect().right > 400).length"
    )
    assert wide == 0


def test_choosing_a_measure_changes_the_views(browser, page):
    from selenium.webdriver.support.ui import Select, WebDriverWait

    opened(browser, page, 1200)
    read = "return document.querySelector('#where .chart').textContent"
    before = browser.execute_script(read)
    Select(browser.find_element("id", "shown")).select_by_visible_text("Bump steer over 30 mm")
    WebDriverWait(browser, 10).until(lambda b: b.execute_script(read) != before)
    text = browser.execute_script(read)
    assert "tie rod inner (rack)" in text and "58" in text
    assert problems(browser) == []


def test_charts_carry_their_description_when_drawn(browser, page):
    opened(browser, page, 1200)
    labels = browser.execute_script(
        "return [...document.querySelectorAll('.chart')].map(box => box.getAttribute('aria-label') || '')"
    )
    assert labels and all(len(label) > 20 for label in labels)


def test_a_page_of_one_chart_is_drawn(browser, tmp_path):
    at = {"over": "bump", "against": "rack", "over_at": (-10.0, 10.0), "against_at": (0.0, 5.0)}
    maps = [charts.map_spec([[1.0, low], [2.0, 3.0]], **at, key="toe_deg", unit="deg") for low in (0.5, -0.5)]
    path = write_chart(charts.panels(maps, title="Two maps"), tmp_path / "maps.html", [Numbers("toe", ["a"], [["1"]])])
    opened(browser, path.as_uri(), 500)
    assert browser.execute_script("return document.querySelectorAll('.chart svg').length") == 1
    assert browser.execute_script(
        "return document.documentElement.scrollWidth - document.documentElement.clientWidth") <= 0  # fmt: skip
    assert problems(browser) == []
