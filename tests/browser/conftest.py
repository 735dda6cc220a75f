"""A real browser, headless, and the report opened in it from a file."""

import importlib.util
import shutil
from pathlib import Path

import pytest

INVENTED = Path(__file__).parents[1] / "unit" / "report" / "invented.py"
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


@pytest.fixture(scope="session")
def driver(tmp_path_factory):
    browser, control = shutil.which("chromium"), shutil.which("chromedriver")
    if not browser or not control:
        pytest.skip("chromium or chromedriver is not installed")
    from selenium import webdriver
    from selenium.webdriver.chrome.service import Service

    options = webdriver.ChromeOptions()
    options.binary_location = browser
    for flag in FLAGS:
        options.add_argument(flag)
    options.add_argument(f"--user-data-dir={tmp_path_factory.mktemp('profile')}")
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    session = webdriver.Chrome(service=Service(control), options=options)
    yield session
    session.quit()


@pytest.fixture(scope="session")
def invented():
    spec = importlib.util.spec_from_file_location("mtest_tests_invented_browser", INVENTED)
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="session", params=["four_arms", "two_families", "crowded"])
def report(request, invented, tmp_path_factory):
    """The path of a report page."""
    from mtest.report.page import render_page

    path = tmp_path_factory.mktemp("page") / f"{request.param}.html"
    path.write_text(render_page(getattr(invented, request.param)()), encoding="utf-8")
    return path


@pytest.fixture
def opened(driver, report):
    """The driver with the page freshly open at 1280 pixels."""
    resize(driver, 1280)
    for kind in ("browser", "performance"):
        driver.get_log(kind)  # empties it
    driver.get(report.as_uri())
    return driver


def resize(driver, width):
    """Set the viewport, which a headless window cannot make as narrow as a telephone."""
    size = {"width": width, "height": 900, "deviceScaleFactor": 1, "mobile": False}
    driver.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", size)


@pytest.fixture(scope="session")
def set_width():
    return resize
