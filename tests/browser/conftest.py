"""A real Chromium, cut off from every network; skipped with a plain reason where there is none."""

import os
import shutil

import pytest

FLAGS = [
    "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run",
    "--disable-background-networking", "--disable-component-update", "--disable-sync",
    "--disable-dev-shm-usage",
]  # fmt: skip
LOOPBACK = ("http://127.0.0.1", "ws://127.0.0.1", "http://localhost", "ws://localhost")


def _chromium():
    return shutil.which("chromium") or shutil.which("chromium-browser")


@pytest.fixture(scope="session")
def browser():
    """Chromium through playwright; where it is needed (CI) its lack is a failure, not a skip."""
    path = _chromium()
    if path is None:
        why = "no Chromium on this machine (Debian: apt-get install chromium)"
        if os.environ.get("LFPTOOLS_NEEDS_BROWSER"):
            pytest.fail(why)
        pytest.skip(why)
    from playwright.sync_api import sync_playwright

    with sync_playwright() as started:
        opened = started.chromium.launch(executable_path=path, args=FLAGS)
        yield opened
        opened.close()


@pytest.fixture
def page(browser):
    """Yield a page at 1280 x 720; `page.outside` lists requests beyond loopback, all aborted."""
    context = browser.new_context(viewport={"width": 1280, "height": 720})
    opened = context.new_page()
    outside = []

    def guard(route):
        url = route.request.url
        if url.startswith((*LOOPBACK, "data:", "blob:", "file:")):
            route.continue_()
        else:
            outside.append(url)
            route.abort()

    context.route("**/*", guard)
    opened.outside = outside
    yield opened
    context.close()
