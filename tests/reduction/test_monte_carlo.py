"""Whose limits stand: first order against Monte Carlo, held against draws through equations written out here."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gradeline.quantities import Measured
from gradeline.reduction import reduce
from tests.reduction.benches import (
    FAST,
    TAPS,
    TUBE,
    hilly,
    main,
    tube,
    with_bore,
    with_stated,
)
from tests.simulate.surveys import NominalFitting, NominalReach, Uncertainties

DRAWS = 2_000_000
ENDS = (0.025, 0.975)


def both(survey, **more):
    return reduce(survey, monte_carlo=False, **more), reduce(survey, **more)


def said(reduction):
    (sentence,) = [one for one in reduction.assumptions if "Monte Carlo" in one]
    return sentence


def test_f_of_an_uncertain_bore():
    """f = (π²/8) g D⁵ S/Q² with D ± 3 %, Q ± 2 % and S as its table says, drawn by themselves."""
    survey, _ = tube(FAST, stated=Uncertainties(reading=2e-4, flow=0.02))
    plain, drawn = both(with_bore(survey, 0, TUBE.diameter, 0.03 * TUBE.diameter))
    row = drawn.runs.iloc[-1]
    rng = np.random.default_rng(5)
    z = rng.standard_normal((3, DRAWS))
    flow = row["flow"] * (1 + 0.02 * z[0])
    slope = row["slope"] + row["slope_u"] * z[1]
    bore = TUBE.diameter * (1 + 0.03 * z[2])
    f = np.pi**2 / 8 * 9.80665 * bore**5 * slope / flow**2
    u = row["friction_factor_u"]
    low, high = np.quantile(f, ENDS)
    assert (row["friction_factor_low"], row["friction_factor_high"]) == pytest.approx(
        (low, high), abs=0.05 * u
    )
    # First order is symmetric, and short of the upper limit by a fifth of u.
    first = plain.runs.iloc[-1]
    assert first["friction_factor_high"] < high - 0.15 * u
    assert first["friction_factor_u"] == u
    assert "are those of the draws" in said(drawn)
    assert "left out" in said(plain)


def test_the_loss_of_a_valve_goes_with_the_fourth_power_of_the_bore():
    """K = 2 g h_L (π D²/4)²/Q², the flow's calibration ± 3 % and the bore ± 3 %: against draws of that product."""
    bore = 0.203
    survey, _ = main(
        stated=Uncertainties(reading=1e-3, flow_scale=0.03),
        reaches=[NominalReach(0.0, 1210.0, bore, 9e-4)],
        fittings=[NominalFitting(800, 4.0)],
    )
    plain, drawn = (one.fittings.iloc[0] for one in both(with_bore(survey, 0, bore, 0.03 * bore)))
    rng = np.random.default_rng(6)
    z = rng.standard_normal((2, DRAWS))
    k = drawn["loss_coefficient"] * (1 + 0.03 * z[0]) ** 4 / (1 + 0.03 * z[1]) ** 2
    low, high = np.quantile(k, ENDS)
    u = drawn["loss_coefficient_u"]
    # What the readings add is a thousandth of this.
    assert u == pytest.approx(4.0 * np.hypot(0.12, 0.06), rel=0.005)
    found = (drawn["loss_coefficient_low"], drawn["loss_coefficient_high"])
    assert found == pytest.approx((low, high), abs=0.06 * u)
    assert plain["loss_coefficient_high"] < high - 0.15 * u


def test_the_chainages_divide_the_slope():
    """Every tap ± 0.25 m of 5 m: against least squares lines refitted to taps drawn about their places.

    Only what stretches the line is drawn: errors across it would show as residuals, and there are none.
    """
    survey, _ = tube(FAST, stated=Uncertainties(reading=2e-4))
    survey = with_stated(survey, chainage=0.25)
    plain, drawn = both(survey)
    rng = np.random.default_rng(7)
    line = np.column_stack([np.ones(len(TAPS)), TAPS])
    along = line @ np.linalg.pinv(line)
    x = TAPS + 0.25 * rng.standard_normal((400_000, len(TAPS))) @ along
    row, first = drawn.runs.iloc[-1], plain.runs.iloc[-1]
    y = row["slope"] * TAPS
    centred = x - x.mean(axis=1, keepdims=True)
    slope = centred @ y / (centred**2).sum(axis=1)
    u = row["slope_u"]
    found = np.array([row["slope_low"], row["slope_high"]])
    np.testing.assert_allclose(found, np.quantile(slope, ENDS), atol=0.06 * u)
    assert found[1] > first["slope_high"] + 0.1 * u
    assert np.isnan(first["slope_dof"])


def test_a_limit_of_error_is_drawn_as_rectangular():
    """An accuracy class of 1 % of the reading and nothing else: S lies within its limits, and the interval is shorter."""
    survey, _ = hilly(FAST)
    gauge = replace(survey.gauges[0], settings={"accuracy_of_reading": Measured(0.05)})
    survey = with_stated(replace(survey, gauges=(gauge,)), reading_pressure=1.0)
    plain, drawn = both(survey)
    row, first = drawn.runs.iloc[-1], plain.runs.iloc[-1]
    # u = a/√3: 95 % of a rectangular distribution is 0.95 a = 1.645 u, of a normal one 1.96 u.
    assert (row["slope_high"] - row["slope"]) / row["slope_u"] == pytest.approx(0.95 * np.sqrt(3), abs=0.05)
    assert (first["slope_high"] - first["slope"]) / first["slope_u"] == pytest.approx(1.96, abs=0.01)


def test_normal_errors_of_the_heads_alone_need_no_draws_of_s():
    survey, _ = tube(FAST, stated=Uncertainties(reading=2e-4))
    plain, drawn = both(survey)
    for column in ("slope_low", "slope_high"):
        np.testing.assert_array_equal(plain.runs[column], drawn.runs[column])
    assert " of S" not in said(drawn)


def test_the_roughness_is_never_drawn():
    survey, _ = tube(FAST, stated=Uncertainties(reading=2e-4, flow=0.02))
    plain, drawn = both(with_bore(survey, 0, TUBE.diameter, 0.01 * TUBE.diameter))
    for column in plain.walls.columns.drop(["wall", "reason"]):
        np.testing.assert_array_equal(plain.walls[column].to_numpy(), drawn.walls[column].to_numpy())
    for column in ("roughness_low", "roughness_high"):
        np.testing.assert_array_equal(plain.runs[column], drawn.runs[column])


def test_one_seed_one_answer():
    survey, _ = tube(FAST, stated=Uncertainties(reading=2e-4, flow=0.02))
    survey = with_bore(survey, 0, TUBE.diameter, 0.02 * TUBE.diameter)
    first, again, other = (reduce(survey, seed=seed).runs["friction_factor_high"] for seed in (1, 1, 2))
    np.testing.assert_array_equal(first, again)
    assert (first != other).any()
    assert "seed 2" in said(reduce(survey, seed=2))


def test_few_degrees_of_freedom():
    """Three taps, nothing stated: three runs leave three degrees of freedom, and t of them is what the draws give."""
    survey, _ = tube(FAST[:3], sigma=1e-3, seed=4, chainage=np.array([0.2, 2.7, 5.3]))
    plain, drawn = both(survey)
    assert (plain.runs["slope_dof"] < 4).all()
    for end in ("low", "high"):
        np.testing.assert_allclose(
            drawn.runs[f"slope_{end}"],
            plain.runs[f"slope_{end}"],
            atol=0.2 * float(plain.runs["slope_u"].max()),
        )


def test_many_runs_draw_the_least_certain_first():
    flows = np.linspace(3e-4, 1.4e-3, 450)
    survey, _ = tube(flows, sigma=2e-4, stated=Uncertainties(reading=2e-4, flow=0.01))
    drawn = reduce(with_bore(survey, 0, TUBE.diameter, 0.01 * TUBE.diameter))
    assert "400 of f" in said(drawn)
    assert "50 intervals of the smallest relative uncertainty of f were not drawn" in said(drawn)
