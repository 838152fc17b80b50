"""Published worked examples as surveys: read through a gauge of each kind, they give the book's head, pressure or friction.

The textbook rows rest on transcriptions of the books' examples, recomputed by hand; no printed page was opened. Where an
example does not give the viscosity, 1 mm²/s stands for it: the friction factor comes from the slope alone.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

import gradeline
from gradeline.hydraulics.chain import chain_pressure
from gradeline.reduction.calibrations import calibrated, freedom_factor
from gradeline.reduction.heads import heads_of
from gradeline.reduction.media import media_of
from tests.fitting.test_slope import NORRIS
from tests.published.example import (
    FOOT,
    GALLON,
    INCH,
    POUND_PER_CUBIC_FOOT,
    PSI,
    SLUG_PER_CUBIC_FOOT,
    write_example,
)

G_US = 32.2 * FOOT
DIFFERENTIAL = '[gauge.dp]\nkind = "differential transducer"\nupstream = "T1"\ndownstream = "T2"\n'


def reduced(folder):
    return gradeline.reduce(gradeline.read_survey(folder), correct="none")


def difference(folder) -> float:
    """Head of T1 less that of T2 (of T1 alone where the gauge ends open), m."""
    survey = gradeline.read_survey(folder)
    return float(heads_of(survey, media_of(survey)).observed[0, 0])


# Pressure differences of pipe examples: what the differential transducer reads, and what the book has from it.


def test_a_pressure_drop_and_its_head_loss(tmp_path):
    # Cengel and Cimbala, ex. 8-3: 96.54 kPa over 60 m of 50 mm at 6 L/s, 999 kg/m³, 1.138e-3 Pa s: V 3.06, f 0.0172, 9.85 m
    run = reduced(
        write_example(
            tmp_path / "s",
            DIFFERENTIAL,
            {"flow [L/s]": 6, "dp [kPa]": 96.54},
            density=999.0,
            kinematic_viscosity=1.138e-3 / 999,
            bore=0.05,
            length=60.0,
        )
    ).runs.iloc[0]
    assert run["velocity"] == pytest.approx(3.06, abs=0.005)
    assert run["slope"] * 60 == pytest.approx(9.85, abs=0.005)
    assert run["friction_factor"] == pytest.approx(0.0172, abs=5e-5)


def test_a_pressure_drop_of_laminar_glycerin(tmp_path):
    # Cengel and Cimbala, ex. 8-1: 1291 kPa over 70 m of 40 mm at 3 m/s, 1252 kg/m³, 0.3073 Pa s: Re 489, so f = 64/489
    run = reduced(
        write_example(
            tmp_path / "s",
            DIFFERENTIAL,
            {"flow [m^3/s]": 3 * math.pi / 4 * 0.04**2, "dp [kPa]": 1291},
            density=1252.0,
            kinematic_viscosity=0.3073 / 1252,
            bore=0.04,
            length=70.0,
        )
    ).runs.iloc[0]
    assert run["regime"] == "laminar"
    assert run["reynolds"] == pytest.approx(489, abs=0.5)
    assert run["friction_factor"] == pytest.approx(64 / 489, rel=0.5 / 489 + 0.5 / 1291)


def test_a_pressure_gradient_and_the_sublayer(tmp_path):
    # Munson, Young and Okiishi, ex. 8.4: 2.59 kPa/m in 100 mm at 40 L/s, 998 kg/m³, 1.004 mm²/s: Re 5.07e5, sublayer
    # 5 ν/u* = 0.0197 mm
    run = reduced(
        write_example(
            tmp_path / "s",
            DIFFERENTIAL,
            {"flow [L/s]": 40, "dp [kPa]": 25.9},
            density=998.0,
            kinematic_viscosity=1.004e-6,
            length=10.0,
        )
    ).runs.iloc[0]
    sublayer = 5 * 1.004e-6 / (run["velocity"] * math.sqrt(run["friction_factor"] / 8))
    assert run["reynolds"] == pytest.approx(5.07e5, abs=0.005e5)
    assert 1000 * sublayer == pytest.approx(0.0197, abs=5e-5)


def test_a_pressure_drop_of_oil_with_its_flow_by_a_tank(tmp_path):
    # Crane TP-410, ex. 7.13: 66.5 kPa over 100 ft of 52.5 mm at 2 US gal/s, 0.815 × 999.1 kg/m³, 2.7 mm²/s: f 0.0230
    run = reduced(
        write_example(
            tmp_path / "s",
            '[flow]\nmethod = "volumetric tank"\n' + DIFFERENTIAL,
            {"volume [US_gal]": 120, "time [s]": 60, "dp [kPa]": 66.5},
            density=0.815 * 999.1,
            kinematic_viscosity=2.7e-6,
            bore=0.0525,
            length=100 * FOOT,
        )
    ).runs.iloc[0]
    assert run["flow"] == pytest.approx(2 * GALLON, rel=1e-9)
    assert run["friction_factor"] == pytest.approx(0.0230, abs=5e-5)


# Head losses of pipe examples through open columns, columns under trapped gas, and heads written down. Loss and length in
# ft, bore in ft, flow in ft³/s, kinematic viscosity in ft²/s; friction factor and half of its last digit, or of the loss's.
NU_ANY = 1e-6 / FOOT**2
LOSSES = {
    # Vennard, ex. 9.1: 15 ft/s in 6 in, 17.5 ft in 100 ft: 0.025
    "vennard 9.1": (17.5, 100, 0.5, 15 * math.pi / 4 * 0.5**2, NU_ANY, 0.025, 5e-4),
    # Daugherty and Franzini, ex. 8.3: 2 ft³/s in 6 in, 25 ft in 200 ft: 0.0388 (area rounded to 0.196 ft²: 0.2 %)
    "daugherty 8.3": (25.0, 200, 0.5, 2.0, NU_ANY, 0.0388, 5e-5 + 0.002 * 0.0388),
    # Vennard, ex. 9.2 and 9.3: Re 80 000 in 3 in, 0.729e-5 ft²/s: 8.6 ft in 1000 ft at f 0.0255
    "vennard 9.3": (
        8.6,
        1000,
        0.25,
        8e4 * 0.729e-5 * math.pi / 4 * 0.25,
        0.729e-5,
        0.0255,
        0.05 / 8.6 * 0.0255,
    ),
    # Vennard, ex. 9.6: 90 US gal/min in 3 in, 56.0 ft in 3000 ft: 0.018
    "vennard 9.6": (56.0, 3000, 0.25, 90 / 60 * GALLON / FOOT**3, NU_ANY, 0.018, 5e-4),
}
COLUMNS = {
    "piezometer": ('kind = "piezometer"\nzero = "0 m"\n', 1.0),
    # 50 kPa of gas hold the columns lower
    "closed multitube manometer": (
        'kind = "closed multitube manometer"\nzero = "0 m"\ngas_pressure = "50 kPa"\n',
        1.0,
    ),
    "head": ('kind = "head"\n', 0.0),
}


@pytest.mark.parametrize("kind", COLUMNS)
@pytest.mark.parametrize("example", LOSSES)
def test_a_head_loss_gives_the_friction_factor(tmp_path, kind, example):
    loss, length, bore, flow, viscosity, factor, tolerance = LOSSES[example]
    toml, columns = COLUMNS[kind]
    run = reduced(
        write_example(
            tmp_path / "s",
            f"[gauge.g]\n{toml}",
            {"flow [ft^3/s]": flow, "temperature [degC]": 20, "T1 [ft]": loss + 2, "T2 [ft]": 2},
            kinematic_viscosity=viscosity * FOOT**2,
            gravity=G_US,
            bore=bore * FOOT,
            length=length * FOOT,
            gauge="g",
        )
    ).runs.iloc[0]
    # the books leave out the air beside the columns, 0.12 % of them (trapped at 50 kPa: 0.18 %)
    assert run["friction_factor"] == pytest.approx(factor, abs=tolerance + columns * 0.002 * factor)
    if example == "daugherty 8.3":
        # and the stress at the wall, with 1.746 slug/ft³: 0.88 lbf/ft²
        stress = run["friction_factor"] / 8 * 1.746 * SLUG_PER_CUBIC_FOOT * run["velocity"] ** 2
        assert stress / (144 * PSI / 144**2) == pytest.approx(0.88, abs=0.005)


def test_a_head_loss_gives_the_coefficient_of_hazen_and_williams(tmp_path):
    # Vennard, ex. 9.10: 90 US gal/min through 3000 ft of 3 in lose 65.7 ft at C = 140
    found = reduced(
        write_example(
            tmp_path / "s",
            '[gauge.g]\nkind = "head"\n',
            {"flow [US_gal/min]": 90, "T1 [ft]": 65.7, "T2 [ft]": 0},
            gravity=G_US,
            bore=0.25 * FOOT,
            length=3000 * FOOT,
            gauge="g",
        )
    )
    assert found.runs["friction_factor"].iloc[0] > 0.018
    c = found.conveyance["hazen_williams_c"].iloc[0]
    assert c == pytest.approx(140, rel=0.54 * 0.05 / 65.7 + 1e-4)


@pytest.mark.parametrize("kind", ["pressure gauge", "transducer"])
@pytest.mark.parametrize(
    ("upper", "lower", "run", "rise"),
    [
        (30.5, 27.8, 15, 0),
        (27.1, 21.0, 10, 10),
        (20.2, 19.3, 5, 0),
        (18.5, 12.4, 10, 10),
        (11.7, 9.93, 10, 0),
        (4.84, 3.09, 10, 0),
    ],
)
def test_pressures_along_a_house_line(tmp_path, kind, upper, lower, run, rise):
    # Munson, Young and Okiishi, ex. 8.8(c): pressures in psi at both ends of each straight stretch of a 3/4 in copper line,
    # 0.0267 ft³/s, 0.0625 ft, 1.94 slug/ft³, 2.34e-5 lbf s/ft²: f 0.0215, so 0.4046 ft/ft
    found = reduced(
        write_example(
            tmp_path / "s",
            f'[gauge.p]\nkind = "{kind}"\n',
            {"flow [ft^3/s]": 0.0267, "T1 [psi]": upper, "T2 [psi]": lower},
            density=1.94 * SLUG_PER_CUBIC_FOOT,
            kinematic_viscosity=2.34e-5 / 1.94 * FOOT**2,
            gravity=G_US,
            bore=0.0625 * FOOT,
            length=run * FOOT,
            elevations=(0.0, rise * FOOT),
            gauge="p",
        )
    ).runs.iloc[0]
    digit = 0.1 if lower > 10 else 0.055 if upper > 10 else 0.01  # half of both last digits, psi
    foot = 1.94 * 32.2 / 144  # psi
    assert found["reynolds"] == pytest.approx(45000, abs=500)
    assert found["slope"] * run == pytest.approx(0.4046 * run, abs=digit / foot + 0.0013 * rise)


# Manometers between two taps: the pressure of T1 less that of T2, kPa.
U_TUBE = '[gauge.m]\nkind = "u-tube"\nupstream = "T1"\ndownstream = "T2"\ngauge_fluid = "heavy"\n'
INVERTED = U_TUBE.replace('"u-tube"', '"inverted u-tube"').replace("heavy", "light")
TUBES = {
    # Geankoplis, ex. 2.2-4: 32.7 cm of mercury (13.6) under water: 40.40 kPa
    "geankoplis 2.2-4": (U_TUBE, 13600, 0.327, 1000.0, 9.80665, (0.0, 0.0), 40.40, 0.01),
    # Douglas, ex. 2.8: 0.7 m, the second point 0.3 m higher: 89.467 kPa
    "douglas 2.8": (U_TUBE, 13600, 0.7, 1000.0, 9.81, (0.0, 0.3), 89.467, 5e-4),
    # Munson, ex. 2.5: 0.5 m of a gauge fluid of 15.6 kN/m³ under 9.80 kN/m³: 2.90 kPa
    "munson 2.5": (U_TUBE, 15600 / 9.8, 0.5, 1000.0, 9.8, (0.0, 0.0), 2.90, 0.005),
    # Coulson and Richardson 1, ex. 6.2: 0.1 m of mercury (13550) under acid (1300): 12 kPa
    "coulson 6.2": (U_TUBE, 13550, 0.1, 1300.0, 9.81, (0.0, 0.0), 12.0, 0.5),
    # Douglas, ex. 2.9 (see test_published.py for its sketch): air, weightless, and oil of 0.8 above water
    "douglas 2.9 air": (INVERTED, 1e-6, -0.3, 1000.0, 9.81, (-0.1, 0.0), -1.9620, 5e-5),
    "douglas 2.9 oil": (INVERTED, 800, -0.3, 1000.0, 9.81, (-0.1, 0.0), 0.3924, 5e-5),
}


@pytest.mark.parametrize("example", TUBES)
def test_a_tube_between_two_points(tmp_path, example):
    gauge, fluid, reading, density, gravity, elevations, expected, tolerance = TUBES[example]
    head = difference(
        write_example(
            tmp_path / "s",
            gauge + f'gauge_fluid_density = "{fluid!r} kg/m^3"\n',
            {"flow [L/s]": 1, "m [m]": reading},
            density=density,
            gravity=gravity,
            elevations=elevations,
        )
    )
    pressure = density * gravity * (head - elevations[0] + elevations[1])
    assert pressure / 1000 == pytest.approx(expected, abs=tolerance)


# Chains of legs from T1: (density kg/m³, elevation m at its end); the last one ends at T2 or, where that is None, open, the
# datum being there. Elevation of T1 and of T2; kPa at T1 above T2 or the air.
HG, W = 13.6, 62.4 * POUND_PER_CUBIC_FOOT
SUB = 9790 / 9.81
CHAINS = {
    # Douglas, ex. 2.7: liquid of 800 kg/m³, mercury, (0.5, 0.9) m and (0.1, −0.2) m: 116.15 and −27.47 kPa
    "douglas 2.7 above": (9.81, -0.4, None, [(800, -0.9), (13600, 0.0)], 116.15, 0.005),
    "douglas 2.7 below": (9.81, 0.3, None, [(800, 0.2), (13600, 0.0)], -27.47, 0.005),
    # Cengel and Cimbala, ex. 3-6: water 0.1 m, oil of 850 kg/m³ 0.2 m, mercury 0.35 m; 130 kPa with 85.6 kPa outside
    "cengel 3-6": (9.81, -0.05, None, [(1000, -0.15), (850, -0.35), (13600, 0.0)], 130 - 85.6, 0.5),
    # Cengel and Cimbala, ex. 3-5: 0.55 m of 0.85; 100.6 kPa with 96 kPa outside
    "cengel 3-5": (9.81, -0.55, None, [(850, -0.3), (850, 0.0)], 100.6 - 96, 0.05),
    # Munson, ex. 2.4: oil of 0.9 down 36 and 6 in, mercury up 9 in, water 62.4 lb/ft³: 3.06 psi
    "munson 2.4": (
        9.80665,
        33 * INCH,
        None,
        [(0.9 * W, -9 * INCH), (HG * W, 0.0)],
        3.06 * PSI / 1000,
        0.005 * PSI / 1000,
    ),
    # Subramanya, ex. 2.6: oil of 0.70 in A, 0.80 in B, mercury below, water 9.79 kN/m³: 9.545 kPa. The geometry is inferred
    # from the row's sum, 13.6·0.08 + 0.80·0.13 − 0.70·(0.10 + 0.13 + 0.08) m of water: A stands 0.10 m above B, B 0.13 m
    # above its mercury, which is 0.08 m higher than A's; every printed digit comes out.
    "subramanya 2.6": (
        9.81,
        0.10,
        0.0,
        [(700 * SUB / 1000, -0.21), (13600 * SUB / 1000, -0.13), (800 * SUB / 1000, 0.0)],
        9.545,
        5e-4,
    ),
    # Daugherty and Franzini, ex. 2.2: 30 psi in B, 78.8 lb/ft³ in B and 53.5 lb/ft³ in A, mercury of 13.55 between them:
    # 16.2 psi in A. The geometry is inferred from the row's sum, 78.8·(6.5 + 10) − 53.5·(6.5 + 1.3) + 1.3·13.55·62.4 lbf/ft²:
    # A stands 10 ft above B, the mercury 6.5 ft above A on B's side and 1.3 ft more on A's; 16.2356 psi comes out, as listed.
    "daugherty 2.2": (
        9.80665,
        10 * FOOT,
        0.0,
        [
            (53.5 * POUND_PER_CUBIC_FOOT, 17.8 * FOOT),
            (13.55 * W, 16.5 * FOOT),
            (78.8 * POUND_PER_CUBIC_FOOT, 0.0),
        ],
        (16.2 - 30) * PSI / 1000,
        0.05 * PSI / 1000,
    ),
}


@pytest.mark.parametrize("example", CHAINS)
def test_a_chain_of_legs(tmp_path, example):
    gravity, first, second, legs, expected, tolerance = CHAINS[example]
    toml = '[gauge.c]\nkind = "compound manometer"\nupstream = "T1"\n'
    toml += "" if second is None else 'downstream = "T2"\n'
    readings: dict[str, object] = {"flow [L/s]": 1}
    start = "T1"
    for n, (density, end) in enumerate(legs):
        last = n == len(legs) - 1
        place = "T2" if last and second is not None else "0 m" if last else f"level{n}"
        if place.startswith("level"):
            readings[f"c {place} [m]"] = end
        toml += f'[[gauge.c.leg]]\nfluid = "fluid {n}"\ndensity = "{density!r} kg/m^3"\nfrom = "{start}"\nto = "{place}"\n'
        start = place
    head = difference(
        write_example(
            tmp_path / "s",
            toml,
            readings,
            density=legs[0][0],
            gravity=gravity,
            elevations=(first, second or 0.0),
            alone=second is None,
        )
    )
    pressure = legs[0][0] * gravity * (head - first + (second or 0.0)) / 1000
    assert pressure == pytest.approx(expected, abs=tolerance)
    # and by the chain itself
    ends = [first, *(end for _, end in legs)]
    chain = chain_pressure([density for density, _ in legs], ends[:-1], ends[1:], gravity=gravity)
    assert pressure == pytest.approx(chain / 1000, abs=1e-9)
    if example == "subramanya 2.6":
        assert pressure == pytest.approx(9.54525, abs=5e-6)
    if example == "daugherty 2.2":
        assert 30 + 1000 * pressure / PSI == pytest.approx(16.2356, abs=5e-5)


# Calibrations of a gauge by a straight line, through a table beside the survey: what it shows, and what that stands for.


def lines(reading, true):
    return (
        "\n".join(["reading [Pa],true [Pa]", *(f"{r!r},{t!r}" for r, t in zip(reading, true, strict=True))])
        + "\n"
    )


THERMOMETER = [21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511]
CORRECTION = [-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.160]
CALIBRATIONS = {
    # JCGM 100:2008, H.3.4: the correction of a thermometer at 30 °C is −0.1494 °C, u 0.0041 °C, 9 degrees of freedom
    "jcgm 100": (
        THERMOMETER,
        [round(r + c, 4) for r, c in zip(THERMOMETER, CORRECTION, strict=True)],
        30.0,
        (30 - 0.1494, 5e-5),
        (0.0041, 5e-5),
        9,
    ),
    # ISO/TS 28037:2010, p. 13: y = 10.5 belongs to x = 4.913. Its u is for a stated scatter of 0.5; from the scatter itself
    # it is that times √(χ²/ν) = √(1.665/4): u² = 0.4654747² − 2·0.050·x + 0.1195229² x²
    "iso 28037": (
        [1.0, 2.0, 3.0, 4.0, 5.0, 6.0],
        [3.3, 5.6, 7.1, 9.3, 10.7, 12.1],
        4.913,
        (10.5, 1.7571 * 5e-4),
        (math.sqrt((0.4654747**2 - 0.1 * 4.913 + (0.1195229 * 4.913) ** 2) * 1.665 / 4), 1e-4),
        4,
    ),
    # NIST Statistical Reference Datasets, Norris: b0 −0.262323073774029, b1 1.00211681802045, at 500
    "norris": (
        NORRIS[:, 1].tolist(),
        NORRIS[:, 0].tolist(),
        500.0,
        (-0.262323073774029 + 1.00211681802045 * 500, 1e-8),
        None,
        34,
    ),
}


@pytest.mark.parametrize("kind", ["pressure gauge", "transducer"])
@pytest.mark.parametrize("example", CALIBRATIONS)
def test_a_calibrated_gauge(tmp_path, kind, example):
    reading, true, at, (expected, tolerance), uncertainty, dof = CALIBRATIONS[example]
    folder = write_example(
        tmp_path / "s",
        f'[gauge.p]\nkind = "{kind}"\ncalibration = "p.csv"\n',
        {"flow [L/s]": 1, "T1 [Pa]": at, "T2 [Pa]": at},
        gauge="p",
        p__csv=lines(reading, true),
    )
    survey = gradeline.read_survey(folder)
    found = calibrated(survey)
    assert found.readings[0, 0] == pytest.approx(expected, abs=tolerance)
    if uncertainty is not None:
        u = np.hypot(*(change[0, 0] for _, change in found.errors)) / freedom_factor(dof)
        assert u == pytest.approx(uncertainty[0], abs=uncertainty[1])
    assert difference(folder) * 1000 * 9.81 == pytest.approx(expected, abs=tolerance + 1e-9)
