"""The report in a real browser: nothing fails, nothing is fetched, it sorts, copies, fits a phone and prints."""

import base64
import json
import os
import re
import shutil
from contextlib import contextmanager

import pytest

BROWSERS, DRIVERS = ("chromium", "chromium-browser", "google-chrome"), ("chromedriver",)
NEEDED = "Debian's packages 'chromium' and 'chromium-driver' are needed (apt-get install chromium chromium-driver)"
A4_POINTS = (595, 842)


def _found(names):
    return next((path for path in map(shutil.which, names) if path), None)


@pytest.fixture(scope="module")
def browser():
    """A headless browser that opens no window and keeps no profile."""
    binary, driver = _found(BROWSERS), _found(DRIVERS)
    if not (binary and driver):
        if os.environ.get("CI"):
            pytest.fail(f"no browser to test the report with: {NEEDED}")
        pytest.skip(f"no browser here: {NEEDED}")
    from selenium.webdriver import Chrome, ChromeOptions, ChromeService

    options = ChromeOptions()
    options.binary_location = binary
    for argument in ("--headless=new", "--no-sandbox", "--disable-gpu", "--disable-dev-shm-usage"):
        options.add_argument(argument)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    chrome = Chrome(options=options, service=ChromeService(driver))
    yield chrome
    chrome.quit()


@pytest.fixture(scope="module")
def opened(browser, hostile_report):
    """The browser with the report opened as a double click opens it; what it asked for on the way."""
    browser.get_log("performance")
    browser.get(hostile_report.page.as_uri())
    messages = [json.loads(entry["message"])["message"] for entry in browser.get_log("performance")]
    asked = [each["params"]["request"]["url"] for each in messages if each["method"] == "Network.requestWillBeSent"]
    return browser, asked


@pytest.fixture
def page(opened):
    """The browser at the report, as it was opened."""
    opened[0].refresh()
    return opened[0]


@contextmanager
def screen(page, width, scheme="light"):
    """A screen of a width in pixels, light or dark."""
    size = {"width": width, "height": 900, "deviceScaleFactor": 1, "mobile": width < 600}
    page.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", size)
    features = [{"name": "prefers-color-scheme", "value": scheme}]
    page.execute_cdp_cmd("Emulation.setEmulatedMedia", {"features": features})
    try:
        yield page
    finally:
        page.execute_cdp_cmd("Emulation.clearDeviceMetricsOverride", {})
        page.execute_cdp_cmd("Emulation.setEmulatedMedia", {"features": []})


def test_nothing_fails_and_nothing_is_fetched(opened, hostile_report):
    page, asked = opened
    assert asked == [hostile_report.page.as_uri()]
    assert page.execute_script("return performance.getEntriesByType('resource').length") == 0
    assert [entry for entry in page.get_log("browser") if entry["level"] in ("SEVERE", "WARNING")] == []


def test_no_name_became_an_element(page):
    found = page.execute_script(
        "return ['img', 'iframe', 'b', 'body script:not(:last-of-type)', '[onerror]', '[onload]', 'object', 'link']"
        ".map(each => document.querySelectorAll(each).length)"
    )
    assert found == [0] * 8
    assert page.execute_script("return document.scripts.length") == 1
    assert "<script>alert(1)</script>" in page.title and "{{7*7}}" in page.title


def column(page, number):
    """Texts of a column of the first table, as they stand."""
    return page.execute_script(
        "return [...document.querySelector('figure.table table').tBodies[0].rows]"
        ".map(row => Number(row.cells[arguments[0]].dataset.sort))",
        number,
    )


def test_a_table_is_sorted_by_click_and_by_key(page):
    from selenium.webdriver.common.keys import Keys

    heading = page.find_elements("css selector", "figure.table thead th")[2]
    button = heading.find_element("tag name", "button")
    before, widths = column(page, 2), column(page, 0)
    assert heading.get_attribute("aria-sort") == "none"
    button.click()
    assert heading.get_attribute("aria-sort") == "ascending" and column(page, 2) == sorted(before)
    assert column(page, 0) == sorted(widths, reverse=True)  # rows move as a whole: sigma falls with the width
    button.send_keys(Keys.ENTER)
    assert heading.get_attribute("aria-sort") == "descending" and column(page, 2) == sorted(before, reverse=True)
    skew = page.find_elements("css selector", "figure.table thead th button")[3]
    skew.send_keys(Keys.SPACE)
    assert column(page, 3) == sorted(column(page, 3)) and heading.get_attribute("aria-sort") == "none"


def test_a_table_is_copied_with_names_and_all_digits(page):
    page.execute_script(
        "Object.defineProperty(navigator, 'clipboard', {configurable: true,"
        "value: {writeText: async text => { window.copied = text; }}})"
    )
    page.execute_script("document.querySelector('button.copy').click()")
    said = "return document.querySelector('.copied').textContent"
    _until(page, said, "Copied.")
    rows = [line.split("\t") for line in page.execute_script("return window.copied").rstrip("\n").split("\n")]
    assert rows[0][:4] == ["width_um", "vth_mean_v", "vth_mean_low_v", "vth_mean_high_v"]
    assert len(rows) == 1 + 4 and len({len(row) for row in rows}) == 1
    assert float(rows[1][2]) < float(rows[1][1]) < float(rows[1][3])


@pytest.mark.parametrize("allowed", (True, False))
def test_copying_without_leave_to_use_the_clipboard(page, allowed):
    page.execute_script(
        "Object.defineProperty(navigator, 'clipboard', {configurable: true, value: undefined});"
        "document.execCommand = () => { window.copied = document.getSelection().toString(); return arguments[0]; }",
        allowed,
    )
    page.execute_script("document.querySelector('button.copy').click()")
    said = "Copied." if allowed else "Copying is not allowed here: the text below is selected, copy it by hand."
    _until(page, "return document.querySelector('.copied').textContent", said)
    left = page.execute_script("return [...document.querySelectorAll('textarea')].map(area => area.value)")
    assert len(left) == (0 if allowed else 1)
    assert all(text.startswith("width_um\tvth_mean_v\t") for text in left)


def _until(page, script, value):
    from selenium.webdriver.support.ui import WebDriverWait

    WebDriverWait(page, 5).until(lambda _: page.execute_script(script) == value)


@pytest.mark.parametrize("width", (390, 1440))
@pytest.mark.parametrize("scheme", ("light", "dark"))
def test_the_page_is_never_wider_than_its_screen(page, width, scheme):
    with screen(page, width, scheme):
        reach = page.execute_script(
            "return [document.documentElement.scrollWidth, Math.max(...[...document.querySelectorAll("
            "'h1, h2, p, figure, .scroll, svg, dl, .caution')].map(each => each.getBoundingClientRect().right))]"
        )
        assert max(reach) <= width
        paper, ink = page.execute_script(
            "const style = getComputedStyle(document.body); return [style.backgroundColor, style.color]"
        )
        lightness = [sum(map(int, re.findall(r"\d+", color)[:3])) for color in (paper, ink)]
        assert (lightness[0] < lightness[1]) == (scheme == "dark")


def test_text_in_drawings_is_legible_on_a_phone(page):
    with screen(page, 390):
        sizes = page.execute_script(
            "return [...document.querySelectorAll('.panel svg text')].filter(text => text.textContent.trim())"
            ".map(text => parseFloat(getComputedStyle(text).fontSize) * text.getScreenCTM().a)"
            ".filter(size => size > 0)"
        )
        assert min(sizes) > 6.5 and sorted(sizes)[len(sizes) // 2] > 8  # [CSS pixels]


def test_keys_that_differ_can_be_shown_alone(page):
    shown = (
        "return [...document.querySelectorAll('table.options tbody tr:not(.group)')]"
        ".filter(row => getComputedStyle(row).display !== 'none').map(row => row.classList.contains('differs'))"
    )
    assert set(page.execute_script(shown)) == {True, False}
    page.execute_script("document.getElementById('only-differences').click()")
    assert set(page.execute_script(shown)) == {True}


def test_it_prints_on_a_few_pages_of_a4(page):
    printed = page.execute_cdp_cmd("Page.printToPDF", {"preferCSSPageSize": True})
    document = base64.b64decode(printed["data"])
    pages = len(re.findall(rb"/Type\s*/Page\b(?!s)", document))
    assert 6 <= pages <= 14
    sizes = {tuple(map(float, box.split()[2:])) for box in re.findall(rb"/MediaBox\s*\[([\d. ]+)\]", document)}
    assert all(abs(got - wanted) < 2 for size in sizes for got, wanted in zip(size, A4_POINTS)) and sizes
