"""The budget and the likelihood as a reader sees them: words, table, bars and curve."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from matplotlib.figure import Figure

from gradeline.reduction import reduce
from gradeline.reduction.tabulate import frame
from gradeline.report.figures.budget import budget_alt, budget_figure, draw_budget
from gradeline.report.figures.likelihood import draw_likelihood, drawn_walls
from gradeline.report.figures.style import styled
from gradeline.report.page import page
from gradeline.report.sentences import summarise
from gradeline.report.uncertainty import (
    OTHERS,
    best_improvement,
    budget_table,
    budgeted_values,
    improvement_sentences,
    likelihood_sentences,
)
from tests.reduction.benches import main, tube, with_bore
from tests.simulate.surveys import NominalReach, Uncertainties


@pytest.fixture(scope="module")
def field():
    """Two bores, a valve, a rough wall."""
    survey, _ = main(stated=Uncertainties(reading=5e-3, flow_scale=5e-3))
    return reduce(with_bore(with_bore(survey, 0, 0.254, 4e-4), 1, 0.203, 3e-4), monte_carlo=False)


@pytest.fixture(scope="module")
def smooth():
    survey, _ = tube(
        (3e-4, 6e-4, 1e-3, 1.4e-3),
        stated=Uncertainties(reading=2e-4, flow_scale=5e-3),
        reaches=[NominalReach(0.0, 5.5, 0.02664, 1e-7)],
    )
    return reduce(replace(with_bore(survey, 0, 0.02664, 3e-5), title="Smooth"), monte_carlo=False)


@pytest.fixture
def ax():
    with styled():
        yield Figure(figsize=(6, 4)).add_subplot()


def with_budget(reduction, rows):
    """A reduction with a budget written by hand: (quantity, subject, input, u)."""
    totals = {}
    for quantity, subject, _, u in rows:
        totals[quantity, subject] = totals.get((quantity, subject), 0.0) + u**2
    table = [(q, s, i, u, u**2 / totals[q, s]) for q, s, i, u in rows]
    columns = ("quantity", "subject", "input", "contribution_u", "variance_share")
    return replace(
        reduction, budget=frame("budget", dict(zip(columns, zip(*table, strict=True), strict=True)))
    )


def with_improvement(reduction, *row):
    names = ("quantity", "subject", "input", "value", "u", "u_halved", "bound", "bound_halved")
    return replace(
        reduction, improvements=frame("improvements", {n: [v] for n, v in zip(names, row, strict=True)})
    )


def test_the_values_are_of_the_fastest_run_of_each_reach(field):
    names = [value.name for value in budgeted_values(field)]
    assert names == [
        "S, run 6, reach 1",
        "S, run 6, reach 2",
        "f, run 6, reach 1",
        "f, run 6, reach 2",
        "ε, wall",
        "K, fitting 2",
    ]
    for value in budgeted_values(field):
        assert sum(value.shares.values()) == pytest.approx(1.0)


def test_the_reach_is_left_out_where_there_is_only_one(smooth):
    names = [value.name for value in budgeted_values(smooth)]
    assert names == ["S, run 4", "f, run 4", "bound of ε, wall"]


def test_what_adds_nothing_anywhere_stands_together(field):
    made = with_budget(
        field,
        [
            ("roughness", "wall", "bore", 0.9),
            ("roughness", "wall", "gravity", 0.03),
            ("roughness", "wall", "zero", 0.02),
        ],
    )
    (value,) = budgeted_values(made)
    assert list(value.shares) == ["bore", OTHERS]
    assert value.shares[OTHERS] == pytest.approx(13e-4 / (0.81 + 13e-4))


def test_the_table_has_shares_and_the_standard_uncertainty(field):
    made = with_budget(
        field,
        [
            ("slope", "run 6, reach 1", "reading scatter", 3e-4),
            ("slope", "run 6, reach 1", "bore", 4e-4),
            ("roughness", "wall", "bore", 6e-5),
            ("roughness", "wall", "temperature", 1e-6),
            ("loss_coefficient", "valve", "bore", 0.2),
        ],
    )
    table = budget_table(made)
    assert table.heads == ("input", "S, run 6, reach 1", "ε, wall", "K, valve")
    assert table.rows == (
        ("bore", "64.0", "100.0", "100.0"),
        ("reading scatter", "36.0", "–", "–"),
        (OTHERS, "–", "< 0.1", "–"),
        ("standard uncertainty", "0.50 mm/m", "0.060 mm", "0.20"),
    )


def test_one_sentence_names_what_pays_most(field):
    made = with_improvement(field, "roughness", "cast iron", "bore", 1e-3, 1.7e-4, 9e-5, math.nan, math.nan)
    assert best_improvement(made) == (
        "Half the uncertainty of the bore would pay most for the roughness of the wall cast iron: it would be known to "
        "9.0 % instead of 17 % (one standard uncertainty)."
    )
    assert best_improvement(made) in summarise(made).found


@pytest.mark.parametrize(
    ("row", "words"),
    [
        (
            ("roughness_upper95", "copper", "reading scatter", 4e-6, math.nan, math.nan, 4e-6, 2.5e-6),
            "Half the scatter of the readings (four times as many) would pay most for the roughness of the wall copper: an "
            "upper bound of 0.0025 mm instead of 0.0040 mm could be expected.",
        ),
        (
            ("loss_coefficient", "valve", "tap chainage", 0.1, 0.27, 0.19, math.nan, math.nan),
            "Half the uncertainty of the tap chainages would pay most for K of valve: it would be known to ± 0.19 instead of "
            "± 0.27.",
        ),
        (
            ("friction_factor", "run 6, reach 1", "bore", 0.02, 2e-4, 1.99e-4, math.nan, math.nan),
            "No single input pays for f of run 6, reach 1: half the uncertainty of the bore, the best of them, lowers its "
            "uncertainty by less than 3 %.",
        ),
        (
            ("roughness_upper95", "copper", "bore", 4e-6, math.nan, math.nan, math.nan, math.nan),
            "Most of what is unknown of the roughness of the wall copper comes from the bore.",
        ),
    ],
)
def test_every_kind_of_improvement_has_its_words(field, row, words):
    assert best_improvement(with_improvement(field, *row)) == words


def test_the_roughness_comes_first(field):
    assert "the roughness of the wall wall" in best_improvement(field)
    told = improvement_sentences(field)
    assert len(told) == 4
    assert not any(" S of " in one for one in told)


def test_epsilon_plus_of_a_rough_wall(field):
    """ε⁺ = ε u*/ν with u* = √(g D S/4): from the tables of the fastest run."""
    wall = field.walls.iloc[0]
    row = field.runs.iloc[-1]
    friction_velocity = math.sqrt(field.gravity * 0.203 * row["slope"] / 4)
    plus = wall["roughness"] * friction_velocity / row["kinematic_viscosity"]
    (sentence,) = likelihood_sentences(field)
    assert f"ε⁺ = {plus:.0f} (" in sentence
    assert plus > 70
    assert "fully rough over the whole interval" in sentence
    assert "Nikuradse 1933" in sentence


def test_epsilon_plus_of_a_smooth_wall(smooth):
    (sentence,) = likelihood_sentences(smooth)
    assert "at most" in sentence
    assert "by the sand-grain criterion hydraulically smooth even at the upper bound" in sentence


def test_the_bars_are_the_shares(ax, field):
    value = next(one for one in budgeted_values(field) if one.quantity == "roughness")
    inputs = list(value.shares)
    drawn = draw_budget(ax, value, inputs)
    widths = [bar.get_width() for bar in drawn.bars]
    np.testing.assert_allclose(widths, [100 * value.shares[name] for name in inputs])
    assert [text.get_text() for text in ax.get_yticklabels()] == inputs
    assert ax.yaxis_inverted()
    assert drawn.labels[0].get_text() == f"{widths[0]:.0f}"
    assert ax.get_title(loc="left") == "ε\nwall"


def test_the_figure_of_all_budgets(field):
    with styled():
        figure = budget_figure(field)
    assert len(figure.axes) == 6
    assert [ax.get_xlabel() for ax in figure.axes] == [""] * 3 + ["share of variance (%)"] * 3
    assert [bool(ax.get_yticklabels()[0].get_text()) for ax in figure.axes] == [True, False, False] * 2
    words = budget_alt(field)
    assert "ε, wall: " in words
    assert "%" in words


def test_the_likelihood_with_its_interval(ax, field):
    wall = field.walls.iloc[0]
    drawn = draw_likelihood(ax, field, "wall")
    x, y = drawn.curve.get_data()
    assert x[np.argmax(y)] == pytest.approx(1000 * wall["roughness"])
    assert max(y) == pytest.approx(1.0)
    # at both ends of a 95 % interval of a normal likelihood: exp(−1.96²/2) = 0.1465
    np.testing.assert_allclose(
        np.interp([1000 * wall["roughness_low"], 1000 * wall["roughness_high"]], x, y), 0.1465, atol=1e-3
    )
    assert drawn.level.get_ydata()[0] == pytest.approx(0.1465, abs=1e-4)
    assert drawn.bound.get_xdata()[0] == pytest.approx(1000 * wall["roughness_upper95"])
    inside = drawn.interval.get_paths()[0].vertices[:, 0]
    assert inside.min() == pytest.approx(1000 * wall["roughness_low"])
    assert inside.max() == pytest.approx(1000 * wall["roughness_high"])
    assert ax.get_xlabel() == "roughness ε (mm)"
    assert drawn.smooth is None
    assert "lies to the left" in ax.texts[0].get_text()
    assert drawn_walls(field) == ["wall"]


def test_where_the_wall_is_smooth_is_marked_or_said(ax, smooth):
    draw_likelihood(ax, smooth, "wall")
    assert "smooth by the sand-grain criterion throughout" in ax.texts[0].get_text()
    other = Figure().add_subplot()
    middle = float(smooth.likelihood["roughness"].median())
    moved = replace(smooth, likelihood=smooth.likelihood.assign(smooth_limit=middle))
    drawn = draw_likelihood(other, moved, "wall")
    assert drawn.smooth.get_xdata()[0] == pytest.approx(1000 * middle)


def test_the_page_has_a_section_of_its_own(field, bench):
    text = page(field, (), "1")
    assert '<h2 id="uncertainty">Uncertainty budget</h2>' in text
    assert '<a href="#uncertainty">Uncertainty</a>' in text
    # a reduction without budget and likelihood has none
    assert 'id="uncertainty"' not in page(bench, (), "1")


def test_a_bore_that_nobody_measured_is_no_input():
    survey, _ = tube((3e-4, 6e-4, 1e-3, 1.4e-3), stated=Uncertainties(reading=2e-4))
    reduction = reduce(replace(survey, title="x"), monte_carlo=False)
    assert {row[0] for row in budget_table(reduction).rows} == {"reading scatter", "standard uncertainty"}
