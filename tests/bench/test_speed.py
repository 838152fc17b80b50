"""How fast: run with ``pytest tests/bench --benchmark-enable``; without it each runs once, and what it says is checked.

No test asserts a time. Each benchmark tells how many runs it took under ``extra_info``; the ratios in one sitting are
printed by ``python -m tests.bench.ratios``.
"""

from __future__ import annotations

import tracemalloc

import numpy as np
import pytest

from tests.bench.runs import RUNS, SCRIPT_RUNS, TAPS, batch, bench_runs, frame, run_script, script_readings
from tests.simulate.bench_runs import BenchRuns


@pytest.fixture(scope="module")
def runs() -> BenchRuns:
    made = bench_runs()
    batch(made, search=True)  # what the search does to sound runs is simulated once and kept
    return made


@pytest.mark.benchmark(group="per-run reduction")
def test_the_plain_script(benchmark, script, runs):
    benchmark.extra_info["runs"] = SCRIPT_RUNS
    out = benchmark.pedantic(run_script, (script, script_readings(runs), runs), rounds=5)
    assert len(out) == SCRIPT_RUNS


@pytest.mark.benchmark(group="per-run reduction")
@pytest.mark.parametrize("search", [True, False], ids=["with outlier search", "without"])
def test_all_runs_at_once(benchmark, runs, search):
    benchmark.extra_info["runs"] = RUNS
    result = benchmark.pedantic(batch, (runs,), {"search": search}, rounds=10, warmup_rounds=1)
    assert result.slope.shape == (RUNS,)


@pytest.mark.benchmark(group="tables")
def test_building_the_table_beside_it(benchmark, runs):
    benchmark.extra_info["runs"] = RUNS
    result = batch(runs, search=False)
    assert len(benchmark.pedantic(frame, (result,), rounds=10)) == RUNS


def test_the_batch_says_what_the_script_says(script, runs):
    """Slope and f of every run, ε where the script has one: two programs that share no code."""
    theirs = run_script(script, script_readings(runs), runs)
    ours = batch(runs, search=False)
    part = slice(0, SCRIPT_RUNS)
    np.testing.assert_allclose(ours.slope[part], theirs["slope"], rtol=1e-9)
    np.testing.assert_allclose(ours.friction_factor[part], theirs["friction_factor"], rtol=1e-9)
    rough = theirs["roughness"].to_numpy()
    found = np.isfinite(rough)
    assert 0.2 < found.mean() < 1.0
    np.testing.assert_allclose(ours.roughness[part][found], rough[found], rtol=1e-6, atol=1e-12)
    # Where the script has none, f lies below the smooth law (no run here is laminar).
    assert (ours.roughness[part][~found] < 0).all()
    # Each run's own standard error scatters about the pooled one, which stands in the batch.
    own = np.sqrt((theirs["slope_u"] ** 2).mean())
    assert ours.slope_u[0] == pytest.approx(own, rel=0.02)


def test_the_scatter_and_the_flags_are_right(runs):
    result = batch(runs, search=True)
    np.testing.assert_allclose(result.scatter, 1e-3, rtol=0.02)
    # A sound run is flagged in about one in a hundred.
    assert result.flagged.any(axis=1).mean() == pytest.approx(0.01, abs=0.004)


@pytest.mark.parametrize("search", [True, False], ids=["with outlier search", "without"])
def test_memory_stays_below_ten_times_the_readings(runs, search):
    tracemalloc.start()
    batch(runs, search=search)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert runs.heads.shape == (RUNS, TAPS)
    assert peak < 10 * runs.heads.nbytes
