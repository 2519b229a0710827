"""The report in a real Chromium, from a file URL."""

import json
import shutil
from itertools import pairwise
from pathlib import Path
from urllib.parse import urlsplit

import pytest

from skipline.recon.report import write_report
from skipline.recon.study import load_study, run

pytest.importorskip("selenium", reason="selenium is not installed (pip install selenium)")

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser")
DRIVER = shutil.which("chromedriver")

pytestmark = pytest.mark.skipif(
    not (CHROMIUM and DRIVER),
    reason="chromium and chromedriver are not installed (apt-get install chromium-driver)",
)

TITLE = (
    "<script>document.title = 'taken'</script><img src='http://example.invalid/x.png' onerror='boom()'> "
    "$x_{2$ &amp; " + "averylongwordwithoutaspace" * 5
)

STUDY = f"""\
[study]
title = '''{TITLE.replace("'", '"')}'''
seed = 7

[reference]
phantom = "line-pair-slab"
matrix = [64, 48]
field_of_view_mm = [240.0, 320.0]

[acquisition]
snr = [30.0, 60.0]

[sampling]
pattern = ["variable-density-lines", "variable-density-points"]
acceleration = [1.5, 2.0, 3.0, 4.0, 6.0]
calibration = 4
draws = 2

[[reconstruction]]
method = "zero-filled"

[[reconstruction]]
method = "wavelet-sparse"
weight = [1.0, 2.0]
iterations = 30

[limits]
nrmse = {{ at_most = 0.15 }}
ssim = {{ at_least = 0.3 }}
"""


@pytest.fixture(scope="module")
def report(tmp_path_factory):
    folder = tmp_path_factory.mktemp("study")
    (folder / "study.toml").write_text(STUDY)
    run(load_study(folder / "study.toml"), folder / "results", workers=1, progress=False)
    return write_report(folder / "results")


@pytest.fixture(scope="module")
def browser(tmp_path_factory):
    from selenium import webdriver
    from selenium.webdriver.chrome.service import Service

    options = webdriver.ChromeOptions()
    options.binary_location = str(CHROMIUM)
    for argument in (
        "--headless",
        "--no-sandbox",
        "--disable-gpu",
        "--disable-quic",
        "--no-first-run",
        "--disable-background-networking",
        "--disable-component-update",
        "--disable-sync",
        f"--user-data-dir={tmp_path_factory.mktemp('chromium')}",
    ):
        options.add_argument(argument)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    driver = webdriver.Chrome(options=options, service=Service(str(DRIVER)))
    yield driver
    driver.quit()


def look(browser, report, width=1440, scheme="light"):
    media = [{"name": "prefers-color-scheme", "value": scheme}]
    browser.execute_cdp_cmd("Emulation.setEmulatedMedia", {"features": media})
    size = {"width": width, "height": 900, "deviceScaleFactor": 1, "mobile": width < 500}
    browser.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", size)
    browser.get(report.as_uri())


def test_no_console_message_and_no_request(browser, report):
    for kind in ("browser", "performance"):
        browser.get_log(kind)
    look(browser, report)
    assert browser.get_log("browser") == []
    messages = [json.loads(entry["message"])["message"] for entry in browser.get_log("performance")]
    asked = [
        message["params"]["request"]["url"]
        for message in messages
        if message["method"] == "Network.requestWillBeSent"
    ]
    assert report.as_uri() in asked
    assert {urlsplit(url).scheme for url in asked} <= {"file", "data"}
    assert {url for url in asked if url.startswith("file")} == {report.as_uri()}


def test_what_is_said(browser, report):
    look(browser, report)
    verdict = json.loads((report.parent / "verdict.json").read_text())
    body = browser.find_element("tag name", "body").text
    assert verdict["sentence"] in body
    assert "not for diagnosis" in body
    assert browser.find_element("tag name", "h1").text == TITLE.replace("'", '"')
    assert browser.title.startswith("<script>document.title")
    assert not browser.find_elements("css selector", "script, h1 *")


def test_every_image_is_shown_to_scale(browser, report):
    look(browser, report)
    images = browser.execute_script(
        "return [...document.images].map(i => [i.complete, i.naturalWidth, i.clientWidth, i.clientHeight])"
    )
    assert len(images) > 40
    assert all(complete and natural and width and height for complete, natural, width, height in images)
    tiles = browser.execute_script(
        "return [...document.querySelectorAll('.row img')].map(i => i.getBoundingClientRect())"
        ".map(box => box.width / box.height)"
    )
    assert tiles == pytest.approx([240 / 320] * len(tiles), rel=0.01)
    scale = browser.execute_script(
        "return document.querySelector('.scale').getBoundingClientRect().width"
        " / document.querySelector('.row img').getBoundingClientRect().width"
    )
    assert scale == pytest.approx(50 / 240, rel=0.02)


@pytest.mark.parametrize("scheme", ["light", "dark"])
@pytest.mark.parametrize("width", [1440, 1024, 390])
def test_nothing_is_wider_than_the_window(browser, report, width, scheme):
    look(browser, report, width, scheme)
    assert browser.execute_script("return innerWidth") == width
    # text that is cut off would not make the page scroll
    assert browser.execute_script("return document.documentElement.scrollWidth") <= width
    beyond = browser.execute_script(
        "return [...document.querySelectorAll('body *')].filter(e => !e.closest('.wide') && !e.closest('svg')"
        " && e.getBoundingClientRect().right > innerWidth + 1).map(e => e.outerHTML.slice(0, 200))"
    )
    assert beyond == []


def test_labels_of_figures_stay_inside(browser, report):
    for width in (1440, 390):
        look(browser, report, width)
        outside = browser.execute_script(
            "return [...document.querySelectorAll('.card svg text')].filter(t => {"
            "  const box = t.getBoundingClientRect(), card = t.closest('.card').getBoundingClientRect();"
            "  return box.left < card.left || box.right > card.right"
            "    || box.top < card.top || box.bottom > card.bottom"
            "}).map(t => t.textContent)"
        )
        assert outside == []


def test_dark_is_dark_and_figures_follow(browser, report):
    colours = []
    for scheme in ("light", "dark"):
        look(browser, report, 1024, scheme)
        colours.append(
            browser.execute_script(
                "return [getComputedStyle(document.body).backgroundColor,"
                " getComputedStyle(document.querySelector('.card svg text')).fill,"
                " getComputedStyle(document.querySelector('.legend [style*=series]')).stroke]"
            )
        )
    light, dark = colours
    assert all(one != other for one, other in zip(light, dark, strict=True))
    assert sum(map(int, dark[0][4:-1].split(","))) < 120


def test_headings_descend_one_level_at_a_time(browser, report):
    look(browser, report)
    levels = browser.execute_script(
        "return [...document.querySelectorAll('h1, h2, h3, h4')].map(h => +h.tagName[1])"
    )
    assert levels[0] == 1
    assert all(after - before <= 1 for before, after in pairwise(levels))


def test_prints_on_paper(browser, report, tmp_path: Path):
    import base64

    look(browser, report)
    printed = browser.execute_cdp_cmd("Page.printToPDF", {"preferCSSPageSize": True})
    pdf = base64.b64decode(printed["data"])
    assert b"/MediaBox [0 0 594.95996 841.91998]" in pdf or b"/MediaBox [0 0 595" in pdf, "A4, in points"
