"""A real server in a process of its own, and a real browser that must not have to complain about any page."""

import re
import shutil
import subprocess
import sys
import time
from pathlib import Path
from urllib.parse import urlsplit

import pytest

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser")
QUIET = (
    "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--disable-background-networking",
    "--disable-component-update", "--disable-sync",
)  # fmt: skip
START_SECONDS = 30


def pytest_collection_modifyitems(items):
    """Everything in this folder needs the browser, and comes last: its driver keeps this process's only event loop."""
    for item in items:
        if _is_here(item):
            item.add_marker("browser")
            if CHROMIUM is None:
                item.add_marker(pytest.mark.skip(reason="Debian's package chromium is not installed"))
    items.sort(key=_is_here)


def _is_here(item):
    return Path(__file__).parent in item.path.parents


@pytest.fixture(scope="session")
def server(tmp_path_factory):
    """The address of a server with an empty database and one worker."""
    folder = tmp_path_factory.mktemp("server")
    command = [
        sys.executable,
        "-m",
        "service",
        "serve",
        "--port",
        "0",
        "--data",
        str(folder / "data"),
        "--workers",
        "1",
    ]
    with (folder / "said").open("w") as said:
        process = subprocess.Popen(command, stdout=said, stderr=subprocess.STDOUT)
    try:
        yield _address(process, folder / "said")
    finally:
        process.terminate()
        try:
            process.wait(timeout=15)
        except subprocess.TimeoutExpired:
            process.kill()
            process.wait()
            raise AssertionError("the server did not end when it was asked to") from None


def _address(process, said):
    """Where the server listens, as soon as it says so."""
    until = time.monotonic() + START_SECONDS
    while process.poll() is None and time.monotonic() < until:
        if found := re.search(r"http://127\.0\.0\.1:\d+", said.read_text()):
            return found[0]
        time.sleep(0.05)
    raise AssertionError(f"the server did not start:\n{said.read_text()}")


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


@pytest.fixture(scope="session")
def audit():
    """Finds what hinders people who use a keyboard, a screen reader or strong contrast (axe-core, WCAG 2.2 A and AA).

    Gives one line per finding: the rule, and the first element that breaks it.
    """
    axe = pytest.importorskip("axe_playwright_python.sync_playwright").Axe()
    rules = ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice"]

    def findings(page):
        options = {"runOnly": {"type": "tag", "values": rules}, "resultTypes": ["violations"]}
        found = axe.run(page, options=options).response["violations"]
        return [
            f"{item['id']}: {item['nodes'][0]['html'][:160]} {item['nodes'][0]['failureSummary']}" for item in found
        ]

    return findings
