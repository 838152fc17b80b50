"""A headless Chromium for the tests of what people see; they are skipped, with the reason, where there is none."""

from __future__ import annotations

import shutil
import time
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pytest

DEMO = Path(__file__).resolve().parents[2] / "data_demo"
SURVEYS = ("cast_main", "copper_bench", "hydrant_main", "mercury_bench")
#: px: a telephone and a desk.
WIDTHS = (400, 1400)


@pytest.fixture(scope="session")
def browser() -> Iterator[Any]:
    driver = pytest.importorskip(
        "playwright.sync_api", reason="playwright drives the browser; it is in the extra 'dev'"
    )
    found = shutil.which("chromium") or shutil.which("chromium-browser")
    if found is None:
        pytest.skip("no Chromium on this machine to show the page in")
    with driver.sync_playwright() as started:
        running = started.chromium.launch(
            executable_path=found, args=["--disable-gpu", "--disable-quic", "--disable-component-update"]
        )
        yield running
        running.close()


@dataclass
class Seen:
    """A page and what went on in it."""

    page: Any
    requests: list[str] = field(default_factory=list)
    errors: list[str] = field(default_factory=list)

    def wide(self) -> tuple[int, int]:
        """Return how wide the content is, and the window, px."""
        found = self.page.evaluate(
            "[document.documentElement.scrollWidth, document.body.scrollWidth, document.documentElement.clientWidth]"
        )
        return max(found[:2]), found[2]

    def wait_for(self, condition: str, seconds: float) -> None:
        """Wait until JavaScript says so; the page may load anew meanwhile.

        The page's own rules stay in force: its condition is asked from outside, since inside nothing may be evaluated.
        """
        from playwright.sync_api import Error  # noqa: PLC0415 (where it is missing the tests are skipped)

        until = time.monotonic() + seconds
        while time.monotonic() < until:
            try:
                if self.page.evaluate(condition):
                    return
            except Error as error:
                if "context was destroyed" not in str(error) and "navigat" not in str(error):
                    raise
            self.page.wait_for_timeout(50)  # lets the page's own events through
        shown = self.page.evaluate("document.body.innerText.slice(0, 1500)")
        raise AssertionError(f"not within {seconds} s: {condition}; the page shows: {shown}")


@pytest.fixture
def tab(browser: Any, request: pytest.FixtureRequest) -> Iterator[Seen]:
    """An empty tab, by default as wide as a desk."""
    context = browser.new_context(viewport={"width": getattr(request, "param", WIDTHS[-1]), "height": 900})
    seen = Seen(context.new_page())
    seen.page.on("request", lambda one: seen.requests.append(one.url))
    seen.page.on("pageerror", lambda error: seen.errors.append(str(error)))
    seen.page.on(
        "console", lambda one: seen.errors.append(one.text) if one.type in ("error", "warning") else None
    )
    yield seen
    context.close()
