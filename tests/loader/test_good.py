import hashlib
import math

import numpy as np
import pytest

from gradeline.errors import SurveyError
from gradeline.loader import read_survey
from gradeline.quantities import Measured
from gradeline.survey import Stated

LONG_RUNS = """\
run,flow [m^3/h],temperature [degF]
01,0,64.4
02,0.9,64.4
NA,1.8,65
"""

LONG_READINGS = """\
run,tap,reading,unit,note
01,T1,500,mm,
01,T4,2.1,kPa,
02,T1,48,cm,
02,T2,455,mm,
02,T3,431,mm,
02,T4,1.4,kPa,
NA,T1,430,mm,
NA,T2,,mm,
"""


def test_the_parts_are_in_si(write_survey):
    survey = read_survey(write_survey())
    assert survey.title == "Hill main"
    assert survey.date == "2026-05-06"
    assert survey.source.endswith("hill_main")
    assert [(reach.name, reach.start, reach.end) for reach in survey.reaches] == [
        ("upper", 0.0, 3.0),
        ("lower", 3.0, 6.0),
    ]
    assert survey.reaches[0].diameter.value == 0.02664
    assert survey.reaches[0].diameter.u == pytest.approx(3e-5)
    assert survey.site.latitude == pytest.approx(math.radians(53.4))
    assert survey.site.altitude == 38.0
    (valve,) = survey.fittings
    assert (valve.at, valve.loss_coefficient, valve.velocity, valve.approach, valve.recovery) == (
        4.5,
        None,
        "smaller",
        2.0,
        10.0,
    )
    assert survey.gauge("board").settings == {"zero": Measured(0.8)}
    assert [(tap.name, tap.chainage, tap.elevation, tap.gauge) for tap in survey.taps] == [
        ("T1", 0.5, 0.0, "board"),
        ("T2", 1.5, 0.1, "board"),
        ("T3", 2.5, 0.2, "board"),
        ("T4", 5.0, 0.3, "bourdon"),
    ]
    assert survey.stated.reading == 0.0005
    assert survey.stated.reading_pressure is None
    assert survey.stated.flow == Stated(0.004, relative=True)
    assert survey.stated.temperature == 0.2
    assert survey.stated.elevation is None
    assert [observation.label for observation in survey.observations] == ["T1", "T2", "T3", "T4"]
    assert list(survey.runs["run"]) == ["01", "02", "NA"]
    assert survey.runs["flow"].tolist() == [0.0, 0.00025, 0.0005]
    assert survey.runs["temperature"].tolist() == pytest.approx([291.15, 291.35, 291.55])
    assert survey.readings.loc["02"].tolist() == [0.48, 0.455, 0.431, 1400.0]
    assert survey.readings.loc["NA"].tolist()[0] == 0.43
    assert math.isnan(survey.readings.loc["NA", "T2"])
    assert survey.readings.loc["NA", "T4"] == -200.0
    assert survey.units["T4"] == "kPa"
    assert survey.units["taps.csv chainage"] == "m"


def test_files_are_named_with_their_hash(write_survey):
    folder = write_survey()
    survey = read_survey(folder)
    assert {file.name: file.sha256 for file in survey.files} == {
        name: hashlib.sha256((folder / name).read_bytes()).hexdigest()
        for name in ("survey.toml", "taps.csv", "readings.csv")
    }


@pytest.mark.parametrize(
    "encode",
    [
        lambda text: text.encode("utf-8-sig"),
        lambda text: text.encode("utf-16"),
        lambda text: b"\xfe\xff" + text.encode("utf-16-be"),
        lambda text: text.encode("utf-16-le"),
        lambda text: text.replace("\n", "\r\n").encode(),
        lambda text: ("\ufeff" + text.replace("\n", "\r\n")).encode("utf-16-le"),
    ],
    ids=["byte order mark", "UTF-16", "UTF-16 BE", "UTF-16 LE unmarked", "CRLF", "UTF-16 CRLF"],
)
def test_text_of_any_usual_encoding_is_read(write_survey, encode):
    folder = write_survey()
    plain = read_survey(folder)
    for name in ("survey.toml", "taps.csv", "readings.csv"):
        path = folder / name
        path.write_bytes(encode(path.read_bytes().decode()))
    survey = read_survey(folder)
    assert survey.readings.equals(plain.readings)
    assert survey.runs.equals(plain.runs)
    assert survey.reaches == plain.reaches
    assert survey.taps == plain.taps


def test_long_readings_agree_with_wide(write_survey):
    survey = read_survey(write_survey(readings_csv=LONG_READINGS, runs_csv=LONG_RUNS))
    assert list(survey.runs["run"]) == ["01", "02", "NA"]
    assert survey.runs["flow"].tolist() == pytest.approx([0, 0.00025, 0.0005], rel=1e-15)
    assert survey.runs["temperature"].tolist()[0] == pytest.approx(291.15, abs=1e-9)  # 64.4 degF is 18 degC
    assert survey.readings.loc["02"].tolist() == [0.48, 0.455, 0.431, 1400.0]
    assert survey.readings.loc["01"].isna().tolist() == [False, True, True, False]
    assert survey.readings.loc["NA"].isna().tolist() == [False, True, True, True]


def test_repeats_are_averaged_and_their_spread_kept(write_survey):
    rows = "run,flow [L/s],temperature [degC],T1 [mm],T2 [mm],T3 [mm],T4 [kPa]\n"
    rows += "a,0.250,18,480,455,431,1.4\nb,0.5,18,430,400,310,0\na,0.252,19,482,,431,1.5\na,0.251,18,484,457,431,1.6\n"
    survey = read_survey(write_survey(readings_csv=rows))
    assert list(survey.runs["run"]) == ["a", "b"]
    assert survey.runs["repeats"].tolist() == [3, 1]
    assert survey.runs["flow"].tolist() == pytest.approx([0.000251, 0.0005], rel=1e-12)
    assert survey.runs["flow_u"].tolist()[0] == pytest.approx(1e-6 / math.sqrt(3))
    assert math.isnan(survey.runs["flow_u"].tolist()[1])
    assert survey.readings.loc["a"].tolist() == pytest.approx([0.482, 0.456, 0.431, 1500])
    assert survey.repeats.loc["a"].tolist() == [3, 2, 3, 3]
    assert survey.spreads.loc["a"].tolist() == pytest.approx([0.002, math.sqrt(2) * 1e-3, 0, 100], abs=1e-12)
    assert survey.spreads.loc["b"].isna().all()
    assert "Rows with one run label are averaged as repeats: run a (3 rows)." in survey.assumptions


def test_repeats_within_three_stated_uncertainties_stand(write_survey):
    rows = "run,flow [L/s],temperature [degC],T1 [mm],T2 [mm],T3 [mm],T4 [kPa]\n"
    rows += "a,0.250,18,480,455,431,1.4\na,0.259,18,480,455,431,1.4\n"
    with pytest.raises(SurveyError, match=r"readings.csv row 3, flow \[L/s\]: the repeats of run 'a'"):
        read_survey(write_survey(readings_csv=rows))
    survey = read_survey(
        write_survey(("survey.toml", 'flow = "0.4 %"', 'flow = "0.004 L/s"'), readings_csv=rows)
    )
    assert survey.runs["repeats"].tolist() == [2]


def test_what_is_not_given_stands_as_assumptions_and_cautions(write_survey):
    toml = """
[[reach]]
name = "main"
from = "0 m"
to = "6 m"
diameter = "100 mm"
wall = "steel"
[gauge.dial]
kind = "pressure gauge"
line_fluid = "mercury"
"""
    taps = "tap,chainage [m]\nA,1\nB,5\n"
    readings = "run,flow [L/s],temperature [degC],A [kPa],B [bar]\n1,10,18,20,0.19\n"
    survey = read_survey(write_survey(survey_toml=toml, taps_csv=taps, readings_csv=readings))
    assert survey.title == "hill_main"
    assert survey.assumptions == (
        "The survey names no fluid: it is taken as water.",
        "Neither latitude nor gravity is given: gravity is taken as 9.80665 m/s².",
        "The elevation of the taps is not given: the pipe's axis is taken as level at the datum, so pressures below "
        "atmospheric are not looked for.",
        "The elevation of the gauge is not given at A and B: it is taken to be at the pipe's axis.",
        "The gauge 'dial' is the only one: it is taken to read every tap.",
        "The survey states no date.",
    )
    assert survey.cautions[0] == (
        "The uncertainty of the bore is not stated for main: it contributes nothing to the results. f grows as D⁵."
    )
    told = " ".join(survey.cautions)
    for word in (
        "of the flow is",
        "(flow_scale)",
        "chainage",
        "elevation",
        "reading of gauge 'dial'",
        "temperature",
    ):
        assert word in told
    assert "Mercury is poisonous" in told
    assert survey.readings.loc["1"].tolist() == [20000.0, 19000.0]


def test_what_is_stated_is_no_caution(write_survey):
    told = " ".join(read_survey(write_survey()).cautions)
    for word in ("bore", "flow", "chainage", "temperature", "reading of gauge 'board'"):
        assert word not in told
    assert "reading of gauge 'bourdon'" in told  # the reading stated in [uncertainty] is a length


def test_another_fluid_needs_no_temperature(write_survey):
    fluid = 'name = "gear oil"\ndensity = "868 kg/m^3 +/- 2 kg/m^3"\nviscosity = "31 mPa s"'
    readings = "run,flow [L/s],T1 [mm],T2 [mm],T3 [mm],T4 [kPa]\n1,0.1,480,455,431,1.4\n"
    survey = read_survey(write_survey(("survey.toml", 'name = "water"', fluid), readings_csv=readings))
    assert survey.fluid.density == Measured(868.0, 2.0)
    assert survey.fluid.viscosity == Measured(0.031)
    assert survey.runs["temperature"].isna().all()
    assert (
        "The density and the viscosity of gear oil are taken as constant: run temperatures do not change them."
        in survey.assumptions
    )
    assert not any("surface tension" in text for text in survey.cautions)


def test_capillary_rise_in_another_fluid_takes_its_surface_tension(write_survey):
    fluid = (
        "survey.toml",
        'name = "water"',
        'name = "gear oil"\ndensity = "868 kg/m^3"\nviscosity = "31 mPa s"',
    )
    bore = 'zero = "0.80 m"\nbore = "6 mm"'
    tension = f'{bore}\nsurface_tension = "0.031 N/m"'
    survey = read_survey(write_survey(fluid, ("survey.toml", 'zero = "0.80 m"', tension)))
    assert survey.gauge("board").settings["surface_tension"] == Measured(0.031)
    with pytest.raises(SurveyError) as caught:
        read_survey(write_survey(fluid, ("survey.toml", 'zero = "0.80 m"', bore)))
    assert str(caught.value) == (
        "survey.toml gauge.board.bore: the capillary rise in the tube goes with the surface tension of gear oil, which is not "
        'known; add it, such as surface_tension = "0.03 N/m", or take bore away where the rise is taken off already or is too '
        "small to count"
    )
    assert read_survey(write_survey(("survey.toml", 'zero = "0.80 m"', bore))).gauge("board").settings["bore"]


def test_a_zero_with_its_own_uncertainty_is_stated(write_survey):
    cautions = read_survey(write_survey()).cautions
    assert (
        "The uncertainties of the zero and the scale of gauges 'board' and 'bourdon' are not stated: they contribute nothing to "
        "the results." in cautions
    )
    survey = read_survey(write_survey(("survey.toml", '"0.80 m"', '"0.80 m +/- 20 mm"')))
    assert survey.gauge("board").settings["zero"] == Measured(0.8, 0.02)
    assert (
        "The uncertainty of the scale of gauge 'board' is not stated: it contributes nothing to the results."
        in survey.cautions
    )


def test_taps_close_together_in_a_long_reach_are_a_caution(write_survey):
    taps = "tap,chainage [m],gauge\n" + "".join(f"T{n},{n}.1e-3,board\n" for n in range(1, 5))
    readings = "run,flow [L/s],temperature [degC],T1 [mm],T2 [mm],T3 [mm],T4 [mm]\n1,0.1,18,5,5,5,5\n"
    survey = read_survey(write_survey(taps_csv=taps, readings_csv=readings))
    said = "In reach 'upper' all 4 taps lie within 3 mm of a reach of 3 m: is the unit of chainage right?"
    assert said in survey.cautions
    assert not any("unit of chainage" in text for text in read_survey(write_survey()).cautions)


LONG_SOUND = "run,tap,reading [mm]\n" + "".join(f"1,T{n},{5 + n}\n" for n in range(1, 5))
ONE_RUN = "run,flow [L/s],temperature [degC]\n1,0.1,18\n"
PIEZOMETERS = ("survey.toml", 'kind = "pressure gauge"', 'kind = "piezometer"')


def test_doubled_rows_of_listed_readings_are_repeats(write_survey):
    survey = read_survey(write_survey(PIEZOMETERS, readings_csv=LONG_SOUND + "1,T2,9\n", runs_csv=ONE_RUN))
    assert survey.readings.loc["1", "T2"] == pytest.approx(0.008)
    assert (
        "Rows of readings with one run and one tap are averaged as repeats: run 1 at T2 (2 rows)."
        in survey.assumptions
    )
    plain = read_survey(write_survey(PIEZOMETERS, readings_csv=LONG_SOUND, runs_csv=ONE_RUN))
    assert not any("repeats" in text for text in plain.assumptions)


def doubtful(survey):
    return [text for text in survey.cautions if "lie far apart" in text]


def test_repeats_far_apart_are_a_caution_with_both_rows(write_survey):
    head = "run,flow [L/s],temperature [degC],T1 [mm],T2 [mm],T3 [mm],T4 [kPa]\n"
    rows = (
        head
        + "a,0.25,18,480,455,431,1.4\na,0.25,18,481,555,432,1.5\nb,0.5,18,430,400,310,0\nb,0.5,18,431,399,312,0\n"
    )
    # the others: five pairs 1 mm apart or so, (1 + 1 + 1 + 1 + 4)/2 over 5 degrees of freedom: s = 0.894 mm
    (said,) = doubtful(read_survey(write_survey(readings_csv=rows)))
    assert said == (
        "The repeats of run 'a' at tap 'T2' lie far apart: 455 mm (readings.csv row 2) and 555 mm (readings.csv row 3), "
        "112 times the usual spread of repeats. Look for a slip of the pen; as it stands, their mean is used."
    )
    assert not doubtful(read_survey(write_survey(readings_csv=rows.replace("555", "458"))))
    # two slips do not hide each other, and a step of the scale among equal repeats is none
    two = rows.replace("b,0.5,18,431,399,312", "b,0.5,18,530,399,312")
    assert len(doubtful(read_survey(write_survey(readings_csv=two)))) == 2
    equal = (
        head
        + "a,0.25,18,480,455,431,1.4\na,0.25,18,480,456,431,1.4\nb,0.5,18,430,400,310,0\nb,0.5,18,430,400,310,0\n"
    )
    assert not doubtful(read_survey(write_survey(readings_csv=equal)))


def test_listed_repeats_far_apart_name_their_rows(write_survey):
    doubled = "".join(f"1,T{n},{value}\n" for n, value in ((1, 6.5), (2, 7.5), (3, 8.5), (4, 90)))
    survey = read_survey(write_survey(PIEZOMETERS, readings_csv=LONG_SOUND + doubled, runs_csv=ONE_RUN))
    assert not doubtful(survey)  # the tap T4 is read by a gauge of its own
    one_gauge = ("taps.csv", "bourdon", "board")
    survey = read_survey(
        write_survey(PIEZOMETERS, one_gauge, readings_csv=LONG_SOUND + doubled, runs_csv=ONE_RUN)
    )
    (said,) = doubtful(survey)
    assert "9 mm (readings.csv row 5) and 90 mm (readings.csv row 9)" in said


def test_units_of_stated_values_are_kept(write_survey):
    survey = read_survey(write_survey())
    assert survey.units["survey.toml uncertainty.reading"] == "mm"
    assert survey.units["survey.toml gauge.board.zero"] == "m"
    assert "taps.csv elevation" in survey.units


def test_change_of_bore_stands_at_the_boundary(write_survey):
    change = '\n[[fitting]]\nname = "reducer"\nat = "3000 mm"\nkind = "change of bore"\nloss_coefficient = "0.3(1)"\n'
    survey = read_survey(
        write_survey(("survey.toml", "\n[gauge.board]", change + 'velocity = "upstream"\n\n[gauge.board]'))
    )
    reducer = survey.fittings[1]
    assert (reducer.at, reducer.change_of_bore, reducer.velocity) == (3.0, True, "upstream")
    assert reducer.loss_coefficient == Measured(0.3, pytest.approx(0.1))


def test_plan_chainages_become_lengths_along_the_axis(write_survey):
    # 3-4-5 triangles: each 4 m of plan rise 3 m
    toml = """
[survey]
chainage_is = "plan"
[[reach]]
name = "main"
from = "0 m"
to = "10 m"
diameter = "100 mm"
wall = "steel"
[[fitting]]
name = "valve"
at = "5 m"
loss_coefficient = 0.2
[gauge.dial]
kind = "pressure gauge"
"""
    taps = "tap,chainage [m],elevation [m]\nA,1,0\nB,5,3\nC,9,6\n"
    readings = "run,flow [L/s],temperature [degC],A [kPa],B [bar],C [psi]\n1,10,18,20,0.19,2\n"
    survey = read_survey(write_survey(survey_toml=toml, taps_csv=taps, readings_csv=readings))
    assert [tap.chainage for tap in survey.taps] == [1.0, 6.0, 11.0]
    assert survey.reaches[0].end == 12.0
    assert survey.fittings[0].at == 6.0
    assert any("Chainages are measured on the plan" in text for text in survey.assumptions)


@pytest.mark.parametrize(
    ("taps", "readings"),
    [
        ("tap,chainage [m],gauge\nA,1,board\n", "run,flow [L/s],temperature [degC],A [mm]\n1,1,18,0\n"),
        (
            "tap,chainage [m],gauge\nA,1,board\nB,2,board\n",
            "run,flow [L/s],temperature [degC],A [mm],B [mm]\n1,0,18,0,0\n",
        ),
    ],
    ids=["one tap, one run, reading zero", "two taps, only static"],
)
def test_small_surveys_are_sound(write_survey, taps, readings):
    survey = read_survey(write_survey(taps_csv=taps, readings_csv=readings))
    assert (survey.readings.to_numpy() == 0).all()


def test_ten_thousand_runs_keep_their_order(write_survey):
    rows = ["run,flow [L/s],temperature [degC],T1 [mm],T2 [mm],T3 [mm],T4 [kPa]"]
    rows += [f"r{n},{n / 1e4},18,{n},{n + 1},,{n / 10}" for n in range(10_000)]
    survey = read_survey(write_survey(readings_csv="\n".join(rows)))
    assert survey.runs["run"].tolist()[::3333] == ["r0", "r3333", "r6666", "r9999"]
    assert np.allclose(survey.readings["T1"], np.arange(10_000) / 1000)
    assert survey.readings["T3"].isna().all()


def test_spaces_quotes_blank_rows_and_notes_do_no_harm(write_survey):
    readings = (
        ' run , flow  [ L/s ],"temperature [degC]",T1 [mm],T2 [mm],T3 [mm],T4 [kPa],Notes,\n'
        ",,,,,,,,\n"
        '\n 01 , 0.25, 18 ,480,455,431, 1.4,"a, ""quoted""\nnote",\n'
    )
    survey = read_survey(write_survey(readings_csv=readings))
    assert survey.runs["run"].tolist() == ["01"]
    assert survey.readings.loc["01", "T1"] == 0.48
    assert "Notes" not in survey.units


def test_the_folder_of_results_is_passed_over(write_survey):
    folder = write_survey()
    (folder / "reduction").mkdir()
    (folder / "reduction" / "runs.csv").write_text("anything")
    assert len(read_survey(folder).runs) == 3
