"""Headless Chromium as tests drive it: offline, with an empty profile, and with a log of what a page asked for."""

from __future__ import annotations

import json
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import pytest

FLAGS = (
    "--headless",
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
)


class Browser:
    """One page at a time."""

    def __init__(self, driver: Any) -> None:
        self.driver = driver

    def open(self, page: Path, width: int = 1280, dark: bool = False) -> None:
        """Load a file in a window of this width, in pixels."""
        size = {"width": width, "height": 900, "deviceScaleFactor": 1, "mobile": False}
        self.command("Emulation.setDeviceMetricsOverride", **size)
        scheme = {"name": "prefers-color-scheme", "value": "dark" if dark else "light"}
        self.command("Emulation.setEmulatedMedia", media="", features=[scheme])
        for log in ("browser", "performance"):
            self.driver.get_log(log)
        self.driver.get(page.as_uri())

    def command(self, name: str, **parameters: object) -> Any:
        """A command of the browser's developer tools."""
        return self.driver.execute_cdp_cmd(name, parameters)

    def run(self, script: str, *values: object) -> Any:
        """What a script in the page returns."""
        return self.driver.execute_script(script, *values)

    def complaints(self) -> list[str]:
        """What the page wrote to the console since it was opened."""
        return [f"{entry['level']}: {entry['message']}" for entry in self.driver.get_log("browser")]

    def requests(self) -> list[str]:
        """Every address that was asked for since the page was opened."""
        events = [json.loads(entry["message"])["message"] for entry in self.driver.get_log("performance")]
        return [e["params"]["request"]["url"] for e in events if e["method"] == "Network.requestWillBeSent"]


@contextmanager
def chromium(profile: Path) -> Iterator[Browser]:
    """A browser with a new profile in `profile`; skips the test where Debian's chromium and chromium-driver are not."""
    binary, program = shutil.which("chromium"), shutil.which("chromedriver")
    if binary is None or program is None:
        pytest.skip("needs the programs chromium and chromedriver (Debian: chromium, chromium-driver)")
    from selenium.webdriver import Chrome
    from selenium.webdriver.chrome.options import Options
    from selenium.webdriver.chrome.service import Service

    options = Options()
    options.binary_location = binary
    for flag in (*FLAGS, f"--user-data-dir={profile}"):
        options.add_argument(flag)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    driver = Chrome(options=options, service=Service(program))
    try:
        yield Browser(driver)
    finally:
        driver.quit()
