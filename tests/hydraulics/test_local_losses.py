"""Published losses at a change of bore."""

from __future__ import annotations

import numpy as np
import pytest

from gradeline.hydraulics import local_losses
from gradeline.hydraulics.friction import velocity_head


def test_published_coefficients():
    # tests of fluids 1.3.1: sudden expansion 0.5 -> 1 m, sharp entrance, sudden contraction 3 -> 2 (Crane)
    assert local_losses.expansion_loss_coefficient(0.5, 1.0) == 0.5625
    assert local_losses.contraction_loss_coefficient(1e9, 1.0) == pytest.approx(0.5, rel=1e-12)
    assert local_losses.contraction_loss_coefficient(3.0, 2.0) == pytest.approx(0.27778, abs=5e-6)


def test_borda_in_a_worked_example():
    # Coulson & Richardson 1, Ex 3.6 p 88: 40 -> 50 mm at 7.2 m3/h loses 16.7 mm of water
    velocity = 7.2 / 3600 / (np.pi / 4 * 0.04**2)
    loss = local_losses.expansion_loss_coefficient(0.04, 0.05) * velocity_head(velocity, 9.81)
    assert 1000 * loss == pytest.approx(16.7, abs=0.05)


def test_borda_is_the_head_of_the_lost_velocity():
    # (V1 - V2)^2/2g, the momentum balance
    up, down = 0.03, np.array([0.03, 0.05, 0.3])
    upstream = 2.0
    downstream = upstream * (up / down) ** 2
    loss = local_losses.expansion_loss_coefficient(up, down) * upstream**2 / 2
    assert loss == pytest.approx((upstream - downstream) ** 2 / 2, abs=1e-14)


def test_a_change_of_bore_is_told_by_its_direction():
    got = local_losses.change_of_bore_loss_coefficient([0.5, 1.0, 3.0], [1.0, 1.0, 2.0])
    assert got == pytest.approx([0.5625, 0.0, 5 / 18], abs=1e-15)


@pytest.mark.parametrize(
    ("function", "up", "down", "words"),
    [
        (local_losses.expansion_loss_coefficient, 0.2, 0.1, "this line narrows"),
        (local_losses.contraction_loss_coefficient, 0.1, 0.2, "this line widens"),
        (local_losses.change_of_bore_loss_coefficient, 0.0, 0.2, "the upstream bore must be above 0 m: 0.0"),
        (
            local_losses.change_of_bore_loss_coefficient,
            0.1,
            -0.2,
            "the downstream bore must be above 0 m: -0.2",
        ),
    ],
)
def test_wrong_bores_are_refused(function, up, down, words):
    with pytest.raises(ValueError, match=words):
        function(up, down)


@pytest.mark.parametrize("bore", [0.019, 0.0266, 0.0525, 0.1023, 0.203])
def test_valves_against_another_library(bore: float) -> None:
    """Crane TP-410, gate valve 8 f_T and ball valve 3 f_T, as `fluids.fittings` has them: within 1.5 %, its f_T being
    that of nominal sizes.
    """
    fittings = pytest.importorskip("fluids.fittings")
    assert local_losses.fully_rough_loss_coefficient(8, bore) == pytest.approx(
        fittings.K_gate_valve_Crane(bore, bore, 0.0), rel=0.015
    )
    assert local_losses.fully_rough_loss_coefficient(3, bore) == pytest.approx(
        fittings.K_ball_valve_Crane(bore, bore, 0.0), rel=0.015
    )


def test_a_gate_valve_in_a_two_inch_pipe() -> None:
    """0.15 in Munson, Young and Okiishi, Fundamentals of Fluid Mechanics, table of loss coefficients (from memory)."""
    assert float(local_losses.fully_rough_loss_coefficient(8, 0.0525)) == pytest.approx(0.15, abs=0.005)


def test_a_multiple_below_zero_and_a_hair_are_refused() -> None:
    with pytest.raises(ValueError, match="the multiple must not be negative: -1"):
        local_losses.fully_rough_loss_coefficient(-1, 0.05)
    with pytest.raises(ValueError, match=r"the bore must be above 0.001 m: 0.0005"):
        local_losses.fully_rough_loss_coefficient(8, 0.0005)
