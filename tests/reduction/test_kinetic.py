"""The kinetic correction α follows bore and flow: against central differences of whole reductions."""

from __future__ import annotations

import numpy as np
import pytest

from gradeline.quantities import Measured
from gradeline.reduction import reduce
from tests.reduction.benches import main, with_bore, with_runs, with_stated
from tests.simulate.surveys import NominalFitting, Uncertainties

STEP = 0.05


def of_shared(reduction) -> np.ndarray:
    runs = reduction.runs
    return np.sqrt(runs["slope_u"].to_numpy(float) ** 2 - runs["slope_u_random"].to_numpy(float) ** 2)


@pytest.mark.parametrize("what", ["first bore", "second bore", "flow calibration"])
def test_the_shared_part_of_the_slopes_uncertainty_is_a_central_difference(what: str) -> None:
    """Two bores, a contraction of given K: the change of S with one standard uncertainty, both ways.

    With α held it came out 6 to 10 % too large.
    """
    given = [NominalFitting(430, 0.18, Measured(0.18), change_of_bore=True), NominalFitting(800, 4.0)]
    survey, _ = main(stated=Uncertainties(reading=1e-3), fittings=given)
    if what == "flow calibration":
        u = 5e-3
        there = with_stated(survey, flow_scale=u)
        moved = [with_runs(there, flow=there.runs["flow"] * (1 + side * STEP * u)) for side in (1.0, -1.0)]
    else:
        place = ["first bore", "second bore"].index(what)
        bore, u = survey.reaches[place].diameter.value, 2e-4
        there = with_bore(survey, place, bore, u)
        moved = [with_bore(there, place, bore + side * STEP * u, u) for side in (1.0, -1.0)]
    up, down = (reduce(one).runs["slope"].to_numpy(float) for one in moved)
    change = np.abs(up - down) / (2 * STEP)
    assert change.max() > 1e-9
    np.testing.assert_allclose(of_shared(reduce(there)), change, rtol=2e-3, atol=2e-9)
