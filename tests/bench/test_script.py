"""The plain script is a fair opponent only if it gets the right answer."""

from __future__ import annotations

from types import ModuleType

import fluids
import numpy as np
import pandas as pd
import pytest


@pytest.fixture
def bench() -> dict[str, np.ndarray]:
    """Exact heads of a rough, a laminar and a too smooth run; f of the first from Colebrook-White by `fluids`."""
    chainage, diameter, viscosity, gravity = np.linspace(0.2, 5.4, 12), 0.025, 1.1e-6, 9.81
    velocity = np.array([1.5, 0.06, 1.5])
    reynolds = velocity * diameter / viscosity
    friction_factor = np.array([fluids.Colebrook(reynolds[0], 2e-4), 64 / reynolds[1], 0.017])
    slope = friction_factor * velocity**2 / (2 * gravity * diameter)
    return {
        "heads": 1.4 - slope[:, None] * chainage,
        "chainage": chainage,
        "flow": velocity * np.pi * diameter**2 / 4,
        "friction_factor": friction_factor,
    }


def test_the_script_recovers_exact_heads(script: ModuleType, bench: dict[str, np.ndarray]) -> None:
    out = script.reduce_runs(
        pd.DataFrame(bench["heads"], index=["a", "b", "c"]),
        bench["chainage"],
        bench["flow"],
        diameter=0.025,
        viscosity=1.1e-6,
        gravity=9.81,
    )
    assert list(out.index) == ["a", "b", "c"]
    np.testing.assert_allclose(out["friction_factor"], bench["friction_factor"], rtol=1e-9)
    np.testing.assert_allclose(out["slope_u"], 0, atol=1e-9)
    assert out.loc["a", "roughness"] == pytest.approx(2e-4 * 0.025, rel=1e-6)
    assert out.loc[["b", "c"], "roughness"].isna().all()  # laminar; below the smooth law
