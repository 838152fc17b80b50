"""The wall's roughness against the same likelihood written out densely, and what it does with slips and trends."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import minimize_scalar
from scipy.stats import norm
from scipy.stats import t as student

from gradeline.fitting.wall import WallData, best_roughness, fit_wall, law_log_slope

GRAVITY = 9.81


def colebrook(reynolds, relative):
    """Colebrook–White by fixed-point iteration, from its implicit form."""
    root = np.full(np.broadcast(reynolds, relative).shape, 7.0)
    for _ in range(60):
        root = -2.0 * np.log10(relative / 3.7 + 2.51 * root / reynolds)
    return root**-2


def log_slope(roughness, flow, diameter, viscosity, gravity=GRAVITY):
    """ln S of the law from flow and bore, (R, K)."""
    velocity = flow[:, None] / (np.pi * diameter**2 / 4)
    factor = colebrook(velocity * diameter / viscosity[:, None], roughness / diameter)
    return np.log(factor * velocity**2 / (2 * gravity * diameter))


# Standard uncertainties of the shared inputs: two bores, flow calibration, viscosity, gravity, and a chainage.
SHARED = {
    "bore 1": 0.002,
    "bore 2": 0.001,
    "flow": 0.003,
    "viscosity": 0.005,
    "gravity": 1e-4,
    "chainage": 0.004,
}


def make(rng, *, roughness=5e-5, runs=10, flow_u=0.004, reading_u=2e-5, draw=True):
    """Two reaches, 40 and 50 mm, every error drawn from its statement: (data, true flow, viscosity)."""
    diameter = np.array([0.04, 0.05])
    flow = np.geomspace(0.6e-3, 4e-3, runs)
    viscosity = np.full(runs, 1.1e-6)
    z = rng.standard_normal(6) * draw
    true_bore = diameter * (1 + np.array([SHARED["bore 1"] * z[0], SHARED["bore 2"] * z[1]]))
    true_flow = flow * (1 - SHARED["flow"] * z[2]) * (1 - flow_u * rng.standard_normal(runs) * draw)
    slope = np.exp(
        log_slope(roughness, true_flow, true_bore, viscosity * (1 + SHARED["viscosity"] * z[3]), GRAVITY)
    )
    covariance = reading_u**2 * np.array([[2.0, -0.7], [-0.7, 1.0]])
    noise = rng.multivariate_normal(np.zeros(2), covariance, runs) * draw
    chainage = SHARED["chainage"] * slope * np.array([1.0, -0.5])
    slope = slope + chainage * z[5] + noise
    zero = np.zeros((runs, 2))
    return WallData(
        slope=slope,
        slope_covariance=np.broadcast_to(covariance, (runs, 2, 2)).copy(),
        velocity=flow[:, None] / (np.pi * diameter**2 / 4),
        diameter=diameter,
        kinematic_viscosity=viscosity,
        gravity=GRAVITY,
        flow_u=np.full(runs, flow_u),
        own_slope_effect=zero,
        viscosity_u=np.full(runs, 0.001),
        slope_effect=np.stack([zero] * 5 + [chainage], axis=2),
        diameter_effect=np.array([[SHARED["bore 1"], 0, 0, 0, 0, 0], [0, SHARED["bore 2"], 0, 0, 0, 0]]),
        flow_effect=np.array([0, 0, SHARED["flow"], 0, 0, 0]),
        viscosity_effect=np.tile([0, 0, 0, SHARED["viscosity"], 0, 0], (runs, 1)).astype(float),
        gravity_effect=np.array([0, 0, 0, 0, SHARED["gravity"], 0]),
    )


def dense_covariance(data, roughness):
    """C of ln S_observed − ln S_law over all runs and reaches, by differences of the law, nothing in closed form."""
    runs, reaches = data.slope.shape
    flow = data.velocity[:, 0] * np.pi * data.diameter[0] ** 2 / 4
    nu = data.kinematic_viscosity
    base = log_slope(roughness, flow, data.diameter, nu)
    h = 1e-4

    def change(diameter=0.0, of_flow=0.0, viscosity=0.0, gravity=0.0):
        up, down = (
            log_slope(
                roughness,
                flow * (1 + sign * h * of_flow),
                data.diameter * (1 + sign * h * np.asarray(diameter)),
                nu * (1 + sign * h * viscosity),
                data.gravity * (1 + sign * h * gravity),
            )
            for sign in (1, -1)
        )
        # ln S_law is what falls short if the stated value is too high: residual = −change.
        return -(up - down) / (2 * h)

    shared = [
        change(diameter=data.diameter_effect[:, 0]),
        change(diameter=data.diameter_effect[:, 1]),
        change(of_flow=SHARED["flow"]),
        change(viscosity=SHARED["viscosity"]),
        change(gravity=SHARED["gravity"]),
        data.slope_effect[:, :, 5] / np.exp(base),
    ]
    covariance = sum(np.outer(one.ravel(), one.ravel()) for one in shared)
    own = [change(of_flow=data.flow_u[0]), change(viscosity=data.viscosity_u[0])]
    for run in range(runs):
        here = slice(run * reaches, (run + 1) * reaches)
        law = np.exp(base[run])
        covariance[here, here] += data.slope_covariance[run] / np.outer(law, law)
        for one in own:
            covariance[here, here] += np.outer(one[run], one[run])
    return covariance, base


def dense_fit(data, used):
    """The minimum of r' C⁻¹ r over ε, C renewed at each minimum; and the function at the last C."""
    flow = data.velocity[:, 0] * np.pi * data.diameter[0] ** 2 / 4
    observed, roughness, here = np.log(data.slope), 3e-5, used.ravel()
    for _ in range(12):
        inverse = np.linalg.inv(dense_covariance(data, roughness)[0][np.ix_(here, here)])

        def squares(value, inverse=inverse):
            law = log_slope(value, flow, data.diameter, data.kinematic_viscosity)
            rest = (observed - law).ravel()[here]
            return float(rest @ inverse @ rest)

        new = minimize_scalar(squares, bounds=(0.0, 2e-3), method="bounded", options={"xatol": 1e-13}).x
        done = abs(new - roughness) < 1e-9 * new
        roughness = new
        if done:
            break
    return roughness, squares


@pytest.mark.parametrize("seed", range(4))
def test_the_fit_is_the_dense_likelihoods(seed):
    data = make(np.random.default_rng(seed))
    fit = fit_wall(data, np.isfinite(data.slope))
    # Now and then a sound run is off the law (5 % of surveys): what is used is compared.
    roughness, squares = dense_fit(data, fit.used)
    assert fit.roughness == pytest.approx(roughness, rel=1e-4)
    assert fit.chi_square == pytest.approx(squares(roughness), rel=1e-4)
    # Both ends of the interval lie where the sum of squares has risen by the square of the quantile.
    quantile = norm.ppf(0.975) ** 2
    least = squares(fit.roughness)
    assert squares(fit.low) - least == pytest.approx(quantile, rel=1e-3)
    assert squares(fit.high) - least == pytest.approx(quantile, rel=1e-3)
    assert squares(fit.upper95) - least == pytest.approx(norm.ppf(0.95) ** 2, rel=1e-3)


def test_students_quantile_where_the_scatter_has_few_degrees_of_freedom():
    data = make(np.random.default_rng(1))
    fit = fit_wall(data, np.isfinite(data.slope), dof=6.0, level=0.9)
    _, squares = dense_fit(data, fit.used)
    assert squares(fit.high) - squares(fit.roughness) == pytest.approx(student.ppf(0.95, 6) ** 2, rel=1e-3)


def test_exact_slopes_give_the_roughness_back():
    for roughness in (2e-7, 1e-5, 5e-4):
        data = make(np.random.default_rng(0), roughness=roughness, draw=False)
        fit = fit_wall(data, np.isfinite(data.slope))
        assert fit.roughness == pytest.approx(roughness, rel=1e-5)
        assert abs(fit.trend) < 1e-6
        assert best_roughness(data, fit) == pytest.approx(fit.roughness, rel=1e-6)


def test_the_law_is_that_of_the_implicit_equation():
    data = make(np.random.default_rng(0), draw=False, roughness=5e-5)
    np.testing.assert_allclose(law_log_slope(data, 5e-5), np.log(data.slope), rtol=1e-12)


def test_slopes_below_the_smooth_law_give_zero_and_an_interval_that_begins_there():
    data = make(np.random.default_rng(0), roughness=0.0, draw=False)
    data = replace(data, slope=data.slope * 0.997)
    fit = fit_wall(data, np.isfinite(data.slope))
    assert fit.roughness == 0.0
    assert fit.low == 0.0
    assert 0 < fit.upper95 < fit.high


def test_shared_errors_widen_the_interval():
    data = make(np.random.default_rng(3))
    alone = replace(data, diameter_effect=0 * data.diameter_effect, flow_effect=0 * data.flow_effect)
    usable = np.isfinite(data.slope)
    whole, part = fit_wall(data, usable), fit_wall(alone, usable)
    assert whole.high - whole.low > 1.5 * (part.high - part.low)


def two_tap(rng, *, runs=23, roughness=1e-6, scatter=0.008, trend=0.0, bore_u=0.0025):
    """Two taps, nothing stated but the bore: no scatter within a run."""
    diameter, flow, viscosity = np.array([0.0285]), np.geomspace(1.4e-4, 1.4e-3, runs), np.full(runs, 1.3e-6)
    exact = log_slope(roughness, flow, diameter * (1 + bore_u * rng.standard_normal()), viscosity)
    velocity = flow[:, None] / (np.pi * diameter**2 / 4)
    decades = np.log10(velocity * diameter / viscosity[:, None])
    slope = np.exp(exact + scatter * rng.standard_normal((runs, 1)) + trend * (decades - decades.mean()))
    return WallData(
        slope=slope,
        slope_covariance=np.full((runs, 1, 1), np.nan),
        velocity=velocity,
        diameter=diameter,
        kinematic_viscosity=viscosity,
        gravity=GRAVITY,
        flow_u=np.zeros(runs),
        own_slope_effect=np.zeros((runs, 1)),
        viscosity_u=np.zeros(runs),
        slope_effect=np.zeros((runs, 1, 1)),
        diameter_effect=np.array([[bore_u]]),
        flow_effect=np.zeros(1),
        viscosity_effect=np.zeros((runs, 1)),
        gravity_effect=np.zeros(1),
    )


@pytest.mark.parametrize("factor", [10.0, 0.1, 0.63])
@pytest.mark.parametrize("run", [0, 11, 22])
def test_a_slip_in_a_two_tap_reading_is_off_the_law_and_leaves_the_fit(factor, run):
    data = two_tap(np.random.default_rng(run))
    clean = fit_wall(data, np.isfinite(data.slope))
    slope = data.slope.copy()
    slope[run] *= factor
    fit = fit_wall(replace(data, slope=slope), np.isfinite(slope))
    assert fit.off_law[run, 0]
    assert fit.off_law.sum() <= 1 + clean.off_law.sum() + 1
    assert np.sign(fit.score[run, 0]) == np.sign(np.log(factor))
    # The law that the others follow gives what the reading should have been, within a few of the scatter.
    assert fit.expected_slope[run, 0] == pytest.approx(data.slope[run, 0], rel=0.05)
    assert fit.relative_scatter == pytest.approx(0.008, rel=0.5)


def test_sound_two_tap_surveys_are_seldom_off_the_law():
    """Family-wise 5 %; 100 surveys, three standard errors."""
    rng = np.random.default_rng(6)
    hit = 0
    for _ in range(100):
        data = two_tap(rng)
        hit += fit_wall(data, np.isfinite(data.slope)).off_law.any()
    assert hit / 100 < 0.05 + 3 * np.sqrt(0.05 * 0.95 / 100)


def test_the_scatter_off_the_law_is_recovered_with_runs_less_one_degrees_of_freedom():
    rng = np.random.default_rng(7)
    fits = []
    for _ in range(60):
        data = two_tap(rng)
        fits.append(fit_wall(data, np.isfinite(data.slope)))
    assert np.median([fit.relative_scatter for fit in fits]) == pytest.approx(0.008, rel=0.1)
    assert all(fit.dof == fit.used.sum() - 1 for fit in fits)


def test_a_trend_of_f_against_the_law_is_recovered():
    """Falling: roughness cannot follow, so the minimum stays at 0 and the trend is seen whole."""
    rng = np.random.default_rng(8)
    fits = []
    for _ in range(60):
        data = two_tap(rng, roughness=0.0, trend=-0.05)
        fits.append(fit_wall(data, np.isfinite(data.slope)))
    trends = np.array([fit.trend for fit in fits if fit.roughness == 0.0])
    assert len(trends) > 40
    assert trends.mean() == pytest.approx(-0.05, abs=4 * trends.std() / np.sqrt(len(trends)))
    # Beyond chance at the 1 % that a flag asks for.
    assert np.mean([abs(fit.trend) > 2.8 * fit.trend_u for fit in fits]) > 0.95


def test_runs_on_the_law_show_no_trend_beyond_its_uncertainty():
    """Two-sided 1 % point of Student's t with 22 degrees of freedom: 2.82; three standard errors of 150 surveys."""
    rng = np.random.default_rng(9)
    beyond = 0
    for _ in range(150):
        data = two_tap(rng, roughness=1e-6)
        fit = fit_wall(data, np.isfinite(data.slope))
        beyond += abs(fit.trend) > student.ppf(0.995, 22) * fit.trend_u
    assert beyond / 150 < 0.01 + 3 * np.sqrt(0.01 * 0.99 / 150)


def test_gaps_and_too_few():
    data = make(np.random.default_rng(2))
    slope = data.slope.copy()
    slope[3, 1] = np.nan
    fit = fit_wall(replace(data, slope=slope), np.isfinite(slope))
    assert not fit.used[3, 1]
    assert np.isnan(fit.score[3, 1])
    assert np.isfinite(fit.roughness)
    nothing = fit_wall(data, np.zeros(slope.shape, dtype=bool))
    assert np.isnan(nothing.roughness)
    assert np.isnan(best_roughness(data, nothing))
    one = np.zeros(slope.shape, dtype=bool)
    one[-1, 0] = True
    single = fit_wall(data, one)
    assert np.isfinite(single.roughness)
    assert np.isnan(single.trend)


def test_a_wall_of_two_reaches_shares_one_roughness():
    data = make(np.random.default_rng(5), draw=False, roughness=8e-5)
    both = np.isfinite(data.slope)
    first = both & np.array([True, False])
    assert fit_wall(data, both).roughness == pytest.approx(fit_wall(data, first).roughness, rel=1e-5)
    assert fit_wall(data, both).high < fit_wall(data, first).high


@pytest.mark.parametrize("trend", [0.0, -0.05])
def test_the_trends_interval_holds_it_where_the_scatter_is_that_off_the_law(trend):
    """95 % of surveys, and no wider than it need be: with the trend left in the scatter it was twice too wide."""
    rng = np.random.default_rng(11)
    held, found, u = 0, [], []
    for _ in range(60):
        data = two_tap(rng, roughness=2e-4, trend=trend)
        fit = fit_wall(data, np.isfinite(data.slope))
        held += abs(fit.trend - trend) < student.ppf(0.975, fit.trend_dof) * fit.trend_u
        found.append(fit.trend)
        u.append(fit.trend_u)
    assert held / 60 >= 0.95 - 3 * np.sqrt(0.95 * 0.05 / 60)
    assert np.median(u) == pytest.approx(np.std(found), rel=0.3)
