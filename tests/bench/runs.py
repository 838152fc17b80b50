"""The runs that speed is measured on: 100,000 of 12 taps on a copper bore, one reading uncertainty for all."""

from __future__ import annotations

import numpy as np
import pandas as pd

from gradeline.reduction.batch import BatchResult, reduce_arrays
from tests.simulate.bench_runs import BenchRuns, simulate_runs

RUNS, TAPS = 100_000, 12
#: The script takes a sub-sample: its runs cost the same each.
SCRIPT_RUNS = 1_500


def bench_runs(runs: int = RUNS) -> BenchRuns:
    """Seeded runs from Re 9,000 to 90,000, σ = 1 mm."""
    return simulate_runs(
        np.random.default_rng(20260506),
        runs=runs,
        chainage=np.linspace(0.2, 5.4, TAPS),
        diameter=0.025,
        roughness=2e-6,
        flow_range=(2e-4, 1.5e-3),
        temperature=(285.0, 300.0),
        sigma=1e-3,
    )


def batch(runs: BenchRuns, *, search: bool) -> BatchResult:
    """Arrays in, arrays out."""
    return reduce_arrays(
        runs.heads,
        runs.chainage,
        runs.flow,
        diameter=runs.diameter,
        kinematic_viscosity=runs.viscosity,
        gravity=runs.gravity,
        search=search,
    )


def frame(result: BatchResult) -> pd.DataFrame:
    """The per-run columns as a table."""
    return pd.DataFrame(
        {
            "slope": result.slope,
            "slope_u": result.slope_u,
            "friction_factor": result.friction_factor,
            "friction_factor_u": result.friction_factor_u,
            "roughness": result.roughness,
            "flagged": result.flagged.sum(axis=1),
        }
    )


def script_readings(runs: BenchRuns) -> pd.DataFrame:
    """The sub-sample as the script takes it."""
    return pd.DataFrame(runs.heads[:SCRIPT_RUNS])


def run_script(script, readings: pd.DataFrame, runs: BenchRuns) -> pd.DataFrame:
    """The plain script on the sub-sample."""
    count = len(readings)
    return script.reduce_runs(
        readings,
        runs.chainage,
        runs.flow[:count],
        diameter=runs.diameter,
        viscosity=runs.viscosity[:count],
        gravity=runs.gravity,
    )
