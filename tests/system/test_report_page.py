"""The page of a night in a browser: sorted, filtered, and without a request to anywhere.

Needs Debian's chromium.
"""

import numpy as np
import pytest
from chromium import Chromium

from tiny_pipeline import TinyPipeline, sky_pixels, write_sky

NAMES = ["ferry_noon", "quay_night", "<script>window.taken = true<"]
ROWS = "[...document.querySelectorAll('#probes tbody tr')]"
SHOWN = f"{ROWS}.filter(row => !row.hidden).map(row => row.cells[1].innerText)"


@pytest.fixture(scope="module")
def page(tmp_path_factory):
    pipeline = TinyPipeline(tmp_path_factory.mktemp("night"), probes=NAMES)
    pipeline.bake()
    write_sky(pipeline.folder / "quay_night.exr", pixels=sky_pixels(1) * np.float32(1.5))
    pipeline.bake()
    return pipeline.build / "report/index.html"


@pytest.fixture(scope="module")
def browser(tmp_path_factory):
    with Chromium(tmp_path_factory.mktemp("profile")) as browser:
        yield browser


def test_filter_and_sort_by_keyboard(browser, page):
    browser.open(page)
    browser.value("document.getElementById('filter').focus()")
    browser.call("Input.insertText", text="tiny rebuilt")
    assert browser.value(SHOWN) == ["quay_night"]
    assert browser.value("document.getElementById('count').innerText") == "1 of 3 probes"
    browser.value("document.getElementById('filter').value = ''")
    browser.value("document.getElementById('filter').dispatchEvent(new Event('input'))")
    browser.value("document.querySelectorAll('#probes th button')[5].click()")  # change, largest first
    assert browser.value(SHOWN)[0] == "quay_night"
    browser.value("document.querySelectorAll('#probes th button')[0].click()")
    assert browser.value(SHOWN) == sorted(NAMES)
    browser.value("document.querySelectorAll('#probes th button')[0].click()")
    assert browser.value(SHOWN) == sorted(NAMES, reverse=True)
    assert browser.value("document.querySelector('[aria-sort=descending]').innerText").startswith("Name")


@pytest.mark.parametrize("width", [390, 1280])
def test_page_fits_its_width_in_both_schemes_and_runs_no_name(browser, page, width):
    papers = []
    for dark in (False, True):
        browser.open(page, width, 900, dark)
        assert browser.value("document.documentElement.scrollWidth") <= width
        papers.append(browser.value("getComputedStyle(document.documentElement).backgroundColor"))
        assert browser.value("window.taken === undefined")
    assert papers[0] != papers[1]


def test_pages_ask_for_their_own_files_alone(browser, page):
    browser.requests.clear()
    browser.open(page)
    browser.open(page.parent / "probes/quay_night/index.html")
    folder = page.parent.resolve().as_uri()
    asked = [address for address in browser.requests if not address.startswith("data:")]
    assert len(asked) >= 5
    assert all(address.startswith(folder) for address in asked)
