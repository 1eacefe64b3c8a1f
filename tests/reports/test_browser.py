"""The report in a real browser with the network off: dividers, keyboard, console, accessibility, hostile names."""

from __future__ import annotations

import shutil
from collections.abc import Iterator
from pathlib import Path

import axe_core_python
import pytest
from selenium import webdriver
from selenium.webdriver.common.action_chains import ActionChains
from selenium.webdriver.common.by import By
from selenium.webdriver.common.keys import Keys

from hueferry.reports.page import render_page, write_report
from reports.runs import HOSTILE, make_run, store, with_entries

CHROMIUM, DRIVER = shutil.which("chromium"), shutil.which("chromedriver")
pytestmark = [
    pytest.mark.skipif(CHROMIUM is None or DRIVER is None, reason="needs Debian's chromium and chromium-driver"),
    pytest.mark.filterwarnings("ignore::ResourceWarning"),
]

Browser = webdriver.Chrome


@pytest.fixture(scope="module")
def run(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return make_run(tmp_path_factory.mktemp("browser"))


@pytest.fixture(scope="module")
def browser(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Browser]:
    options = webdriver.ChromeOptions()
    options.binary_location = CHROMIUM or ""
    for flag in (
        "--headless=new",
        "--no-sandbox",
        "--disable-gpu",
        "--disable-quic",
        "--no-first-run",
        "--disable-background-networking",
        "--disable-component-update",
        "--disable-sync",
        "--disable-dev-shm-usage",
        f"--user-data-dir={tmp_path_factory.mktemp('profile')}",
        "--window-size=1200,900",
    ):
        options.add_argument(flag)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    driver = webdriver.Chrome(options=options, service=webdriver.ChromeService(executable_path=DRIVER))
    driver.execute_cdp_cmd("Network.enable", {})
    driver.execute_cdp_cmd(
        "Network.emulateNetworkConditions",
        {"offline": True, "latency": 0, "downloadThroughput": 0, "uploadThroughput": 0},
    )
    yield driver
    driver.quit()


def opened(browser: Browser, page: Path) -> Browser:
    browser.get_log("browser")
    browser.get_log("performance")
    browser.get(page.as_uri())
    return browser


def place_of(browser: Browser) -> float:
    style = browser.find_element(By.CSS_SELECTOR, ".divider").get_attribute("style") or ""
    return float(style.split("--at:")[1].split("%")[0])


def test_no_error_and_no_request(browser: Browser, run: Path) -> None:
    opened(browser, run / "report.html")

    complaints = [entry for entry in browser.get_log("browser") if entry["level"] in ("SEVERE", "WARNING")]
    requests = [entry["message"] for entry in browser.get_log("performance") if "requestWillBeSent" in entry["message"]]

    assert not complaints
    assert all('"url":"file:' in message or '"url":"data:' in message for message in requests)


def test_the_divider_follows_keys_and_mouse(browser: Browser, run: Path) -> None:
    opened(browser, run / "report.html")
    handle = browser.find_element(By.CSS_SELECTOR, ".divider input")

    assert place_of(browser) == 50
    handle.send_keys(Keys.ARROW_RIGHT * 5)
    assert place_of(browser) == 55
    handle.send_keys(Keys.HOME)
    assert place_of(browser) == 0
    width = handle.size["width"]
    ActionChains(browser).move_to_element_with_offset(handle, -width // 4, 0).click_and_hold().move_by_offset(
        width // 2, 0
    ).release().perform()
    assert place_of(browser) == pytest.approx(75, abs=4)


def test_every_control_is_reached_by_the_tab_key(browser: Browser, run: Path) -> None:
    opened(browser, run / "report.html")
    controls = browser.find_elements(By.CSS_SELECTOR, "summary, .divider input, a")
    body = browser.find_element(By.TAG_NAME, "body")

    reached = set()
    for _ in range(len(controls) + 3):
        body.send_keys(Keys.TAB)
        reached.add(browser.switch_to.active_element.id)

    assert {control.id for control in controls if control.is_displayed()} <= reached


@pytest.mark.parametrize("width", [1200, 390])
@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_an_accessibility_check_finds_nothing_serious(browser: Browser, run: Path, width: int, scheme: str) -> None:
    browser.set_window_size(width, 900)
    browser.execute_cdp_cmd(
        "Emulation.setEmulatedMedia", {"features": [{"name": "prefers-color-scheme", "value": scheme}]}
    )
    opened(browser, run / "report.html")
    source = (Path(axe_core_python.__file__).parent / "axe.min.js").read_text(encoding="utf-8")

    browser.execute_script(source)
    found = browser.execute_async_script("axe.run().then(arguments[0])")

    grave = [
        (one["id"], one["nodes"][0]["html"]) for one in found["violations"] if one["impact"] in ("serious", "critical")
    ]
    assert not grave


def test_a_phone_scrolls_down_only(browser: Browser, run: Path) -> None:
    browser.set_window_size(500, 900)
    opened(browser, run / "report.html")

    assert browser.execute_script("return document.documentElement.scrollWidth - window.innerWidth") <= 0


def test_hostile_names_stay_text(browser: Browser, run: Path, tmp_path: Path) -> None:
    page = tmp_path / "hostile.html"
    page.write_text(render_page(with_entries(run, HOSTILE), [None] * len(HOSTILE)), encoding="utf-8")

    opened(browser, page)

    assert not browser.find_elements(By.CSS_SELECTOR, "img, #broken, b")
    titles = [one.get_attribute("textContent") for one in browser.find_elements(By.CSS_SELECTOR, "article h3")]
    assert titles[0] == HOSTILE[0]
    assert titles[3] == "{{ 7*7 }}.png"


def test_five_hundred_pictures_open(browser: Browser, run: Path, tmp_path: Path) -> None:
    for name in ("warm.png", "cool.png", "dim.png"):
        (tmp_path / name).write_bytes((run / name).read_bytes())
    record = with_entries(run, [f"{number}.png" for number in range(500)])
    for entry in record["entries"]:
        entry["source"]["path"] = str(run.parent / "shoot" / "warm.png")
        entry["output"]["path"] = "warm.png"
    store(record, tmp_path)
    page = write_report(tmp_path)

    opened(browser, page)

    assert page.stat().st_size < 15e6
    assert len(browser.find_elements(By.CSS_SELECTOR, "article")) == 500
