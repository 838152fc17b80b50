"""Fitted losses on the page and in their figure."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from gradeline.reduction.tables import Reduction
from gradeline.report.figures import draw_loss_coefficient, pictures
from gradeline.report.figures.style import styled
from gradeline.report.losses import loss_table
from gradeline.report.page import page
from gradeline.report.sentences import summarise
from gradeline.report.tables import fitting_table


@pytest.fixture
def ax():
    with styled():
        figure = Figure(figsize=(6.2, 4))
        FigureCanvasAgg(figure)
        yield figure.add_axes((0.14, 0.15, 0.8, 0.7))


def beside(reduction: Reduction, **cells: object) -> Reduction:
    table = reduction.losses.copy()
    for name, value in cells.items():
        table[name] = value
    return dataclasses.replace(reduction, losses=table)


def test_runs_mean_band_and_published_value(ax, field: Reduction) -> None:
    drawn = draw_loss_coefficient(ax, field, "gate valve")
    runs = field.loss_runs
    used = runs["used"].to_numpy(bool)
    np.testing.assert_array_equal(drawn.used.lines[0].get_xdata(), runs["reynolds"][used])
    np.testing.assert_array_equal(drawn.used.lines[0].get_ydata(), runs["loss_coefficient"][used])
    np.testing.assert_array_equal(drawn.left_out.get_xdata(), runs["reynolds"][~used])
    # 1.96 standard uncertainties of 0.05 to either side
    (low, high) = drawn.used.lines[2][0].get_segments()[0][:, 1]
    assert (high - low) / 2 == pytest.approx(1.959964 * 0.05, rel=1e-6)
    assert drawn.mean.get_ydata()[0] == 2.4
    assert (drawn.band.get_y(), drawn.band.get_y() + drawn.band.get_height()) == pytest.approx((2.31, 2.49))
    assert drawn.published.get_ydata()[0] == 0.11
    assert drawn.trend is None
    assert (ax.get_xlabel(), ax.get_ylabel()) == ("Reynolds number Re", "loss coefficient K")
    assert ax.get_xscale() == "log"


def test_a_trend_is_drawn_where_k_depends_on_re(ax, field: Reduction) -> None:
    changed = beside(field, depends_on_reynolds=True, trend=-0.5, trend_u=0.1)
    drawn = draw_loss_coefficient(ax, changed, "gate valve")
    x, y = (np.asarray(data, float) for data in drawn.trend.get_data())
    assert (y[1] - y[0]) / np.log10(x[1] / x[0]) == pytest.approx(-0.5)
    assert np.interp(np.log10(3.1e5), np.log10(x), y) == pytest.approx(2.4)


def test_a_line_without_published_value_has_none(ax, field: Reduction) -> None:
    changed = beside(field, published=np.nan, published_low=np.nan, published_high=np.nan, verdict=None)
    drawn = draw_loss_coefficient(ax, changed, "gate valve")
    assert drawn.published is None
    assert drawn.published_band is None


def test_one_figure_for_each_fitted_loss(field: Reduction, bench: Reduction) -> None:
    assert [one.name for one in pictures(field, png=False) if one.group == "fittings"] == [
        "loss_coefficient_1"
    ]
    assert not [one for one in pictures(bench, png=False) if one.group == "fittings"]


def test_the_sentence_tells_length_and_published_value(field: Reduction) -> None:
    (text,) = [text for text in summarise(field).found if "K =" in text]
    assert text == (
        "The loss coefficient of gate valve is K = 2.400 ± 0.040 (95 % interval 2.310 to 2.490), as much as "
        "(4.10 ± 0.21) m of straight pipe in the fastest run. It lies above the 0.11 published for a gate valve fully "
        "open (0.060 to 0.170 by handbook and make)."
    )
    same = beside(field, verdict="not distinguishable", published=2.3, published_low=2.1, published_high=2.6)
    assert "It is not distinguishable from the 2.3 published" in " ".join(summarise(same).found)


def test_the_sentence_tells_the_trend(field: Reduction) -> None:
    changed = beside(field, depends_on_reynolds=True, trend=-0.5, trend_u=0.1)
    assert (
        "It falls with Re, by 0.50 ± 0.10 per decade: the value is that of runs near Re 310 000"
        in " ".join(summarise(changed).found).replace("\u202f", " ").replace("\u00a0", " ")
    )


def test_the_tables_hold_it(field: Reduction) -> None:
    table = fitting_table(field)
    assert table.rows[0][table.heads.index("equivalent length (m)")] == "4.10 ± 0.21"
    more = loss_table(field)
    row = dict(zip(more.heads, more.rows[0], strict=True))
    assert (row["taps upstream"], row["taps downstream"]) == ("3", "4")
    assert row["published K"] == "0.11 (0.060 to 0.170)"
    assert row["K against it"] == "above"
    assert row["trend of K per decade"] == "−0.12 ± 0.20"


def test_the_page_has_a_section_of_fittings(field: Reduction, bench: Reduction) -> None:
    text = page(field, pictures(field, png=False), "0")
    assert '<h2 id="fittings">Fittings</h2>' in text
    assert 'id="loss_coefficient_1"' in text
    assert 'id="fittings"' not in page(bench, pictures(bench, png=False), "0")
