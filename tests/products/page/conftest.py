import shutil

import pytest

from fieldgen.products.page import write_page
from tests.products.page.folders import write_outputs

BROWSERS = ("chromium", "chromium-browser", "google-chrome", "chrome")


@pytest.fixture(scope="session")
def outputs(tmp_path_factory):
    """An output folder that the program made."""
    return write_outputs(tmp_path_factory.mktemp("page"))


@pytest.fixture(scope="session")
def page_file(outputs):
    """Its page."""
    return write_page(outputs, outputs / "page.html", None)


@pytest.fixture(scope="session")
def browser():
    """A headless Chromium; tests that need one skip without it."""
    playwright = pytest.importorskip("playwright.sync_api", reason="playwright is not installed")
    program = next(filter(None, map(shutil.which, BROWSERS)), None)
    if program is None:
        pytest.skip("no Chromium on this machine")
    with playwright.sync_playwright() as driver:
        browser = driver.chromium.launch(executable_path=program, args=["--no-sandbox"])
        yield browser
        browser.close()
