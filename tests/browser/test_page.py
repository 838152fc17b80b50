"""The page as a reader sees it."""

from __future__ import annotations

from pathlib import Path

import pytest

import gradeline
from gradeline.report import write
from tests.browser.conftest import DEMO, SURVEYS, WIDTHS


@pytest.fixture(scope="module", params=SURVEYS)
def report(request, tmp_path_factory, browser) -> Path:  # noqa: ARG001 (nothing is reduced where nothing can show it)
    out = tmp_path_factory.mktemp("page") / request.param
    reduction = gradeline.reduce(gradeline.read_survey(DEMO / request.param), monte_carlo=False)
    write(reduction, out, formats=("html",))
    return out / "report.html"


@pytest.mark.parametrize("tab", WIDTHS, indirect=True)
def test_the_page_is_whole(report, tab):
    tab.page.goto(report.as_uri())
    assert tab.errors == []
    assert tab.requests == [report.as_uri()]  # no request leaves the file
    content, window = tab.wide()
    assert content <= window
    figures = tab.page.locator("figure svg")
    assert figures.count() == tab.page.locator("figure").count() >= 5
    for figure in figures.all():
        assert figure.is_visible()
        box = figure.bounding_box()
        assert box["x"] >= 0
        assert box["x"] + box["width"] <= window
        assert box["width"] > 250
        assert box["height"] > 100


@pytest.mark.parametrize("tab", WIDTHS, indirect=True)
def test_the_sections_can_be_reached(report, tab):
    """Each link of the head leads to a place that is there and can be seen."""
    tab.page.goto(report.as_uri())
    links = tab.page.locator("nav a").all()
    assert len(links) >= 10
    for link in links:
        link.click()
        target = tab.page.locator(link.get_attribute("href"))
        assert target.count() == 1
        assert target.is_visible()
    assert tab.errors == []


def test_nothing_of_it_runs(report, tab):
    """The page forbids scripts itself: one that somebody put in later stays dead."""
    page = report.read_text(encoding="utf-8").replace(
        "<body>", "<body><script>document.title = 'ran'</script>"
    )
    other = report.with_name("changed.html")
    other.write_text(page, encoding="utf-8")
    tab.page.goto(other.as_uri())
    assert tab.page.title() != "ran"
    assert any("Content Security Policy" in error for error in tab.errors)
