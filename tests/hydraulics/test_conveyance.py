"""Hazen–Williams C and Manning n against worked examples of textbooks (their printed pages were not seen)."""

from __future__ import annotations

import pytest

from gradeline.hydraulics.conveyance import hazen_williams_c, manning_n
from gradeline.hydraulics.friction import darcy_friction_factor

FOOT, GALLON = 0.3048, 231 * 0.0254**3


def test_hazen_williams_of_a_three_inch_pipe():
    """Vennard, Ex. 9.10: C = 140, 3 in, 90 US gal/min, 3000 ft lose 65.7 ft."""
    bore = 3 * 0.0254
    velocity = 90 * GALLON / 60 / (3.141592653589793 * bore**2 / 4)
    # 65.7 ± 0.05 ft of 3000 ft is ± 0.04 % of C
    assert hazen_williams_c(velocity, bore, 65.7 / 3000) == pytest.approx(140.0, rel=5e-4)


def test_manning_of_an_open_channel():
    """Cengel and Cimbala, Ex. 13-2: R = 0.2859 m, S = 0.005236, n = 0.03 give V = 1.0468 m/s."""
    assert manning_n(1.0468, 4 * 0.2859, 0.005236) == pytest.approx(0.03, rel=5e-5)


def test_manning_from_darcy():
    """Subramanya, Ex. 12.4: f = 0.02, A = 11.5 m², P = 9.6 m: Chezy's C = 62.6 and n = 0.0165."""
    radius = 11.5 / 9.6
    velocity, gravity = 2.0, 9.81
    slope = 0.02 * velocity**2 / (2 * gravity * 4 * radius)
    assert darcy_friction_factor(slope, 4 * radius, velocity, gravity) == pytest.approx(0.02)
    assert manning_n(velocity, 4 * radius, slope) == pytest.approx(0.0165, abs=5e-5)


@pytest.mark.parametrize("measure", [hazen_williams_c, manning_n])
def test_nothing_comes_of_no_slope(measure):
    assert str(measure(1.0, 0.1, [0.0, -0.1])) == "[nan nan]"
