"""Each flow method through the survey's files to the reduction: the flow, its uncertainty, and what is said of it."""

import math

import numpy as np
import pytest

import gradeline
from gradeline.cli.understood import understood
from gradeline.errors import SurveyError
from gradeline.hydraulics.differential_meters import differential_meter_flow
from gradeline.hydraulics.weirs import kindsvater_carter_flow, kindsvater_shen_flow, rehbock_flow
from gradeline.reduction.flow import metered_flow
from gradeline.report.inputs import statements

from .conftest import FLOWS, NU, RHO, columns_of

Q = np.array(FLOWS)
AIR = 1.2


def reading_for(flow_of, flows=Q, top=1e6):
    """The reading that gives each flow, by bisection of a rising function."""
    low, high = np.zeros(len(flows)), np.full(len(flows), top)
    for _ in range(200):
        middle = (low + high) / 2
        below = np.asarray(flow_of(middle)) < flows
        low, high = np.where(below, middle, low), np.where(below, high, middle)
    return middle


def orifice(pressure):
    return differential_meter_flow(pressure, RHO, NU, 0.0525, 0.030, "orifice plate, corner")


CASES = {
    "volumetric tank": (
        '[flow]\nmethod = "volumetric tank"\n',
        {"volume [L]": 60e3 * Q, "time [s]": np.full(5, 60.0)},
    ),
    "weighing tank": (
        '[flow]\nmethod = "weighing tank"\nair_density = "1.2 kg/m^3"\n',
        {
            # ISO 4185: m (1 − ρ_a/8000) = ρ V (1 − ρ_a/ρ)
            "mass [kg]": 50 * Q * RHO * (1 - AIR / RHO) / (1 - AIR / 8000),
            "time [s]": np.full(5, 50.0),
        },
    ),
    "orifice plate": (
        '[flow]\nmethod = "orifice plate"\npipe_bore = "52.5 mm"\nthroat_bore = "30 mm"\n',
        {"differential [Pa]": reading_for(orifice)},
    ),
    "orifice plate by mercury": (
        '[flow]\nmethod = "orifice plate"\npipe_bore = "52.5 mm"\nthroat_bore = "30 mm"\n'
        'gauge_fluid_density = "13550 kg/m^3"\n',
        {"differential [mm]": 1000 * reading_for(orifice) / ((13550 - RHO) * 9.80665)},
    ),
    "venturi": (
        '[flow]\nmethod = "venturi"\npipe_bore = "52.5 mm"\nthroat_bore = "30 mm"\nconvergent = "machined"\n',
        {"differential [Pa]": RHO / 2 * (Q / (0.995 * math.pi / 4 * 0.03**2)) ** 2 * (1 - (30 / 52.5) ** 4)},
    ),
    "nozzle": (
        '[flow]\nmethod = "nozzle"\npipe_bore = "52.5 mm"\nthroat_bore = "30 mm"\ndischarge_coefficient = "0.98"\n',
        {"differential [Pa]": RHO / 2 * (Q / (0.98 * math.pi / 4 * 0.03**2)) ** 2 * (1 - (30 / 52.5) ** 4)},
    ),
    "v-notch weir": (
        '[flow]\nmethod = "v-notch weir"\nnotch_angle = "60 deg"\n',
        {"weir head [m]": reading_for(lambda h: kindsvater_shen_flow(h, math.pi / 3), top=2.0)},
    ),
    "rectangular weir": (
        '[flow]\nmethod = "rectangular weir"\nnotch_width = "0.1 m"\ncrest_height = "0.2 m"\nchannel_width = "0.4 m"\n',
        {"weir head [m]": reading_for(lambda h: kindsvater_carter_flow(h, 0.2, 0.1, 0.4), top=2.0)},
    ),
    "rehbock": (
        '[flow]\nmethod = "rectangular weir"\nequation = "rehbock"\nnotch_width = "0.1 m"\ncrest_height = "0.2 m"\n',
        {"weir head [m]": reading_for(lambda h: rehbock_flow(h, 0.2, 0.1), top=2.0)},
    ),
    "hydrant pitot": (
        '[flow]\nmethod = "hydrant pitot"\n'
        '[[flow.outlet]]\nname = "north"\nbore = "10 mm"\ndischarge_coefficient = "0.9"\n'
        '[[flow.outlet]]\nname = "south"\nbore = "12 mm"\ndischarge_coefficient = "0.8"\n',
        {
            "pitot north [Pa]": RHO / 2 * (0.3 * Q / (0.9 * math.pi / 4 * 0.010**2)) ** 2,
            "pitot south [Pa]": RHO / 2 * (0.7 * Q / (0.8 * math.pi / 4 * 0.012**2)) ** 2,
        },
    ),
    "calibrated meter": (
        '[flow]\nmethod = "calibrated meter"\ntable = "meter.csv"\n',
        {"meter reading [%]": (1000 * Q - 0.1) * 50},
    ),
}
METER = "reading [%],flow [L/s],flow uncertainty [L/s]\n0,0.1,0.001\n20,0.5,0.002\n60,1.3,0.004\n"


def cells(columns):
    return {name: [repr(float(value)) for value in values] for name, values in columns.items()}


@pytest.mark.parametrize("case", CASES)
def test_a_method_gives_the_flow_and_the_same_friction(write_flow, case):
    toml, columns = CASES[case]
    files = {"meter_csv": METER} if case == "calibrated meter" else {}
    survey = gradeline.read_survey(write_flow(toml, cells(columns), **files))
    found = gradeline.reduce(survey).runs
    direct = gradeline.reduce(gradeline.read_survey(write_flow("", {"flow [m^3/s]": FLOWS}))).runs
    assert found["flow"].to_numpy() == pytest.approx(Q, rel=1e-9)
    assert found["friction_factor"].to_numpy() == pytest.approx(
        direct["friction_factor"].to_numpy(), rel=1e-6
    )


def flow_inputs(folder):
    metered = metered_flow(gradeline.read_survey(folder))
    return metered.survey.runs, {(one.name, one.subject): np.ravel(one.flow) for one in metered.inputs}


def test_a_stopwatch_and_a_scale_reach_the_flow(write_flow):
    toml, columns = CASES["weighing tank"]
    toml += 'u_time = "0.2 s"\nu_mass = "0.05 kg"\nu_scale = "0.1 %"\n'
    runs, inputs = flow_inputs(write_flow(toml, cells(columns)))
    mass = np.asarray(columns["mass [kg]"])
    # Q = m/(ρ t): relative parts in quadrature (JCGM 100)
    assert runs["flow_u"].to_numpy() / Q == pytest.approx(np.hypot(0.2 / 50, 0.05 / mass), rel=1e-4)
    assert inputs[("flow reading scale", "")] == pytest.approx(1e-3, rel=1e-6)


def test_a_throat_a_coefficient_and_a_zero_are_shared_by_all_runs(write_flow):
    toml, columns = CASES["nozzle"]
    toml = toml.replace('"30 mm"', '"30 mm +/- 0.03 mm"').replace('"0.98"', '"0.98 +/- 0.0049"')
    toml += 'u_zero = "20 Pa"\n'
    _, inputs = flow_inputs(write_flow(toml, cells(columns)))
    beta4 = (30 / 52.5) ** 4
    # d ln Q / d ln d = 2/(1 − β⁴), d ln Q / d ln Δp = 1/2 (ISO 5167-1)
    assert inputs[("flow throat bore", "")] == pytest.approx(1e-3 * 2 / (1 - beta4), rel=1e-4)
    assert inputs[("flow discharge coefficient", "")] == pytest.approx(0.005, rel=1e-6)
    assert inputs[("flow reading zero", "")] == pytest.approx(10 / columns["differential [Pa]"], rel=1e-3)


def test_the_coefficient_of_the_standard_carries_its_uncertainty_to_f(write_flow):
    toml, columns = CASES["orifice plate"]
    reduction = gradeline.reduce(gradeline.read_survey(write_flow(toml, cells(columns))))
    exact = toml + 'discharge_coefficient = "0.61"\n'
    without = gradeline.reduce(gradeline.read_survey(write_flow(exact, cells(columns))))
    share = reduction.runs["friction_factor_u"] / reduction.runs["friction_factor"]
    other = without.runs["friction_factor_u"] / without.runs["friction_factor"]
    # ISO 5167-2: 0.5 % at β = 0.57, and 0.9 (0.75 − β)(2.8 − D/25.4 mm) % more for a pipe below 71.12 mm, at 95 %
    beta = 30 / 52.5
    # and 0.5 % more where β > 0.5 and Re_D < 10 000, as in the first run
    reynolds = 4 * Q / (math.pi * 0.0525 * NU)
    size = (0.5 + 0.9 * (0.75 - beta) * (2.8 - 52.5 / 25.4) + 0.5 * (reynolds < 1e4)) / 200
    assert (reynolds < 1e4).tolist() == [True, False, False, False, False]
    assert np.sqrt(share**2 - other**2).to_numpy() == pytest.approx(2 * size, rel=0.02)
    assert any("iterated on Re" in text for text in reduction.assumptions)


def test_one_fluid_density_is_one_error_in_heads_and_flow(write_flow):
    toml, columns = CASES["weighing tank"]
    folder = write_flow(toml, cells(columns))
    text = (folder / "survey.toml").read_text(encoding="utf-8")
    (folder / "survey.toml").write_text(
        text.replace("998.0 kg/m^3", "998.0 kg/m^3 +/- 2 kg/m^3"), encoding="utf-8"
    )
    _, inputs = flow_inputs(folder)
    assert inputs[("density", "")] == pytest.approx(-2 / (998 - AIR), rel=1e-4)


def test_limits_are_flagged_and_the_flow_is_there(write_flow):
    toml, columns = CASES["venturi"]
    reduction = gradeline.reduce(gradeline.read_survey(write_flow(toml, cells(columns))))
    assert [text for text in reduction.cautions if "used beyond" in text] == [
        "The venturi is used beyond ISO 5167: Re = 9\u202f700, where the standard holds from 200\u202f000. The flow is worked out "
        "all the same."
    ]


def test_a_meter_read_beyond_its_table_is_flagged(write_flow):
    toml, columns = CASES["calibrated meter"]
    table = METER.replace("60,1.3,0.004", "50,1.1,0.004")
    reduction = gradeline.reduce(gradeline.read_survey(write_flow(toml, cells(columns), meter_csv=table)))
    assert any(
        "beyond its table: run '5' reads 55 %, where meter.csv holds from 0 to 50 %." in text
        for text in reduction.cautions
    )


def test_repeats_give_the_random_uncertainty(write_flow):
    toml, _ = CASES["volumetric tank"]
    flows = [FLOWS[0], FLOWS[0], *FLOWS[1:]]
    columns = {
        "volume [L]": [60e3 * q for q in flows],
        "time [s]": [59.8, 60.2, 60, 60, 60, 60],
    }
    runs, _ = flow_inputs(write_flow(toml, columns, flows=flows, runs=["1", "1", "2", "3", "4", "5"]))
    each = 60 * FLOWS[0] / np.array([59.8, 60.2])
    assert runs["flow"][0] == pytest.approx(each.mean())
    assert runs["flow_u"][0] == pytest.approx(each.std(ddof=1) / math.sqrt(2))
    assert np.isnan(runs["flow_u"][1])


def test_repeats_that_lie_apart_are_refused(write_flow):
    toml, _ = CASES["volumetric tank"]
    flows = [FLOWS[0], FLOWS[0]]
    folder = write_flow(toml, {"volume [L]": [24, 24], "time [s]": [60, 57]}, flows=flows, runs=["1", "1"])
    with pytest.raises(SurveyError) as error:
        gradeline.reduce(gradeline.read_survey(folder))
    assert str(error.value) == (
        "readings.csv row 3: the repeats of run '1' have the flows 0.4 L/s (row 2), 0.4211 L/s (row 3), further apart than "
        "2 % or three times the stated uncertainty; give runs at different flows their own labels"
    )


def test_an_empty_tank_is_a_static_run(write_flow):
    toml, _ = CASES["volumetric tank"]
    columns = {"volume [L]": [0, *(60e3 * Q)], "time [s]": ["", 60, 60, 60, 60, 60]}
    heads = [np.full(7, 9.0), *(columns_of(q) for q in FLOWS)]
    reduction = gradeline.reduce(
        gradeline.read_survey(write_flow(toml, columns, flows=[0, *FLOWS], heads=heads))
    )
    assert reduction.runs["regime"].tolist() == ["static", *["turbulent"] * 5]


def test_unstated_uncertainties_are_told(write_flow):
    toml, columns = CASES["volumetric tank"]
    cautions = gradeline.reduce(gradeline.read_survey(write_flow(toml, cells(columns)))).cautions
    assert (
        "The uncertainty of a reading of 'time' ([flow] u_time) is not stated: it contributes nothing to the results beyond "
        "what repeats show."
    ) in cautions


@pytest.mark.parametrize("bores", [1, 2])
def test_a_shared_coefficient_does_what_a_flow_calibration_does(write_flow, bores):
    toml, columns = CASES["nozzle"]
    own = write_flow(toml.replace('"0.98"', '"0.98 +/- 0.0049"'), cells(columns))
    general = write_flow(toml, cells(columns), uncertainty='flow_scale = "0.5 %"\n')
    for folder in (own, general) if bores == 2 else ():
        file = folder / "survey.toml"
        text = file.read_text(encoding="utf-8").replace('to = "5.5 m"', 'to = "3 m"')
        more = '[[reach]]\nname = "end"\nfrom = "3 m"\nto = "5.5 m"\ndiameter = "30 mm +/- 0.02 mm"\nwall = "copper"\n'
        file.write_text(text.replace("[gauge.board]", more + "[gauge.board]"), encoding="utf-8")
    one, other = (gradeline.reduce(gradeline.read_survey(folder)) for folder in (own, general))
    for name in ("slope_u", "friction_factor_u"):
        assert one.runs[name].to_numpy() == pytest.approx(other.runs[name].to_numpy(), rel=1e-6, nan_ok=True)
    for name in ("roughness", "roughness_low", "roughness_high"):
        assert one.walls[name].to_numpy() == pytest.approx(
            other.walls[name].to_numpy(), rel=1e-4, nan_ok=True
        )


def test_the_record_says_how_the_flow_was_measured(write_flow):
    toml, columns = CASES["hydrant pitot"]
    toml = toml.replace(
        '[[flow.outlet]]\nname = "north"', 'u_pitot = "50 Pa"\n[[flow.outlet]]\nname = "north"'
    )
    inputs = gradeline.reduce(gradeline.read_survey(write_flow(toml, cells(columns)))).inputs
    said = inputs[inputs["group"] == "flow"]
    cells_of = zip(said["text"], said["quantity"], said["value"], strict=True)
    found = {
        what: text or (quantity, value)
        for what, (text, quantity, value) in zip(said["what"], cells_of, strict=True)
    }
    assert found == {
        "method": "hydrant pitot",
        "u of pitot": ("pressure", 50.0),
        "outlet north, bore": ("diameter", 0.01),
        "outlet north, discharge coefficient": ("number", 0.9),
        "outlet south, bore": ("diameter", 0.012),
        "outlet south, discharge coefficient": ("number", 0.8),
    }


@pytest.mark.parametrize(
    ("case", "keys", "told"),
    [
        ("hydrant pitot", 'u_pitot = "50 Pa"', "u of pitot 0.05 kPa, outlet north, bore 10 mm"),
        ("weighing tank", 'u_mass = "20 g"\nu_time = "0.2 s"', "u of mass 0.02 kg, u of time 0.2 s"),
        ("volumetric tank", 'u_volume = "100 mL"\nu_scale = "0.2 %"', "u of volume 0.1 L, u of scale 0.2 %"),
        ("v-notch weir", 'u_weir_head = "0.2 mm"', "u of weir head 0.2 mm"),
    ],
)
def test_the_page_shows_the_flow_in_units_of_a_bench(write_flow, case, keys, told):
    toml, columns = CASES[case]
    first, outlets, rest = toml.partition("[[flow.outlet]]")
    folder = write_flow(f"{first}\n{keys}\n{outlets}{rest}", cells(columns))
    assert told in dict(statements(gradeline.reduce(gradeline.read_survey(folder))))["Flow"]


def test_check_tells_the_flow_that_was_worked_out(write_flow):
    toml, columns = CASES["weighing tank"]
    text = understood(gradeline.read_survey(write_flow(toml, cells(columns))))
    assert "Flow: weighing tank, air density 1.2 kg/m³" in text
    assert "  1    0.4 " in text


def test_readings_in_us_units_give_the_same_flow(write_flow):
    toml, columns = CASES["volumetric tank"]
    litres = np.asarray(columns["volume [L]"])
    us = {"volume [US_gal]": litres / 3.785411784, "time [min]": np.full(5, 1.0)}
    metric, _ = flow_inputs(write_flow(toml, cells(columns)))
    other, _ = flow_inputs(write_flow(toml, cells(us)))
    assert other["flow"].to_numpy() == pytest.approx(metric["flow"].to_numpy(), rel=1e-12)


@pytest.mark.parametrize("case", CASES)
def test_a_survey_of_static_runs_alone_has_no_flow(write_flow, case):
    toml, columns = CASES[case]
    still = {name: ["0" if "time" not in name else ""] for name in columns}
    folder = write_flow(toml, still, flows=[0], heads=[np.full(7, 9.0)], meter_csv=METER)
    runs, inputs = flow_inputs(folder)
    assert runs["flow"].tolist() == [0.0]
    assert not inputs
