"""Normal gravity against published values and independent formulas."""

from __future__ import annotations

import numpy as np
import pytest

from gradeline.hydraulics.gravity import STANDARD_GRAVITY, normal_gravity


@pytest.mark.parametrize(
    ("latitude", "altitude", "expected", "tolerance"),
    [
        # WGS 84 equator and pole, NIMA TR8350.2 (from memory) and the package boule 0.6.0
        (0.0, 0.0, 9.7803253359, 1e-10),
        (90.0, 0.0, 9.8321849379, 1e-10),
        # WGS 84 at height, boule 0.6.0 normal_gravity
        (45.0, 0.0, 9.806197769, 1e-9),
        (45.0, 100.0, 9.805889217, 1e-9),
        (45.0, 1000.0, 9.803112897, 1e-9),
        # GRS80, H. Moritz (and 40 CFR 1065.630 at 45 deg): another ellipsoid, 1.5e-6 away
        (45.0, 0.0, 9.8061992026, 2e-6),
        (0.0, 0.0, 9.7803267715, 2e-6),
        (90.0, 0.0, 9.8321863685, 2e-6),
    ],
)
def test_published_values(latitude, altitude, expected, tolerance):
    assert normal_gravity(np.radians(latitude), altitude) == pytest.approx(expected, abs=tolerance)


def test_somigliana_on_the_ellipsoid():
    # Somigliana's formula with the constants of NIMA TR8350.2
    phi = np.linspace(-np.pi / 2, np.pi / 2, 37)
    s2 = np.sin(phi) ** 2
    expected = 9.7803253359 * (1 + 0.00193185265241 * s2) / np.sqrt(1 - 0.00669437999013 * s2)
    assert normal_gravity(phi) == pytest.approx(expected, abs=2e-10)


def test_two_term_formula_of_1980():
    # 9.780327 (1 + 0.0053024 sin2 - 0.0000058 sin2(2 lat)), from memory, rounded at 1e-6
    phi = np.radians(np.arange(0, 91, 5))
    expected = 9.780327 * (1 + 0.0053024 * np.sin(phi) ** 2 - 0.0000058 * np.sin(2 * phi) ** 2)
    assert normal_gravity(phi) == pytest.approx(expected, abs=3e-6)


def test_free_air_gradient():
    # 3.086e-6 per metre, the free-air gradient in any text on geodesy; rounded to four digits
    fall = normal_gravity(np.radians(45), 0.0) - normal_gravity(np.radians(45), 500.0)
    assert fall / 500 == pytest.approx(3.086e-6, abs=2e-9)


def test_standard_gravity():
    # 3rd CGPM, 1901
    assert STANDARD_GRAVITY == 9.80665


@pytest.mark.parametrize(
    ("latitude", "altitude", "words"),
    [(53.4, 0.0, "latitude lies outside .* rad: 53.4"), (0.5, 2e4, "altitude lies outside .* m: 20000")],
)
def test_degrees_and_wild_altitudes_are_refused(latitude, altitude, words):
    with pytest.raises(ValueError, match=words):
        normal_gravity(latitude, altitude)
