"""Propagation of distributions, against the examples of JCGM 100 and JCGM 101 and against distributions that are known."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.stats import norm, t

from gradeline.fitting.monte_carlo import propagate, tolerance_of


def four(draw):
    """The sum of four independent quantities."""

    def model(generator, count, outputs):
        return draw(generator, (len(outputs), 4, count)).sum(axis=1), None

    return model


def test_the_sum_of_four_normal_quantities():
    """JCGM 101:2008, 9.2.2 and its table 2: u = 2.00, 95 % interval [−3.92, 3.92]."""
    found = propagate(four(lambda generator, shape: generator.standard_normal(shape)), 1, seed=3)
    assert found.settled[0]
    assert found.tolerance[0] == 0.05
    assert found.mean[0] == pytest.approx(0.0, abs=0.05)
    assert found.u[0] == pytest.approx(2.0, abs=0.05)
    assert (found.low[0], found.high[0]) == pytest.approx((-3.92, 3.92), abs=0.05)


def test_the_sum_of_four_rectangular_quantities():
    """JCGM 101:2008, 9.2.3 and its table 3: u = 2.0, interval ± 3.88; exactly ± 3.879406741 (Irwin–Hall)."""
    half = math.sqrt(3.0)
    found = propagate(four(lambda generator, shape: generator.uniform(-half, half, shape)), 1, seed=5)
    assert found.u[0] == pytest.approx(2.0, abs=0.05)
    assert (found.low[0], found.high[0]) == pytest.approx((-3.879406741, 3.879406741), abs=0.05)


def end_gauge(generator, count, outputs):
    """JCGM 100:2008, H.1, l = l_s + d − l_s (δα θ + α_s δθ), in nm; u of the inputs as stated there."""
    standard = 50_000_623 + 25.0 * generator.standard_normal((len(outputs), count))
    difference = 215 + 9.7 * generator.standard_normal((len(outputs), count))
    by_expansion = generator.uniform(-1e-6, 1e-6, (len(outputs), count))
    expansion = generator.uniform(9.5e-6, 13.5e-6, (len(outputs), count))
    by_temperature = generator.uniform(-0.05, 0.05, (len(outputs), count))
    # the mean of the bath −0.1 ± 0.2, a cycle of amplitude 0.5 about it
    phase = generator.uniform(0.0, 2 * np.pi, (len(outputs), count))
    temperature = -0.1 + 0.2 * generator.standard_normal((len(outputs), count)) + 0.5 * np.cos(phase)
    return standard + difference - standard * (by_expansion * temperature + expansion * by_temperature), None


def test_the_end_gauge_of_the_guide():
    """JCGM 100:2008, H.1: l = 50.000 838 mm, u = 32 nm to first order and 34 nm with the second (H.1.7)."""
    found = propagate(end_gauge, 1, seed=7)
    assert found.mean[0] == pytest.approx(50_000_838, abs=0.5)
    assert found.u[0] == pytest.approx(34.0, abs=0.5)
    assert found.tolerance[0] == 0.5


@pytest.mark.parametrize(
    ("u", "digits", "expected"),
    [
        # JCGM 101:2008, 7.9.2, examples 1 and 2
        (0.00035, 2, 0.000005),
        (2.0, 1, 0.5),
        # a second digit that rounds up: 0.0997 is 10 × 10⁻²
        (0.0997, 2, 0.005),
        (0.0994, 2, 0.0005),
    ],
)
def test_the_tolerance_is_half_a_unit_in_the_last_digit(u, digits, expected):
    assert tolerance_of(u, digits) == pytest.approx(expected, rel=1e-12)
    assert np.isnan(tolerance_of([0.0, np.nan])).all()


def skewed(generator, count, outputs):
    """exp of a normal quantity of 0.05, and its first order."""
    z = 0.05 * generator.standard_normal((len(outputs), count))
    return np.exp(z), 1.0 + z


def test_a_first_order_counterpart_saves_blocks_and_moves_nothing():
    """The quantiles of the log-normal distribution are exp(± 1.96 × 0.05)."""
    ends = np.exp(0.05 * norm.ppf([0.025, 0.975]))
    alone = propagate(lambda *a: (skewed(*a)[0], None), 1, seed=11)
    with_it = propagate(skewed, 1, seed=11, control=(np.array([1.0]), np.array([0.05])))
    for found in (alone, with_it):
        assert found.settled[0]
        assert (found.low[0], found.high[0]) == pytest.approx(ends, abs=2 * found.tolerance[0])
        assert found.mean[0] == pytest.approx(math.exp(0.05**2 / 2), abs=found.tolerance[0])
    assert with_it.trials[0] * 3 <= alone.trials[0]


def test_what_is_linear_and_normal_is_found_exactly():
    def draw(generator, count, outputs):
        z = 0.3 * generator.standard_normal((len(outputs), count)) + 4.0
        return z, z

    found = propagate(draw, 2, control=(np.full(2, 4.0), np.full(2, 0.3)), level=0.99)
    assert found.trials.tolist() == [20_000, 20_000]
    np.testing.assert_allclose(found.high, 4.0 + 0.3 * norm.ppf(0.995), rtol=1e-12)
    np.testing.assert_allclose(found.u, 0.3, rtol=1e-12)


def test_students_t_of_one_degree_of_freedom_has_limits_though_no_variance():
    def draw(generator, count, outputs):
        return generator.standard_t(1.0, (len(outputs), count)), None

    found = propagate(draw, 1, seed=2, size=np.array([10.0]))
    assert found.settled[0]
    assert found.high[0] == pytest.approx(t.ppf(0.975, 1), abs=3 * found.tolerance[0])


def test_an_output_that_has_settled_is_drawn_no_more():
    asked = []

    def draw(generator, count, outputs):
        asked.append(outputs.tolist())
        scale = np.where(outputs == 0, 1.0, 0.99)[
            :, None
        ]  # δ is a twentieth of the first, a two-hundredth of the other
        return scale * generator.standard_normal((len(outputs), count)), None

    found = propagate(draw, 2, seed=4)
    assert asked[0] == [0, 1]
    assert asked[-1] == [1]
    assert found.trials[0] == 10_000 * sum(0 in one for one in asked)
    assert found.tolerance.tolist() == pytest.approx([0.05, 0.005])


def test_the_same_seed_gives_the_same_numbers():
    first, again, other = (propagate(end_gauge, 1, seed=seed) for seed in (7, 7, 8))
    assert first.u[0] == again.u[0]
    assert first.u[0] != other.u[0]


def test_a_high_level_asks_for_longer_blocks():
    """JCGM 101:2008, 7.9.4 b: at least 100/(1 − p) draws a block."""
    found = propagate(four(lambda generator, shape: generator.standard_normal(shape)), 1, level=0.999, seed=1)
    assert found.trials[0] % 100_000 == 0
    assert found.high[0] == pytest.approx(2 * norm.ppf(0.9995), abs=3 * found.tolerance[0])
