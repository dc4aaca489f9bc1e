"""A listening page made by the command, and a browser that opens it."""

import json
import shutil
from pathlib import Path

import pytest
from needed import require
from selenium import webdriver
from selenium.webdriver.chrome.service import Service

from livelag.cli.main import run

FLAGS = (
    "--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run",
    "--disable-background-networking", "--disable-component-update", "--disable-sync",
    "--mute-audio", "--window-size=1200,800",
)  # fmt: skip


def why_no_browser():
    """Why no page can be opened here; empty if one can."""
    missing = [name for name in ("chromium", "chromedriver") if shutil.which(name) is None]
    return f"not installed: {', '.join(missing)}" if missing else ""


@pytest.fixture(scope="session")
def made(tmp_path_factory):
    """The folder of a page of four sounds: two ranges at two rotations."""
    folder = tmp_path_factory.mktemp("page") / "to send"
    arguments = ["render", "--phrase", "run", "--rate", "8000", "--rotations", "0.1,0.6"]
    assert run([*arguments, "--page", str(folder), "--json"]) == 0
    return folder


@pytest.fixture(scope="session")
def chromium(tmp_path_factory):
    """A headless browser that keeps its console and its requests on record."""
    require(why_no_browser())
    options = webdriver.ChromeOptions()
    options.binary_location = shutil.which("chromium")
    for flag in FLAGS:
        options.add_argument(flag)
    options.add_argument(f"--user-data-dir={tmp_path_factory.mktemp('profile')}")
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    driver = webdriver.Chrome(options, Service(shutil.which("chromedriver")))
    yield Browser(driver)
    driver.quit()


@pytest.fixture
def page(chromium, made):
    """The page, newly opened, wide and in light colours; a quiet console is part of every test."""
    chromium.forget()
    chromium.show(made / "index.html")
    yield chromium
    assert chromium.console() == []
    for url in chromium.requests():
        assert url.startswith(("file://", "data:")), url


class Browser:
    """A driver, with what the tests ask of it."""

    def __init__(self, driver):
        self.driver = driver

    def show(self, path: Path, *, scripts=True, width=1200, height=800, **media):
        """Open a file in a window of a size, with media features by name."""
        self.command("Emulation.setScriptExecutionDisabled", value=not scripts)
        self.command(
            "Emulation.setDeviceMetricsOverride",
            width=width, height=height, deviceScaleFactor=1, mobile=width < 600,
        )  # fmt: skip
        features = [{"name": k.replace("_", "-"), "value": v} for k, v in media.items()]
        self.command("Emulation.setEmulatedMedia", features=features)
        self.driver.get(path.as_uri())

    def command(self, name, **arguments):
        return self.driver.execute_cdp_cmd(name, arguments)

    def run(self, script, *arguments):
        return self.driver.execute_script(script, *arguments)

    def console(self):
        return self.driver.get_log("browser")

    def requests(self):
        """Every URL asked for since the log was last read."""
        log = [json.loads(row["message"])["message"] for row in self.driver.get_log("performance")]
        sent = [message for message in log if message["method"] == "Network.requestWillBeSent"]
        return [message["params"]["request"]["url"] for message in sent]

    def click(self, selector):
        """Click the first that matches, clear of the line at the foot."""
        element = self.driver.find_element("css selector", selector)
        self.run("arguments[0].scrollIntoView({block: 'center'})", element)
        element.click()

    def forget(self):
        self.console()
        self.requests()
