"""A served page and a real Chromium; every request leaves a trace, and none may leave this machine."""

import os
import shutil
import threading
from urllib.parse import urlsplit

import pytest

from app.server import Served
from engine.design import Design

NAMES = ("chromium", "chromium-browser", "google-chrome", "google-chrome-stable", "chrome")
FLAGS = ["--no-sandbox", "--disable-gpu", "--disable-background-networking"]
REQUIRED = os.environ.get("ELASTOVOX_REQUIRE_BROWSER") == "1"
# Every element in the page that fits a selector, shadow roots included.
DEEP = """(selector) => {
  const deep = (root) => {
    const found = [...root.querySelectorAll(selector)]
    for (const host of root.querySelectorAll("*")) { if (host.shadowRoot) { found.push(...deep(host.shadowRoot)) } }
    return found
  }
  return deep(document)
}"""


def _missing(what):
    """Say what the browser tests lack: a failure where they are required."""
    text = f"browser tests need {what}; set ELASTOVOX_REQUIRE_BROWSER=1 to make its lack a failure"
    if REQUIRED:
        pytest.fail(text, pytrace=False)
    pytest.skip(text)


@pytest.fixture(scope="session")
def chromium():
    """A running Chromium."""
    try:
        from playwright.sync_api import sync_playwright
    except ImportError:
        _missing('Playwright (pip install -e ".[test]")')
    path = next(filter(None, map(shutil.which, NAMES)), None)
    if path is None:
        _missing(f"a Chromium on the PATH (looked for {', '.join(NAMES)})")
    with sync_playwright() as playwright:
        browser = playwright.chromium.launch(executable_path=path, args=FLAGS)
        yield browser.new_context()      # one for all visits: scripts are read and compiled once
        browser.close()


@pytest.fixture(scope="session")
def address():
    """Address of the page, served by a thread of this process."""
    started, box = threading.Event(), []

    def serve():
        served = Served(Design(), "127.0.0.1", None, 5800)
        box.append(served)
        served.server.start()
        served.loop.add_callback(started.set)
        served.loop.start()
        served.close()

    thread = threading.Thread(target=serve)
    thread.start()
    assert started.wait(60)
    yield box[0].url
    box[0].loop.add_callback(box[0].loop.stop)
    thread.join(60)


class Visit:
    """One visitor's page, with what tests look at."""

    def __init__(self, page):
        self.page = page
        self.faults = []
        page.on("console", self._heard)
        page.on("pageerror", lambda error: self.faults.append(f"error in the page: {error}"))
        page.on("requestfailed", lambda request: self.faults.append(f"failed: {request.url} {request.failure}"))
        page.route("**/*", self._route)
        page.set_default_timeout(30_000)

    def _heard(self, message):
        if message.type == "error":
            self.faults.append(f"console: {message.text}")

    def _route(self, route):
        url = urlsplit(route.request.url)
        if url.scheme in ("data", "blob") or url.hostname == "127.0.0.1":
            route.continue_()
        else:
            self.faults.append(f"outside request: {route.request.url}")
            route.abort()

    def open(self, address):
        """Open the page and wait until its plots are painted."""
        self.page.goto(address)
        self.page.wait_for_function("window.Bokeh && Bokeh.documents.length > 0")
        self.wait("data('level').frequency.length > 10")
        self.page.wait_for_function(f"({DEEP})('canvas').length > 0")
        self.page.locator(".region-level canvas").first.wait_for()
        return self

    def evaluate(self, expression):
        """Value of an expression in which ``data(name)`` is a source's data and ``deep(selector)`` finds elements."""
        return self.page.evaluate(self._with_helpers(expression))

    def wait(self, expression):
        """Wait until such an expression is true."""
        self.page.wait_for_function(self._with_helpers(expression))

    def _with_helpers(self, expression):
        return (f"(() => {{ const deep = {DEEP}; "
                "const data = (name) => Bokeh.documents[0].get_model_by_name(name).data; "
                f"return {expression} }})()")

    def level(self):
        """Frequencies and levels of the level plot, as lists."""
        return tuple(self.evaluate(f"Array.from(data('level').{column})") for column in ("frequency", "level_db"))

    def changed(self, act):
        """Act, and wait until the level plot has other data."""
        self.page.evaluate("window.before = Bokeh.documents[0].get_model_by_name('level').data")
        act()
        self.wait("data('level') !== window.before")

    def words(self, selector):
        """What an element of the plots says."""
        return self.evaluate(f"deep('{selector}')[0].shadowRoot.querySelector('.bk-clearfix').textContent")

    def slider(self, key):
        """The slider of a field."""
        return self.page.locator(f".field-{key.replace('.', '-')} input[type=range]")

    def entry(self, key):
        """The typed entry of a field."""
        return self.page.locator(f".field-{key.replace('.', '-')} input.entry")

    def message(self, key):
        """The message at a field."""
        return self.page.locator(f".field-{key.replace('.', '-')} .message")

    def type(self, key, text):
        """Type a value and press Enter."""
        self.entry(key).fill(text)
        self.entry(key).press("Enter")

    def button(self, words):
        """One of the header's actions."""
        return self.page.locator("button.action", has_text=words)


@pytest.fixture
def visitor(chromium, address):
    """Makes visitors; each must leave without an outside request, a failed one or an error."""
    visits = []

    def visit(width=1440, height=900, at=""):
        made = Visit(chromium.new_page())
        made.page.set_viewport_size({"width": width, "height": height})
        visits.append(made)
        return made.open(address + at)

    yield visit
    for made in visits:
        made.page.close()
    assert [fault for made in visits for fault in made.faults] == []


@pytest.fixture
def visit(visitor):
    """One visitor at the page of the default design."""
    return visitor()
