"""Chromium without a window, driven by its own driver; what the tests of the page ask of it."""

import base64
import json
import os
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

FLAGS = (
    "--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--disable-dev-shm-usage",
    "--disable-background-networking", "--disable-component-update", "--disable-sync", "--window-size=1280,900",
)  # fmt: skip
REQUIRED = "BAYESMED_BROWSER"
"""Environment variable: with the value "required" a missing Chromium is an error, not a reason to skip."""


def why_missing() -> str:
    """Return why no browser can be had, or nothing."""
    if os.environ.get(REQUIRED) == "required":
        return ""
    missing = [name for name in ("chromium", "chromedriver") if shutil.which(name) is None]
    return f"{' and '.join(missing)} not found (Debian: apt-get install chromium chromium-driver)" if missing else ""


@contextmanager
def chromium() -> Iterator["Browser"]:
    """Start Chromium with a fresh profile and end it."""
    from selenium import webdriver
    from selenium.webdriver.chrome.service import Service

    options = webdriver.ChromeOptions()
    options.binary_location = shutil.which("chromium") or "chromium"
    with TemporaryDirectory(ignore_cleanup_errors=True) as profile:
        for flag in (*FLAGS, f"--user-data-dir={profile}"):
            options.add_argument(flag)
        options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
        driver = webdriver.Chrome(options=options, service=Service(shutil.which("chromedriver") or "chromedriver"))
        try:
            yield Browser(driver)
        finally:
            driver.quit()


class Browser:
    """The few things that tests do with a browser."""

    def __init__(self, driver: Any) -> None:
        self.driver = driver

    def open(self, path: Path, fragment: str = "") -> None:
        """Open a file afresh, with empty logs, in a light window of 1280 pixels."""
        self.driver.get("about:blank")
        self.logged()
        self.requested()
        self.media()
        self.width(1280)
        self.driver.get(path.as_uri() + fragment)
        self.settled()

    def run(self, script: str, *arguments: Any) -> Any:
        """Run a script and return what it returns."""
        return self.driver.execute_script(script, *arguments)

    def settled(self) -> None:
        """Wait until what was asked for is drawn."""
        self.driver.execute_async_script(
            "const done = arguments[0]; requestAnimationFrame(() => requestAnimationFrame(() => setTimeout(done, 0)))"
        )

    def text(self, name: str) -> str:
        """Return the text of the element with an id."""
        return str(self.run("return document.getElementById(arguments[0]).textContent", name))

    def element(self, name: str) -> Any:
        """Return the element with an id."""
        return self.driver.find_element("id", name)

    def width(self, pixels: int) -> None:
        """Make the window that many pixels wide."""
        size = {"width": pixels, "height": 900, "deviceScaleFactor": 1, "mobile": False}
        self.command("Emulation.setDeviceMetricsOverride", size)

    def media(self, kind: str = "screen", scheme: str = "light") -> None:
        """Take a medium and a colour scheme for the page's."""
        features = [{"name": "prefers-color-scheme", "value": scheme}]
        self.command("Emulation.setEmulatedMedia", {"media": kind, "features": features})

    def command(self, name: str, parameters: dict[str, Any]) -> Any:
        """Send a command of the browser's own protocol."""
        return self.driver.execute_cdp_cmd(name, parameters)

    def printed(self) -> bytes:
        """Return the page printed to PDF."""
        return base64.b64decode(self.command("Page.printToPDF", {"printBackground": True})["data"])

    def logged(self) -> list[str]:
        """Return what was written to the console since asked last."""
        return [entry["message"] for entry in self.driver.get_log("browser")]

    def requested(self) -> list[str]:
        """Return the addresses asked for since asked last, data of the page itself left out."""
        events = [json.loads(entry["message"])["message"] for entry in self.driver.get_log("performance")]
        asked = [e["params"]["request"]["url"] for e in events if e["method"] == "Network.requestWillBeSent"]
        return [address for address in asked if not address.startswith(("data:", "about:"))]

    def names(self) -> list[tuple[str, str]]:
        """Return (role, name) of every node of the accessibility tree that is not ignored."""
        self.command("Accessibility.enable", {})
        nodes = self.command("Accessibility.getFullAXTree", {})["nodes"]
        return [
            (node["role"]["value"], node.get("name", {}).get("value", "")) for node in nodes if not node.get("ignored")
        ]
