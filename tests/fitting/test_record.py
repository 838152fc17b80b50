"""A logger's record in blocks: means with their uncertainty, windows, spikes and other faults.

How often intervals hold and faults are found is measured in `tests/calibration/record.py`.
"""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.signal import lfilter

from gradeline.fitting.record import (
    faults_of,
    steady_windows,
    stretches,
    window_mean,
    window_means,
    without_spikes,
)
from gradeline.fitting.record.autocorrelation import lagged_products, variance_of_mean
from gradeline.fitting.record.changes import changes
from gradeline.fitting.record.trend import step_of, trend_of


def blocks(x: np.ndarray, size: int) -> dict[str, np.ndarray]:
    parts = x[: len(x) // size * size].reshape(-1, size, x.shape[1])
    mean = parts.mean(axis=1)
    return {
        "count": np.full(mean.shape, float(size)),
        "mean": mean,
        "squares": ((parts - mean[:, None]) ** 2).sum(axis=1),
        "low": parts.min(axis=1),
        "high": parts.max(axis=1),
    }


def autoregression(phi: float, samples: int, seed: int, columns: int = 1) -> np.ndarray:
    rng = np.random.default_rng(seed)
    drive = rng.standard_normal((samples, columns)) * np.sqrt(1 - phi**2)
    return lfilter([1.0], [1.0, -phi], drive, axis=0)


class TestMeans:
    def test_products_are_those_of_a_plain_loop(self) -> None:
        x = np.random.default_rng(1).standard_normal((37, 3))
        plain = [(x[: 37 - k] * x[k:]).sum(axis=0) for k in range(37)]
        np.testing.assert_allclose(lagged_products(x), plain, atol=1e-12)

    @pytest.mark.parametrize("phi", [0.0, 0.5, 0.9, 0.98])
    def test_an_autoregression_has_the_variance_of_the_textbook(self, phi: float) -> None:
        """Var = s²/n (1 + φ)/(1 − φ): Box, Jenkins and Reinsel, Time Series Analysis (1994), sec. 2.1, from memory."""
        x = autoregression(phi, 200_000, 2)
        one = window_mean(*(blocks(x, 50)[name][:, 0] for name in ("count", "mean", "squares")))
        assert one.effective == pytest.approx(200_000 * (1 - phi) / (1 + phi), rel=0.15)
        assert one.u == pytest.approx(np.sqrt((1 + phi) / (1 - phi) / 200_000), rel=0.08)
        assert one.batch_u == pytest.approx(one.u, rel=0.4)
        assert not one.reason

    def test_the_mean_is_that_of_all_samples_whatever_the_blocks(self) -> None:
        x = autoregression(0.7, 1000, 3)[:, 0]
        cuts = np.r_[0, 17, np.arange(60, 960, 45), 1000]
        parts = [x[a:b] for a, b in pairwise(cuts)]
        count = [len(part) for part in parts]
        one = window_mean(count, [part.mean() for part in parts], [part.var() * len(part) for part in parts])
        assert one.mean == pytest.approx(x.mean(), rel=1e-12)
        # s² + u² is the variance of a sample: the effective samples follow from the samples alone
        assert one.effective == pytest.approx((x.var() + one.u**2) / one.u**2, rel=1e-12)

    def test_a_block_without_samples_counts_for_nothing(self) -> None:
        b = blocks(autoregression(0.6, 4000, 4), 20)
        whole = window_means(b["count"], b["mean"], b["squares"])[0]
        empty = {name: np.insert(b[name], 90, np.nan if name == "mean" else 0.0, axis=0) for name in b}
        other = window_means(empty["count"], empty["mean"], empty["squares"])[0]
        assert other.mean == pytest.approx(whole.mean, rel=1e-12)
        assert other.u == pytest.approx(whole.u, rel=0.1)

    @pytest.mark.parametrize(
        ("mean", "count", "reason"),
        [
            ([1.0, 2.0, 1.5], 9, "only 3 blocks of samples"),
            ([2.5] * 40, 9, "do not change at all"),
            (np.linspace(0, 1, 60).tolist(), 1, "correlated over the whole window"),
        ],
    )
    def test_what_is_not_known_has_no_number(self, mean: list[float], count: int, reason: str) -> None:
        one = window_mean([count] * len(mean), mean, [0.0] * len(mean))
        assert reason in one.reason
        assert np.isnan(one.u)
        assert np.isnan(one.normal_u)

    def test_few_effective_samples_are_told_and_widen_the_interval(self) -> None:
        x = autoregression(0.995, 2000, 11)
        one = window_mean(*(blocks(x, 10)[name][:, 0] for name in ("count", "mean", "squares")))
        assert 3 <= one.effective < 10
        assert "widened by Student's t" in one.reason
        assert one.normal_u > 1.15 * one.u

    @settings(max_examples=30, deadline=None)
    @given(st.floats(-1e6, 1e6), st.floats(1e-3, 1e3), st.integers(0, 1000))
    def test_shift_and_scale_go_through(self, shift: float, scale: float, seed: int) -> None:
        b = blocks(autoregression(0.8, 600, seed), 10)
        one = window_means(b["count"], b["mean"], b["squares"])[0]
        other = window_means(b["count"], shift + scale * b["mean"], scale**2 * b["squares"])[0]
        assert other.mean == pytest.approx(shift + scale * one.mean, abs=1e-9 * (abs(shift) + scale))
        if np.isfinite(one.u):
            assert other.u == pytest.approx(scale * one.u, rel=1e-4)


class TestTrends:
    def test_a_line_is_found_exactly(self) -> None:
        t = np.arange(100.0)
        line = trend_of(t, 100.0, np.ones((100, 1)), (3.0 + 0.02 * t)[:, None])
        assert line.change[0] == pytest.approx(2.0, rel=1e-12)
        assert line.p[0] < 1e-12

    def test_uncorrelated_noise_has_the_error_of_ordinary_least_squares(self) -> None:
        """Standard error of a slope, σ/√Σ(t − t̄)²: any text on regression."""
        rng = np.random.default_rng(5)
        t = np.arange(400.0)
        u = trend_of(t, 400.0, np.ones((400, 200)), rng.standard_normal((400, 200))).u
        assert np.median(u) == pytest.approx(400 / np.sqrt(((t - t.mean()) ** 2).sum()), rel=0.08)

    def test_a_step_is_told_where_it_is(self) -> None:
        z = autoregression(0.3, 300, 6)
        z[200:] -= 3.0
        step = step_of(np.ones((300, 1)), z)
        assert abs(int(step.at[0]) - 200) <= 2
        assert step.size[0] == pytest.approx(-3.0, abs=0.5)

    def test_a_variance_needs_four_blocks(self) -> None:
        assert np.isnan(variance_of_mean(np.ones((3, 2)), np.ones((3, 2))).variance).all()


class TestWindows:
    def test_the_cuts_are_the_best_of_all(self) -> None:
        """Held against every way of cutting a short record, each line fitted by numpy."""
        rng = np.random.default_rng(7)
        z = np.r_[np.zeros(5), np.full(4, 3.0), 3.0 + 0.8 * np.arange(5)] + 0.1 * rng.standard_normal(14)

        def cost(a: int, b: int) -> float:
            x = np.arange(a, b)
            return float(((z[a:b] - np.polyval(np.polyfit(x, z[a:b], 1), x)) ** 2).sum())

        best: dict[int, tuple[float, list[int]]] = {0: (0.0, [0])}
        for b in range(3, 15):
            options = [(best[a][0] + cost(a, b) + 0.5, [*best[a][1], b]) for a in range(b - 2) if a in best]
            best[b] = min(options)
        assert changes(z[:, None], np.ones((14, 1)), 0.5, 3) == best[14][1]

    @staticmethod
    def record(flow: np.ndarray, noise: float, seed: int) -> tuple[np.ndarray, ...]:
        rng = np.random.default_rng(seed)
        moving = flow + noise * np.max(flow) * rng.standard_normal(len(flow))
        heads = 2.0 - 5e4 * moving[:, None] ** 2 * np.linspace(0.2, 1, 4)
        mean = np.column_stack([moving, heads + 1e-4 * rng.standard_normal(heads.shape)])
        t = np.arange(float(len(flow)))
        return t, t + 1, np.full(len(t), 20.0), mean, np.zeros(mean.shape)

    def test_plateaus_are_found_and_what_lies_between_is_left_out(self) -> None:
        flow = np.r_[np.zeros(150), np.linspace(0, 2e-3, 100), np.full(300, 2e-3), np.full(300, 1.5e-3)]
        found = steady_windows(
            *self.record(flow, 1e-3, 8),
            np.arange(5) == 0,
            drift=0.01,
            least_length=60.0,
            settle=20.0,
        )
        assert [one.static for one in found] == [True, False, False]
        assert [round(one.flow, 5) for one in found[1:]] == [2e-3, 1.5e-3]
        for one, (low, high) in zip(found, ((0, 150), (250, 550), (550, 850)), strict=True):
            assert low - 1 <= one.start < one.end <= high + 1
        assert found[2].start >= 570

    def test_a_slow_drift_is_refused_and_said(self) -> None:
        flow = 2e-3 * np.linspace(1, 1.06, 600)
        (one,) = stretches(
            *self.record(flow, 1e-3, 9), np.arange(5) == 0, drift=0.01, least_length=60.0, settle=20.0
        )
        assert one.reason.startswith("the flow changes by ")
        assert one.drift == pytest.approx(0.06 / 1.03, rel=0.05)

    def test_heads_that_drift_together_refuse_a_window_and_one_alone_does_not(self) -> None:
        for moving, count in ((slice(1, 5), 0), (slice(1, 2), 1)):
            start, end, n, mean, squares = self.record(np.full(400, 2e-3), 1e-4, 10)
            mean[:, moving] += 0.02 * np.linspace(0, 1, 400)[:, None]
            found = steady_windows(
                start, end, n, mean, squares, np.arange(5) == 0, drift=0.005, least_length=60.0, settle=20.0
            )
            assert len(found) == count

    def test_a_gap_parts_a_plateau(self) -> None:
        start, end, *rest = self.record(np.full(600, 2e-3), 1e-3, 11)
        start, end = start + 400.0 * (start >= 300), end + 400.0 * (start >= 300)
        found = steady_windows(
            start, end, *rest, np.arange(5) == 0, drift=0.01, least_length=60.0, settle=20.0
        )
        assert [(one.first_block, one.last_block) for one in found] == [(0, 299), (300, 599)]

    def test_nothing_recorded_has_no_windows(self) -> None:
        none = np.zeros((0, 2))
        assert (
            steady_windows([], [], none, none, none, [True, False], drift=0.01, least_length=1, settle=1)
            == ()
        )


class TestFaults:
    @pytest.mark.parametrize("size", [1, 5, 40])
    def test_a_spike_is_taken_out_exactly(self, size: int) -> None:
        x = np.random.default_rng(12).standard_normal((60 * size, 2))
        at = 31 * size + size // 2
        x[at, 1] -= 40.0
        b = blocks(x, size)
        clean = without_spikes(b["count"], b["mean"], b["squares"], b["low"], b["high"])
        assert clean.taken.sum() == 1
        assert clean.taken[31, 1] == 1
        rest = np.delete(x[31 * size : 32 * size, 1], size // 2)
        if size > 1:
            assert clean.mean[31, 1] == pytest.approx(rest.mean(), rel=1e-12)
            assert clean.squares[31, 1] == pytest.approx(((rest - rest.mean()) ** 2).sum(), rel=1e-9)
        else:
            assert np.isnan(clean.mean[31, 1])
        assert clean.size[31, 1] == pytest.approx(-40.0, abs=4.0)

    def test_a_step_of_the_flow_is_no_spike(self) -> None:
        x = np.random.default_rng(13).standard_normal((2000, 1))
        x[999:] += 60.0
        b = blocks(x, 20)
        assert not without_spikes(b["count"], b["mean"], b["squares"], b["low"], b["high"]).taken.any()

    @staticmethod
    def told(x: np.ndarray, size: int = 20, window: object = None, **more: object) -> list[tuple[str, int]]:
        b = blocks(x, size)
        t = np.arange(len(b["mean"])) * size * 0.1
        where = np.full(len(t), -1) if window is None else np.asarray(window)
        values = [b[name] for name in ("count", "mean", "low", "high", "squares")]
        return [(one.kind, one.column) for one in faults_of(t, t + size * 0.1, *values, 0.1, where, **more)]

    def test_a_transducer_that_stands_still_is_stuck_and_a_coarse_one_is_not(self) -> None:
        x = np.random.default_rng(14).standard_normal((6000, 2))
        x[2000:3000, 0] = x[2000, 0]
        # a slow temperature on a coarse scale changes now and then
        x[:, 1] = np.round(np.linspace(0, 3, 6000))
        assert self.told(x) == [("stuck", 0)]

    def test_a_meter_that_shows_nought_rests(self) -> None:
        x = np.random.default_rng(15).standard_normal((4000, 1)) + 10
        x[:2000] = 0.0
        assert self.told(x) == [("stuck", 0)]
        assert self.told(x, zero_is_rest=[True]) == []

    def test_drift_and_step_are_told_apart(self) -> None:
        x = np.random.default_rng(16).standard_normal((6000, 3))
        window = np.repeat([0, 1, 2], 100)
        x[2000:4000, 0] += np.linspace(0, 3, 2000)
        x[3000:4000, 2] += 2.0
        assert self.told(x, window=window) == [("drift", 0), ("step", 2)]
        assert self.told(x, window=window, slow=[True, False, False]) == [("step", 2)]

    def test_gaps_have_their_times(self) -> None:
        b = blocks(np.random.default_rng(17).standard_normal((2000, 2)), 20)
        t = np.arange(100) * 2.0
        keep = (t < 80) | (t >= 120)
        b["count"] = b["count"].copy()
        b["count"][10:12, 1] = 0.0
        values = [b[name][keep] for name in ("count", "mean", "low", "high", "squares")]
        found = faults_of(t[keep], t[keep] + 2.0, *values, 0.1, np.full(int(keep.sum()), -1))
        assert [(one.column, one.kind, one.start, one.end, round(one.size, 6)) for one in found] == [
            (-1, "gap", 80.0, 120.0, 40.0),
            (1, "gap", 20.0, 24.0, 4.0),
        ]
