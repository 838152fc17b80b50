"""Surveys without noise: what went into them comes out, by any gauge, over one bore or two."""

from __future__ import annotations

from dataclasses import replace

import fluids
import numpy as np
import pytest

from gradeline.quantities import Measured
from gradeline.reduction import reduce
from gradeline.survey import Fitting, Fluid
from tests.reduction.benches import (
    CONTRACTION,
    FAST,
    FLOWS,
    KELVIN,
    MAIN_FLOWS,
    TUBE,
    VALVE,
    hilly,
    main,
    tube,
    with_gauge,
)
from tests.simulate.surveys import NominalFitting
from tests.simulate.water import density, kinematic_viscosity


def runs_of(reduction, column, reaches=1):
    return reduction.runs[column].to_numpy(float).reshape(-1, reaches)


def test_one_reach_gives_back_its_truth():
    survey, truth = tube()
    found = reduce(survey)
    np.testing.assert_allclose(runs_of(found, "slope"), truth.slope, rtol=1e-6)
    np.testing.assert_allclose(runs_of(found, "friction_factor"), truth.friction_factor, rtol=1e-6)
    np.testing.assert_allclose(runs_of(found, "reynolds"), truth.reynolds, rtol=1e-6)
    assert found.walls["roughness"].item() == pytest.approx(TUBE.roughness, rel=1e-5)
    signed = found.runs["roughness_signed"].to_numpy(float)
    np.testing.assert_allclose(signed[2:], TUBE.roughness, rtol=1e-5)
    assert np.isnan(signed[:2]).all()
    assert found.runs["regime"].tolist() == ["laminar", "critical", *["turbulent"] * 4]


def test_the_friction_factor_is_that_of_another_library():
    """`fluids.friction_factor`, which solves the Colebrook equation by a route of its own, and 64/Re."""
    survey, _ = tube()
    found = reduce(survey).runs
    area = np.pi / 4 * TUBE.diameter**2
    for place in (0, 2, 5):
        reynolds = FLOWS[place] / area * TUBE.diameter / float(kinematic_viscosity(KELVIN))
        expected = (
            64 / reynolds
            if reynolds < 2000
            else fluids.friction.Colebrook(reynolds, TUBE.roughness / TUBE.diameter)
        )
        assert found["friction_factor"][place] == pytest.approx(expected, rel=1e-6)


def test_the_columns_of_a_run_are_what_they_say():
    survey, _ = tube()
    found = reduce(survey).runs
    np.testing.assert_allclose(
        found["velocity"], np.array(FLOWS) / (np.pi / 4 * TUBE.diameter**2), rtol=1e-12
    )
    np.testing.assert_allclose(found["density"], float(density(KELVIN)), rtol=1e-7)
    np.testing.assert_allclose(found["kinematic_viscosity"], float(kinematic_viscosity(KELVIN)), rtol=1e-6)
    assert (found["temperature"] == KELVIN).all()
    assert (found["observations_used"] == 10).all()


def test_two_bores_and_a_valve_give_back_their_truth():
    survey, truth = main()
    found = reduce(survey)
    np.testing.assert_allclose(runs_of(found, "slope", 2), truth.slope, rtol=2e-6)
    np.testing.assert_allclose(runs_of(found, "friction_factor", 2), truth.friction_factor, rtol=2e-6)
    np.testing.assert_allclose(runs_of(found, "reynolds", 2), truth.reynolds, rtol=1e-6)
    assert found.walls["roughness"].item() == pytest.approx(9e-4, rel=2e-5)
    losses = found.fittings.set_index("fitting")["loss_coefficient"]
    assert losses.iloc[0] == pytest.approx(CONTRACTION, rel=1e-12)
    assert losses.iloc[1] == pytest.approx(VALVE, rel=1e-5)
    assert found.fittings["reason"].tolist() == ["given, not fitted", None]


@pytest.mark.parametrize(
    ("velocity", "bore"), [("smaller", 0.203), ("upstream", 0.254), ("downstream", 0.203)]
)
def test_a_loss_coefficient_refers_to_the_bore_that_is_named(velocity, bore):
    """K V²/2g is one loss of head, so K goes with the fourth power of the bore that it refers to."""
    survey, _ = main(fittings=[NominalFitting(430, VALVE)])
    valve = Fitting("valve", 430.0, None, velocity=velocity, change_of_bore=True)
    found = reduce(replace(survey, fittings=(valve,)))
    assert found.fittings["loss_coefficient"].item() == pytest.approx(VALVE * (bore / 0.203) ** 4, rel=1e-5)


def test_a_given_loss_coefficient_is_taken_off():
    survey, truth = tube(fittings=[NominalFitting(2.9, 1.5, Measured(1.5))])
    found = reduce(survey)
    np.testing.assert_allclose(runs_of(found, "slope"), truth.slope, rtol=1e-6)
    # the jump is seen in the heads: what two neighbouring columns lose beyond friction is K V²/2g
    heads = found.heads[found.heads["run"] == "6"].set_index("tap")["head"]
    velocity = FLOWS[5] / (np.pi / 4 * TUBE.diameter**2)
    lost = heads["T5"] - heads["T6"] - truth.slope[5, 0] * (survey.taps[5].chainage - survey.taps[4].chainage)
    assert lost == pytest.approx(1.5 * velocity**2 / (2 * 9.80665), rel=1e-6)


def test_pressure_gauges_at_any_height_see_what_columns_see():
    columns, truth = tube()
    gauges, _ = hilly()
    first, second = reduce(columns), reduce(gauges)
    # 1e-7: the last digit of the air's density, over 3 m of height
    np.testing.assert_allclose(runs_of(second, "slope"), truth.slope, rtol=1e-6, atol=1e-7)
    np.testing.assert_allclose(second.heads["head"] - first.heads["head"], 10.0, rtol=0, atol=1e-6)
    assert second.walls["roughness"].item() == pytest.approx(first.walls["roughness"].item(), rel=1e-4)


def test_an_inclined_scale_reads_longer():
    """sin 30° is one half: the same heads stand at twice the reading along the scale."""
    survey, truth = tube()
    tilted = replace(survey, readings=2 * survey.readings)
    settings = {**survey.gauges[0].settings, "inclination": Measured(np.pi / 6)}
    np.testing.assert_allclose(
        runs_of(reduce(with_gauge(tilted, settings=settings)), "slope"), truth.slope, rtol=1e-6
    )


def test_the_velocity_head_carries_its_coefficient():
    """In the energy heads a column stands α V²/2g above its piezometric head: α is 2 in laminar flow, 1 + 2.7 f else."""
    survey, truth = tube()
    heads = reduce(survey).heads
    above = (heads["energy_head"] - heads["head"]).to_numpy(float).reshape(len(FLOWS), -1)
    velocity = np.array(FLOWS) / (np.pi / 4 * TUBE.diameter**2)
    plain = velocity**2 / (2 * 9.80665)
    np.testing.assert_allclose(above[0], 2 * plain[0], rtol=1e-6)
    for run in range(2, 6):
        # f of the second pass is that of the first pass's slope: exact to its own small error
        np.testing.assert_allclose(
            above[run], (1 + 2.7 * truth.friction_factor[run, 0]) * plain[run], rtol=1e-5
        )


def test_without_the_coefficient_the_loss_of_the_contraction_would_be_off():
    """At a change of bore the difference of α V²/2g is part of the step: with α = 1, K would differ by Δα V²/2g."""
    survey, truth = main(fittings=[NominalFitting(430, CONTRACTION, "fit", change_of_bore=True)])
    found = reduce(survey).fittings["loss_coefficient"].item()
    assert found == pytest.approx(CONTRACTION, abs=2e-5)
    wide, narrow = truth.friction_factor.mean(axis=0)
    plain = CONTRACTION + 2.7 * narrow - 2.7 * wide * (0.203 / 0.254) ** 4
    assert abs(plain - CONTRACTION) > 0.03
    assert abs(found - plain) > 0.03


def test_two_walls_stand_apart_and_one_wall_is_shared():
    survey, _ = main()
    apart = replace(
        survey,
        reaches=tuple(replace(reach, wall=name) for reach, name in zip(survey.reaches, "ab", strict=True)),
    )
    one, two = reduce(survey), reduce(apart)
    assert one.walls["wall"].tolist() == ["wall"]
    assert two.walls["wall"].tolist() == ["a", "b"]
    np.testing.assert_allclose(two.walls["roughness"], 9e-4, rtol=5e-5)
    assert one.walls["runs_used"].item() == len(MAIN_FLOWS)
    assert set(two.bore_sensitivity["wall"]) == {"a", "b"}


def test_two_walls_of_different_roughness_do_not_mix():
    rough, smooth = (
        replace(TUBE, end=2.75, wall="rough"),
        replace(TUBE, start=2.75, roughness=5e-6, wall="smooth"),
    )
    survey, _ = tube(reaches=[rough, smooth])
    found = reduce(survey).walls.set_index("wall")["roughness"]
    assert found["rough"] == pytest.approx(1e-4, rel=1e-4)
    assert found["smooth"] == pytest.approx(5e-6, rel=1e-3)


@pytest.mark.parametrize("kinematic", [False, True])
def test_another_fluid_by_its_stated_properties(kinematic):
    """The heads of the bench filled with a fluid of the water's own viscosity: the same Re, by either statement."""
    survey, truth = tube(FAST)
    nu, rho = float(kinematic_viscosity(KELVIN)), float(density(KELVIN))
    stated = {"kinematic_viscosity": Measured(nu)} if kinematic else {"viscosity": Measured(nu * rho)}
    found = reduce(replace(survey, fluid=Fluid("brine", density=Measured(rho), **stated)))
    np.testing.assert_allclose(runs_of(found, "reynolds"), truth.reynolds, rtol=1e-6)
    np.testing.assert_allclose(runs_of(found, "slope"), truth.slope, rtol=1e-6)
