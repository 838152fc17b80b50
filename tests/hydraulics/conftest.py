"""Reference results by an independent route: the Colebrook–White law in 50-digit arithmetic."""

from __future__ import annotations

from collections.abc import Callable

import mpmath
import numpy as np
import pytest


@pytest.fixture(scope="session")
def digits() -> mpmath.ctx_mp.MPContext:
    """An own context of 50 digits, so that no global precision is touched."""
    context = mpmath.mp.clone()
    context.dps = 50
    return context


@pytest.fixture(scope="session")
def colebrook_root(digits) -> Callable[..., mpmath.mpf]:
    """1/sqrt(f) as the root of x + 2 log10(rel/3.7 + 2.51 x/Re) by Newton's method from Haaland's formula."""

    def root(reynolds, relative_roughness):
        re, rel = digits.mpf(reynolds), digits.mpf(relative_roughness)
        a, b = rel / digits.mpf("3.7"), digits.mpf("2.51") / re
        per_decade = digits.log(10)
        x = -digits.mpf("1.8") * digits.log10(abs(a) ** digits.mpf("1.11") + digits.mpf("6.9") / re)
        for _ in range(12):
            inside = a + b * x
            step = (x + 2 * digits.log10(inside)) / (1 + 2 * b / (per_decade * inside))
            x -= step
            if abs(step) < digits.mpf(10) ** -45:
                return x
        raise AssertionError(f"no root for Re {reynolds}, relative roughness {relative_roughness}")

    return root


@pytest.fixture(scope="session")
def law_points() -> np.ndarray:
    """A grid and random points over Re 4e3 to 1e8 and relative roughness 0 to 0.05, shape (n, 2)."""
    roughness = np.concatenate([[0.0], np.geomspace(1e-9, 0.05, 12)])
    grid = np.stack(np.meshgrid(np.geomspace(4e3, 1e8, 12), roughness), axis=-1).reshape(-1, 2)
    rng = np.random.default_rng(20260506)
    random = np.column_stack(
        [10 ** rng.uniform(np.log10(4e3), 8, 250), 10 ** rng.uniform(-8, np.log10(0.05), 250)]
    )
    random[:40, 1] = rng.uniform(0, 0.05, 40)
    return np.concatenate([grid, random])
