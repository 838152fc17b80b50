"""Flows that mark a change of regime, and spreads over a range."""

from __future__ import annotations

import numpy as np
import pytest

from gradeline.planning.flows import flow_marks, spreads, with_flows, with_more_runs
from tests.simulate.line import friction_factor
from tests.simulate.surveys import NominalReach, make_survey

AREA = 0.25 * np.pi * 0.1**2


def test_reynolds_limits_by_hand() -> None:
    """D = 100 mm, ν = 1.0e-6 m²/s: V = 0.04 m/s at Re 4000, Q = 0.04 × 7.854e-3 = 0.3142 L/s; half of it at Re 2000."""
    marks = flow_marks(0.1, AREA, 1e-6, 1e-4)
    assert marks.turbulent == pytest.approx(3.1416e-4, rel=1e-4)
    assert marks.laminar == pytest.approx(1.5708e-4, rel=1e-4)


@pytest.mark.parametrize(("mark", "plus"), [("smooth", 5.0), ("rough", 70.0)])
def test_roughness_reynolds_number_at_the_marks(mark: str, plus: float) -> None:
    """ε⁺ = ε u*/ν with u* = V √(f/8), f of the simulated line's own law at that flow."""
    flow = getattr(flow_marks(0.1, AREA, 1e-6, 1e-3), mark)
    velocity = flow / AREA
    factor = float(friction_factor(velocity * 0.1 / 1e-6, 0.01))
    assert 1e-3 * velocity * np.sqrt(factor / 8) / 1e-6 == pytest.approx(plus, rel=1e-6)


def test_a_smooth_wall_is_never_rough() -> None:
    marks = flow_marks(0.1, AREA, 1e-6, 0.0)
    assert np.isnan(marks.rough)
    assert np.isnan(marks.smooth)


@pytest.mark.parametrize("count", [2, 3, 4, 5, 9])
def test_spreads_stay_in_their_range(count: int) -> None:
    for flows in spreads(1e-4, 1e-3, count).values():
        assert len(flows) == count
        assert flows.min() >= 1e-4 * (1 - 1e-12)
        assert flows.max() == pytest.approx(1e-3)
        assert count < 4 or len(np.unique(flows.round(12))) >= 3


def test_other_flows_and_more_runs() -> None:
    survey, _ = make_survey(
        np.random.default_rng(0),
        chainage=[0.5, 2.0, 4.0],
        reaches=[NominalReach(0.0, 5.0, 0.03, 1e-5)],
        flows=[0.0, 1e-3, 5e-4],
    )
    changed = with_flows(survey, np.array([2e-3, 3e-3]))
    assert changed.runs["flow"].tolist() == [0.0, 3e-3, 2e-3]  # in the order of the planned ones
    twice = with_more_runs(survey)
    assert twice.runs["flow"].tolist() == [0.0, 1e-3, 5e-4, 1e-3, 5e-4]
    assert twice.readings.index.tolist() == twice.runs["run"].tolist()
