"""A browser for the tests of the page, without a network."""

import shutil
import subprocess
import tarfile

import pytest

from geoshape.report import ReportOptions, build_report
from tests.report import made

BROWSERS = ("chromium", "chromium-browser", "google-chrome-stable", "google-chrome")
ARGUMENTS = (
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
)


@pytest.fixture(scope="session")
def browser():
    """Chromium, or a skip that says what is missing."""
    driver = pytest.importorskip("playwright.sync_api", reason="Playwright for Python is not installed")
    program = next(filter(None, map(shutil.which, BROWSERS)), None)
    if program is None:
        pytest.skip(f"no Chromium found (looked for {', '.join(BROWSERS)}): the page is not tried in a browser")
    with driver.sync_playwright() as playwright:
        chromium = playwright.chromium.launch(executable_path=program, args=list(ARGUMENTS))
        yield chromium
        chromium.close()


class Opened:
    """A page in the browser, and what it complained of."""

    def __init__(self, browser, path, **settings):
        self.context = browser.new_context(offline=True, **settings)
        self.page = self.context.new_page()
        self.complaints, self.requests = [], []
        self.page.on("pageerror", lambda error: self.complaints.append(str(error)))
        self.page.on(
            "console",
            lambda message: self.complaints.append(message.text) if message.type in {"error", "warning"} else None,
        )
        self.page.on("request", lambda request: self.requests.append(request.url))
        self.page.goto(path.as_uri())
        self.page.wait_for_function("document.documentElement.dataset.figures === 'ready'")

    def do(self, script, argument=None):
        return self.page.evaluate(script, argument)

    def text(self, selector):
        return self.page.locator(selector).inner_text()

    def close(self):
        self.context.close()


@pytest.fixture(scope="session")
def decided_page(tmp_path_factory):
    """The lakes with groups, flags and errors, written as a page."""
    path = tmp_path_factory.mktemp("page") / "decided.html"
    options = ReportOptions(class_column="lake <i>type</i>", map_column="polsby_popper")
    path.write_text(build_report(made.decided(), options), encoding="utf-8")
    return path


@pytest.fixture(scope="session")
def opened(browser, decided_page):
    """That page, opened once on a wide screen; a test leaves it as it likes."""
    found = Opened(browser, decided_page, viewport={"width": 1440, "height": 900})
    yield found
    found.close()


@pytest.fixture(scope="session")
def axe(tmp_path_factory):
    """The script of axe-core, fetched with npm where that is possible."""
    npm = shutil.which("npm")
    if npm is None:
        pytest.skip("npm is not installed: axe-core cannot be had")
    folder = tmp_path_factory.mktemp("axe")
    command = [npm, "pack", "axe-core@4", "--silent", "--pack-destination", str(folder)]
    try:
        subprocess.run(command, check=True, capture_output=True, timeout=60, cwd=folder)
    except (subprocess.SubprocessError, OSError) as error:
        pytest.skip(f"axe-core cannot be had from the registry: {error}")
    [archive] = folder.glob("axe-core-*.tgz")
    with tarfile.open(archive) as packed:
        return packed.extractfile("package/axe.min.js").read().decode("utf-8")
