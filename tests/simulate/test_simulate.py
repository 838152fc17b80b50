"""The simulators: their truth against independent physics, their draws against what they state."""

from __future__ import annotations

import fluids
import numpy as np
import pytest

from tests.simulate.bench_runs import simulate_runs
from tests.simulate.line import TrueLine, TrueLoss, TrueReach, friction_factor, kinetic_energy_factor
from tests.simulate.surveys import NominalFitting, NominalReach, Uncertainties, make_survey
from tests.simulate.water import density, kinematic_viscosity

TAPS = np.linspace(0.2, 5.3, 10)
TUBE = NominalReach(0.0, 5.5, 0.02664, 1.5e-6, diameter_u=3e-5)


def test_water_at_twenty_degrees() -> None:
    """998.207 kg/m³ and 1.0016 mPa s: IAPWS-95 and IAPWS R12-08, from memory of their tables at 20 °C."""
    assert float(density(293.15)) == pytest.approx(998.207, abs=0.002)
    assert float(density(293.15) * kinematic_viscosity(293.15)) == pytest.approx(1.0016e-3, rel=2e-4)


def test_friction_by_regime() -> None:
    """64/Re and, above Re 4000, `fluids.Colebrook`; the ends of the critical zone meet."""
    np.testing.assert_allclose(friction_factor([500, 1999], 1e-3), [0.128, 64 / 1999], rtol=1e-12)
    for reynolds in (4000.0, 5e4, 3e6):
        assert float(friction_factor(reynolds, 2e-3)) == pytest.approx(
            fluids.Colebrook(reynolds, 2e-3), rel=1e-9
        )
    middle = (64 / 2000 + fluids.Colebrook(4000.0, 2e-3)) / 2
    assert float(friction_factor(3000.0, 2e-3)) == pytest.approx(middle, rel=1e-9)
    assert np.isnan(friction_factor(0.0, 2e-3))


def test_the_energy_balance_of_a_line() -> None:
    """Bernoulli by hand over a narrowing with K = 0.18 and a valve with K = 4."""
    line = TrueLine(
        (TrueReach(0, 430, 0.254, 9e-4), TrueReach(430, 1210, 0.203, 9e-4)),
        (TrueLoss(430, 0.18), TrueLoss(800, 4.0)),
        gravity=9.81,
    )
    flow, nu = 0.06, 1.3e-6
    fast, slow = flow / (np.pi * 0.203**2 / 4), flow / (np.pi * 0.254**2 / 4)
    f_slow = fluids.Colebrook(slow * 0.254 / nu, 9e-4 / 0.254)
    f_fast = fluids.Colebrook(fast * 0.203 / nu, 9e-4 / 0.203)
    head = f_slow * 430 / 0.254 * slow**2 + (f_fast * 570 / 0.203 + 4.18) * fast**2
    head = -(head + (1 + 2.7 * f_fast) * fast**2) / (2 * 9.81)
    assert line.heads([1000.0], [flow], [nu])[0, 0] == pytest.approx(head, rel=1e-9)
    assert (line.heads([0.0, 430.0, 1210.0], [0.0], [nu]) == 0).all()
    np.testing.assert_allclose(kinetic_energy_factor([100, 2000], 1e-3), 2)


def test_runs_scatter_by_what_is_asked() -> None:
    rng = np.random.default_rng(11)
    made = simulate_runs(
        rng,
        runs=4000,
        chainage=TAPS,
        diameter=0.02664,
        roughness=1.5e-6,
        flow_range=(2e-5, 1.5e-3),
        temperature=(287.0, 291.0),
        sigma=5e-4,
        surge=0.004,
    )
    scaled = (made.heads - made.true_heads) / made.sigma[:, None]
    assert scaled.std() == pytest.approx(1, abs=4 / np.sqrt(2 * scaled.size))
    np.testing.assert_allclose(made.sigma**2 - 5e-4**2, (0.004 * made.velocity**2 / 19.6133) ** 2, atol=1e-15)
    fall = (made.true_heads[:, 0] - made.true_heads[:, -1]) / (TAPS[-1] - TAPS[0])
    np.testing.assert_allclose(fall, made.slope, rtol=1e-9)
    assert (made.reynolds < 2000).any()
    assert (made.reynolds > 60_000).any()


def test_a_survey_without_errors_reads_its_truth() -> None:
    """Columns stand taller by the weight of the air beside them, 1.204/998.2 of the head (20 °C, dry)."""
    survey, truth = make_survey(
        np.random.default_rng(1), chainage=TAPS, reaches=[TUBE], flows=[0, 3e-4, 1.2e-3], sigma=0, draw=False
    )
    slopes = -np.polyfit(TAPS, survey.readings.to_numpy().T, 1)[0]
    assert slopes[0] == pytest.approx(0, abs=1e-12)
    np.testing.assert_allclose(slopes[1:] / truth.slope[1:, 0], 1 + 1.204 / 998.2, atol=3e-5)
    assert survey.reaches[0].diameter.u == 3e-5
    assert truth.line.reaches[0].diameter == TUBE.diameter


def test_inputs_are_drawn_from_what_is_stated() -> None:
    """Each shared input's error, over its stated uncertainty, is a standard normal deviate."""
    stated = Uncertainties(
        reading=1e-3, flow=0.004, flow_scale=0.003, chainage=1e-3, zero=1e-3, temperature=0.2
    )
    rng = np.random.default_rng(2)
    errors = []
    for _ in range(400):
        survey, truth = make_survey(rng, chainage=TAPS, reaches=[TUBE], flows=[5e-4, 1e-3], stated=stated)
        flow = truth.flow / survey.runs["flow"].to_numpy() - 1
        errors.append(
            [
                (truth.line.reaches[0].diameter - TUBE.diameter) / 3e-5,
                flow[0] / 0.005,  # 0.3 % and 0.4 % together
                (flow[0] - flow[1]) / 0.004 / np.sqrt(2),
                (truth.chainage[3] - TAPS[3]) / 1e-3,
                (truth.zero - 0.8) / 1e-3,
                (truth.temperature[0] - survey.runs["temperature"][0]) / 0.2,
            ]
        )
    np.testing.assert_allclose(np.std(errors, axis=0), 1, atol=4 / np.sqrt(2 * 400))
    np.testing.assert_allclose(np.mean(errors, axis=0), 0, atol=4 / np.sqrt(400))


def test_slips_offsets_and_unlisted_losses_reach_the_readings() -> None:
    kinds = [NominalFitting(2.0, 4.0), NominalFitting(3.1, 1.0, stated=None)]
    given = {"chainage": TAPS, "reaches": [TUBE], "flows": [0, 1e-3], "sigma": 0, "draw": False}
    plain, _ = make_survey(np.random.default_rng(3), **given)
    offsets = np.arange(10) * 1e-3
    survey, _ = make_survey(
        np.random.default_rng(3), **given, fittings=kinds, offsets=offsets, slips={(1, 4): 0.03}
    )
    assert [fitting.loss_coefficient for fitting in survey.fittings] == [None]
    added = (survey.readings - plain.readings).to_numpy()
    np.testing.assert_allclose(added[0], offsets, atol=1e-12)
    velocity_head = (1e-3 / (np.pi * 0.02664**2 / 4)) ** 2 / 19.6133
    upstream = 4.0 * (TAPS <= 2.0) + 1.0 * (TAPS <= 3.1)
    slip = 0.03 * (np.arange(10) == 4)
    np.testing.assert_allclose(added[1] - offsets - slip, upstream * velocity_head, rtol=2e-3, atol=1e-9)
