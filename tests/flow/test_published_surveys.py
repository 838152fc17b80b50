"""Published worked examples as surveys: the flow of each method as the book, the standard or the trade's table has it.

The textbook rows rest on transcriptions of the books' examples, recomputed by hand; no printed page was opened. What is from
memory says so.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

import gradeline
from gradeline.hydraulics import differential_meters, flowmeters
from gradeline.hydraulics.local_losses import expansion_loss_coefficient
from gradeline.reduction.flow import metered_flow
from tests.published.example import FOOT, GALLON, POUND_PER_CUBIC_FOOT, write_example

HEADS = '[gauge.h]\nkind = "head"\n'
LEVELS = {"T1 [m]": 2.0, "T2 [m]": 1.0}


def flow_of(tmp_path, flow, columns, more="", **given) -> float:
    """The flow of the one run, m³/s."""
    files = {name: given.pop(name) for name in list(given) if "__" in name}
    folder = write_example(
        tmp_path / "s", f"[flow]\n{flow}" + HEADS + more, {**columns, **LEVELS}, gauge="h", **given, **files
    )
    return float(metered_flow(gradeline.read_survey(folder)).survey.runs["flow"].iloc[0])


# Direct


def test_a_gradient_and_a_flow_give_the_roughness(tmp_path):
    # Subramanya, ex. 10.19: 250 mm, ε 0.15 mm, slope 0.025, 1 mm²/s: 127.9 L/s (with 1.14 and 9.35 in the law; 3.7 and 2.51
    # have 127.87, and the roughness goes with the flow as its −9th power there)
    folder = write_example(
        tmp_path / "s",
        HEADS,
        {"flow [L/s]": 127.9, "T1 [m]": 2.5, "T2 [m]": 0.0},
        bore=0.25,
        gauge="h",
    )
    run = gradeline.reduce(gradeline.read_survey(folder), correct="none").runs.iloc[0]
    assert 1000 * run["roughness"] == pytest.approx(0.15, rel=9 * (0.05 + 0.047) / 127.9)


# Volumetric tank: the example's flow as a volume in a minute


def test_a_tank_in_a_minute_and_the_reynolds_number(tmp_path):
    # Crane TP-410, ex. 7.1: 200 L/min of water of 30 °C in 50 mm pipe of schedule 40, inside 52.5 mm (inferred: it alone
    # gives the printed Re): Re 100 600 (viscosity off a chart: 0.5 %)
    folder = write_example(
        tmp_path / "s",
        '[flow]\nmethod = "volumetric tank"\n' + HEADS,
        {"volume [L]": 200, "time [s]": 60, "temperature [degC]": 30, **LEVELS},
        bore=0.0525,
        gauge="h",
        water=True,
    )
    run = gradeline.reduce(gradeline.read_survey(folder), correct="none").runs.iloc[0]
    assert run["flow"] == pytest.approx(200e-3 / 60, rel=1e-12)
    assert run["reynolds"] == pytest.approx(100600, rel=0.005)


def test_a_tank_in_an_hour_and_the_loss_at_a_widening(tmp_path):
    # Coulson and Richardson 1, ex. 3.6: 7.2 m³/h from 40 to 50 mm: 16.7 mm (Borda)
    flow = flow_of(tmp_path, 'method = "volumetric tank"\n', {"volume [m^3]": 7.2, "time [min]": 60})
    velocity = flow / (math.pi / 4 * 0.04**2)
    loss = float(expansion_loss_coefficient(0.04, 0.05)) * velocity**2 / (2 * 9.81)
    assert 1000 * loss == pytest.approx(16.7, abs=0.05)


def test_a_tank_in_a_minute_and_the_pressure_behind_a_widening(tmp_path):
    # Subramanya, ex. 11.1: 450 L/min from 6 to 9 cm, 20 kPa before, 9.79 kN/m³: 21.73 kPa behind
    flow = flow_of(tmp_path, 'method = "volumetric tank"\n', {"volume [L]": 450, "time [s]": 60})
    before, behind = flow / (math.pi / 4 * 0.06**2), flow / (math.pi / 4 * 0.09**2)
    kinetic = before**2 - behind**2 - float(expansion_loss_coefficient(0.06, 0.09)) * before**2
    assert 20 + 9.79 * kinetic / (2 * 9.81) == pytest.approx(21.73, abs=0.01)


# Weighing tank


@pytest.mark.parametrize(
    ("celsius", "hectopascal", "humidity", "volume", "tolerance"),
    [
        # an accredited pipette certificate to ISO 8655-6: 1.00258 µL/mg at 18.75 °C, 986 hPa and 59.29 %
        (18.75, 986, 59.29, 1.00258, 2e-5),
        # ISO 8655-6:2002, table A.1, 101.3 kPa (from memory)
        (15, 1013, 50, 1.0020, 1e-4),
        (20, 1013, 50, 1.0029, 1e-4),
        (25, 1013, 50, 1.0040, 1e-4),
        (30, 1013, 50, 1.0054, 1e-4),
    ],
)
def test_a_weighed_kilogram_of_water(tmp_path, celsius, hectopascal, humidity, volume, tolerance):
    # air by the approximation of NIST IR 6969, SOP 2
    air = (0.34848 * hectopascal - 0.009 * humidity * math.exp(0.061 * celsius)) / (273.15 + celsius)
    flow = flow_of(
        tmp_path,
        f'method = "weighing tank"\nair_density = "{air!r} kg/m^3"\n',
        {"mass [kg]": 60, "time [s]": 60, "temperature [degC]": celsius},
        water=True,
    )
    assert 1000 * flow == pytest.approx(volume, abs=tolerance)


def test_a_weighed_flow_with_its_buoyancy(tmp_path):
    # ISO 4185 (and NIST SOP 2), evaluated: 998.2, 8000 and 1.2 kg/m³: 1.0010534
    flow = flow_of(
        tmp_path,
        'method = "weighing tank"\nair_density = "1.2 kg/m^3"\nweight_density = "8000 kg/m^3"\n',
        {"mass [kg]": 998.2, "time [s]": 100},
        density=998.2,
    )
    assert 100 * flow == pytest.approx(1.0010534, abs=1e-7)


# Differential meters, the differential by a gauge of the survey where the example has a manometer
U_TUBE = '[gauge.m]\nkind = "u-tube"\ngauge_fluid = "mercury below"\ngauge_fluid_density = "{} kg/m^3"\n'
AIR_ABOVE = (
    '[gauge.m]\nkind = "inverted u-tube"\ngauge_fluid = "nothing"\ngauge_fluid_density = "1e-6 kg/m^3"\n'
)
BY_GAUGE = 'differential_gauge = "m"\n'
METERS = {
    # Crane TP-410M, ex. 7.29: 17 kPa, 50 mm in 73.66 mm, D and D/2, water of 15 °C: 478 L/min with C off a chart
    "crane 7.29": (
        'method = "orifice plate"\ntappings = "D and D/2"\npipe_bore = "73.66 mm"\nthroat_bore = "50 mm"\n',
        "",
        {"differential [kPa]": 17},
        {"density": 999.1, "kinematic_viscosity": 1.138e-3 / 999.1},
        478e-3 / 60,
        0.01,
    ),
    # Crane TP-410, ex. 7.23: 4.4 in of mercury under water of 62.364 lb/ft³ and 1.1 cP, 2 in in 102.26 mm: 106 US gal/min
    "crane 7.23": (
        'method = "orifice plate"\ntappings = "D and D/2"\npipe_bore = "102.26 mm"\nthroat_bore = "2 in"\n'
        + BY_GAUGE,
        U_TUBE.format(13570),
        {"m [in]": 4.4},
        {
            "density": 62.364 * POUND_PER_CUBIC_FOOT,
            "kinematic_viscosity": 1.1e-3 / (62.364 * POUND_PER_CUBIC_FOOT),
            "gravity": 9.80665,
        },
        106 / 60 * GALLON,
        0.005,
    ),
    # Cengel and Cimbala, ex. 8-10: methanol 788.4 kg/m³, 11 cm of mercury, 3 in 4 cm, C 0.61: 3.09e-3 m³/s
    "cengel 8-10": (
        'method = "orifice plate"\npipe_bore = "4 cm"\nthroat_bore = "3 cm"\ndischarge_coefficient = "0.61"\n'
        + BY_GAUGE,
        U_TUBE.format(13600),
        {"m [cm]": 11},
        {"density": 788.4, "kinematic_viscosity": 7.4e-7},
        3.09e-3,
        0.005 / 3.09,
    ),
    # Coulson and Richardson 1, ex. 6.2: acid 1300 kg/m³, 0.1 m of mercury (13550), 10 mm in a wide pipe, C 0.61: 0.268 kg/s
    "coulson 6.2": (
        'method = "orifice plate"\npipe_bore = "1 m"\nthroat_bore = "10 mm"\ndischarge_coefficient = "0.61"\n'
        + BY_GAUGE,
        U_TUBE.format(13550),
        {"m [m]": 0.1},
        {"density": 1300.0},
        0.268 / 1300,
        0.5 / 268,
    ),
    # Coulson and Richardson 1, ex. 6.3: 150 and 50 mm, 121 mm of water (here by limbs with weightless air above), 9.8 m/s²,
    # C 0.96: 2.91 kg/s
    "coulson 6.3": (
        'method = "venturi"\npipe_bore = "150 mm"\nthroat_bore = "50 mm"\ndischarge_coefficient = "0.96"\n'
        + BY_GAUGE,
        AIR_ABOVE,
        {"m [mm]": 121},
        {"gravity": 9.8},
        2.91e-3,
        0.005 / 0.96,
    ),
    # Munson, Young and Okiishi, ex. 3.11 (from memory, reproduced): kerosene of 0.85, 60 mm in 0.1 m without losses: 1.16 kPa
    # at 5 L/s and 116 kPa at 50 L/s
    "munson 3.11 low": (
        'method = "venturi"\npipe_bore = "0.1 m"\nthroat_bore = "60 mm"\ndischarge_coefficient = "1.0"\n',
        "",
        {"differential [kPa]": 1.16},
        {"density": 850.0},
        5e-3,
        0.005 / 1.16 / 2,
    ),
    "munson 3.11 high": (
        'method = "venturi"\npipe_bore = "0.1 m"\nthroat_bore = "60 mm"\ndischarge_coefficient = "1.0"\n',
        "",
        {"differential [kPa]": 116},
        {"density": 850.0},
        50e-3,
        0.5 / 116 / 2,
    ),
    # Munson, Young and Okiishi, ex. 8.15 (from memory, reproduced with its C 0.972 off a chart): ethyl alcohol 789 kg/m³,
    # 1.19e-3 Pa s, 4.0 kPa across a long radius nozzle of 34.1 mm in 60 mm: 0.003 m³/s. The bore is rounded, and after the
    # first of its iterations: 0.5 %
    "munson 8.15": (
        'method = "nozzle"\nshape = "long radius"\npipe_bore = "60 mm"\nthroat_bore = "34.1 mm"\n',
        "",
        {"differential [kPa]": 4.0},
        {"density": 789.0, "kinematic_viscosity": 1.19e-3 / 789},
        3e-3,
        0.005,
    ),
}


@pytest.mark.parametrize("example", METERS)
def test_a_differential_meter(tmp_path, example):
    flow, gauge, columns, given, expected, tolerance = METERS[example]
    assert flow_of(tmp_path, flow, columns, gauge, **given) == pytest.approx(expected, rel=tolerance)


def test_coefficient_and_expansibility_of_a_nozzle():
    # Munson, Young and Okiishi, ex. 8.15 (from memory): 0.972 off the chart at Re 42 200, β 0.57
    found = differential_meters.discharge_coefficient("nozzle, long radius", 0.06, 0.0341, 42200.0)
    assert found == pytest.approx(0.972, abs=1e-3)
    # ISO/TR 11583, worked example 1, with the equation that ISO 5167-3 and -4 share: 0.994236
    for shape in ("ISA 1932", "long radius", "venturi"):
        gas = differential_meters.expansibility(f"nozzle, {shape}", 0.1, 0.06, 60e5, 0.5e5, 1.3)
        assert gas == pytest.approx(0.994236, abs=5e-7)


# Weirs


@pytest.mark.parametrize(
    ("head", "expected", "tolerance"),
    [
        # ISO 1438, Kindsvater and Shen, C_e 0.578 and k_h 0.85 mm (from memory, evaluated)
        ("0.2 m", 0.02468, 3e-3),
        # Q = 1.38 h^2.5 (common practice)
        ("0.2 m", 0.024686, 3e-3),
        # Cone, Q = 2.49 h^2.48 in ft and ft³/s, which the tables of the U.S. Bureau of Reclamation are printed from, 0.2 to
        # 1.25 ft (from memory): 0.446 at half a foot, 2.49 at one
        ("0.5 ft", 0.446 * FOOT**3, 0.01),
        ("1.0 ft", 2.49 * FOOT**3, 0.01),
    ],
)
def test_a_right_angled_notch(tmp_path, head, expected, tolerance):
    value, unit = head.split()
    flow = flow_of(
        tmp_path,
        'method = "v-notch weir"\nnotch_angle = "90 deg"\n',
        {f"weir head [{unit}]": value},
        gravity=9.80665,
    )
    assert flow == pytest.approx(expected, rel=tolerance)


@pytest.mark.parametrize(
    ("head", "crest", "width", "equation", "expected", "tolerance"),
    [
        # Cengel and Cimbala, ex. 13-11, by a Rehbock form: 9.24 m³/s
        (0.9, 0.6, 5.0, "rehbock", 9.24, 0.01),
        # test values of the fluids library: by Rehbock, by Kindsvater and Carter, and both against Ackers
        (0.3, 0.4, 2.0, "rehbock", 0.6486856, 1e-3),
        (0.3, 0.4, 2.0, "kindsvater-carter", 0.6415603, 1e-4),
        (0.3, 0.4, 2.0, "rehbock", 0.6489619, 0.012),
        (0.3, 0.4, 2.0, "kindsvater-carter", 0.6489619, 0.012),
    ],
)
def test_a_weir_of_full_width(tmp_path, head, crest, width, equation, expected, tolerance):
    flow = flow_of(
        tmp_path,
        f'method = "rectangular weir"\nnotch_width = "{width} m"\ncrest_height = "{crest} m"\nequation = "{equation}"\n',
        {"weir head [m]": head},
        gravity=9.80665,
    )
    assert flow == pytest.approx(expected, rel=tolerance)


# Hydrants
OUTLET = '[[flow.outlet]]\nname = "{}"\nbore = "{} in"\ndischarge_coefficient = "{}"\n'
#: 29.84 stands for water of 62.4 lb/ft³ or so: 0.1 %
CONSTANT = 1e-3


@pytest.mark.parametrize(
    ("bore", "psi", "coefficient", "gallons"),
    [
        # NFPA 291, theoretical discharge of a 2 1/2 in outlet by 29.84 c d² √p (from memory): 590, 834 and 1319 US gal/min
        (2.5, 10, 1.0, 590),
        (2.5, 20, 1.0, 834),
        (2.5, 50, 1.0, 1319),
        # Smooth tips of 1, 1 1/8 and 1 1/4 in at 50 psi by 29.7 d² √p (fire service practice, from memory): 210, 266, 328
        (1.0, 50, 29.7 / 29.84, 210),
        (1.125, 50, 29.7 / 29.84, 266),
        (1.25, 50, 29.7 / 29.84, 328),
    ],
)
def test_an_outlet_of_the_tables(tmp_path, bore, psi, coefficient, gallons):
    flow = flow_of(
        tmp_path,
        'method = "hydrant pitot"\n' + OUTLET.format("a", bore, coefficient),
        {"pitot a [psi]": psi},
        density=62.4 * POUND_PER_CUBIC_FOOT,
    )
    assert 60 * flow / GALLON == pytest.approx(gallons, abs=0.5 + CONSTANT * gallons)


def test_two_outlets_add_up(tmp_path):
    # two of the tabled outlets at once, 590 and 834 US gal/min, the second at 0.9 of it (from memory)
    flow = flow_of(
        tmp_path,
        'method = "hydrant pitot"\n' + OUTLET.format("a", 2.5, 1.0) + OUTLET.format("b", 2.5, 0.9),
        {"pitot a [psi]": 10, "pitot b [psi]": 20},
        density=62.4 * POUND_PER_CUBIC_FOOT,
    )
    assert 60 * flow / GALLON == pytest.approx(590 + 0.9 * 834, abs=1 + CONSTANT * 1424)


# Calibrated meters: tables of published pairs. No worked example of a meter read between its points was found.
TABLES = {
    # NFPA 291, 2 1/2 in outlet (from memory)
    "outlet": ("reading [psi],flow [US_gal/min]", [(10, 590), (20, 834), (50, 1319)], GALLON / 60),
    # Munson, Young and Okiishi, ex. 3.11 (from memory)
    "venturi": ("reading [kPa],flow [L/s]", [(1.16, 5), (116, 50)], 1e-3),
    # Cone's notch at 0.5 and 1 ft (from memory)
    "notch": ("reading [ft],flow [ft^3/s]", [(0.5, 0.446), (1, 2.49)], FOOT**3),
}


@pytest.mark.parametrize("example", TABLES)
def test_a_meter_gives_the_flows_of_its_table(tmp_path, example):
    heading, pairs, unit = TABLES[example]
    text = "\n".join([heading, *(f"{reading},{flow}" for reading, flow in pairs)]) + "\n"
    of_reading = heading.split("[")[1].split("]")[0]
    for place, (reading, flow) in enumerate(pairs):
        found = flow_of(
            tmp_path / str(place),
            'method = "calibrated meter"\ntable = "meter.csv"\n',
            {f"meter reading [{of_reading}]": reading},
            meter__csv=text,
        )
        assert found == pytest.approx(flow * unit, rel=1e-9)


def test_a_meter_between_the_points_of_a_table_of_the_trade(tmp_path):
    # 15 psi in the table of the outlet: 722 US gal/min by its formula (from memory). The chord lies below the root by
    # h²/8 times its second derivative, p^-1.5/4 of the constant, at 10 psi at most
    heading, pairs, unit = TABLES["outlet"]
    text = "\n".join([heading, *(f"{reading},{flow}" for reading, flow in pairs)]) + "\n"
    flow = flow_of(
        tmp_path,
        'method = "calibrated meter"\ntable = "meter.csv"\n',
        {"meter reading [psi]": 15},
        meter__csv=text,
    )
    sag = 10**2 / 8 * 590 / math.sqrt(10) / 4 * 10**-1.5
    assert 0 < 722 - flow / unit < sag


def test_interpolation_in_a_printed_table_that_is_straight():
    # CRC Handbook, specific volume of mercury at 0, 10, 20 and 40 °C in old ml/g: the middle entries lie on the straight
    # between their neighbours to the last digit. A table of numbers; no flow, but the same interpolation.
    celsius, volume = [0.0, 10.0, 20.0, 40.0], [0.073554, 0.0736877, 0.0738215, 0.0740891]
    for inner in (1, 2):
        kept = [place for place in range(4) if place != inner]
        found = flowmeters.interpolated_flow(celsius[inner], np.take(celsius, kept), np.take(volume, kept))
        assert found == pytest.approx(volume[inner], abs=1e-7)
