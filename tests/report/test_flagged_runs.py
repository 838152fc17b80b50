"""Grade lines of a run off the law, and residuals where there are none."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from gradeline.reduction import reduce
from gradeline.reduction.tables import Reduction
from gradeline.report.figures import draw_grade_lines, pictures
from gradeline.report.figures.grade_lines import energy_line_is_cut, flagged_words
from gradeline.report.figures.residuals import any_left_over
from gradeline.report.figures.style import styled
from gradeline.report.page import page
from tests.reduction.benches import tube

HEADING = "flagged: off the law of the other runs; its readings do not enter the wall's fit"
FLOWS = np.geomspace(3e-4, 1.8e-3, 8)


@pytest.fixture(scope="module")
def litres_a_minute() -> Reduction:
    """The flow of run 5 in L/min, read as L/s: 60 times too large."""
    survey, _ = tube(FLOWS, sigma=1e-3, seed=2)
    runs = survey.runs.copy()
    runs.loc[4, "flow"] *= 60.0
    return reduce(dataclasses.replace(survey, runs=runs), monte_carlo=False)


@pytest.fixture
def ax():
    with styled():
        figure = Figure(figsize=(6.2, 4))
        FigureCanvasAgg(figure)
        yield figure.add_axes((0.14, 0.15, 0.8, 0.7))


def test_the_axis_follows_the_readings_and_the_energy_line_is_cut(ax, litres_a_minute: Reduction) -> None:
    ax.set_xlim(0, 5.5)
    drawn = draw_grade_lines(ax, litres_a_minute, "5")
    heads = litres_a_minute.heads[litres_a_minute.heads["run"] == "5"]["head"].to_numpy(float)
    low, high = ax.get_ylim()
    assert low < heads.min()
    assert high > heads.max()
    # the fall of the readings takes at least half the height; the velocity head would be hundreds of metres
    assert high - low < 2 * np.ptp(heads)
    assert drawn.egl.get_ydata().min() > high + 100
    assert drawn.band is None
    (note,) = [text.get_text() for text in ax.texts if "EGL" in text.get_text()]
    rise = (FLOWS[4] * 60 / (np.pi * 0.02664**2 / 4)) ** 2 / (2 * 9.80665)
    assert note.startswith("the EGL lies ")
    assert note.endswith(" m above and is cut off")
    # V²/2g times the kinetic-energy coefficient, 1 to 1.1 in turbulent flow
    assert rise * 0.99 < float(note.split()[3]) < 1.1 * rise
    assert "reading used for S" in [text.get_text() for text in ax.get_legend().get_texts()]
    assert "EGL" not in [text.get_text() for text in ax.get_legend().get_texts()]


def test_the_heading_says_that_the_run_is_flagged(litres_a_minute: Reduction) -> None:
    drawn = [one for one in pictures(litres_a_minute, png=False) if one.group == "grade lines"]
    assert [HEADING in one.svg.decode() for one in drawn] == [n == 4 for n in range(8)]
    assert "Flagged: off the law of the other runs;" in drawn[4].alt
    assert "Flagged" not in drawn[3].alt


def test_a_flagged_run_of_usual_flow_and_a_sound_one_keep_their_energy_line(
    ax, litres_a_minute: Reduction
) -> None:
    assert not energy_line_is_cut(litres_a_minute, "8")
    assert flagged_words(litres_a_minute, "8") == ""
    survey, _ = tube(FLOWS, sigma=1e-3, seed=2)
    runs = survey.runs.copy()
    runs.loc[4, "flow"] *= 1.2
    found = reduce(dataclasses.replace(survey, runs=runs), monte_carlo=False)
    assert flagged_words(found, "5") == HEADING
    assert not energy_line_is_cut(found, "5")
    ax.set_xlim(0, 5.5)
    drawn = draw_grade_lines(ax, found, "5")
    assert drawn.egl.get_ydata().max() < ax.get_ylim()[1]


def test_two_taps_have_no_residuals_to_draw(bench: Reduction) -> None:
    survey, _ = tube(FLOWS, sigma=1e-3, seed=2)
    names = ["T2", "T9"]
    two = dataclasses.replace(
        survey,
        taps=tuple(tap for tap in survey.taps if tap.name in names),
        observations=tuple(one for one in survey.observations if one.label in names),
        **{name: getattr(survey, name)[names] for name in ("readings", "repeats", "spreads")},
    )
    found = reduce(two, monte_carlo=False)
    assert not any_left_over(found)
    drawn = pictures(found, png=False)
    assert "residuals" not in [one.name for one in drawn]
    text = page(found, drawn, "0")
    assert "No run has more readings than its line has parameters: no reading lies off it" in text
    assert any_left_over(bench)
    assert "residuals" in [one.name for one in pictures(bench, png=False)]
