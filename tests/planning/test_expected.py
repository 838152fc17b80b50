"""Expected readings against the simulated line, hand arithmetic, and the gauges' own functions."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

import gradeline
from gradeline.planning.accuracy import accuracy_of
from gradeline.planning.expected import expected_survey
from gradeline.quantities import Measured
from gradeline.reduction.heads import heads_of
from gradeline.survey import Gauge, Observation, Survey
from tests.simulate.surveys import (
    BOARD_ZERO,
    TAIL_COLUMN,
    NominalFitting,
    NominalReach,
    Uncertainties,
    make_survey,
)
from tests.simulate.water import density

STATED = Uncertainties(reading=1e-3, flow=0.004, flow_scale=0.003, chainage=1e-3, temperature=0.2)


def simulated(**more: object) -> Survey:
    survey, _ = make_survey(
        np.random.default_rng(0),
        chainage=np.linspace(0.3, 5.7, 7),
        reaches=[NominalReach(0.0, 3.0, 0.03, 4e-5), NominalReach(3.0, 6.0, 0.025, 4e-5)],
        flows=[0.0, 5e-5, 4e-4, 1.2e-3],
        sigma=0.0,
        draw=False,
        fittings=[NominalFitting(1.5, 3.0)],
        **more,  # type: ignore[arg-type]  # keys of several types
    )
    return survey


def test_columns_are_those_of_the_simulated_line() -> None:
    """tests/simulate works them out by itself; α and a change of bore included."""
    survey = simulated(stated=STATED)
    # The column above the datum weighs less than its height: the simulated board reads the top of a column of water.
    found = expected_survey(survey, {"wall": 4e-5}, {"fitting 1": 3.0}, head=BOARD_ZERO + TAIL_COLUMN)
    both = found.readings, survey.readings.to_numpy(float)
    # The simulated line takes the change of bore as loss-free; the survey as a sudden contraction.
    step = 0.5 * (1 - (0.025 / 0.03) ** 2) * (found.flow.velocity[:, 1] ** 2 / (2 * 9.80665))
    upstream = found.line.chainage <= 3.0
    assert both[0][:, ~upstream] == pytest.approx(both[1][:, ~upstream], abs=2e-5)
    assert both[0][:, upstream] == pytest.approx((both[1] + 1.0012 * step[:, None])[:, upstream], abs=5e-5)


def test_deflection_of_a_mercury_gauge_by_hand() -> None:
    """Δ = Δh ρ/(ρ_g − ρ) of a U-tube: ρ of water at 15 °C, mercury stated as 13 550 kg/m³."""
    survey = simulated(stated=STATED)
    gauge = Gauge("m", "u-tube", {"gauge_fluid_density": Measured(13550.0)}, reading_u=1e-3)
    columns = survey.readings.iloc[:, [0]].set_axis(["m"], axis=1)
    changed = replace(
        survey,
        gauges=(gauge,),
        observations=(Observation("m", "T4", "T7"),),
        readings=columns,
        repeats=columns.notna().astype(int),
        spreads=columns * np.nan,
    )
    found = expected_survey(changed, {"wall": 4e-5}, {"fitting 1": 3.0})
    fall = found.heads[:, 3] - found.heads[:, 6]
    water = density(288.15)
    assert found.readings[:, 0] == pytest.approx(fall * water / (13550.0 - water), rel=1e-4)
    assert not found.tells_level


@pytest.mark.parametrize("name", ["copper_bench", "mercury_bench", "cast_main", "hydrant_main"])
def test_readings_give_back_the_heads(name: str) -> None:
    survey = gradeline.read_plan(f"data_demo/{name}")
    walls = {reach.wall: 1e-4 for reach in survey.reaches}
    losses = {one.name: 2.0 for one in survey.fittings if one.loss_coefficient is None}
    found = expected_survey(survey, walls, losses)
    heads = heads_of(found.survey, found.media)
    told = np.isfinite(heads.observed)
    assert told.any()
    assert heads.observed[told] == pytest.approx((found.heads @ heads.taps.T)[told], abs=1e-9)
    assert (~np.isfinite(found.survey.readings.to_numpy(float)) == ~found.on_scale).all()


def test_the_level_keeps_columns_on_the_board_and_above_the_crown() -> None:
    survey = simulated(stated=STATED)
    board = replace(survey.gauges[0], span=(0.0, 1.0))
    found = expected_survey(replace(survey, gauges=(board,)), {"wall": 4e-5}, {"fitting 1": 0.0})
    spread = np.ptp(found.readings, axis=1)
    assert found.fits.tolist() == (spread <= 1.0).tolist()
    fitting = found.readings[found.fits]
    assert ((fitting >= 0) & (fitting <= 1)).all()
    # In the middle of the room: as much above the highest column as below the lowest.
    assert (1.0 - fitting.max(axis=1)) == pytest.approx(fitting.min(axis=1), abs=1e-6)
    assert (found.heads >= found.crown).all()
    assert found.window[found.fits, 1] - found.window[found.fits, 0] == pytest.approx(
        1.0 - spread[found.fits], rel=2e-3
    )
    assert np.isnan(found.survey.readings.to_numpy(float)[~found.fits]).any()


def test_a_head_below_the_crown_is_told() -> None:
    survey = simulated(stated=STATED)
    found = expected_survey(survey, {"wall": 4e-5}, {"fitting 1": 3.0}, head=0.0)
    assert not found.fits.any()


@pytest.mark.parametrize("name", ["copper_bench", "cast_main"])
def test_what_reduce_finds_is_what_is_expected(name: str) -> None:
    """The short way through the fits gives the uncertainties of the long one."""
    survey = gradeline.read_plan(f"data_demo/{name}")
    walls = {reach.wall: 1e-4 for reach in survey.reaches}
    losses = {one.name: 2.0 for one in survey.fittings if one.loss_coefficient is None}
    expected = expected_survey(survey, walls, losses)
    short, long = accuracy_of(expected), gradeline.reduce(expected.survey, monte_carlo=False)
    runs = long.runs[(long.runs["flow"] > 0).to_numpy(bool)]
    ratio = (runs["slope_u"] / runs["slope"]).to_numpy(float)
    assert short.slope_u.ravel() == pytest.approx(ratio, rel=1e-9)
    ratio = (runs["friction_factor_u"] / runs["friction_factor"]).to_numpy(float)
    assert short.factor_u.ravel() == pytest.approx(ratio, rel=1e-9)
    for row in long.walls.to_dict("records"):
        assert short.roughness[row["wall"]] == pytest.approx((row["roughness_low"], row["roughness_high"]))
        assert row["roughness"] == pytest.approx(1e-4, rel=1e-3)
    for fitting, u in short.loss_u.items():
        mine = long.fittings[(long.fittings["fitting"] == fitting).to_numpy(bool)].iloc[0]
        assert mine["loss_coefficient_u"] == pytest.approx(u)
        assert mine["loss_coefficient"] == pytest.approx(2.0, rel=1e-3)
    assert not len(long.flags)
