"""Gains in χ² against generalised least squares with one dense covariance; readings that follow, by hand."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gradeline.fitting.diagnosis.evidence import Evidence, freed, gather
from gradeline.fitting.diagnosis.following import following


class Setting:
    """Runs with lines of their own, a stated shared error, something accepted, and candidates."""

    def __init__(self, seed: int, runs: int = 5, n: int = 7) -> None:
        rng = np.random.default_rng(seed)
        self.runs, self.n = runs, n
        x = np.sort(rng.uniform(0.0, 5.0, n))
        self.design = np.column_stack([np.ones(n), -x])
        self.variance = rng.uniform(0.5, 2.0, (runs, n)) * 1e-6
        self.used = np.ones((runs, n), dtype=bool)
        self.used[0, 2] = self.used[runs - 1, n - 1] = False
        self.y = np.where(self.used, 1e-3 * rng.standard_normal((runs, n)) + 0.3 * x, 0.0)
        flow = rng.uniform(0.1, 1.0, runs)[:, None]
        self.candidates = np.stack(
            [np.eye(n)[2] * np.ones((runs, 1)), np.eye(n)[4] * flow, (x > x[3]) * flow], axis=2
        )
        self.accepted = (np.eye(n)[1] * flow**2)[:, :, None]
        self.stated = np.stack([1e-3 * np.eye(n)[5] * flow, 5e-4 * x * np.ones((runs, 1))], axis=2)
        self.weight = np.zeros((runs, n, n))
        for run in range(runs):
            kept = self.used[run]
            w = np.diag(kept / self.variance[run])
            a = self.design
            self.weight[run] = w - w @ a @ np.linalg.inv(a.T @ w @ a) @ a.T @ w

    def evidence(self) -> Evidence:
        return gather(self.y, self.weight, self.candidates, self.accepted, self.stated)

    def chi_square(self, *columns: np.ndarray, without: tuple[int, int] | None = None) -> float:
        """Dense: every run's line, what is accepted and the columns free, stated errors in the covariance."""
        kept = self.used.copy()
        if without is not None:
            kept[without] = False
        keep = kept.ravel()
        lines = np.kron(np.eye(self.runs), self.design)
        free = np.column_stack([lines, self.accepted.reshape(-1, 1), *columns])[keep]
        shared = self.stated.reshape(keep.size, -1)[keep]
        covariance = np.diag(self.variance.ravel()[keep]) + shared @ shared.T
        root = np.linalg.inv(np.linalg.cholesky(covariance))
        left = root @ self.y.ravel()[keep]
        left = left - (root @ free) @ np.linalg.lstsq(root @ free, left, rcond=None)[0]
        return float(left @ left)


@pytest.mark.parametrize("seed", range(4))
def test_the_least_misfit_is_that_of_dense_least_squares(seed: int) -> None:
    here = Setting(seed)
    assert here.evidence().chi_square == pytest.approx(here.chi_square(), rel=1e-8)


@pytest.mark.parametrize("seed", range(4))
def test_gains_of_columns_are_differences_of_dense_misfits(seed: int) -> None:
    here = Setting(seed)
    evidence, before = here.evidence(), here.chi_square()
    flat = [here.candidates[:, :, c].ravel() for c in range(3)]
    for c, gain in enumerate(evidence.gains()):
        assert gain == pytest.approx(before - here.chi_square(flat[c]), rel=1e-8)
    for pick in ((0, 1), (0, 2), (0, 1, 2)):
        gain = evidence.sizes(pick)[2]
        assert gain == pytest.approx(before - here.chi_square(*(flat[c] for c in pick)), rel=1e-8)


@pytest.mark.parametrize("seed", range(4))
def test_sizes_and_their_covariance_are_those_of_dense_least_squares(seed: int) -> None:
    here = Setting(seed)
    keep = here.used.ravel()
    lines = np.kron(np.eye(here.runs), here.design)
    free = np.column_stack([here.candidates.reshape(-1, 3), lines, here.accepted.reshape(-1, 1)])[keep]
    shared = here.stated.reshape(keep.size, -1)[keep]
    inverse = np.linalg.inv(np.diag(here.variance.ravel()[keep]) + shared @ shared.T)
    covariance = np.linalg.inv(free.T @ inverse @ free)
    size, found, _ = here.evidence().sizes((0, 1, 2))
    np.testing.assert_allclose(found, covariance[:3, :3], rtol=1e-6)
    np.testing.assert_allclose(
        size, (covariance @ free.T @ inverse @ here.y.ravel()[keep])[:3], rtol=1e-6, atol=1e-12
    )


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize("count", [1, 2])
def test_gains_of_freed_directions_are_differences_of_dense_misfits(seed: int, count: int) -> None:
    here = Setting(seed)
    ways = np.column_stack([np.eye(here.n)[3], np.eye(here.n)[5]])[:, :count]
    gain, unknowns = freed(here.evidence(), ways)
    each = np.kron(np.eye(here.runs), ways)
    assert unknowns == count * here.runs
    assert gain == pytest.approx(here.chi_square() - here.chi_square(each), rel=1e-8)


@pytest.mark.parametrize("seed", range(3))
def test_gains_of_single_readings_are_differences_of_dense_misfits(seed: int) -> None:
    here = Setting(seed)
    before, gains = here.chi_square(), here.evidence().reading_gains()
    for place in np.ndindex(here.used.shape):
        expected = before - here.chi_square(without=place) if here.used[place] else 0.0
        assert gains[place] == pytest.approx(expected, rel=1e-7, abs=1e-8), place


def test_a_column_that_the_lines_make_up_gains_nothing() -> None:
    here = Setting(1)
    here.candidates[:, :, 0] = here.design[:, 1]
    evidence = here.evidence()
    assert evidence.gains()[0] == 0.0
    assert evidence.sizes((0,))[2] == 0.0
    assert np.isinf(evidence.sizes((0,))[1]).all()


def test_errors_along_a_direction_are_those_of_a_reading_left_out() -> None:
    """The error of a tap in a run is its reading less what the other taps of the run give."""
    x = np.array([0.0, 1.0, 2.0, 3.0])
    design = np.column_stack([np.ones(4), -x])
    weight = (np.eye(4) - design @ np.linalg.pinv(design)) / 1e-6
    heads = np.array([[5.0, 4.0, 3.5, 2.0], [9.0, 7.0, 4.7, 3.0]])
    none = np.zeros((2, 4, 0))
    evidence = gather(heads, np.repeat(weight[None], 2, axis=0), none, none, none)
    error, deviation = evidence.errors_along(np.eye(4)[2])
    # 5, 4, ., 2 lie on 5 − x: 3 at x = 2; 9, 7, ., 3 on 9 − 2 x: 5 there
    np.testing.assert_allclose(error, [0.5, -0.3], atol=1e-12)
    # one reading at σ and a line through 0, 1, 3 at x = 2: 1 + 1/3 + (2 − 4/3)²/(14/3) = 10/7
    np.testing.assert_allclose(deviation, 1e-3 * (10 / 7) ** 0.5, rtol=1e-9)


def test_a_tube_that_makes_half_of_the_change() -> None:
    true = np.array([1.0, 2.0, 4.0, 3.0, 6.0])
    read = 1.0 + 0.5 * (true - 1.0)
    found = following(read, read - true, np.full(5, 1e-3))
    assert (found.share, found.stuck) == pytest.approx((0.5, 1.0))
    # only the first run is right
    assert found.sound == pytest.approx(1 / 5)


def test_air_in_two_of_five_runs() -> None:
    error = np.array([0.0, 0.05, 0.0, 0.04, 0.0])
    true = np.array([1.0, 1.5, 1.2, 1.1, 1.4])
    found = following(true + error, error, np.full(5, 1e-3))
    assert found.sound == pytest.approx(3 / 5)
    assert found.stuck < 0.6


def test_a_head_that_never_moves_tells_nothing() -> None:
    error = np.array([0.0, 0.05, 0.0, 0.04, 0.0])
    found = following(2.0 + error, error, np.full(5, 1e-3))
    assert np.isnan(found.share)
    assert found.stuck == 0.0


@settings(max_examples=30, deadline=None)
@given(st.floats(0.05, 0.95), st.integers(0, 1000))
def test_a_lag_is_found_as_large_as_it_is(part: float, seed: int) -> None:
    true = np.random.default_rng(seed).uniform(0.0, 1.0, 8)
    read = [true[0]]
    for head in true[1:]:
        read.append(head + part * (read[-1] - head))
    found = following(np.array(read), np.array(read) - true, np.full(8, 1e-5))
    assert found.memory == pytest.approx(part, rel=1e-6)
    assert found.slow == pytest.approx(1.0, rel=1e-6)


@pytest.mark.parametrize("seed", range(3))
def test_errors_along_a_direction_know_what_the_shared_effects_are_uncertain_by(seed: int) -> None:
    """Against dense least squares with an unknown for the error of each run: accepted and stated effects are free."""
    case = Setting(seed)
    direction = np.eye(case.n)[3]
    error, deviation = case.evidence().errors_along(direction)
    keep = case.used.ravel()
    each = np.kron(np.eye(case.runs), direction[:, None])
    lines = np.kron(np.eye(case.runs), case.design)
    free = np.column_stack([each, lines, case.accepted.reshape(-1, 1)])[keep]
    shared = case.stated.reshape(keep.size, -1)[keep]
    root = np.linalg.inv(np.linalg.cholesky(np.diag(case.variance.ravel()[keep]) + shared @ shared.T))
    size = np.linalg.lstsq(root @ free, root @ case.y.ravel()[keep], rcond=None)[0][: case.runs]
    covariance = np.linalg.inv((root @ free).T @ (root @ free))[: case.runs, : case.runs]
    np.testing.assert_allclose(error, size, rtol=1e-6, atol=1e-10)
    np.testing.assert_allclose(deviation, np.sqrt(np.diag(covariance)), rtol=1e-6)
