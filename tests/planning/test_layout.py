"""Tap layouts against the textbook's designs and against every layout of a grid."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from gradeline.planning.expected import Expected, expected_survey
from gradeline.planning.layout import d_optimal_places, recommended_layout, undisturbed, with_places
from gradeline.survey import Survey
from tests.simulate.surveys import NominalFitting, NominalReach, make_survey

DIAMETER = 0.05


def line(x: np.ndarray) -> np.ndarray:
    model = np.stack([np.ones_like(x), x], axis=2)
    with np.errstate(divide="ignore"):
        return np.linalg.slogdet(np.swapaxes(model, 1, 2) @ model)[1]


def planned(
    chainage: object, *, loss_at: float | None = None, inlet: bool = False
) -> tuple[Survey, Expected]:
    survey, _ = make_survey(
        np.random.default_rng(0),
        chainage=chainage,
        reaches=[NominalReach(0.0, 10.0, DIAMETER, 5e-5, inlet=inlet)],
        flows=[2e-3, 4e-3],
        fittings=[] if loss_at is None else [NominalFitting(loss_at, 2.0)],
    )
    return survey, expected_survey(survey, {"wall": 5e-5}, {} if loss_at is None else {"fitting 1": 2.0})


@pytest.mark.parametrize("count", [4, 7, 10])
def test_half_of_the_taps_at_either_end_are_best_for_a_straight_line(count: int) -> None:
    """Atkinson, Donev and Tobias, Optimum Experimental Designs, 2007: the D-optimal design of a straight line (from memory)."""
    found = d_optimal_places(np.linspace(0.1, 0.9, count), ((0.0, 1.0),), line, spacing=0.0, step=0.001)
    assert set(found.tolist()) == {0.0, 1.0}
    assert abs((found == 0.0).sum() - count / 2) <= 0.5


@pytest.mark.parametrize("spacing", [0.1, 0.2])
def test_no_layout_of_a_grid_is_better(spacing: float) -> None:
    """Every layout of five taps on a grid of eleven places that keeps the spacing."""
    grid = np.linspace(0.0, 1.0, 11)
    every = [
        places
        for places in itertools.combinations(grid.tolist(), 5)
        if np.diff(places).min() >= spacing - 1e-9
    ]
    best = line(np.array(every)).max()
    found = d_optimal_places([0.0, 0.3, 0.5, 0.7, 1.0], ((0.0, 1.0),), line, spacing=spacing, step=0.1)
    assert line(found[None, :])[0] == pytest.approx(best, abs=1e-9)


def test_a_fixed_tap_stays() -> None:
    found = d_optimal_places([0.0, 0.4, 0.5, 1.0], ((0.0, 1.0),), line, spacing=0.05, step=0.01, fixed=[1])
    assert 0.4 in found.tolist()
    assert found.round(9).tolist() == [0.0, 0.4, 0.95, 1.0]


def test_efficiency_of_an_even_layout() -> None:
    """Ten taps evenly over the whole line: det = (n + 1)/(3 (n − 1)) of the two ends' = 11/27; two parameters: its root."""
    survey, expected = planned(np.linspace(0.0, 10.0, 10))
    found = recommended_layout(survey, expected, spacing=0.01)
    assert found.efficiency == pytest.approx(np.sqrt(11 / 27), rel=0.01)
    assert found.recommended[4] == pytest.approx(0.04)
    assert found.recommended[5] == pytest.approx(9.96)


def test_taps_keep_clear_of_a_fitting_and_stand_on_both_sides() -> None:
    """2 bores upstream and 10 downstream of 4 m at a bore of 50 mm: 3.9 to 4.5 m."""
    survey, expected = planned(np.linspace(0.5, 9.5, 8), loss_at=4.0)
    found = recommended_layout(survey, expected, spacing=0.1)
    assert not ((found.recommended > 3.9) & (found.recommended < 4.5)).any()
    assert (found.recommended < 4.0).sum() >= 2
    assert (found.recommended > 4.0).sum() >= 2
    assert with_places(survey, found.recommended).taps[0].chainage == found.recommended[0]


def test_the_entrance_length_of_the_fastest_run_is_left_out() -> None:
    """Re = 4 Q/(π D ν); 4.4 Re^(1/6) D (Munson, Young and Okiishi, Fundamentals of Fluid Mechanics, from memory)."""
    survey, expected = planned(np.linspace(0.1, 9.5, 8), inlet=True)
    reynolds = 4 * 4e-3 / (np.pi * DIAMETER * expected.media.kinematic_viscosity[0])
    (zone,) = undisturbed(survey, expected.line, expected.flow.reynolds)
    assert zone[0] == pytest.approx(4.4 * reynolds ** (1 / 6) * DIAMETER, abs=1e-6)
    found = recommended_layout(survey, expected, spacing=0.1)
    assert found.recommended.min() >= zone[0]
    assert found.disturbed.tolist() == (expected.line.chainage < zone[0]).tolist()


def test_too_little_room_is_said() -> None:
    survey, expected = planned(np.linspace(0.5, 9.5, 8), loss_at=4.0)
    found = recommended_layout(survey, expected, spacing=2.0)
    assert found.reason is not None
    assert "allow a smaller spacing or add taps" in found.reason
    assert found.recommended.tolist() == found.places.tolist()
