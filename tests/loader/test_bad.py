import pickle

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from gradeline.errors import SurveyError
from gradeline.loader import read_survey
from gradeline.loader.keyed import read_survey_sheet
from gradeline.loader.ledger import Ledger

T, P, R = "survey.toml", "taps.csv", "readings.csv"

# (what was done, the change, the whole message that has to be told)
ONE_CHANGE = [
    (
        "number with a letter",
        (R, "480,455", "480,45x5"),
        "readings.csv row 3, T2 [mm]: '45x5' is not a number; leave the cell empty if the tap was not read",
    ),
    (
        "decimal comma",
        (R, "480,455", '480,"45,5"'),
        "readings.csv row 3, T2 [mm]: '45,5' has a comma; write decimals with a point and no mark between thousands; "
        "leave the cell empty if the tap was not read",
    ),
    (
        "infinite reading",
        (R, "480,455", "480,inf"),
        "readings.csv row 3, T2 [mm]: 'inf' is not a finite number; leave the cell empty if the tap was not read",
    ),
    (
        "reading that is no number",
        (R, "480,455", "480,nan"),
        "readings.csv row 3, T2 [mm]: 'nan' is not a finite number; leave the cell empty if the tap was not read",
    ),
    (
        "huge reading",
        (R, "480,455", "480,1e999"),
        "readings.csv row 3, T2 [mm]: '1e999' is too large for a number; leave the cell empty if the tap was not read",
    ),
    (
        "negative flow",
        (R, "02,0.25", "02,-0.25"),
        "readings.csv row 3, flow [L/s]: -0.25 is negative; chainage increases downstream, so turn the line round",
    ),
    (
        "no flow",
        (R, "02,0.25", "02,"),
        "readings.csv row 3, flow [L/s]: the cell is empty; give the flow, 0 for a static run",
    ),
    (
        "hot water",
        (R, "18.2", "180"),
        "readings.csv row 3, temperature [degC]: 180 degC does not lie above 0 degC and up to 100 degC, where water is "
        "a liquid; mend the value or the unit",
    ),
    (
        "ice",
        (R, "18.2", "0"),
        "readings.csv row 3, temperature [degC]: 0 degC does not lie above 0 degC and up to 100 degC, where water is "
        "a liquid; mend the value or the unit",
    ),
    (
        "no temperature in a row",
        (R, "18.2", ""),
        "readings.csv row 3, temperature [degC]: the cell is empty; water has its density and viscosity from the "
        "temperature",
    ),
    (
        "no temperature column",
        (R, "temperature [degC]", "note 2"),
        "readings.csv row 1: the column 'temperature [degC]' is missing; water has its density and viscosity from it",
    ),
    (
        "no flow column",
        (R, "flow [L/s]", "note 2"),
        "readings.csv row 1: the column 'flow [L/s]' is missing; add it",
    ),
    (
        "no unit",
        (R, "T2 [mm]", "T2"),
        "readings.csv row 1, T2: a unit is missing; give a unit such as m, mm, cm, ft, in",
    ),
    (
        "wrong dimension",
        (R, "T2 [mm]", "T2 [kPa]"),
        "readings.csv row 1, T2 [kPa]: the unit 'kPa' is a pressure, not a length; give a unit such as m, mm, cm, ft, in",
    ),
    (
        "a length for a pressure",
        (R, "T4 [kPa]", "T4 [m]"),
        "readings.csv row 1, T4 [m]: the unit 'm' is a length, not a pressure; give a unit such as kPa, Pa, bar, psi, "
        "mH2O, mmHg",
    ),
    (
        "ambiguous unit",
        (R, "flow [L/s]", "flow [gal/min]"),
        "readings.csv row 1, flow [gal/min]: the unit 'gal/min' is ambiguous; say US_gal or imp_gal",
    ),
    (
        "unit of a text",
        (R, "run,", "run [-],"),
        "readings.csv row 1, run [-]: the column holds text; take away [-]",
    ),
    (
        "unknown tap",
        (R, "T3 [mm]", "T33 [mm]"),
        "readings.csv row 1, T33 [mm]: there is no tap 'T33' in taps.csv and no such column; did you mean 'T3'?",
    ),
    (
        "unknown column",
        (R, "note", "temprature [degC]"),
        "readings.csv row 1, temprature [degC]: there is no tap 'temprature' in taps.csv and no such column; "
        "did you mean 'temperature'?",
    ),
    (
        "a column twice",
        (R, "T3 [mm]", "T2 [mm]"),
        "readings.csv row 1, T2 [mm]: two columns are called 'T2'; keep one of them",
    ),
    (
        "too few cells",
        (R, "02,0.25,", "02,"),
        "readings.csv row 3: the row has 7 cells, the heading has 8; give every column a cell, empty where there is "
        "no value",
    ),
    (
        "all readings of a run empty",
        (R, "480,455,431,1.4", ",,,"),
        "readings.csv row 3, run: all readings of run '02' are empty; enter them or take the run away",
    ),
    ("no label of a run", (R, "02,0.25", ",0.25"), "readings.csv row 3, run: the run has no label; name it"),
    (
        "a tap that nothing reads",
        (P, "T4,5", "T5,4.9,0.3,board\nT4,5"),
        "taps.csv row 5, tap: the tap 'T5' has no column in readings.csv; add one headed 'T5 [unit]', or take the tap "
        "away",
    ),
    (
        "duplicate tap",
        (P, "T4,5", "T3,2.6,0.2,board\nT4,5"),
        "taps.csv row 5, tap: the tap 'T3' stands in row 4 already; give each tap its own label",
    ),
    (
        "chainages out of order",
        (P, "T2,1.5", "T2,2.9"),
        "taps.csv row 4, chainage [m]: 2500e-3 m does not come after 2.9 m of tap 'T2'; list the taps in order of "
        "chainage, each at its own",
    ),
    (
        "a tap outside every reach",
        (P, "T4,5", "T4,6.5"),
        "taps.csv row 5, chainage [m]: 6.5 m lies outside every reach (0 m to 6 m); mend the chainage or extend a reach",
    ),
    (
        "no chainage",
        (P, "T2,1.5", "T2,"),
        "taps.csv row 3, chainage [m]: the cell is empty; give the tap's chainage",
    ),
    (
        "unknown gauge",
        (P, "bourdon", "burdon"),
        "taps.csv row 5, gauge: unknown gauge 'burdon'; did you mean 'bourdon'?",
    ),
    (
        "no gauge",
        (P, "bourdon", ""),
        "taps.csv row 5, gauge: the cell is empty; say which gauge reads the tap (board, bourdon)",
    ),
    (
        "unknown column of taps",
        (P, "elevation", "elevtion"),
        "taps.csv row 1, elevtion [m]: unknown column 'elevtion'; did you mean 'elevation'?",
    ),
    (
        "a tap called as a column",
        (P, "T2,1.5", "flow,1.5"),
        "taps.csv row 3, tap: a tap cannot be called 'flow', which names another column; call it otherwise",
    ),
    (
        "unknown table",
        (T, "[uncertainty]", "[uncertainties]"),
        "survey.toml uncertainties: unknown table or key 'uncertainties'; did you mean 'uncertainty'?",
    ),
    (
        "unknown key",
        (T, 'zero = "0.80 m"', 'zeros = "0.80 m"'),
        "survey.toml gauge.board.zeros: unknown key 'zeros'; did you mean 'zero'?",
    ),
    (
        "unknown fluid",
        (T, 'name = "water"', 'name = "watter"'),
        "survey.toml fluid.name: unknown fluid 'watter' (did you mean 'water'?); known are water and air, any other fluid needs "
        "density and viscosity",
    ),
    (
        "water with a density",
        (T, 'name = "water"', 'name = "water"\ndensity = "998 kg/m^3"'),
        "survey.toml fluid.density: water has its properties from the temperature; leave the key out, or give the "
        "fluid another name",
    ),
    (
        "unknown kind of gauge",
        (T, 'kind = "piezometer"', 'kind = "piezometre"'),
        "survey.toml gauge.board.kind: unknown kind 'piezometre'; did you mean 'piezometer'?",
    ),
    (
        "unknown line fluid",
        (T, 'kind = "pressure gauge"', 'kind = "pressure gauge"\nline_fluid = "mercuri"'),
        "survey.toml gauge.bourdon.line_fluid: unknown 'mercuri'; did you mean 'mercury'?",
    ),
    (
        "missing key",
        (T, 'diameter = "26.64 mm +/- 0.03 mm"\n', ""),
        'survey.toml reach[1].diameter: the key is missing; add it, such as diameter = "26.64 mm +/- 0.03 mm"',
    ),
    (
        "number without a unit",
        (T, 'from = "3 m"', "from = 3"),
        "survey.toml reach[2].from: 3 has no unit; write it in quotes with its unit, such as '5.5 m'",
    ),
    (
        "bore of nothing",
        (T, "26.64 mm +/- 0.03 mm", "0 mm"),
        "survey.toml reach[1].diameter: '0 mm' must be above 0; write it as '26.64 mm +/- 0.03 mm'",
    ),
    (
        "a bore in the wrong unit",
        (T, "26.64 mm +/- 0.03 mm", "26.64 m"),
        "survey.toml reach[1].diameter: a bore of 26.64 m is above 20 m; is the unit right? Mend the value or the unit",
    ),
    (
        "a bore longer than its reach",
        (T, "26.64 mm +/- 0.03 mm", "3.5 m"),
        "survey.toml reach[1].diameter: a bore of 3.5 m is larger than the reach's length of 3 m; is the unit right? Mend "
        "the value or the unit",
    ),
    (
        "a bore of a hair",
        (T, "26.64 mm +/- 0.03 mm", "26.64 µm"),
        "survey.toml reach[1].diameter: a bore of 0.02664 mm is below 0.1 mm; is the unit right? Mend the value or the unit",
    ),
    (
        "a temperature in coulombs",
        (R, "temperature [degC]", "temperature [C]"),
        "readings.csv row 1, temperature [C]: the unit 'C' is of another dimension, not a temperature; did you mean 'degC'?",
    ),
    (
        "thousands apart",
        (R, "480,455", "1 870,455"),
        "readings.csv row 3, T1 [mm]: '1 870' has a gap; write no space between thousands, such as 1870; leave the cell "
        "empty if the tap was not read",
    ),
    (
        "gap between reaches",
        (T, 'from = "3 m"', 'from = "3.1 m"'),
        "survey.toml reach[2].from: the reach starts at 3.1 m, but 'upper' ends at 3 m; reaches follow each other "
        "without a gap or overlap",
    ),
    (
        "fitting outside every reach",
        (T, 'at = "4.5 m"', 'at = "7 m"'),
        "survey.toml fitting[1].at: 7 m lies outside every reach (0 m to 6 m); mend the chainage or extend a reach",
    ),
    (
        "change of bore where there is none",
        (T, 'at = "4.5 m"', 'at = "4.5 m"\nkind = "change of bore"'),
        "survey.toml fitting[1].at: the bore does not change at 4.5 m; it changes at 3 m",
    ),
    (
        "loss coefficient in words",
        (T, '"fit"', '"fitted"'),
        "survey.toml fitting[1].loss_coefficient: 'fitted' is neither \"fit\" nor a number; write one of them",
    ),
    (
        "absolute where relative is meant",
        (T, '"0.3 %"', '"0.3 L/s"'),
        "survey.toml uncertainty.flow_scale: '0.3 L/s' must be relative; write it in percent, such as '0.3 %'",
    ),
    (
        "latitude beyond the pole",
        (T, "53.4 deg", "95 deg"),
        "survey.toml site.latitude: '95 deg' is too large; write it as '53.4 deg'",
    ),
    (
        "infinite number in the TOML",
        (T, '"fit"', "inf"),
        "survey.toml fitting[1].loss_coefficient: 'inf' is not a finite number",
    ),
    (
        "huge number in the TOML",
        (T, '"3 m"\ndiameter', '"1e999 m"\ndiameter'),
        "survey.toml reach[1].to: '1e999' is too large for a number",
    ),
    (
        "wrong dimension in the TOML",
        (T, '"0.80 m"', '"0.80 kg"'),
        "survey.toml gauge.board.zero: the unit 'kg' is a mass, not a length; give a unit such as m, mm, cm, ft, in",
    ),
    (
        "hot connecting line",
        (T, 'kind = "pressure gauge"', 'kind = "pressure gauge"\nline_temperature = "120 degC"'),
        "survey.toml gauge.bourdon.line_temperature: its temperature is missing or does not lie above 0 degC and up to "
        "100 degC, where the density of water is known; mend the value or the unit",
    ),
    (
        "escape sequence in a name",
        (T, '"Hill main"', '"Hill \\u001b[31m main"'),
        "survey.toml survey.title: 'Hill \\x1b[31m main' has characters that are not printable; write it in one line",
    ),
    (
        "escape sequence in a cell",
        (R, "pump two", "pump \x1b[31m two"),
        "readings.csv row 4: the character U+001B is not printable; take it out of the file",
    ),
    (
        "label in two lines",
        (R, "02,0.25", '"0\n2",0.25'),
        "readings.csv row 3, run: '0\\n2' has more than one line; write it in one",
    ),
    (
        "syntax",
        (T, 'title = "Hill main"', 'title = "Hill main'),
        "survey.toml row 2: this is not TOML: Illegal character '\\n', at character 19; mend the line",
    ),
    (
        "syntax at the end",
        (T, 'temperature = "0.2 K"', "temperature = ["),
        "survey.toml row 43: this is not TOML: Invalid value; mend the line",
    ),
]


def problems_of(folder):
    with pytest.raises(SurveyError) as caught:
        read_survey(folder)
    return [str(problem) for problem in caught.value.problems]


# a column under another name leaves its own tap unread, which is told as well
SEVERAL = {"unknown tap", "a column twice", "a tap called as a column"}


@pytest.mark.parametrize(("name", "change", "told"), ONE_CHANGE, ids=[case[0] for case in ONE_CHANGE])
def test_one_fault_is_told_at_its_place(write_survey, name, change, told):
    problems = problems_of(write_survey(change))
    assert told in problems
    assert len(problems) == 1 or name in SEVERAL


@pytest.mark.parametrize(
    ("whole", "told"),
    [
        ({"taps_csv": None}, "taps.csv: the file is missing; add it to the folder"),
        (
            {"readings_csv": None},
            "readings.csv: the file is missing; add it to the folder (before there are readings: gradeline plan, gradeline sheet)",
        ),
        ({"survey_toml": None}, "survey.toml: the file is missing; add it to the folder"),
        (
            {"readings_csv": None, "readings_xlsx": b"PK\x03\x04..."},
            "readings.csv: the file is missing; readings.xlsx is there, but only csv is read: save the sheet as csv",
        ),
        (
            {"readings_csv": None, "readings_xlsx": b"run,flow"},
            "readings.csv: the file is missing; readings.xlsx is there, but it is no Excel workbook: save the table as "
            "csv",
        ),
        (
            {"readings_csv": b"PK\x03\x04" + bytes(range(256))},
            "readings.csv: the file is an Excel workbook or another zip archive, not text; save it as csv in UTF-8",
        ),
        (
            {"taps_csv": bytes(range(256)) * 4},
            "taps.csv: the file is binary, not text; save it as csv in UTF-8",
        ),
        (
            {"survey_toml": b"\x00\x01\x02" * 90},
            "survey.toml: the file is binary, not text; save it as plain text in UTF-8",
        ),
        (
            {"taps_csv": "tap,chainage [m]\nT\u00e91,1\n".encode("latin-1")},
            "taps.csv row 2: the byte 0xE9 is not UTF-8; save the file as UTF-8",
        ),
        ({"taps_csv": ""}, "taps.csv: the file is empty; give a heading and rows"),
        (
            {"taps_csv": "tap,chainage [m]\n"},
            "taps.csv: there are no rows below the heading; add one for each line of data",
        ),
        (
            {"taps_csv": 'tap,chainage [m]\nT1,"0.5\nT2,1\n'},
            "taps.csv row 2: the row cannot be read as csv (unexpected end of data); check its quotation marks",
        ),
        (
            {"survey_toml": "x = " + "[" * 5000},
            "survey.toml: the file nests lists or tables too deeply; write them flat",
        ),
        (
            {"survey_toml": "x = 5" + "0" * 5000},
            "survey.toml: this is not TOML: a number or date is out of range; mend the line",
        ),
        (
            {"survey_toml": "reach = 5"},
            "survey.toml reach: 5 stands here; begin each one with [[reach]], alone on its line (in a workbook: alone in "
            "column A of its own row)",
        ),
        (
            {"survey_toml": "[gauge]\nboard = 3"},
            "survey.toml gauge.board: 3 stands here; begin the gauge with [gauge.board]",
        ),
        (
            {"survey_toml": ""},
            "survey.toml reach: there is no [[reach]]; describe at least one length of pipe",
        ),
        ({"survey_toml": ""}, "survey.toml gauge: there is no [gauge.NAME]; describe at least one gauge"),
        (
            {"runs_csv": "run,flow [L/s]\n1,2\n"},
            "runs.csv: readings.csv has a column for each tap and holds the runs itself; take runs.csv away, or list the "
            "readings by 'run', 'tap' and 'reading'",
        ),
        (
            {"readings_csv": "run,tap,reading [mm]\n1,T1,3\n"},
            "runs.csv: the file is missing; add it to the folder",
        ),
    ],
)
def test_a_whole_file_at_fault_is_told(write_survey, whole, told):
    assert told in problems_of(write_survey(**whole))


def test_long_readings_at_fault_are_told(write_survey):
    readings = "run,tap,reading,unit\n1,T1,500,mm\n1,T2,500,kPa\n2,T3,5,mm\n1,T9,5,mm\n1,T4,x,kPa\n3,T1,,mm\n"
    runs = "run,flow [L/s],temperature [degC]\n1,0.1,18\n3,0.1,18\n"
    assert problems_of(write_survey(readings_csv=readings, runs_csv=runs)) == [
        "runs.csv row 3, run: all readings of run '3' are empty; enter them or take the run away",
        "readings.csv row 3, unit: the unit 'kPa' is a pressure, not a length; give a unit such as m, mm, cm, ft, in",
        "readings.csv row 4, run: there is no run '2' in runs.csv; known are 1, 3",
        "readings.csv row 5, tap: there is no tap 'T9' in taps.csv; known are T1, T2, T3, T4",
        "readings.csv row 6, reading: 'x' is not a number; leave the cell empty if the tap was not read",
    ]


def test_all_faults_are_told_at_once_in_order_of_place(write_survey):
    told = problems_of(
        write_survey(
            (R, "480,455", "4x,455"),
            (R, "NA,0.5", "NA,-0.5"),
            (P, "T4,5", "T4,7"),
            (P, "bourdon", "burdon"),
            (T, '"53.4 deg"', '"53.4"'),
            (T, '"26.64 mm +/- 0.03 mm"', '"26.64 kg"'),
            (T, '"0.4 %"', '"0.4 furlongs"'),
            (T, '"0.80 m"', "0.8"),
        )
    )
    assert [text.split(": ")[0] for text in told] == [
        "survey.toml site.latitude",
        "survey.toml reach[1].diameter",
        "survey.toml gauge.board.zero",
        "survey.toml uncertainty.flow",
        "taps.csv row 5, gauge",
        "readings.csv row 3, T1 [mm]",
        "readings.csv row 4, flow [L/s]",
    ]


def test_faults_of_one_row_stand_in_the_order_of_its_columns(write_survey):
    told = problems_of(write_survey((R, "02,0.25,18.2,480,455", "02,-0.25,182,x,y")))
    assert [text.split(": ")[0] for text in told] == [
        f"readings.csv row 3, {heading}"
        for heading in ("flow [L/s]", "temperature [degC]", "T1 [mm]", "T2 [mm]")
    ]


def test_a_line_of_mercury_needs_a_temperature(write_survey):
    fluid = 'name = "gear oil"\ndensity = "868 kg/m^3"\nviscosity = "31 mPa s"'
    told = problems_of(
        write_survey(
            (T, 'name = "water"', fluid),
            (T, 'kind = "pressure gauge"', 'kind = "pressure gauge"\nline_fluid = "mercury"'),
            (R, "18.2", ""),
        )
    )
    assert told == [
        "survey.toml gauge.bourdon.line_temperature: a run's temperature, as the line states none, is missing or does "
        "not lie above -20 degC and up to 100 degC, where the density of mercury is known; add line_temperature"
    ]


def test_many_unknown_runs_or_taps_are_one_line(write_survey):
    sound = "run,tap,reading [mm]\n1,T1,5\n1,T2,5\n1,T3,5\n1,T4,5\n"
    piezometers = (T, 'kind = "pressure gauge"', 'kind = "piezometer"')
    runs = "run,flow [L/s],temperature [degC]\n1,0.1,18\n"

    def told(rows):
        return problems_of(write_survey(piezometers, readings_csv=sound + rows, runs_csv=runs))

    assert told("".join(f"x{n},T1,5\n" for n in range(40))) == [
        "readings.csv row 6, run: there are 40 runs that are not in runs.csv: 'x0', 'x1', 'x2' and 37 more, in rows 6 "
        "to 45; known are 1"
    ]
    assert told("".join(f"1,U{n},5\n" for n in range(5))) == [
        "readings.csv row 6, tap: there are 5 taps that are not in taps.csv: 'U0', 'U1', 'U2' and 2 more, in rows 6 to "
        "10; known are T1, T2, T3, T4"
    ]
    assert told("2,T1,5\n1,T1,5\n2,T2,5\n2,T3,5\n") == [
        "readings.csv row 6, run: there is no run '2' in runs.csv (nor for rows 8, 9); known are 1"
    ]


def test_many_taps_outside_every_reach_are_one_line(write_survey):
    in_mm = "tap,chainage [m],gauge\n" + "".join(f"T{n},{n}500,board\n" for n in range(1, 5))
    readings = "run,flow [L/s],temperature [degC],T1 [mm],T2 [mm],T3 [mm],T4 [mm]\n1,0.1,18,5,5,5,5\n"
    assert problems_of(write_survey(taps_csv=in_mm, readings_csv=readings)) == [
        "taps.csv row 2, chainage [m]: 1500 m lies outside every reach (0 m to 6 m), and so do 3 more taps (rows 3 to 5); "
        "mend the chainages or their unit or extend a reach"
    ]


def test_unsorted_chainages_are_one_line(write_survey):
    taps = "tap,chainage [m],gauge\nT1,5,board\nT2,4,board\nT3,3,board\nT4,2,board\n"
    readings = "run,flow [L/s],temperature [degC],T1 [mm],T2 [mm],T3 [mm],T4 [mm]\n1,0.1,18,5,5,5,5\n"
    assert problems_of(write_survey(taps_csv=taps, readings_csv=readings)) == [
        "taps.csv row 3, chainage [m]: 4 m does not come after 5 m of tap 'T1', and 2 more not after the tap above (rows "
        "4, 5); list the taps in order of chainage, each at its own"
    ]


def test_many_empty_runs_are_one_line(write_survey):
    head = "run,flow [L/s],temperature [degC],T1 [mm],T2 [mm],T3 [mm],T4 [kPa]\n"
    empty = [f"r{n},0.1,18,,,,\n" for n in range(12)]
    full = "s,0.1,18,5,5,5,5\n"
    assert problems_of(write_survey(readings_csv=head + full + "".join(empty))) == [
        "readings.csv row 3, run: all readings are empty of the 12 runs 'r0', 'r1', 'r2', 'r3', 'r4', 'r5', 'r6', 'r7', "
        "'r8', 'r9' and 2 more in rows 13, 14; enter them or take the runs away"
    ]
    assert len(problems_of(write_survey(readings_csv=head + full + "".join(empty[:10])))) == 10


def test_units_in_round_brackets_are_told_once(write_survey):
    assert problems_of(write_survey((R, "T3 [mm]", "T3 (mm)"), (R, "flow [L/s]", "flow(L/s)"))) == [
        "readings.csv row 1, flow(L/s): units stand in square brackets; write 'flow [L/s]'",
        "readings.csv row 1, T3 (mm): units stand in square brackets; write 'T3 [mm]'",
    ]
    assert problems_of(write_survey((R, "temperature [degC]", "temperature (degC)"))) == [
        "readings.csv row 1, temperature (degC): units stand in square brackets; write 'temperature [degC]'"
    ]
    assert problems_of(write_survey((P, "chainage [m]", "chainage (m)"))) == [
        "taps.csv row 1, chainage (m): units stand in square brackets; write 'chainage [m]'"
    ]
    rounded = "run,flow [L/s],temperature [degC],T1 (mm),T2 (mm),T3 (mm),T4 (kPa)\n1,0.1,18,5,5,5,5\n"
    assert problems_of(write_survey(readings_csv=rounded)) == [
        "readings.csv row 1, T1 (mm): units stand in square brackets; write 'T1 [mm]', and so on for 3 more taps"
    ]
    listed = "run,tap,reading (mm)\n1,T1,5\n"
    runs = "run,flow [L/s],temperature [degC]\n1,0.1,18\n"
    assert problems_of(write_survey(readings_csv=listed, runs_csv=runs)) == [
        "readings.csv row 1, reading (mm): units stand in square brackets; write 'reading [mm]'"
    ]


def test_two_columns_of_readings_are_told_the_rule(write_survey):
    listed = "run,tap,reading [bar],reading [psi]\n1,T1,,5\n1,T4,2,\n"
    runs = "run,flow [L/s],temperature [degC]\n1,0.1,18\n"
    assert problems_of(write_survey(readings_csv=listed, runs_csv=runs)) == [
        "readings.csv row 1, reading [psi]: two columns are called 'reading'; readings listed one a row have one column "
        "'reading [unit]', or a column 'reading' beside a column 'unit'"
    ]


GEAR_OIL = 'name = "gear oil"\ndensity = "868 kg/m^3"\nviscosity = "31 mPa s"'


def test_a_temperature_that_changes_nothing_is_refused(write_survey):
    told = problems_of(
        write_survey(
            (T, 'name = "water"', GEAR_OIL),
            (T, 'zero = "0.80 m"', 'column_temperature = "20 degC"'),
            (T, 'kind = "pressure gauge"', 'kind = "pressure gauge"\nline_temperature = "20 degC"'),
        )
    )
    rule = (
        "the key has no effect, as [fluid] gives one density of gear oil for all temperatures; take it away"
    )
    assert told == [
        f"survey.toml gauge.board.column_temperature: {rule}",
        f"survey.toml gauge.bourdon.line_temperature: {rule}",
    ]


def test_row_numbers_are_those_of_an_editor(write_survey):
    readings = (
        "run,flow [L/s],temperature [degC],T1 [mm],T2 [mm],T3 [mm],T4 [kPa],note\n"
        '1,0.2,18,480,455,431,1.4,"two\nlines"\n'
        "\n"
        "2,0.2,18,48O,455,431,1.4,\n"
    )
    (told,) = problems_of(write_survey(readings_csv=readings))
    assert told.startswith("readings.csv row 5, T1 [mm]: '48O' is not a number")


def test_no_folder_and_a_file_are_told(tmp_path, write_survey):
    missing = tmp_path / "nowhere"
    assert problems_of(missing) == [
        f"{missing}: there is no such folder; give the folder that holds survey.toml"
    ]
    file = write_survey() / "survey.toml"
    assert problems_of(file) == [
        f"{file}: this is a file, not a folder; give the folder that holds survey.toml"
    ]


def test_a_survey_error_travels_between_processes(write_survey):
    with pytest.raises(SurveyError) as caught:
        read_survey(write_survey((P, "bourdon", "burdon")))
    again = pickle.loads(pickle.dumps(caught.value))
    assert again.problems == caught.value.problems


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    st.sampled_from([T, P, R]),
    st.integers(0, 2000),
    st.one_of(
        st.binary(min_size=1, max_size=6), st.sampled_from([b'"', b",", b"\n", b"[", b"]", b"-", b"\x00"])
    ),
)
def test_a_damaged_file_is_read_or_told(write_survey, name, place, damage):
    folder = write_survey()
    content = (folder / name).read_bytes()
    place %= len(content)
    (folder / name).write_bytes(content[:place] + damage + content[place + 1 :])
    try:
        read_survey(folder)
    except SurveyError as error:
        assert all(problem.message for problem in error.problems)  # noqa: PT017 (either outcome is right)


def test_a_key_behind_a_header_in_a_workbook_is_told_where_the_header_stands(tmp_path):
    ledger = Ledger(tmp_path)
    assert read_survey_sheet(ledger, "sheet survey", [["[[reach]].diameter", "26.6 mm"]]) is None
    assert [str(problem) for problem in ledger.problems] == [
        "sheet survey row 1: '[[reach]].diameter' is no key; a header such as [[reach]] stands alone in column A of its own "
        "row, its keys in the rows below"
    ]
