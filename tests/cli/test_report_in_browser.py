"""The report in a real headless Chromium: it sorts, filters, opens, and is cut off nowhere."""

from __future__ import annotations

import shutil
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from ruleout.report.html import html_report
from ruleout.verdicts.types import Judgement

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser")
DRIVER = shutil.which("chromedriver")
pytestmark = [
    pytest.mark.skipif(not CHROMIUM or not DRIVER, reason="no chromium and chromedriver installed"),
    pytest.mark.xdist_group("browser"),
]
OPTIONS = (
    "--headless",
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--disable-dev-shm-usage",
    # Smooth scrolling would move what is about to be clicked.
    "--force-prefers-reduced-motion",
)
HOSTILE = "<script>window.hurt = 1</script><img src=x onerror='window.hurt = 2'>"


@pytest.fixture(scope="module")
def browser(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Any]:
    webdriver = pytest.importorskip("selenium.webdriver", reason="selenium is not installed")
    from selenium.webdriver.chrome.service import Service

    options = webdriver.ChromeOptions()
    options.binary_location = CHROMIUM
    for option in OPTIONS:
        options.add_argument(option)
    options.add_argument(f"--user-data-dir={tmp_path_factory.mktemp('profile')}")
    options.set_capability("goog:loggingPrefs", {"browser": "ALL"})
    driver = webdriver.Chrome(options=options, service=Service(DRIVER))
    yield driver
    driver.quit()


@pytest.fixture(scope="module")
def address(
    tmp_path_factory: pytest.TempPathFactory, frost_judgement: Judgement, frost_case: Any
) -> str:
    judgement = replace(
        frost_judgement,
        meta={**frost_judgement.meta, "title": HOSTILE},
        findings=frost_judgement.findings.assign(message=HOSTILE),
    )
    path: Path = tmp_path_factory.mktemp("run") / "report.html"
    path.write_text(html_report(judgement, frost_case), encoding="utf-8")
    return path.as_uri()


@pytest.fixture
def opened(browser: Any, address: str) -> Any:
    from selenium.webdriver.support.ui import WebDriverWait

    browser.get_log("browser")
    browser.get("about:blank")
    browser.get(address)
    # The script stands at the end of the page: it has run once all of the page is there.
    WebDriverWait(browser, 60).until(
        lambda page: page.execute_script("return document.readyState") == "complete"
    )
    return browser


def set_width(browser: Any, width: int) -> None:
    metrics = {"width": width, "height": 900, "deviceScaleFactor": 1, "mobile": width < 500}
    browser.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", metrics)


def shown_rows(browser: Any) -> list[str]:
    rows: list[str] = browser.execute_script(
        "return [...document.querySelectorAll('#variant-table tbody tr')]"
        ".filter(r => r.getClientRects().length).map(r => r.querySelector('a').textContent)"
    )
    return rows


def choose(browser: Any, selector: str, value: str) -> None:
    from selenium.webdriver.common.by import By
    from selenium.webdriver.support.ui import Select

    Select(browser.find_element(By.CSS_SELECTOR, selector)).select_by_value(value)


def test_nothing_is_logged_and_no_text_of_the_user_runs(opened: Any) -> None:
    assert opened.get_log("browser") == []
    assert opened.execute_script("return window.hurt") is None
    assert opened.execute_script("return document.querySelector('h1').textContent") == HOSTILE


def test_a_column_sorts_both_ways_by_mouse_and_keyboard(opened: Any) -> None:
    from selenium.webdriver.common.by import By
    from selenium.webdriver.common.keys import Keys

    button = opened.find_element(By.XPATH, "//th/button[contains(., 'Variant')]")
    button.click()
    assert shown_rows(opened) == [f"v{i}" for i in range(1, 9)]
    button.send_keys(Keys.ENTER)
    assert shown_rows(opened) == [f"v{i}" for i in range(8, 0, -1)]
    header = opened.find_element(By.XPATH, "//th[button[contains(., 'Variant')]]")
    assert header.get_attribute("aria-sort") == "descending"


def test_sorting_by_p_is_by_number(opened: Any) -> None:
    from selenium.webdriver.common.by import By

    opened.find_element(By.XPATH, "//th/button[i[text()='p']]").click()
    assert shown_rows(opened)[-1] == "v3"
    assert set(shown_rows(opened)[:4]) == {"v1", "v2", "v4", "v6"}


def test_filters_by_contested_edge_and_verdict_combine_and_clear(opened: Any) -> None:
    from selenium.webdriver.common.by import By

    choose(opened, "select[data-of=protectant_on_kinase]", "present")
    assert set(shown_rows(opened)) == {"v3", "v5", "v7", "v8"}
    choose(opened, "select[data-of=cold_on_protectant]", "absent")
    assert set(shown_rows(opened)) == {"v3", "v5"}
    choose(opened, "select[name=verdict]", "ruled_out")
    assert shown_rows(opened) == []
    assert opened.find_element(By.ID, "none-shown").is_displayed()
    assert opened.find_element(By.ID, "shown").text == "0 of 8 shown"
    opened.find_element(By.CSS_SELECTOR, "#filters button[type=reset]").click()
    opened.execute_async_script("setTimeout(arguments[0], 50)")
    assert len(shown_rows(opened)) == 8


def test_a_link_in_the_table_opens_the_evidence(opened: Any) -> None:
    from selenium.webdriver.common.by import By

    assert not opened.find_element(By.CSS_SELECTOR, "#v1 .body").is_displayed()
    opened.find_element(By.CSS_SELECTOR, "#variant-table a[href='#v1']").click()
    opened.execute_async_script("setTimeout(arguments[0], 50)")
    assert opened.find_element(By.CSS_SELECTOR, "#v1 .body").is_displayed()
    failing = opened.find_elements(By.CSS_SELECTOR, "#v1 figure.fails")
    assert len(failing) == 1
    assert "fails: peak" in failing[0].text


@pytest.mark.parametrize("width", [1280, 390])
def test_nothing_is_cut_off(opened: Any, width: int) -> None:
    set_width(opened, width)
    opened.execute_script("document.querySelectorAll('details').forEach(d => { d.open = true; })")
    assert opened.execute_script("return document.documentElement.scrollWidth") <= width
    outside = opened.execute_script(
        """
        const wide = arguments[0];
        return [...document.querySelectorAll('main *, header *')].filter((e) => {
          if (e.closest('svg, .visually-hidden, thead')) return false;
          if (getComputedStyle(e).position === 'absolute') return false;
          const box = e.getBoundingClientRect();
          return box.width && (box.right > wide + 0.5 || box.left < -0.5);
        }).map((e) => e.outerHTML.slice(0, 120));
        """,
        width,
    )
    assert outside == []


def test_the_graphs_of_the_table_are_drawn(opened: Any) -> None:
    set_width(opened, 1280)
    sizes = opened.execute_script(
        "return [...document.querySelectorAll('td.picture svg')].map(s => {"
        "const b = s.getBBox(); return [b.width, b.height, s.querySelectorAll('use').length]; })"
    )
    assert len(sizes) == 8
    assert all(w > 20 and h > 5 and n == 4 for w, h, n in sizes)


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_text_has_contrast_in_light_and_dark(opened: Any, scheme: str) -> None:
    features = {"features": [{"name": "prefers-color-scheme", "value": scheme}]}
    opened.execute_cdp_cmd("Emulation.setEmulatedMedia", features)
    # WCAG 2.1, relative luminance: at least 4.5 to 1 for text.
    ratios = opened.execute_script(
        """
        const rgb = (text) => text.match(/[\\d.]+/g).map(Number);
        const light = (c) => {
          const [r, g, b] = rgb(c).slice(0, 3).map((v) => {
            const u = v / 255;
            return u <= 0.03928 ? u / 12.92 : ((u + 0.055) / 1.055) ** 2.4;
          });
          return 0.2126 * r + 0.7152 * g + 0.0722 * b;
        };
        const ground = (e) => {
          for (let at = e; at; at = at.parentElement) {
            const c = getComputedStyle(at).backgroundColor;
            if (rgb(c).length < 4 || rgb(c)[3] > 0) return c;
          }
          return 'rgb(255, 255, 255)';
        };
        const texts = document.querySelectorAll('p, h1, h2, .verdict, td, th, a, label, .flag');
        return [...texts].map((e) => {
          const [a, b] = [light(getComputedStyle(e).color), light(ground(e))];
          return (Math.max(a, b) + 0.05) / (Math.min(a, b) + 0.05);
        });
        """
    )
    assert min(ratios) >= 4.5


def test_print_opens_all_evidence(opened: Any) -> None:
    opened.execute_script("dispatchEvent(new Event('beforeprint'))")
    closed = "return document.querySelectorAll('details.evidence:not([open])').length"
    assert opened.execute_script(closed) == 0
    opened.execute_script("dispatchEvent(new Event('afterprint'))")
    assert opened.execute_script(closed) == 8
