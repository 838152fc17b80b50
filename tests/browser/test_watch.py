"""`gradeline watch` as somebody at the rig sees it: the page follows the files."""

from __future__ import annotations

import re
import shutil
import signal
import subprocess
import sys
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import pytest

from tests.browser.conftest import DEMO, WIDTHS

#: s: what a change may take until it is to be seen.
SOON = 60
#: The digit that was written down wrongly in run 7 of the demo survey, at T6 (its truth is at the head of survey.toml).
WRONG, RIGHT = "560.5,543.0,476.0", "560.5,513.0,476.0"
#: What no number is, and would run where a page took it in unescaped.
BAD = "560.5,51<img src=x onerror=alert(1)>3.0,476.0"


@dataclass
class Watched:
    process: subprocess.Popen[str]
    survey: Path
    address: str

    def change(self, old: str, new: str) -> None:
        path = self.survey / "readings.csv"
        text = path.read_text(encoding="utf-8")
        assert text.count(old) == 1
        path.write_text(text.replace(old, new), encoding="utf-8")


@pytest.fixture
def watched(browser, tmp_path) -> Iterator[Watched]:  # noqa: ARG001 (nothing is watched where nothing can show it)
    survey = tmp_path / "bench"
    shutil.copytree(DEMO / "copper_bench", survey, ignore=shutil.ignore_patterns("reduction"))
    with subprocess.Popen(
        [sys.executable, "-u", "-m", "gradeline", "watch", str(survey), "--no-monte-carlo"],
        stdout=subprocess.PIPE,
        stderr=subprocess.STDOUT,
        text=True,
    ) as process:
        assert process.stdout is not None
        line = process.stdout.readline()
        address = re.search(r"http://127\.0\.0\.1:\d+/", line)
        assert address, line
        yield Watched(process, survey, address[0])
        process.send_signal(signal.SIGINT)
        try:
            process.wait(timeout=60)
        finally:
            process.kill()


def test_the_page_follows_the_survey(watched, tab):
    page = tab.page
    page.goto(watched.address)
    tab.wait_for("document.querySelectorAll('figure svg').length > 5", 60)
    assert "Run 7, tap T6: 543.0 mm was read" in page.locator(".summary").inner_text().replace("\xa0", " ")
    assert page.locator("#watch-note").count() == 0
    assert (
        page.locator("#watch-status").inner_text().startswith(f"Follows {watched.survey}; this report is of ")
    )
    content, window = tab.wide()
    assert content <= window

    page.evaluate("scrollTo(0, 1500)")
    watched.change(WRONG, RIGHT)
    tab.wait_for(
        "document.querySelector('.summary').innerText.includes('No reading and no run was flagged')", SOON
    )
    # the reader stays where they were
    tab.wait_for("Math.abs(scrollY - 1500) < 60", 20)

    watched.change(RIGHT, BAD)
    tab.wait_for("document.getElementById('watch-note') !== null", SOON)
    note = page.locator("#watch-note").inner_text()
    assert "the survey cannot be reduced. The report below is the last good one, of " in note
    assert "readings.csv row 9, T6 [mm]: '51<img src=x onerror=alert(1)>3.0' is not a number" in note
    assert page.locator("img").count() == 0
    assert page.locator("figure svg").count() > 5  # the last good page stays
    for width in WIDTHS:
        page.set_viewport_size({"width": width, "height": 900})
        content, window = tab.wide()
        assert content <= window

    watched.change(BAD, RIGHT)
    tab.wait_for("document.getElementById('watch-note') === null", SOON)
    assert "No reading and no run was flagged" in page.locator(".summary").inner_text()
    assert all(url.startswith(watched.address) for url in tab.requests)
    assert tab.errors == []


def test_the_page_says_when_nobody_watches_any_more(watched, tab):
    tab.page.goto(watched.address)
    tab.wait_for("document.getElementById('watch-status') !== null", 60)
    watched.process.send_signal(signal.SIGINT)
    assert watched.process.wait(timeout=60) == 0
    tab.wait_for(
        "document.getElementById('watch-status').innerText.startsWith('gradeline watch has ended')", SOON
    )
