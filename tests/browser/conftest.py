"""A real browser over the pages; its tests are skipped where there is none."""

import shutil
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest


class Browser:
    """A page in a headless browser, opened from its file."""

    def __init__(self, driver: Any, downloads: Path) -> None:
        self.driver = driver
        self.downloads = downloads

    def open(self, page: Path, width: int = 1100) -> None:
        """Open a file at a width in CSS pixels; what the console held before is forgotten."""
        size = {"width": width, "height": 900, "deviceScaleFactor": 1, "mobile": False}
        self.driver.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", size)
        self.driver.get_log("browser")
        self.driver.get(page.as_uri())

    def run(self, script: str, *arguments: Any) -> Any:
        """Run a piece of script in the page and return its value."""
        return self.driver.execute_script(script, *arguments)

    def wait(self, script: str, *arguments: Any) -> Any:
        """Run a script until it returns something true."""
        from selenium.webdriver.support.ui import WebDriverWait

        return WebDriverWait(self.driver, 60, 0.02).until(lambda driver: driver.execute_script(script, *arguments))

    def complaints(self) -> list[str]:
        """What the console holds of errors and warnings since the page was opened."""
        return [entry["message"] for entry in self.driver.get_log("browser")]

    def saved(self, name: str) -> bytes:
        """Return the content of a file once it has been saved."""
        for _ in range(500):
            if (self.downloads / name).exists():
                return (self.downloads / name).read_bytes()
            time.sleep(0.02)
        raise AssertionError(f"{name} was not saved: {[path.name for path in self.downloads.iterdir()]}")

    def overflow(self) -> int:
        """How many pixels the page is wider than its window."""
        return int(self.run("const e = document.documentElement; return e.scrollWidth - e.clientWidth"))


@pytest.fixture(scope="session")
def browser(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Browser]:
    """The browser; one for all tests."""
    command, program = shutil.which("chromedriver"), shutil.which("chromium") or shutil.which("google-chrome")
    if command is None or program is None:
        pytest.skip("there is no chromium with its chromedriver on this machine")
    from selenium import webdriver
    from selenium.webdriver.chrome.service import Service

    downloads = tmp_path_factory.mktemp("downloads")
    options = webdriver.ChromeOptions()
    options.binary_location = program
    for word in ("--headless=new", "--no-sandbox", "--disable-gpu", "--disable-dev-shm-usage"):
        options.add_argument(word)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL"})
    options.add_experimental_option("prefs", {"download.default_directory": str(downloads)})
    driver = webdriver.Chrome(options=options, service=Service(command))
    try:
        yield Browser(driver, downloads)
    finally:
        driver.quit()
