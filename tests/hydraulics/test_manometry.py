"""Heads from readings, against the hydrostatics of water and air and worked examples."""

from __future__ import annotations

import inspect

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gradeline.hydraulics import manometry
from gradeline.survey import GAUGE_KINDS

G = 9.81

PIEZOMETER = {
    "reading": 0.62,
    "tap_elevation": 0.31,
    "density": 998.2,
    "column_density": 997.1,
    "air_density": 1.2,
    "gravity": G,
    "zero": 0.8,
    "inclination": 1.1,
    "bore": 0.006,
    "surface_tension": 0.0728,
    "contact_angle": 0.4,
}
PRESSURE_GAUGE = {
    "reading": 84e3,
    "tap_elevation": -1.2,
    "gauge_elevation": 1.4,
    "density": 999.1,
    "line_density": 996.0,
    "air_density": 1.19,
    "gravity": G,
}


def test_one_head_for_every_gauge_kind():
    assert set(manometry.HEADS) == set(GAUGE_KINDS)


@pytest.mark.parametrize("kind", sorted(GAUGE_KINDS))
def test_keys_of_a_kind_are_arguments_of_its_head(kind):
    # a text or a temperature reaches the head as a density
    direct = {
        name
        for name, key in GAUGE_KINDS[kind].keys.items()
        if key.of_head and key.dimension != "text" and not name.endswith("temperature")
    }
    assert direct <= set(inspect.signature(manometry.HEADS[kind]).parameters)


def test_capillary_rise_in_a_worked_example():
    # Choudhary & Om Prakash Ex 2.6 p 18: 2 mm bore, water and mercury
    rise = manometry.capillary_rise(
        bore=0.002,
        density=np.array([1000.0, 13600.0]),
        gravity=9.81,
        surface_tension=np.array([0.073, 0.510]),
        contact_angle=np.radians([0.0, 130.0]),
    )
    assert 1000 * rise[0] == pytest.approx(14.88, abs=0.005)
    assert 1000 * rise[1] == pytest.approx(-4.914, abs=0.0005)


@given(
    surface=st.floats(-5.0, 50.0),
    tap=st.floats(-5.0, 20.0),
    gauge=st.floats(-5.0, 20.0),
    zero=st.floats(-2.0, 2.0),
    inclination=st.floats(0.05, np.pi / 2),
)
def test_water_at_rest_has_one_head(surface, tap, gauge, zero, inclination):
    """An open tank, a column and a gauge at any heights: the same head, that of the tank's surface."""
    water, air = 998.2, 1.2
    expected = surface * (1 - air / water)
    column = manometry.piezometer_head(
        (surface - zero) / np.sin(inclination),
        tap_elevation=tap,
        zero=zero,
        inclination=inclination,
        density=water,
        column_density=water,
        air_density=air,
        gravity=G,
    )
    # the tank's surface bears the air above it; so does the gauge's case, lower by the air between
    reading = water * G * (surface - gauge) - air * G * (surface - gauge)
    pressure = manometry.pressure_gauge_head(
        reading,
        tap_elevation=tap,
        gauge_elevation=gauge,
        density=water,
        line_density=water,
        air_density=air,
        gravity=G,
    )
    assert column == pytest.approx(expected, abs=1e-12)
    assert pressure == pytest.approx(expected, abs=1e-12)


@given(pressure=st.floats(1e3, 1e6), line=st.floats(600.0, 1300.0), column=st.floats(950.0, 1050.0))
def test_both_gauges_see_the_pressure_at_the_tap(pressure, line, column):
    """From one pressure at the tap (against the air at datum) to readings, and back through the heads."""
    water, air, tap, gauge = 990.0, 1.15, 0.7, 2.9
    expected = tap + pressure / (water * G)
    # p_tap = rho_c g (top - tap) - rho_a g top, solved for the column's top
    top = (pressure / G + column * tap) / (column - air)
    h_column = manometry.piezometer_head(
        top, tap_elevation=tap, density=water, column_density=column, air_density=air, gravity=G
    )
    at_gauge = pressure - line * G * (gauge - tap) + air * G * gauge
    h_gauge = manometry.pressure_gauge_head(
        at_gauge,
        tap_elevation=tap,
        gauge_elevation=gauge,
        density=water,
        line_density=line,
        air_density=air,
        gravity=G,
    )
    assert h_column == pytest.approx(expected, rel=1e-12)
    assert h_gauge == pytest.approx(expected, rel=1e-12)


def test_air_takes_an_eighth_of_a_percent_off_a_slope():
    common = {"tap_elevation": 0.0, "density": 998.2, "column_density": 998.2, "gravity": G}
    readings = np.array([1.0, 0.4])
    with_air = np.diff(manometry.piezometer_head(readings, air_density=1.2, **common))[0]
    without = np.diff(manometry.piezometer_head(readings, air_density=0.0, **common))[0]
    assert without == pytest.approx(-0.6, rel=1e-14)
    # 1.2/998.2 = 0.12 %
    assert without / with_air - 1 == pytest.approx(0.0012, abs=5e-6)


def test_column_stands_too_high_by_its_capillary_rise():
    bare = manometry.piezometer_head(**{**PIEZOMETER, "bore": None, "reading": 0.0, "zero": 1.0})
    rise = manometry.capillary_rise(
        bore=0.006, density=997.1, gravity=G, surface_tension=0.0728, contact_angle=0.4
    )
    # the same pressure, so the tube that draws up its column is read higher by the rise
    tube = manometry.piezometer_head(**{**PIEZOMETER, "reading": 0.0, "zero": 1.0 + rise})
    assert rise > 0.004
    assert tube == pytest.approx(bare, abs=1e-14)


def test_gauge_above_the_pipe_in_common_units():
    # 1 m of water of 1000 kg/m3 is 9.80665 kPa: a gauge 2 m above the pipe reading 0 shows 2 m at the pipe
    head = manometry.pressure_gauge_head(
        0.0,
        tap_elevation=5.0,
        gauge_elevation=7.0,
        density=1000.0,
        line_density=1000.0,
        air_density=0.0,
        gravity=9.80665,
    )
    assert head == pytest.approx(7.0, rel=1e-15)


@pytest.mark.parametrize(
    ("function", "arguments", "name"),
    [(manometry.piezometer_head, PIEZOMETER, name) for name in PIEZOMETER]
    + [(manometry.pressure_gauge_head, PRESSURE_GAUGE, name) for name in PRESSURE_GAUGE],
    ids=lambda value: value if isinstance(value, str) else "",
)
def test_complex_step_gives_the_derivative(function, arguments, name):
    value = arguments[name]
    derivative = np.imag(function(**{**arguments, name: value + 1e-30j})) / 1e-30
    step = 1e-5 * abs(value)
    difference = function(**{**arguments, name: value + step}) - function(**{**arguments, name: value - step})
    assert derivative == pytest.approx(difference / (2 * step), rel=1e-6, abs=1e-7 / abs(value))


def test_readings_broadcast_over_runs_and_taps():
    head = manometry.piezometer_head(
        np.zeros((4, 3)),
        tap_elevation=np.arange(3.0),
        density=np.full((4, 1), 998.0),
        column_density=np.full((4, 1), 998.0),
        air_density=1.2,
        gravity=G,
    )
    assert head.shape == (4, 3)
    assert head.dtype == np.float64
