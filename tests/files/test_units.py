"""The readings of one survey in SI and in US customary units give one reduction (issue: 1e-12 relative)."""

from __future__ import annotations

import tempfile
from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from gradeline.loader import read_survey
from gradeline.reduction import Reduction, reduce

TOML = """\
[survey]
title = "Two units"
[[reach]]
name = "line"
from = "0 {length}"
to = "{end!r} {length}"
diameter = "{bore!r} {small} +/- 0.1 %"
wall = "steel"
[gauge.board]
kind = "piezometer"
zero = "0 m"
uncertainty = "0.5 mm"
[gauge.bourdon]
kind = "pressure gauge"
uncertainty = "0.1 kPa"
[uncertainty]
flow = "0.5 %"
flow_scale = "0.3 %"
"""

# Exact by definition: international foot and inch; pound-force from the pound and standard gravity (NIST SP 811);
# US gallon of 231 cubic inches; Fahrenheit.
FOOT, INCH, PSI = 0.3048, 0.0254, 0.45359237 * 9.80665 / 0.0254**2
GALLON_A_MINUTE = 231 * 0.0254**3 / 60
CHAINAGES = (1.0, 3.0, 5.0, 7.0, 9.0, 11.0)
COLUMNS = 4  # the rest are read by pressure gauges


def written(
    folder: Path, flows: np.ndarray, heads: np.ndarray, bore: float, celsius: float, *, us: bool
) -> Path:
    folder.mkdir()
    length, small, flow, pressure, degree = (
        ("ft", "in", "US_gal/min", "psi", "degF") if us else ("m", "mm", "m^3/s", "Pa", "degC")
    )
    foot, inch, gallon, psi = (FOOT, INCH, GALLON_A_MINUTE, PSI) if us else (1.0, 1e-3, 1.0, 1.0)
    text = TOML.format(length=length, small=small, end=12 / foot, bore=bore / inch)
    (folder / "survey.toml").write_text(text)
    taps = [
        f"T{i},{x / foot!r},{0.1 * i / foot!r},{'board' if i < COLUMNS else 'bourdon'}\n"
        for i, x in enumerate(CHAINAGES)
    ]
    (folder / "taps.csv").write_text(f"tap,chainage [{length}],elevation [{length}],gauge\n" + "".join(taps))
    titles = [f"T{i} [{length if i < COLUMNS else pressure}]" for i in range(len(CHAINAGES))]
    temperature = celsius * 1.8 + 32 if us else celsius
    rows = [
        f"{run},{q / gallon!r},{temperature!r},"
        + ",".join(repr(h / foot if i < COLUMNS else h * 9790.0 / psi) for i, h in enumerate(line))
        + "\n"
        for run, (q, line) in enumerate(zip(flows.tolist(), heads.tolist(), strict=True))
    ]
    (folder / "readings.csv").write_text(
        f"run,flow [{flow}],temperature [{degree}],{','.join(titles)}\n" + "".join(rows)
    )
    return folder


def numbers_of(reduction: Reduction) -> np.ndarray:
    runs = [
        "velocity",
        "reynolds",
        "slope",
        "slope_u",
        "friction_factor",
        "friction_factor_u",
        "kinematic_viscosity",
    ]
    walls = ["roughness", "roughness_low", "roughness_high", "roughness_upper95"]
    return np.concatenate(
        [reduction.runs[runs].to_numpy(float).ravel(), reduction.walls[walls].to_numpy(float).ravel()]
    )


@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(
    bore=st.floats(0.02, 0.05),
    speed=st.floats(1.5, 3.0),
    celsius=st.floats(5.0, 40.0),
    roughness=st.floats(1e-4, 5e-4),
    seed=st.integers(0, 2**32 - 1),
)
def test_si_and_us_readings_give_one_reduction(
    bore: float, speed: float, celsius: float, roughness: float, seed: int
) -> None:
    """Slopes, friction factors and the wall, with what is said of how sure they are."""
    flows = np.pi / 4 * bore**2 * speed * np.array([0.5, 0.7, 0.85, 1.0])
    # a rough wall's law (Prandtl–Kármán) is near enough for readings that can be
    slopes = (
        (2 * np.log10(3.7 * bore / roughness)) ** -2 / bore * (flows / (np.pi / 4 * bore**2)) ** 2 / 19.62
    )
    heads = 2.0 - slopes[:, None] * np.array(CHAINAGES) + np.random.default_rng(seed).normal(0, 2e-4, (4, 6))
    with tempfile.TemporaryDirectory() as name:
        si, us = (
            reduce(read_survey(written(Path(name, unit), flows, heads, bore, celsius, us=unit == "us")))
            for unit in ("si", "us")
        )
    np.testing.assert_allclose(numbers_of(us), numbers_of(si), rtol=1e-12)


def test_the_constants_are_those_of_the_standard() -> None:
    """NIST SP 811 (2008), appendix B.8, from memory: psi 6.894757e3 Pa, US gallon a minute 6.309020e-5 m³/s."""
    assert pytest.approx(6.894757e3, rel=1e-6) == PSI
    assert pytest.approx(6.309020e-5, rel=1e-6) == GALLON_A_MINUTE
