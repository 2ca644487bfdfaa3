"""A real server in a process of its own, and a real browser that must not have to complain about any page."""

import re
import shutil
import subprocess
import sys
import threading
from urllib.parse import urlsplit

import pytest

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser")
QUIET = (
    "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--disable-background-networking",
    "--disable-component-update", "--disable-sync",
)  # fmt: skip
START_SECONDS = 30


def pytest_collection_modifyitems(items):
    """Everything in this folder needs the browser."""
    for item in items:
        if "tests/browser/" in item.nodeid:
            item.add_marker("browser")
            if CHROMIUM is None:
                item.add_marker(pytest.mark.skip(reason="Debian's package chromium is not installed"))


@pytest.fixture(scope="session")
def server(tmp_path_factory):
    """The address of a server with an empty database and one worker."""
    data = tmp_path_factory.mktemp("data")
    process = subprocess.Popen(
        [sys.executable, "-m", "service", "serve", "--port", "0", "--data", str(data), "--workers", "1"],
        stdout=subprocess.PIPE, stderr=subprocess.STDOUT, text=True,
    )  # fmt: skip
    too_long = threading.Timer(START_SECONDS, process.kill)
    too_long.start()
    said = []
    address = None
    for line in process.stdout:
        said.append(line)
        if found := re.search(r"http://127\.0\.0\.1:\d+", line):
            address = found[0]
            break
    too_long.cancel()
    assert address, "the server did not start:\n" + "".join(said)
    # What it says later must not fill the pipe and stop it.
    threading.Thread(target=process.stdout.read, daemon=True).start()
    yield address
    process.terminate()
    try:
        process.wait(timeout=15)
    except subprocess.TimeoutExpired:
        process.kill()
        raise AssertionError("the server did not end when it was asked to") from None


@pytest.fixture(scope="session")
def browser():
    """One Chromium for all tests."""
    playwright = pytest.importorskip("playwright.sync_api")
    with playwright.sync_playwright() as driver:
        chromium = driver.chromium.launch(executable_path=CHROMIUM, args=list(QUIET))
        yield chromium
        chromium.close()


@pytest.fixture
def open_page(browser, server):
    """Makes pages of browser windows of their own: `open_page("/compose", width=360, color_scheme="dark")`.

    At the end of the test nothing may have gone wrong in any of them: no violation of the security policy, no error
    on the console, no exception, no request to another host.  `page.expected` lists texts that may be complained about.
    """
    contexts, wrong = [], []

    def opened(path="/", *, width=1200, height=900, expected=(), **options):
        context = browser.new_context(base_url=server, viewport={"width": width, "height": height}, **options)
        contexts.append(context)
        page = context.new_page()

        def note(text):
            if not any(part in text for part in expected):
                wrong.append(f"{path}: {text}")

        page.on("console", lambda message: note(message.text) if message.type in ("error", "warning") else None)
        page.on("pageerror", lambda error: note(f"exception: {error}"))
        page.on("request", lambda request: note(f"foreign request: {request.url}") if _foreign(request) else None)
        page.goto(path)
        return page

    def _foreign(request):
        url = urlsplit(request.url)
        return url.scheme in ("http", "https", "ws", "wss") and f"{url.scheme}://{url.netloc}" != server

    yield opened
    for context in contexts:
        context.close()
    assert wrong == []
