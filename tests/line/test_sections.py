"""f·Re of other sections than circles against solutions of the equation of motion, and printed values."""

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.sparse import diags, identity, kron
from scipy.sparse.linalg import spsolve

from gradeline.hydraulics.sections import (
    annulus_laminar_constant,
    hydraulic_diameter,
    rectangle_laminar_constant,
)


def _rectangle_on_a_grid(aspect: float, cells: int) -> float:
    """f·Re by finite differences: ∇²u = −1 with u = 0 on the walls, sides 1 and `aspect`.

    With the mean U of u: dp/dx = −μ/U per unit velocity, so f Re = 2 D²/U.
    """
    n, m = cells, max(round(cells * aspect), 8)
    hx, hy = 1.0 / n, aspect / m

    def second(count, step):
        return diags([1.0, -2.0, 1.0], [-1, 0, 1], shape=(count - 1, count - 1)) / step**2

    laplacian = kron(second(n, hx), identity(m - 1)) + kron(identity(n - 1), second(m, hy))
    u = spsolve(laplacian.tocsc(), -np.ones((n - 1) * (m - 1)))
    mean = u.sum() * hx * hy / aspect
    diameter = 2.0 * aspect / (1.0 + aspect)
    return float(2.0 * diameter**2 / mean)


@pytest.mark.parametrize("aspect", [1.0, 0.5, 0.25])
def test_a_rectangle_solved_on_a_grid(aspect):
    coarse, fine = _rectangle_on_a_grid(aspect, 40), _rectangle_on_a_grid(aspect, 80)
    extrapolated = fine + (fine - coarse) / 3.0  # the error falls as the square of the step
    assert float(rectangle_laminar_constant(aspect)) == pytest.approx(extrapolated, rel=2e-4)


def test_a_rectangle_has_the_printed_values():
    # Shah and London 1978: 56.91 square, 62.19 2:1, 72.93 4:1, 82.34 8:1, 96 parallel plates (from memory).
    found = rectangle_laminar_constant([1.0, 2.0, 0.25, 8.0, 0.0])
    np.testing.assert_allclose(found, [56.91, 62.19, 72.93, 82.34, 96.0], atol=0.005)


@pytest.mark.parametrize("ratio", [0.001, 0.1, 0.5, 0.9, 0.9899, 0.9901, 0.999])
def test_an_annulus_integrated(ratio):
    """u = (1 − r²)/4 + c ln r with u = 0 at both walls, dp/dx = −μ: the mean by quadrature."""
    c = (ratio**2 - 1.0) / (4.0 * np.log(ratio))
    flow, _ = quad(lambda r: ((1.0 - r**2) / 4.0 + c * np.log(r)) * r, ratio, 1.0, epsabs=0, epsrel=1e-12)
    mean = flow / ((1.0 - ratio**2) / 2.0)
    gap = 2.0 * (1.0 - ratio)
    assert float(annulus_laminar_constant(ratio)) == pytest.approx(2.0 * gap**2 / mean, rel=2e-6)


def test_the_ends_of_an_annulus():
    assert float(annulus_laminar_constant(0.0)) == 64.0
    assert float(annulus_laminar_constant(0.999999)) == pytest.approx(96.0)
    with pytest.raises(ValueError, match="from 0 to below 1"):
        annulus_laminar_constant(1.0)


def test_hydraulic_diameter_of_known_shapes():
    side = np.array([0.2, 0.4])
    np.testing.assert_allclose(hydraulic_diameter(side**2, 4 * side), side)
    np.testing.assert_allclose(hydraulic_diameter(np.pi / 4 * 0.3**2, np.pi * 0.3), 0.3)
    with pytest.raises(ValueError, match="shorter than that of a circle"):
        hydraulic_diameter(1.0, 3.5)
    with pytest.raises(ValueError, match="above 0 m2"):
        hydraulic_diameter(0.0, 3.5)
