"""What must hold for any gauge: loops cancel, swapped limbs change the sign, chains walk backwards, tubes are chains."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gradeline.fitting.calibration import fit_calibration
from gradeline.hydraulics.chain import chain_pressure, compound_manometer_head
from gradeline.hydraulics.differential import (
    differential_pressure_difference,
    inverted_u_tube_difference,
    u_tube_difference,
)

G = 9.81
elevations = st.floats(-20.0, 50.0)
deflections = st.floats(-2.0, 2.0)
heavy = st.floats(1200.0, 14000.0)
lines = st.floats(950.0, 1050.0)
chains = st.lists(st.tuples(st.floats(1.0, 14000.0), elevations), min_size=1, max_size=8)


def legs_of(chain, start):
    """Densities, beginnings and ends of a chain that begins at an elevation."""
    ends = np.array([end for _, end in chain])
    return np.array([rho for rho, _ in chain]), np.concatenate([[start], ends[:-1]]), ends


@given(chain=chains, start=elevations, top=elevations, place=st.integers(0, 8))
def test_a_loop_in_a_line_changes_nothing(chain, start, top, place):
    rho, begin, end = legs_of(chain, start)
    k = place % len(rho)
    with_loop = (
        np.insert(rho, k, [rho[k], rho[k]]),
        np.insert(begin, k, [begin[k], top]),
        np.insert(end, k, [top, begin[k]]),
    )
    expected = chain_pressure(rho, begin, end, gravity=G)
    assert chain_pressure(*with_loop, gravity=G) == pytest.approx(expected, rel=1e-11, abs=1e-6)


@given(chain=chains, start=elevations)
def test_a_chain_walked_backwards_gives_the_negative(chain, start):
    rho, begin, end = legs_of(chain, start)
    there = chain_pressure(rho, begin, end, gravity=G)
    back = chain_pressure(rho[::-1], end[::-1], begin[::-1], gravity=G)
    assert back == pytest.approx(-there, rel=1e-12, abs=1e-6)


@given(reading=deflections, z=elevations, line=lines, fluid=heavy, theta=st.floats(0.05, np.pi / 2))
def test_swapping_the_limbs_changes_the_sign_only(reading, z, line, fluid, theta):
    common = {"tap_elevation": z, "tap_2_elevation": z, "density": 1000.0, "line_density": line, "gravity": G}
    for function, rho in ((u_tube_difference, fluid), (inverted_u_tube_difference, 800.0)):
        one, other = (
            function(sign * reading, gauge_density=rho, inclination=theta, **common) for sign in (1, -1)
        )
        assert one == -other


@given(z1=elevations, z2=elevations, left=elevations, deflection=deflections, line=lines, fluid=heavy)
def test_a_u_tube_equals_the_chain_of_its_legs(z1, z2, left, deflection, line, fluid):
    rho = 1000.0
    tube = u_tube_difference(
        deflection,
        tap_elevation=z1,
        tap_2_elevation=z2,
        density=rho,
        line_density=line,
        gauge_density=fluid,
        gravity=G,
    )
    # from the upstream tap down to the left meniscus, through the gauge fluid up to the right one, to the other tap
    right = left + deflection
    p = chain_pressure([line, fluid, line], [z1, left, right], [left, right, z2], gravity=G)
    assert tube == pytest.approx(p / (rho * G) + z1 - z2, abs=1e-9)
    chain = compound_manometer_head(
        left,
        tap_elevation=z1,
        tap_2_elevation=z2,
        density=rho,
        leg_density=[line, fluid, line],
        leg_rise=[0.0, right, -right],
        leg_reading=[1, -1, 0],
        leg_tap=[-1, 0, 0],
        leg_tap_2=[0, 0, 1],
    )
    assert chain == pytest.approx(tube, abs=1e-9)


@given(
    z1=elevations,
    z2=elevations,
    left=elevations,
    deflection=deflections,
    line=lines,
    light=st.floats(1.0, 900.0),
)
def test_an_inverted_u_tube_equals_the_chain_of_its_legs(z1, z2, left, deflection, line, light):
    right = left - deflection
    p = chain_pressure([line, light, line], [z1, left, right], [left, right, z2], gravity=G)
    tube = inverted_u_tube_difference(
        deflection,
        tap_elevation=z1,
        tap_2_elevation=z2,
        density=1000.0,
        line_density=line,
        gauge_density=light,
        gravity=G,
    )
    assert tube == pytest.approx(p / (1000.0 * G) + z1 - z2, abs=1e-9)


@given(z=elevations, dp=st.floats(-1e5, 1e5), zero=st.floats(-1e3, 1e3))
def test_a_zero_reading_is_taken_off(z, dp, zero):
    given_ = {
        "tap_elevation": z,
        "tap_2_elevation": 0.0,
        "density": 1000.0,
        "line_density": 990.0,
        "gravity": G,
    }
    shown = differential_pressure_difference(dp + zero, zero_reading=zero, **given_)
    assert shown == pytest.approx(differential_pressure_difference(dp, **given_), abs=1e-9)


@pytest.mark.parametrize("function", [u_tube_difference, inverted_u_tube_difference])
@pytest.mark.parametrize(
    "name",
    ["reading", "tap_elevation", "tap_2_elevation", "density", "line_density", "gauge_density", "left_bore"],
)
def test_complex_step_gives_the_derivative(function, name):
    arguments = {
        "reading": 0.31,
        "tap_elevation": 1.2,
        "tap_2_elevation": -0.7,
        "density": 999.0,
        "line_density": 992.0,
        "gauge_density": 13550.0 if function is u_tube_difference else 800.0,
        "gravity": G,
        "inclination": 1.1,
        "left_bore": 0.004,
        "right_bore": 0.006,
        "surface_tension": 0.4,
        "contact_angle": 0.3,
    }
    value = arguments[name]
    derivative = np.imag(function(**{**arguments, name: value + 1e-30j})) / 1e-30
    step = 1e-5 * abs(value)
    difference = function(**{**arguments, name: value + step}) - function(**{**arguments, name: value - step})
    assert derivative == pytest.approx(difference / (2 * step), rel=1e-6, abs=1e-9)


# JCGM 100:2008, H.3, Table H.6: thermometer readings and corrections, degC, at t0 = 20 degC
READINGS = [21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511]
CORRECTIONS = [-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.160]


def test_calibration_of_a_thermometer():
    # JCGM 100:2008, H.3.3 and H.3.4: y1 = -0.1712 (0.0029), y2 = 0.00218 (0.00067), r = -0.930, s = 0.0035;
    # b(30) = -0.1494 with u = 0.0041, 9 degrees of freedom
    reading = np.array(READINGS)
    line = fit_calibration(reading, reading + np.array(CORRECTIONS), at=20.0)
    u = np.sqrt(np.diag(line.covariance))
    assert (line.offset, line.slope) == (pytest.approx(-0.1712, abs=5e-5), pytest.approx(0.00218, abs=5e-6))
    assert (u[0], u[1]) == (pytest.approx(0.0029, abs=5e-5), pytest.approx(0.00067, abs=5e-6))
    assert line.covariance[0, 1] / u.prod() == pytest.approx(-0.930, abs=5e-4)
    assert (line.scatter, line.dof) == (pytest.approx(0.0035, abs=5e-5), 9)
    assert line.correction(np.array(30.0)) == pytest.approx(-0.1494, abs=5e-5)
    assert line.correction_u(np.array(30.0)) == pytest.approx(0.0041, abs=5e-5)


def test_the_two_errors_of_a_calibration_make_its_uncertainty():
    reading = np.array(READINGS)
    line = fit_calibration(reading, reading + np.array(CORRECTIONS))
    parts = [offset + slope * (30.0 - line.at) for offset, slope in line.independent_parts()]
    assert np.hypot(*parts) == pytest.approx(0.0041, abs=5e-5)  # JCGM 100, H.3.4


@pytest.mark.parametrize("reading", [[1.0, 2.0], [1.0, 1.0, 1.0]])
def test_a_calibration_needs_points(reading):
    with pytest.raises(ValueError, match="three readings or more, not all the same"):
        fit_calibration(np.array(reading), np.array(reading))
