"""A real browser, driven without a screen; tests are skipped aloud where there is none, unless CI is set."""

import json
import os
import shutil
from collections.abc import Callable, Iterator
from typing import Any

import pytest

WIDE, TALL = 900, 1200
LISTEN = """
const room = document.getElementById('moving');
const plain = (key, value) => (value === Infinity ? 'inf' : value === -Infinity ? '-inf' : value);
room.addEventListener('gain-moved', (event) => { window.heard = JSON.stringify(event.detail, plain); });
"""


def _absent() -> str:
    """What is missing for these tests, or nothing."""
    missing = [name for name in ("chromium", "chromedriver") if shutil.which(name) is None]
    try:
        import selenium  # noqa: F401
    except ImportError:
        missing.append("the Python package selenium")
    return ", ".join(missing)


@pytest.fixture(scope="session")
def browser() -> Iterator[Any]:
    """Headless Chromium that keeps its console and its requests."""
    absent = _absent()
    if absent:
        told = f"no browser tests: {absent} not found (apt-get install chromium chromium-driver; pip install selenium)"
        if os.environ.get("CI"):
            pytest.fail(told)
        pytest.skip(told)
    from selenium import webdriver

    options = webdriver.ChromeOptions()
    for argument in ("--headless=new", "--no-sandbox", "--disable-gpu", "--disable-dev-shm-usage", "--hide-scrollbars"):
        options.add_argument(argument)
    options.binary_location = str(shutil.which("chromium"))
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    service = webdriver.ChromeService(executable_path=shutil.which("chromedriver"))
    driver = webdriver.Chrome(options=options, service=service)
    yield driver
    driver.quit()


class Page:
    """A report opened in the browser."""

    def __init__(self, driver: Any, url: str) -> None:
        self.driver, self.url = driver, url

    def run(self, script: str, *arguments: Any) -> Any:
        """The value of a script's return."""
        return self.driver.execute_script(script, *arguments)

    def tell(self, command: str, **parameters: Any) -> Any:
        """A command of the browser's own protocol."""
        return self.driver.execute_cdp_cmd(command, parameters)

    def size(self, wide: int, tall: int = TALL) -> None:
        """The window's size in pixels."""
        self.tell("Emulation.setDeviceMetricsOverride", width=wide, height=tall, deviceScaleFactor=1, mobile=False)

    def media(self, kind: str = "", ground: str = "light") -> None:
        """Screen or print, light or dark."""
        features = [{"name": "prefers-color-scheme", "value": ground}]
        self.tell("Emulation.setEmulatedMedia", media=kind, features=features)

    @property
    def ribbon(self) -> Any:
        """The slider."""
        return self.driver.find_element("css selector", "[role=slider]")

    @property
    def heard(self) -> dict[str, Any]:
        """What the page said of the gain it last moved to."""
        found: dict[str, Any] = json.loads(self.run("return window.heard"))
        return found

    def console(self) -> list[str]:
        """What the console was told since last asked."""
        return [entry["message"] for entry in self.driver.get_log("browser")]

    def requests(self) -> list[str]:
        """Addresses asked for since last asked."""
        events = [json.loads(entry["message"])["message"] for entry in self.driver.get_log("performance")]
        return [event["params"]["request"]["url"] for event in events if event["method"] == "Network.requestWillBeSent"]


@pytest.fixture
def opened(browser: Any, tmp_path: Any) -> Callable[[str], Page]:
    """A function that opens a report; the browser is off the network, on a light screen."""

    def open_page(text: str) -> Page:
        path = tmp_path / "report.html"
        path.write_text(text, "utf-8")
        page = Page(browser, path.as_uri())
        page.console(), page.requests()
        page.tell("Network.enable")
        page.tell("Network.emulateNetworkConditions", offline=True, latency=0, downloadThroughput=0, uploadThroughput=0)
        page.media()
        page.size(WIDE)
        browser.get(page.url)
        if "moving-data" in text:
            page.run(LISTEN)
        return page

    return open_page
