"""A browser, JupyterLab on copies of the notebooks, and a page that lets nothing out."""

from __future__ import annotations

import os
import shutil
from pathlib import Path

import pytest

from fieldmap.shipped import notebook_folder

from .lab_server import serving

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser")
FLAGS = (
    *("--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run"),
    *("--disable-background-networking", "--disable-component-update", "--disable-sync"),
)
SIZE = {"width": 1366, "height": 768}
INSIDE = ("http://127.0.0.1:", "ws://127.0.0.1:", "data:", "blob:")


def pytest_collection_modifyitems(config, items):
    """Leave the dark theme to the tests that are about it, unless FIELDMAP_THEMES says "both"."""
    if os.environ.get("FIELDMAP_THEMES") == "both":
        return
    dark = [
        one
        for one in items
        if getattr(one, "callspec", None) is not None
        and one.callspec.params.get("lab") == "Dark"
        and one.get_closest_marker("themed") is None
    ]
    config.hook.pytest_deselected(items=dark)
    items[:] = [one for one in items if one not in dark]


@pytest.fixture(autouse=True)
def _nothing_kept(request):
    """Panels take up what was set the last time: begin with nothing set."""
    if "lab" in request.fixturenames:
        for kept in request.getfixturevalue("lab")[1].rglob("*.panel.json"):
            kept.unlink()


@pytest.fixture(scope="module", params=["Light", "Dark"])
def lab(request, tmp_path_factory):
    """Theme, folder of the notebooks, base address and token of a server."""
    root = tmp_path_factory.mktemp("notebooks")
    for file in notebook_folder().glob("*.ipynb"):
        shutil.copy(file, root)  # a run writes outputs
    with serving(root, tmp_path_factory.mktemp("home"), request.param) as (base, token):
        yield request.param, root, base, token


@pytest.fixture(scope="module")  # not longer: its running loop breaks asyncio.run() elsewhere
def browser():
    playwright = pytest.importorskip("playwright.sync_api")
    if CHROMIUM is None:
        pytest.skip("no chromium")
    with playwright.sync_playwright() as started:
        one = started.chromium.launch(executable_path=CHROMIUM, args=list(FLAGS))
        yield one
        one.close()


@pytest.fixture
def page(browser):
    """A page that stops and notes every request to elsewhere, and every error of its scripts."""
    context = browser.new_context(viewport=SIZE)
    context.set_default_timeout(30_000)
    one = context.new_page()
    outside, errors = [], []
    one.on("pageerror", lambda error: errors.append(str(error)))

    def gate(route):
        if route.request.url.startswith(INSIDE):
            route.continue_()
        else:
            outside.append(route.request.url)
            route.abort()

    context.route("**/*", gate)
    yield one
    context.close()
    assert outside == []
    assert errors == []


@pytest.fixture
def shoot(page, lab):
    """Takes a picture of the page, where FIELDMAP_SHOTS names a folder."""

    def take(name):
        folder = os.environ.get("FIELDMAP_SHOTS")
        if folder:
            Path(folder).mkdir(parents=True, exist_ok=True)
            page.screenshot(path=Path(folder, f"{name}-{lab[0].lower()}.png"))

    return take
