"""A calibrated meter that shows a frequency, a current, a voltage or a speed."""

import numpy as np
import pytest

import gradeline
from gradeline.errors import SurveyError
from gradeline.reduction.flow import metered_flow

from .conftest import FLOWS, columns_of

METER = '[flow]\nmethod = "calibrated meter"\ntable = "meter.csv"\n'
SHOWN = (10, 20, 30, 40, 50)


def table(unit, rows=((0, 0.0), (25, 0.7), (60, 1.4))):
    return (
        "\n".join([f"reading [{unit}],flow [L/s]", *(f"{reading},{flow}" for reading, flow in rows)]) + "\n"
    )


def problems(folder):
    with pytest.raises(SurveyError) as error:
        gradeline.read_survey(folder)
    return str(error.value).splitlines()


def relative_inputs(folder):
    metered = metered_flow(gradeline.read_survey(folder))
    return metered, {one.name: np.ravel(one.flow) for one in metered.inputs}


@pytest.mark.parametrize("unit", ["Hz", "1/s", "mA", "V", "mV", "rpm", "rad/s", "kHz"])
def test_a_meter_is_read_in_its_own_unit(write_flow, unit):
    """By hand: up to 25 the table rises by 0.028 L/s a step, then by 0.02: 10, 20, 30 … are 0.28, 0.56, 0.8 … L/s."""
    folder = write_flow(METER, {f"meter reading [{unit}]": SHOWN}, meter_csv=table(unit))
    runs = metered_flow(gradeline.read_survey(folder)).survey.runs
    assert runs["flow"].to_numpy() == pytest.approx([0.28e-3, 0.56e-3, 0.8e-3, 1.0e-3, 1.2e-3], rel=1e-9)


def test_readings_and_table_may_differ_in_the_unit_of_one_dimension(write_flow):
    khz = [value / 1000 for value in SHOWN]
    folder = write_flow(METER, {"meter reading [kHz]": khz}, meter_csv=table("Hz"))
    runs = metered_flow(gradeline.read_survey(folder)).survey.runs
    assert runs["flow"].to_numpy() == pytest.approx([0.28e-3, 0.56e-3, 0.8e-3, 1.0e-3, 1.2e-3], rel=1e-9)


@pytest.mark.parametrize(
    ("reading", "of_table", "told"),
    [
        ("mA", "V", "it is a voltage, but 'meter reading' in readings.csv is read as an electric current"),
        # 60 turns a minute are not 1 Hz of pulses
        ("rpm", "Hz", "it is a frequency, but 'meter reading' in readings.csv is read as a rotational speed"),
    ],
)
def test_readings_and_table_are_of_one_dimension(write_flow, reading, of_table, told):
    folder = write_flow(METER, {f"meter reading [{reading}]": SHOWN}, meter_csv=table(of_table))
    assert f"survey.toml flow.table: {told}; give both alike" in problems(folder)


def test_an_uncertainty_is_of_the_readings_dimension(write_flow):
    toml = METER + 'u_meter_reading = "0.1 V"\nu_zero = "0.2 Hz"\n'
    told = problems(write_flow(toml, {"meter reading [Hz]": SHOWN}, meter_csv=table("Hz")))
    assert told == [
        "survey.toml flow.u_meter_reading: it is a voltage, but 'meter reading' in readings.csv is read as a frequency; give "
        "both alike"
    ]


def test_an_uncertainty_of_no_reading_is_told(write_flow):
    told = problems(
        write_flow(METER + 'u_zero = "0.2 kg"\n', {"meter reading [Hz]": SHOWN}, meter_csv=table("Hz"))
    )
    assert told == [
        "survey.toml flow.u_zero: '0.2 kg' is not an uncertainty of a reading; give it with a unit such as L/s, m, kPa, m/s, "
        "Hz, rpm, mA, V, %"
    ]


def test_uncertainties_in_the_readings_unit(write_flow):
    """By hand at 10 Hz, 0.028 L/s a hertz: 0.1 Hz is 1 % of the flow, a zero off by 0.2 Hz 2 %."""
    toml = METER + 'u_meter_reading = "0.1 Hz"\nu_zero = "0.2 Hz"\n'
    metered, inputs = relative_inputs(write_flow(toml, {"meter reading [Hz]": SHOWN}, meter_csv=table("Hz")))
    assert metered.survey.runs["flow_u"].iloc[0] == pytest.approx(0.1 * 0.028e-3, rel=1e-6)
    assert inputs["flow reading zero"][0] == pytest.approx(0.02, rel=1e-6)


def test_uncertainties_in_percent(write_flow):
    """By hand at 10 Hz: 1 % of it is 0.1 Hz, 0.5 % of the table's last reading (60 Hz) is 0.3 Hz."""
    toml = METER + 'u_meter_reading = "1 %"\nu_zero = "0.5 %"\n'
    metered, inputs = relative_inputs(write_flow(toml, {"meter reading [Hz]": SHOWN}, meter_csv=table("Hz")))
    assert metered.survey.runs["flow_u"].iloc[0] == pytest.approx(0.1 * 0.028e-3, rel=1e-6)
    assert metered.survey.runs["flow_u"].iloc[4] == pytest.approx(0.5 * 0.02e-3, rel=1e-6)
    assert inputs["flow reading zero"][0] == pytest.approx(0.03, rel=1e-6)


def test_a_meter_that_reads_in_percent_has_errors_in_percent(write_flow):
    """By hand at 10 %, 0.028 L/s a point: half a point is 0.014 L/s."""
    toml = METER + 'u_meter_reading = "0.5 %"\n'
    metered, _ = relative_inputs(write_flow(toml, {"meter reading [%]": SHOWN}, meter_csv=table("%")))
    assert metered.survey.runs["flow_u"].iloc[0] == pytest.approx(0.014e-3, rel=1e-6)


def test_readings_beyond_the_table_are_told_with_their_runs_and_unit(write_flow):
    rows = ((15, 0.4), (25, 0.7), (45, 1.2))
    folder = write_flow(METER, {"meter reading [Hz]": SHOWN}, meter_csv=table("Hz", rows))
    cautions = metered_flow(gradeline.read_survey(folder)).survey.cautions
    assert (
        "The calibrated meter is used beyond its table: run '1' reads 10 Hz, run '5' reads 50 Hz, where meter.csv holds from 15 "
        "to 45 Hz. The flow is worked out all the same." in cautions
    )


def test_a_current_loop_is_still_at_its_live_zero(write_flow):
    rows = ((4, 0.0), (20, 1.6))
    shown = [4, 8, 12, 14, 16]
    heads = [
        np.full(7, 9.0) if reading == 4 else columns_of(flow)
        for reading, flow in zip(shown, FLOWS, strict=True)
    ]
    folder = write_flow(METER, {"meter reading [mA]": shown}, heads=heads, meter_csv=table("mA", rows))
    survey = gradeline.read_survey(folder)
    assert survey.runs["flow"].iloc[0] == 0.0
    # by hand: 0.1 L/s a milliampere above 4
    runs = gradeline.reduce(survey).runs
    assert runs["flow"].to_numpy() == pytest.approx([0, 0.4e-3, 0.8e-3, 1.0e-3, 1.2e-3], rel=1e-9)
    assert runs["regime"].iloc[0] == "static"
