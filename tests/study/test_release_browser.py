"""The release page in a browser: nothing in the console, nothing wider than the window, one page of A4 in print."""

import base64
import os
import re
import shutil
from datetime import datetime

import pytest

from catalog.store import Catalog
from study.dossier import load_dossier
from study.release_contents import picture
from study.release_page import page
from study.release_rows import Head, Said, draft
from tests.study.command_line import command
from tests.study.small_studies import DEMO, TOE, study_text
from tests.study.test_sheet_browser import CHROMIUM, DRIVER, browser, problems  # noqa: F401

pytestmark = pytest.mark.skipif(
    not (CHROMIUM and DRIVER) and not os.environ.get("HOLDTIGHT_REQUIRE_BROWSER"), reason="Chromium is not installed"
)
ERRORS = {"chassis.*": "{ plus_minus = 1.0 }", "chassis.lower_*": "{ diameter = 1.5 }", "upright.*": "{ diameter = 0.2 }",
          "upright.hub_axis": "{ tilt_deg = 0.05 }"}  # fmt: skip
MEASURES = [f'of = "{key}"\nlimits = [-100, 100]' for key in
            ("camber_gain_deg_per_mm", "caster_deg", "scrub_radius_mm", "anti_dive_pct", "trail_mm")]  # fmt: skip


@pytest.fixture(scope="module")
def pages(tmp_path_factory):
    """Release pages by part."""
    folder = tmp_path_factory.mktemp("release")
    shutil.copy(DEMO, folder)
    (folder / "s.toml").write_text(study_text(*MEASURES, errors=ERRORS, alignment=TOE, title="Brackets"), encoding="utf-8")
    with pytest.MonkeyPatch.context() as patch:
        patch.chdir(folder)
        patch.setenv("HOLDTIGHT_CATALOG", str(folder / "shop.duckdb"))
        assert command("queue", "s.toml").code == 0 and command("work", "--threads", 1).code == 0
        dossier = load_dossier(Catalog(), 1)
    made = {}
    for part in ("chassis", "upright"):
        head = Head("FS-101", "B", part, "Ann", datetime(2025, 12, 1), 1, None, "front-wishbone@1", "0.1.0", supersedes_issue="A")
        record, rows = draft(dossier, head, Said(datums=["A|B|C"], condition=["welded"], checked=["CMM"], reason=["first", "*o*=another"]))
        path = folder / f"{part}.html"
        path.write_text(page(record | {"record_hash": "0" * 64}, rows, picture(dossier, part, rows)), encoding="utf-8")
        made[part] = path.as_uri()
    return made


def opened(driver, address, width):
    driver.execute_cdp_cmd("Emulation.setDeviceMetricsOverride",
                           {"width": width, "height": 900, "deviceScaleFactor": 1, "mobile": False})  # fmt: skip
    driver.get(address)


@pytest.mark.parametrize("part", ["chassis", "upright"])
@pytest.mark.parametrize("width", [1100, 700, 400, 320])
def test_page_is_not_wider_than_the_window_and_complains_of_nothing(browser, pages, part, width):  # noqa: F811
    opened(browser, pages[part], width)
    assert browser.execute_script("return document.documentElement.scrollWidth - document.documentElement.clientWidth") <= 0
    drawn = browser.execute_script("return [...document.images].map(i => [i.complete, i.naturalWidth > 100, i.alt.length > 20])")
    assert drawn == [[True, True, True]]
    assert problems(browser) == []


def test_frames_are_drawn_with_their_symbols(browser, pages):  # noqa: F811
    opened(browser, pages["upright"], 1100)
    signs = browser.execute_script("return [...document.querySelectorAll('.frame svg')].map(s => s.getBoundingClientRect().width)")
    assert len(signs) == 5 and all(width > 15 for width in signs)
    text = browser.execute_script("return document.querySelector('.frame').innerText")
    assert text.split() == ["S⌀0.2", "A", "B", "C"]


@pytest.mark.parametrize("part", ["chassis", "upright"])
def test_print_is_one_page(browser, pages, part):  # noqa: F811
    opened(browser, pages[part], 1100)
    printed = browser.execute_cdp_cmd("Page.printToPDF", {"preferCSSPageSize": True})
    assert len(re.findall(rb"/Type\s*/Page\b", base64.b64decode(printed["data"]))) == 1
