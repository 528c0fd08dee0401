"""A real Chromium, driven through its own driver; the tests skip plainly where there is none."""

from __future__ import annotations

import shutil
import sys
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import TYPE_CHECKING

import pytest

from synthetic_results import Synthetic, synthetic
from tapband.report.publish import publish

if TYPE_CHECKING:
    from selenium.webdriver import Chrome

FLAGS = (
    "--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run",
    "--disable-background-networking", "--disable-component-update", "--disable-sync", "--hide-scrollbars",
)  # fmt: skip
HOSTILE = [
    "<script>window.hacked=1</script>", "</script><script>window.hacked=1</script>",
    "<img src=x onerror=window.hacked=1>", "=HYPERLINK(\"http://x.invalid\")",
    "'\" onmouseover=window.hacked=1 x='",
    "{{ 7*7 }}{% raw %}", "two\nlines", "x" * 400, "翼型 Ωμέγα \u202e🛩️", "javascript:window.hacked=1",
]  # fmt: skip


def pytest_collection_modifyitems(items: list[pytest.Item]) -> None:
    """Mark everything here ``browser``."""
    for item in items:
        if Path(__file__).parent in item.path.parents:
            item.add_marker("browser")


@pytest.fixture(scope="session")
def chromium(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Chrome]:
    """One browser for all tests, with a new profile."""
    webdriver = pytest.importorskip("selenium.webdriver", reason="selenium is not installed")
    program, driver = shutil.which("chromium"), shutil.which("chromedriver")
    if program is None or driver is None:
        pytest.skip("chromium or its driver is not installed (apt-get install chromium chromium-driver)")
    options = webdriver.ChromeOptions()
    options.binary_location = program
    for flag in (*FLAGS, f"--user-data-dir={tmp_path_factory.mktemp('profile')}"):
        options.add_argument(flag)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    service = webdriver.ChromeService(executable_path=driver, log_output=sys.stderr)
    browser = webdriver.Chrome(options=options, service=service)
    yield browser
    browser.quit()


Show = Callable[..., "Chrome"]


@pytest.fixture
def show(chromium: Chrome) -> Show:
    """Opens a file at a width, in a colour scheme, with or without script, and returns the browser."""

    def opened(
        path: Path, width: int = 1280, dark: bool = False, script: bool = True, hash_: str = ""
    ) -> Chrome:
        scheme = [{"name": "prefers-color-scheme", "value": "dark" if dark else "light"}]
        size = {"width": width, "height": 900, "deviceScaleFactor": 1, "mobile": width < 600}
        chromium.execute_cdp_cmd("Emulation.setEmulatedMedia", {"media": "", "features": scheme})
        chromium.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", size)
        chromium.execute_cdp_cmd("Emulation.setScriptExecutionDisabled", {"value": not script})
        chromium.get("about:blank")
        for log in ("browser", "performance"):
            chromium.get_log(log)
        chromium.get(path.as_uri() + hash_)
        return chromium

    return opened


@pytest.fixture(scope="session")
def results() -> Synthetic:
    """Twelve points in two runs."""
    return synthetic()


@pytest.fixture(scope="session")
def page(results: Synthetic, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The report of the twelve points."""
    return publish(results, tmp_path_factory.mktemp("small") / "out") / "report.html"


@pytest.fixture(scope="session")
def hostile_page(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A report whose every name tries something."""
    return (
        publish(synthetic(12, 21, 15, names=HOSTILE), tmp_path_factory.mktemp("bad") / "out") / "report.html"
    )
