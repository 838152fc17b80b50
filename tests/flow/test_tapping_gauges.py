"""The differential of an orifice plate, a nozzle or a venturi, read by the gauges of the survey."""

import math

import numpy as np
import pytest

import gradeline
from gradeline.cli.understood import understood
from gradeline.errors import SurveyError
from gradeline.hydraulics.fluid import water_density
from gradeline.reduction.flow import metered_flow
from gradeline.reduction.gauge_ranges import gauge_ranges
from gradeline.report.inputs import statements

from .conftest import FLOWS, RHO, G, columns_of
from .test_methods import CASES, cells, flow_inputs, orifice, reading_for

Q = np.array(FLOWS)
DP = reading_for(orifice)
HEAD = DP / (RHO * G)
PLATE = '\n[flow]\nmethod = "orifice plate"\npipe_bore = "52.5 mm"\nthroat_bore = "30 mm"\n'
ONE = PLATE + 'differential_gauge = "m2"\n'
PAIR = PLATE + 'upstream_gauge = "p1"\ndownstream_gauge = "p2"\n'
HEAVY = 13550.0
U_TUBE = '[gauge.m2]\nkind = "u-tube"\ngauge_fluid = "heavy"\ngauge_fluid_density = "13550 kg/m^3"\n'
DEFLECTION = HEAD * RHO / (HEAVY - RHO)
LEGS = (
    '[gauge.m2]\nkind = "compound manometer"\n'
    '[[gauge.m2.leg]]\nfluid = "brine"\nfrom = "upstream"\nto = "a"\n'
    '[[gauge.m2.leg]]\nfluid = "heavy"\ndensity = "13550 kg/m^3"\nfrom = "a"\nto = "b"\n'
    '[[gauge.m2.leg]]\nfluid = "brine"\nfrom = "b"\nto = "downstream"\n'
)
CELL = '[gauge.m2]\nkind = "differential transducer"\n'
#: The air above open columns and beside pressure gauges: the standard atmosphere at 20 °C (CIPM-2007), kg/m³.
AIR = 1.199

# By hydrostatics along each chain.
GAUGES = {
    "deflection": (ONE + U_TUBE, {"m2 [m]": DEFLECTION}),
    "limbs": (ONE + U_TUBE, {"m2 left [m]": 0.5 - DEFLECTION / 2, "m2 right [m]": 0.5 + DEFLECTION / 2}),
    "well and inclined limb": (
        ONE + U_TUBE + 'inclination = "30 deg"\narea_ratio = "0.02"\n',
        {"m2 [m]": DEFLECTION / (math.sin(math.radians(30)) + 0.02)},
    ),
    "inverted u-tube": (
        ONE
        + '[gauge.m2]\nkind = "inverted u-tube"\ngauge_fluid = "oil"\ngauge_fluid_density = "800 kg/m^3"\n',
        {"m2 left [m]": 3 + HEAD * RHO / (RHO - 800), "m2 right [m]": np.full(5, 3.0)},
    ),
    "compound manometer": (
        ONE + LEGS,
        {"m2 a [m]": 0.5 - DEFLECTION / 2, "m2 b [m]": 0.5 + DEFLECTION / 2},
    ),
    "differential transducer": (ONE + CELL + 'zero_reading = "40 Pa"\n', {"m2 [Pa]": DP + 40}),
    "two pressure gauges": (
        PAIR + "".join(f'[gauge.p{n}]\nkind = "pressure gauge"\n' for n in (1, 2)),
        {"upstream tapping [Pa]": 5e4 + DP, "downstream tapping [Pa]": np.full(5, 5e4)},
    ),
    "one board at both tappings": (
        PLATE
        + 'upstream_gauge = "tubes"\ndownstream_gauge = "tubes"\n[gauge.tubes]\nkind = "piezometer"\nzero = "1 m"\n',
        # The air beside the columns stands in the difference too.
        {"upstream tapping [m]": 0.3 + HEAD / (1 - AIR / RHO), "downstream tapping [m]": np.full(5, 0.3)},
    ),
}


@pytest.mark.parametrize("name", GAUGES)
def test_every_kind_of_gauge_gives_the_flow_and_the_same_friction(write_flow, name):
    toml, columns = GAUGES[name]
    found = gradeline.reduce(gradeline.read_survey(write_flow(toml, cells(columns)))).runs
    direct = gradeline.reduce(gradeline.read_survey(write_flow("", {"flow [m^3/s]": FLOWS}))).runs
    # The density of the air from memory: 1e-3 of it is 1e-6 of the head.
    tolerance = 2e-6 if name == "one board at both tappings" else 1e-9
    assert found["flow"].to_numpy() == pytest.approx(Q, rel=tolerance)
    assert found["friction_factor"].to_numpy() == pytest.approx(
        direct["friction_factor"].to_numpy(), rel=1e-5
    )


def test_a_u_tube_does_what_a_deflection_with_its_fluid_did(write_flow):
    toml, columns = GAUGES["deflection"]
    old, _ = CASES["orifice plate by mercury"]
    runs, _ = flow_inputs(write_flow(toml, cells(columns)))
    before, _ = flow_inputs(write_flow(old, cells({"differential [m]": columns["m2 [m]"]})))
    assert runs["flow"].to_numpy() == pytest.approx(before["flow"].to_numpy(), rel=1e-12)


def test_one_reading_reaches_the_flow_and_two_limbs_are_read_twice(write_flow):
    for name, twice in (("deflection", 1.0), ("limbs", math.sqrt(2.0))):
        toml, columns = GAUGES[name]
        runs, _ = flow_inputs(write_flow(toml + 'uncertainty = "0.5 mm"\n', cells(columns)))
        exponent = np.log(orifice(1.001 * DP) / orifice(DP)) / math.log(1.001)  # a half, but for C(Re)
        expected = exponent * twice * 5e-4 / DEFLECTION
        assert runs["flow_u"].to_numpy() / Q == pytest.approx(expected, rel=1e-3)


@pytest.mark.parametrize(
    ("key", "name", "of_head"),
    [
        ('u_zero = "1 mm"', ("flow gauge zero", "m2"), 1e-3 / DEFLECTION),
        ('u_scale = "0.4 %"', ("flow gauge scale", "m2"), np.full(5, 0.004)),
        (
            'gauge_fluid_density = "13550 kg/m^3 +/- 50 kg/m^3"',
            ("flow gauge gauge fluid density", "m2"),
            np.full(5, 50 / (HEAVY - RHO)),
        ),
    ],
)
def test_what_a_gauge_is_off_by_in_all_runs_is_shared(write_flow, key, name, of_head):
    toml, columns = GAUGES["deflection"]
    if "density" in key:
        toml = toml.replace('gauge_fluid_density = "13550 kg/m^3"\n', "")
    plain = 'discharge_coefficient = "0.61"\ndifferential_gauge'
    _, inputs = flow_inputs(
        write_flow(toml.replace("differential_gauge", plain) + key + "\n", cells(columns))
    )
    # ISO 5167-1: Q as √Δp
    assert inputs[name] == pytest.approx(of_head / 2, rel=1e-3)


def test_a_class_and_a_calibration_enter_as_for_the_gauges_of_the_line(write_flow):
    toml, columns = GAUGES["differential transducer"]
    toml = toml.replace("differential_gauge", 'discharge_coefficient = "0.61"\ndifferential_gauge')
    toml += 'full_scale = "2 kPa"\naccuracy_of_full_scale = "1 %"\n'
    _, inputs = flow_inputs(write_flow(toml, cells(columns)))
    # A limit of error of 20 Pa, rectangular: u = 20/√3, half of its variance zero and half span (JCGM 100, 4.3.7)
    assert inputs[("flow gauge zero", "m2")] == pytest.approx(20 / math.sqrt(6) / DP / 2, rel=1e-3)
    assert inputs[("flow gauge scale", "m2")] == pytest.approx(
        0.01 / math.sqrt(6) / 2 * (DP + 40) / DP, rel=1e-3
    )
    table = "reading [Pa],true [Pa]\n0,10\n2000,2110\n4000,4210\n6000,6310\n"  # true = 1.05 reading + 10
    toml, columns = ONE + CELL + 'calibration = "cell.csv"\n', {"m2 [Pa]": (DP - 10) / 1.05}
    runs, _ = flow_inputs(write_flow(toml, cells(columns), cell_csv=table))
    assert runs["flow"].to_numpy() == pytest.approx(Q, rel=1e-9)


def test_lines_of_another_fluid_between_tappings_at_two_levels(write_flow):
    toml, columns = GAUGES["differential transducer"]
    toml = toml.replace("differential_gauge", 'tapping_rise = "0.2 m +/- 5 mm"\ndifferential_gauge')
    folder = write_flow(
        toml + 'line_fluid = "air"\nline_temperature = "20 degC"\n',
        cells({"m2 [Pa]": DP + 40 + (RHO - AIR) * G * 0.2}),
    )
    runs, inputs = flow_inputs(folder)
    # Lines of air: the flowing fluid's column between the tappings stands in the reading.
    assert runs["flow"].to_numpy() == pytest.approx(Q, rel=1e-4)
    assert inputs[("flow tapping rise", "")][-1] == pytest.approx(
        -0.5 * 0.005 * (1 - AIR / RHO) / HEAD[-1], rel=0.02
    )
    _, level = flow_inputs(write_flow(toml, cells(columns)))
    assert ("flow tapping rise", "") not in level  # lines of the flowing fluid: it cancels


WATER = 'name = "water"\n'
FLUID = f'name = "brine"\ndensity = "{RHO} kg/m^3"\nkinematic_viscosity = "1.0 mm^2/s"\n'


def flows_at(folder, celsius=None, *changes):
    """The flows with other temperatures or statements, by the files alone."""
    for name, pairs in (
        ("survey.toml", changes),
        ("readings.csv", [] if celsius is None else [("20.0", celsius)]),
    ):
        text = (folder / name).read_text(encoding="utf-8")
        for old, new in pairs:
            assert old in text
            text = text.replace(old, str(new))
        (folder / name).write_text(text, encoding="utf-8")
    return metered_flow(gradeline.read_survey(folder)).survey.runs["flow"].to_numpy()


@pytest.mark.parametrize("tube", ["u-tube", "cell"])
def test_the_temperature_goes_to_the_flow_by_density_viscosity_and_mercury(write_flow, tube):
    gauge = '[gauge.m2]\nkind = "u-tube"\ngauge_fluid = "mercury"\n' if tube == "u-tube" else CELL
    reading = {"m2 [m]": DEFLECTION} if tube == "u-tube" else {"m2 [Pa]": DP}
    columns = cells(reading) | {"temperature [degC]": ["20.0"] * 5}

    def folder():
        made = write_flow(ONE + gauge, columns, uncertainty='temperature = "0.5 K"\n')
        flows_at(made, None, (FLUID, WATER))
        return made

    _, inputs = flow_inputs(folder())
    above, below = flows_at(folder(), "20.5"), flows_at(folder(), "19.5")
    expected = np.log(above / below) / 2
    assert inputs[("temperature", "")] == pytest.approx(expected, rel=0.02, abs=1e-9)
    # At a fixed C a pressure would give the density alone, −Δρ/2ρ; a larger Re makes C and so the flow smaller (ISO 5167-2).
    if tube == "cell":
        of_density = -0.25 * np.log(water_density(293.65) / water_density(292.65))
        assert of_density > 0
        assert (inputs[("temperature", "")] < 0).all()


def test_the_viscosity_reaches_the_flow_through_the_coefficient(write_flow):
    toml, columns = GAUGES["differential transducer"]
    stated = ("1.0 mm^2/s", "1.0 mm^2/s +/- 0.05 mm^2/s")

    def folder():
        return write_flow(toml, cells(columns))

    made = folder()
    flows_at(made, None, stated)
    _, inputs = flow_inputs(made)
    above, below = (flows_at(folder(), None, ("1.0 mm^2/s", f"{nu} mm^2/s")) for nu in (1.05, 0.95))
    found = inputs[("viscosity", "")]
    assert found == pytest.approx(np.log(above / below) / 2, rel=0.02)
    assert (found > 1e-4).all()  # a thicker fluid, a smaller Re, a larger C (ISO 5167-2)
    one = gradeline.reduce(gradeline.read_survey(made)).runs["friction_factor_u"]
    other = gradeline.reduce(gradeline.read_survey(folder())).runs["friction_factor_u"]
    assert (one > other).all()


def test_static_runs_by_the_column_flow_and_by_equal_limbs(write_flow):
    heads = [np.full(7, 9.0), *(columns_of(q) for q in FLOWS)]
    for toml, columns in (
        (GAUGES["differential transducer"][0], {"flow [L/s]": [0, *[""] * 5], "m2 [Pa]": [40, *(DP + 40)]}),
        (
            GAUGES["limbs"][0],
            {f"m2 {limb} [m]": [0.5, *GAUGES["limbs"][1][f"m2 {limb} [m]"]] for limb in ("left", "right")},
        ),
        (
            ONE + LEGS,
            {
                "flow [L/s]": [0, *[""] * 5],
                **{
                    f"m2 {level} [m]": [0.5, *GAUGES["compound manometer"][1][f"m2 {level} [m]"]]
                    for level in "ab"
                },
            },
        ),
    ):
        folder = write_flow(toml, columns, flows=[0, *FLOWS], heads=heads)
        runs, _ = flow_inputs(folder)
        assert runs["flow"].to_numpy() == pytest.approx([0, *Q], rel=1e-9)


# Published examples, each read by a u-tube of the survey: (D, d, fluid, gauge fluid, deflection, C, flow, tolerance)
@pytest.mark.parametrize(
    ("pipe", "throat", "density", "heavy", "deflection", "coefficient", "expected", "tolerance"),
    [
        # Cengel and Cimbala, example 8-10: methanol, mercury manometer 11 cm: 3.09e-3 m³/s
        (0.04, 0.03, 788.4, 13600, 0.11, 0.61, 3.09e-3, 2e-3),
        # Coulson and Richardson 1, example 6.2: acid, mercury 0.1 m: 0.268 kg/s (a wide pipe)
        (1.0, 0.010, 1300, 13550, 0.1, 0.61, 0.268 / 1300, 2e-3),
        # Crane TP-410, example 7.23: 2 in plate, D and D/2, 4.4 in mercury under water, C by the standard: 106 US gal/min
        (0.10226, 0.0508, 998.98, 13570, 4.4 * 0.0254, None, 106 * 231 * 0.0254**3 / 60, 5e-3),
    ],
)
def test_published_examples_by_a_u_tube(
    write_flow, pipe, throat, density, heavy, deflection, coefficient, expected, tolerance
):
    toml = f'\n[flow]\nmethod = "orifice plate"\npipe_bore = "{pipe} m"\nthroat_bore = "{throat} m"\n'
    toml += 'tappings = "D and D/2"\ndifferential_gauge = "m2"\n'
    toml += "" if coefficient is None else f'discharge_coefficient = "{coefficient}"\n'
    toml += f'[gauge.m2]\nkind = "u-tube"\ngauge_fluid = "heavy"\ngauge_fluid_density = "{heavy} kg/m^3"\n'
    folder = write_flow(toml, {"m2 [m]": [deflection]}, flows=FLOWS[:1])
    viscosity = 1.1e3 / density  # 1.1 mPa s, of which only the last example takes notice
    flows = flows_at(
        folder,
        None,
        (
            FLUID,
            f'name = "liquid"\ndensity = "{density} kg/m^3"\nkinematic_viscosity = "{viscosity} mm^2/s"\n',
        ),
    )
    assert flows[0] == pytest.approx(expected, rel=tolerance)


def test_the_gauge_is_understood_and_reported(write_flow):
    toml, columns = GAUGES["limbs"]
    survey = gradeline.read_survey(
        write_flow(toml + 'uncertainty = "0.5 mm"\nrange = "0 to 1 m"\n', cells(columns))
    )
    text = understood(survey)
    assert "differential gauge m2" in text, text
    assert "  m2     u-tube" in text
    assert "m2 left" in text
    assert "  1    0.4 " in text
    assert "upstream upstream" not in text
    reduction = gradeline.reduce(survey)
    assert "differential gauge m2" in dict(statements(reduction))["Flow"]
    inputs = reduction.inputs
    assert set(inputs.loc[inputs["name"] == "m2", "what"]) >= {
        "kind",
        "gauge fluid density",
        "u of a reading",
    }
    assert any(
        "read by gauge 'm2' (u-tube) between the meter's tappings, at one level" in one
        for one in reduction.assumptions
    )
    assert any("scale of the flow's gauge 'm2' is not stated" in one for one in reduction.cautions)
    *_, shown = gauge_ranges(survey)
    assert shown.gauge == "m2"
    assert (shown.smallest, shown.largest) == pytest.approx((HEAD[0], HEAD[-1]))
    assert shown.high == pytest.approx((HEAVY - RHO) / RHO)


def problems(folder, *, reduce=False):
    if reduce:
        survey = gradeline.read_survey(folder)
        with pytest.raises(SurveyError) as error:
            gradeline.reduce(survey)
    else:
        with pytest.raises(SurveyError) as error:
            gradeline.read_survey(folder)
    return str(error.value).splitlines()


READ = {"m2 [mm]": [10, 20, 30, 40, 50]}


@pytest.mark.parametrize(
    ("toml", "columns", "told"),
    [
        (
            ONE + U_TUBE + 'upstream = "T1"\n',
            READ,
            "survey.toml gauge.m2.upstream: the gauge is joined to the tappings of the flow's meter, as [flow] says, not to "
            "taps of the line; take the key away",
        ),
        (
            ONE.replace("m2", "bord"),
            READ,
            "survey.toml flow.differential_gauge: there is no [gauge.bord]; did you mean 'board'?",
        ),
        (
            ONE + '[gauge.m2]\nkind = "pressure gauge"\n',
            {"m2 [kPa]": [1, 2, 3, 4, 5]},
            "survey.toml flow.differential_gauge: gauge 'm2' reads one place and shows no difference; name a u-tube, a "
            "differential transducer or the like, or one gauge at each tapping as upstream_gauge and downstream_gauge",
        ),
        (
            PAIR + U_TUBE.replace("m2", "p1") + '[gauge.p2]\nkind = "pressure gauge"\n',
            {"upstream tapping [mm]": [1] * 5, "downstream tapping [kPa]": [2] * 5},
            "survey.toml flow.upstream_gauge: gauge 'p1' reads a difference itself; name it as differential_gauge",
        ),
        (
            PLATE + 'upstream_gauge = "m2"\n' + U_TUBE,
            READ,
            "survey.toml flow.upstream_gauge: one tapping alone tells no difference; add downstream_gauge, or name a "
            "differential_gauge",
        ),
        (
            ONE + 'u_differential = "1 mm"\n' + U_TUBE,
            READ,
            "survey.toml flow.u_differential: the differential is read by a gauge; state it there, as [gauge.m2] uncertainty",
        ),
        (
            PLATE + 'tapping_rise = "0.2 m"\n',
            {"differential [kPa]": [1, 2, 3, 4, 5]},
            "survey.toml flow.tapping_rise: the column 'differential' is taken at one level, so that the key has no effect; "
            "take it away, or name the gauge as differential_gauge",
        ),
        (
            ONE + U_TUBE,
            {"m2 left [mm]": [10, 20, 30, 40, 50]},
            "readings.csv row 1: the flow is worked out from gauge 'm2', which is not read; add the column 'm2 right [mm]'",
        ),
        (
            ONE + U_TUBE,
            {"flow [L/s]": [""] * 5},
            "readings.csv row 1: the flow is worked out from gauge 'm2', which is not read; add the column 'm2 [mm]', or "
            "'m2 right [mm]' and 'm2 left [mm]'",
        ),
        (
            ONE + U_TUBE,
            READ | {"m2 left [mm]": [1, 2, 3, 4, 5]},
            "readings.csv row 1: there are the columns 'm2' and 'm2 left'; keep the deflection or the limbs",
        ),
        (
            ONE + U_TUBE,
            READ | {"flow [L/s]": ["", 0.6, "", "", ""]},
            "readings.csv row 3, flow [L/s]: 0.6 is a flow, but [flow] has it worked out from gauge 'm2'; leave the cell empty, "
            "or give 0 for a static run",
        ),
        (
            ONE + U_TUBE,
            {"m2 [mm]": [10, "", 30, 40, 50]},
            "readings.csv row 3, m2 [mm]: the cell is empty; read the gauge 'm2', or give flow 0 for a static run",
        ),
        (
            ONE + U_TUBE + 'range = "0 to 0.4 m"\n',
            {"m2 left [mm]": [100] * 5, "m2 right [mm]": [110, 120, 130, 140, 450]},
            "readings.csv row 6, m2 right [mm]: 450 lies beyond the scale of gauge 'm2', 0 to 0.4 m; mend the reading or the "
            "gauge's range",
        ),
        (
            ONE + U_TUBE.replace("13550", "900"),
            READ,
            "survey.toml gauge.m2.gauge_fluid: 'heavy' (900 kg/m³) is not heavier than the fluid in the lines (998 kg/m³), as in "
            "kind 'u-tube'; mend the fluid, or is it kind = 'inverted u-tube'?",
        ),
        (
            ONE + LEGS.replace('to = "downstream"', 'to = "2 m"'),
            {"m2 a [mm]": [1] * 5, "m2 b [mm]": [2] * 5},
            "survey.toml gauge.m2.leg[3].to: the chain does not close: it ends at 2 m, not at the tap 'downstream' (0 m); write "
            "to = 'downstream'",
        ),
    ],
)
def test_a_fault_is_told(write_flow, toml, columns, told):
    assert told in problems(write_flow(toml, columns))


def test_a_gauge_at_fault_brings_no_fault_of_its_columns(write_flow):
    (told,) = problems(write_flow(ONE + U_TUBE.replace('"u-tube"', '"u tube"'), READ))
    assert told == "survey.toml gauge.m2.kind: unknown kind 'u tube'; did you mean 'u-tube'?"


def test_a_difference_the_wrong_way_is_refused(write_flow):
    (told,) = problems(write_flow(ONE + U_TUBE, {"m2 [mm]": [-10, -20, -30, -40, -50]}), reduce=True)
    assert told == (
        "readings.csv row 2: the flow's gauge 'm2' shows -0.1258 m of head from the upstream to the downstream tapping, where "
        "a flow lowers it, so that the difference is above 0; it does so in every flowing row: the two sides look swapped, so "
        "exchange them or change the sign of the readings"
    )
    found = problems(
        write_flow(ONE + CELL + 'zero_reading = "1.5 kPa"\n', {"m2 [kPa]": [1, 2, 3, 4, 5]}), reduce=True
    )
    assert len(found) == 1
    assert found[0].endswith("mend the reading or the gauge, or say flow 0 where the run is static")


def test_readings_of_the_gauge_stand_in_the_list_of_runs(write_flow):
    toml, columns = GAUGES["limbs"]
    folder = write_flow(toml, cells(columns))
    rows = [line.split(",") for line in (folder / "readings.csv").read_text(encoding="utf-8").splitlines()]
    (folder / "runs.csv").write_text("\n".join(",".join(row[:3]) for row in rows), encoding="utf-8")
    listed = [
        f"{row[0]},{name.split()[0]},{cell}"
        for row in rows[1:]
        for name, cell in zip(rows[0][3:], row[3:], strict=True)
    ]
    (folder / "readings.csv").write_text("\n".join(["run,tap,reading [m]", *listed]), encoding="utf-8")
    runs, _ = flow_inputs(folder)
    assert runs["flow"].to_numpy() == pytest.approx(Q, rel=1e-9)


def test_a_survey_of_static_runs_alone_has_no_flow(write_flow):
    toml, _ = GAUGES["limbs"]
    columns = {"m2 left [m]": [0.5], "m2 right [m]": [0.5]}
    survey = gradeline.read_survey(write_flow(toml, columns, flows=[0], heads=[np.full(7, 9.0)]))
    assert metered_flow(survey).survey.runs["flow"].tolist() == [0.0]
    assert [one.gauge for one in gauge_ranges(survey)] == ["board"]


def test_repeats_are_worked_out_one_by_one(write_flow):
    toml, columns = GAUGES["deflection"]
    deflections = columns["m2 [m]"]
    read = [0.99 * deflections[0], 1.01 * deflections[0], *deflections[1:]]
    labels = ["1", "1", "2", "3", "4", "5"]
    folder = write_flow(toml, {"m2 [m]": read}, flows=[FLOWS[0], *FLOWS], runs=labels)
    runs, _ = flow_inputs(folder)
    each = orifice(np.array([0.99, 1.01]) * DP[0])
    assert runs["flow"][0] == pytest.approx(each.mean(), rel=1e-9)
    assert runs["flow_u"][0] == pytest.approx(each.std(ddof=1) / math.sqrt(2), rel=1e-6)


def test_a_tap_is_not_called_as_the_gauge(write_flow):
    toml, _ = GAUGES["deflection"]
    found = problems(write_flow(toml.replace("m2", "T1"), {"note": [""] * 5}))
    assert (
        "survey.toml gauge.T1: a tap is called 'T1', which names a column of the flow's gauge as well; call one of them "
        "otherwise"
    ) in found
