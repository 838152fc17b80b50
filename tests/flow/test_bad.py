"""What is wrong with how a flow was measured, told with its place, the rule and the remedy."""

import pytest

import gradeline
from gradeline.errors import SurveyError
from gradeline.flow_methods import FLOW_METHODS

from .conftest import FLOWS

TANK = '[flow]\nmethod = "volumetric tank"\n'
FILLED = {"volume [L]": [24, 36, 48, 60, 72], "time [s]": [60] * 5}
PLATE = '[flow]\nmethod = "orifice plate"\npipe_bore = "52.5 mm"\nthroat_bore = "30 mm"\n'
READ = {"differential [kPa]": [1, 2, 3, 4, 5]}
METER = '[flow]\nmethod = "calibrated meter"\ntable = "meter.csv"\n'
SHOWN = {"meter reading [mm]": [10, 20, 30, 40, 50]}
PITOT = (
    '[flow]\nmethod = "hydrant pitot"\n'
    '[[flow.outlet]]\nname = "north"\nbore = "10 mm"\ndischarge_coefficient = "0.9"\n'
)


def problems(folder):
    with pytest.raises(SurveyError) as error:
        gradeline.read_survey(folder)
    return str(error.value).splitlines()


@pytest.mark.parametrize(
    ("toml", "columns", "told"),
    [
        (
            PLATE.replace("30 mm", "52.5 mm"),
            READ,
            "survey.toml flow.throat_bore: the ratio of bores β = 1 must be below 1 (52.5 mm in a pipe of 52.5 mm); give the "
            "bore of the plate or the throat here and that of the pipe as pipe_bore",
        ),
        (
            TANK,
            FILLED | {"time [s]": [60, -60, 60, 60, 60]},
            "readings.csv row 3, time [s]: -60 is negative; give how long it ran",
        ),
        (
            TANK,
            FILLED | {"time [s]": [60, 0, 60, 60, 60]},
            "readings.csv row 3, time [s]: 0 is not above 0; give how long it ran",
        ),
        (
            TANK,
            FILLED | {"volume [L]": [24, "", 48, 60, 72]},
            "readings.csv row 3, volume [L]: the cell is empty; give what ran into the tank, 0 for a static run",
        ),
        (
            TANK,
            {"volume [L]": [24, 36, 48, 60, 72]},
            "readings.csv row 1: the column 'time [s]' is missing; add it",
        ),
        (
            TANK.replace("volumetric", "volumetrc"),
            FILLED,
            "survey.toml flow.method: unknown method 'volumetrc tank'; did you mean 'volumetric tank'?",
        ),
        (
            TANK + 'u_tme = "0.2 s"\n',
            FILLED,
            "survey.toml flow.u_tme: unknown key 'u_tme'; did you mean 'u_time'?",
        ),
        (
            PLATE,
            {"differential [mm]": [10, 20, 30, 40, 50]},
            "readings.csv row 1, differential [mm]: a deflection needs the fluid in the gauge; add gauge_fluid or "
            "gauge_fluid_density to [flow], or give a pressure",
        ),
        (
            PLATE + 'gauge_fluid = "mercury"\n',
            {"differential [mm]": [10, 20, 30, 40, 50]},
            "readings.csv row 2: the density of the mercury in the flow's gauge goes with the temperature; give 'temperature "
            "[degC]', or gauge_fluid_density in place of gauge_fluid in [flow]",
        ),
        (
            PLATE + 'gauge_fluid = "mercury"\n',
            READ,
            "survey.toml flow.gauge_fluid: it goes with a deflection, but 'differential [kPa]' in readings.csv is a pressure; "
            "take it away, or give the deflection",
        ),
        (
            PLATE + 'u_differential = "1 mm"\n',
            READ,
            "survey.toml flow.u_differential: it is a length, but 'differential' in readings.csv is read as a pressure; give "
            "both alike",
        ),
        (
            PLATE.replace('throat_bore = "30 mm"\n', ""),
            READ,
            'survey.toml flow.throat_bore: the key is missing; add it, such as throat_bore = "30.0 mm"',
        ),
        (
            '[flow]\nmethod = "hydrant pitot"\n',
            {"pitot north [kPa]": [1, 2, 3, 4, 5]},
            "survey.toml flow.outlet: there is no [[flow.outlet]]; describe each outlet that was open",
        ),
        (
            PITOT,
            {"pitot south [kPa]": [1, 2, 3, 4, 5]},
            "readings.csv row 1: the column 'pitot north [kPa]' is missing; add it",
        ),
        (
            '[flow]\nmethod = "rectangular weir"\nequation = "rehbock"\nnotch_width = "0.1 m"\ncrest_height = "0.2 m"\n'
            'channel_width = "0.4 m"\n',
            {"weir head [mm]": [30, 40, 50, 60, 70]},
            "survey.toml flow.equation: Rehbock's equation is for a weir of the channel's full width, and the notch is "
            "narrower; take 'kindsvater-carter'",
        ),
        (
            '[flow]\nread = "in turn"\n',
            {"flow [m^3/s]": FLOWS},
            "survey.toml flow.read: unknown 'in turn'; known are in order, together",
        ),
        (
            "",
            {"flow [m^3/s]": FLOWS, "flow start [m^3/s]": FLOWS},
            "readings.csv row 1, flow start [m^3/s]: 'flow end' is missing; a drift needs both",
        ),
        (
            "",
            {"flow [m^3/s]": FLOWS, "direction": ["rising", "up", "", "", ""]},
            "readings.csv row 3, direction: unknown 'up'; known are falling, rising",
        ),
    ],
)
def test_a_fault_is_told(write_flow, toml, columns, told):
    assert told in problems(write_flow(toml, columns))


@pytest.mark.parametrize(
    ("table", "told"),
    [
        (
            "reading [mm],flow [L/s]\n0,0.1\n30,1.0\n20,1.5\n",
            "meter.csv row 4, reading [mm]: 20 does not rise above the 30 before it; readings and flows of a meter's table "
            "rise together, so sort the rows or mend the value",
        ),
        (
            "reading [mm],flow [L/s]\n0,0.1\n30,1.0\n60,0.9\n",
            "meter.csv row 4, flow [L/s]: 0.9 does not rise above the 1.0 before it; readings and flows of a meter's table "
            "rise together, so sort the rows or mend the value",
        ),
        (
            "reading [kPa],flow [L/s]\n0,0.1\n30,1.0\n",
            "survey.toml flow.table: it is a pressure, but 'meter reading' in readings.csv is read as a length; give both "
            "alike",
        ),
        (
            "reading [mm],flow [L/s]\n0,0.1\n",
            "meter.csv: the table has fewer than two points; add the others",
        ),
    ],
)
def test_a_meters_table_is_checked(write_flow, table, told):
    assert told in problems(write_flow(METER, SHOWN, meter_csv=table))


def test_a_run_is_static_or_flows(write_flow):
    columns = {"volume [L]": [0, 24], "time [s]": ["", 60]}
    folder = write_flow(TANK, columns, flows=FLOWS[:2], runs=["1", "1"])
    assert problems(folder) == [
        "readings.csv row 3, run: run '1' is static in one row and flows in another; give each its own label"
    ]


@pytest.mark.parametrize("method", [name for name in FLOW_METHODS if name != "direct"])
def test_the_examples_of_every_key_can_be_read(write_flow, method):
    known = FLOW_METHODS[method]
    # A gauge's own fluid and gauges of their own stand in place of the column: tests/flow/test_tapping_gauges.py.
    apart = {
        key
        for key in known.keys
        if key.startswith("gauge") or key.endswith("_gauge") or key == "tapping_rise"
    }
    lines = [f'{key} = "{one.example}"' for key, one in known.keys.items() if key not in apart]
    toml = "\n".join(["", "[flow]", f'method = "{method}"', *lines, ""])
    names = list(known.columns)
    if known.outlet_keys:
        toml += "[[flow.outlet]]\nname = 'north'\n"
        toml += "\n".join(f'{key} = "{one.example}"' for key, one in known.outlet_keys.items())
        names = [f"{name} north" for name in names]
    units = {"volume": "L", "time": "s", "mass": "kg", "differential": "kPa", "pitot north": "kPa"}
    columns = {f"{name} [{units.get(name, 'mm')}]": [10, 20, 30, 40, 50] for name in names}
    survey = gradeline.read_survey(
        write_flow(toml, columns, meter_csv="reading [mm],flow [L/s]\n0,0.1\n60,1\n")
    )
    assert set(survey.flow.settings) == set(known.keys) - apart


@pytest.mark.parametrize(
    ("toml", "columns"),
    [
        (PLATE.replace("30 mm", "52.5 mm"), READ),
        (PLATE.replace("plate", "plat"), READ),
        (PITOT.replace('"0.9"', '"9"'), {"pitot north [kPa]": [1, 2, 3, 4, 5]}),
    ],
)
def test_a_fault_of_the_method_brings_no_fault_of_its_columns(write_flow, toml, columns):
    (told,) = problems(write_flow(toml, columns))
    assert told.startswith("survey.toml flow")


METER_ROWS = "reading [1],flow [L/s]\n10,0.4\n20,0.6\n30,0.8\n40,1.0\n50,1.2\n"


def test_a_meter_may_show_a_plain_number(write_flow):
    counts = {"meter reading [1]": [10, 20, 30, 40, 50]}
    survey = gradeline.read_survey(write_flow(METER, counts, meter_csv=METER_ROWS))
    assert survey.flow_readings["meter reading"].tolist() == [10, 20, 30, 40, 50]


def test_a_meter_in_a_unit_of_no_meter_is_told_what_there_is(write_flow):
    told = problems(write_flow(METER, {"meter reading [kg]": [10, 20, 30, 40, 50]}, meter_csv=METER_ROWS))
    assert told[0] == (
        "readings.csv row 1, meter reading [kg]: the unit 'kg' is not one of a flow, a length, a pressure, a velocity, a "
        "frequency, a rotational speed, an electric current, a voltage or a pure number; give a unit such as L/s, m, kPa, "
        "m/s, Hz, rpm, mA, V, %, or [1] for divisions of a scale, in the readings and in the meter's table alike"
    )


def test_a_meter_in_hertz_has_its_table_in_hertz(write_flow):
    told = problems(write_flow(METER, {"meter reading [Hz]": [10, 20, 30, 40, 50]}, meter_csv=METER_ROWS))
    assert told == [
        "survey.toml flow.table: it is a pure number, but 'meter reading' in readings.csv is read as a frequency; give both "
        "alike"
    ]
