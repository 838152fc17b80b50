"""Faults of the tables: units, names, labels, cells."""

from __future__ import annotations

from tests.broken.kinds.case import Broken, P, R, T, U, added, cells, swap, whole

__all__ = ["CASES"]

_UNITS = cells(
    "bench",
    "unit",
    [
        ("no unit of a tap's column", R, "T2 [mm]", "T2", " row 1, T2"),
        ("no unit of the flow", R, "flow [L/s]", "flow", " row 1, flow"),
        ("no unit of the temperature", R, "temperature [degC]", "temperature", " row 1, temperature"),
        ("no unit of the chainage", P, "chainage [m]", "chainage", " row 1, chainage"),
        ("no unit of the elevation", P, "elevation [m]", "elevation", " row 1, elevation"),
        ("no unit of a bore", T, '"26.64 mm +/- 0.03 mm"', '"26.64"', " reach[1].diameter"),
        ("no unit of an uncertainty", T, '"1 mm"', '"1"', " uncertainty.chainage"),
        ("no unit of a calibration", "dial.csv", "reading [kPa]", "reading", " row 1, reading"),
        ("empty brackets", R, "T2 [mm]", "T2 []", " row 1, T2 []"),
        ("ambiguous gallons", R, "flow [L/s]", "flow [gal/min]", " row 1, flow [gal/min]"),
        (
            "gallons in the description",
            T,
            "[uncertainty]",
            '[uncertainty]\nelevation = "1 gal"',
            " uncertainty.elevation",
        ),
        ("a pressure for a length", R, "T2 [mm]", "T2 [kPa]", " row 1, T2 [kPa]"),
        ("a length for a pressure", R, "T4 [kPa]", "T4 [m]", " row 1, T4 [m]"),
        ("a length for a flow", R, "flow [L/s]", "flow [m]", " row 1, flow [m]"),
        ("a velocity for a flow", R, "flow [L/s]", "flow [m/s]", " row 1, flow [m/s]"),
        ("coulombs for degrees", R, "temperature [degC]", "temperature [C]", " row 1, temperature [C]"),
        ("an unknown unit", R, "T2 [mm]", "T2 [furlongz]", " row 1, T2 [furlongz]"),
        ("a mass for a chainage", P, "chainage [m]", "chainage [kg]", " row 1, chainage [kg]"),
        ("a mass for a zero", T, '"0.80 m"', '"0.80 kg"', " gauge.board.zero"),
        ("an area for a bore", T, '"26.64 mm +/- 0.03 mm"', '"26.64 mm^2"', " reach[1].diameter"),
        ("an absolute size where parts are meant", T, '"0.3 %"', '"0.3 L/s"', " uncertainty.flow_scale"),
        ("parts where a size is meant", T, 'chainage = "1 mm"', 'chainage = "1 %"', " uncertainty.chainage"),
        ("round brackets", R, "T3 [mm]", "T3 (mm)", " row 1, T3 (mm)"),
        ("a unit of a label", R, "run,", "run [-],", " row 1, run [-]"),
        (
            "two values of an uncertainty",
            T,
            "26.64 mm +/- 0.03 mm",
            "26.64 mm +/- 0.03 K",
            " reach[1].diameter",
        ),
        ("a power of a power", T, '"0.80 m"', '"0.80 m**m"', " gauge.board.zero"),
        ("a unit as a program", T, '"0.80 m"', "\"0.80 __import__('os')\"", " gauge.board.zero"),
    ],
) + cells(
    "listed",
    "unit",
    [
        ("a row of another dimension", R, "02,T2,655,mm", "02,T2,655,kPa", " row 7, unit"),
        ("a row without a unit", R, "02,T2,655,mm", "02,T2,655,", " row 7, unit"),
        ("two places of a unit", R, "reading,unit", "reading [mm],unit", " row 1, reading [mm]"),
    ],
)

_NAMES = [
    *cells(
        "bench",
        "name twice",
        [
            ("a tap twice", P, "T3,2500e-3", "T2,2500e-3", " row 4, tap"),
            ("a column twice", R, "T3 [mm]", "T2 [mm]", " row 1, T2 [mm]"),
            ("the flow twice", R, "note", "flow [L/s]", " row 1, flow [L/s]"),
            ("the chainage twice", P, "elevation [m]", "chainage [m]", " row 1, chainage [m]"),
            ("a reach twice", T, '"lower"', '"upper"', " reach[2].name"),
            ("a static and a flowing run of one name", R, "02,0.25", "01,0.25", " row 3, flow [L/s]"),
        ],
    ),
    Broken(
        "name twice",
        "a fitting twice",
        "bench",
        added('\n[[fitting]]\nname = "valve"\nat = "1 m"\nloss_coefficient = "0.2"\n'),
        f"{T} fitting[2].name",
    ),
    Broken("name twice", "two tables of readings", "parquet", whole(R, "run\n1\n"), "readings.parquet"),
    Broken("name twice", "a run twice", "listed", swap(U, "03,0.5", "02,0"), f"{U} row 4, flow [L/s]"),
    Broken(
        "name twice",
        "an outlet twice",
        "pitot",
        added('[[flow.outlet]]\nname = "north"\nbore = "20 mm"\ndischarge_coefficient = "0.9"\n'),
        f"{T} flow.outlet[2].name",
    ),
    Broken(
        "name twice",
        "an off-take twice",
        "branch",
        added('\n[[offtake]]\nname = "lane"\nat = "3 m"\n'),
        f"{T} offtake[2].name",
    ),
]

_LABELS = cells(
    "bench",
    "unknown tap, run or gauge",
    [
        ("readings of an unknown tap", R, "T3 [mm]", "T33 [mm]", " row 1, T33 [mm]"),
        ("a tap that nothing reads", P, "T4,5", "T5,4.9,0.3,board\nT4,5", " row 5, tap"),
        ("an unknown gauge", P, "dial", "dail", " row 5, gauge"),
        ("no gauge", P, "0.3,dial", "0.3,", " row 5, gauge"),
        ("a tap called as a column", P, "T2,1.5", "flow,1.5", " row 3, tap"),
        ("an unknown column", R, "note", "remark", " row 1, remark"),
        ("an unknown column of taps", P, "elevation", "elevtion", " row 1, elevtion [m]"),
        ("a tap without a name", P, "T2,1.5", ",1.5", " row 3, tap"),
        ("a run without a name", R, "02,0.25", ",0.25", " row 3, run"),
        ("a run still to be named", R, "02,0.25", "?,0.25", " row 3, run"),
        ("a run's name in two lines", R, "02,0.25", '"0\n2",0.25', " row 3, run"),
    ],
) + cells(
    "listed",
    "unknown tap, run or gauge",
    [
        ("a row of an unknown tap", R, "02,T2", "02,T9", " row 7, tap"),
        ("a row of an unknown run", R, "02,T2", "09,T2", " row 7, run"),
        ("a row without a tap", R, "02,T2", "02,", " row 7, tap"),
    ],
)

_CELLS = cells(
    "bench",
    "cell that is no number",
    [
        ("nan", R, "670,655", "670,nan", " row 3, T2 [mm]"),
        ("inf", R, "670,655", "670,inf", " row 3, T2 [mm]"),
        ("minus infinity", R, "670,655", "670,-Infinity", " row 3, T2 [mm]"),
        ("a letter", R, "670,655", "670,65x5", " row 3, T2 [mm]"),
        ("a letter for a nought", R, "700,700", "70O,700", " row 2, T1 [mm]"),
        ("a word", R, "670,655", "670,off", " row 3, T2 [mm]"),
        ("a dash", R, "670,655", "670,-", " row 3, T2 [mm]"),
        ("two points", R, "670,655", "670,6.5.5", " row 3, T2 [mm]"),
        ("a decimal comma", R, "670,655", '670,"65,5"', " row 3, T2 [mm]"),
        ("a gap between thousands", R, "670,655", "670,1 655", " row 3, T2 [mm]"),
        ("a unit in the cell", R, "670,655", "670,655 mm", " row 3, T2 [mm]"),
        ("a formula", R, "670,655", "670,=A1+1", " row 3, T2 [mm]"),
        ("hexadecimal", R, "670,655", "670,0x28F", " row 3, T2 [mm]"),
        ("an underscore", R, "670,655", "670,6_55", " row 3, T2 [mm]"),
        ("figures of another script", R, "670,655", "670,٦٥٥", " row 3, T2 [mm]"),
        ("a value still to be filled in", R, "670,655", "670,?", " row 3, T2 [mm]"),
        ("a word for a chainage", P, "T2,1.5", "T2,near", " row 3, chainage [m]"),
        ("no chainage", P, "T2,1.5", "T2,", " row 3, chainage [m]"),
        ("nan for a chainage", P, "T2,1.5", "T2,nan", " row 3, chainage [m]"),
        ("a word for a flow", R, "02,0.25", "02,slow", " row 3, flow [L/s]"),
        ("nan for a flow", R, "02,0.25", "02,nan", " row 3, flow [L/s]"),
        ("a word for a temperature", R, "0.25,18.2", "0.25,mild", " row 3, temperature [degC]"),
        ("an infinite temperature", R, "0.25,18.2", "0.25,inf", " row 3, temperature [degC]"),
        ("an infinite calibration", "dial.csv", "10,10.0", "10,inf", " row 3, true [kPa]"),
    ],
)

_HUGE = cells(
    "bench",
    "huge number",
    [
        ("a reading beyond any number", R, "670,655", "670,1e999", " row 3, T2 [mm]"),
        ("a reading of 1e200", R, "670,655", "670,1e200", " row 3, T2 [mm]"),
        ("a reading of 1e30", R, "670,655", "670,1e30", " row 3, T2 [mm]"),
        ("a flow of 1e90", R, "02,0.25", "02,1e90", " row 3, flow [L/s]"),
        ("a flow of 1e12", R, "02,0.25", "02,1e12", " row 3, flow [L/s]"),
        ("a chainage of 1e90", P, "T4,5,", "T4,1e90,", " row 5, chainage [m]"),
        ("an elevation of 1e90", P, "T4,5,0.3", "T4,5,1e90", " row 5, elevation [m]"),
        ("an end of 1e999", T, 'to = "6 m"', 'to = "1e999 m"', " reach[2].to"),
        ("a zero of 1e300", T, '"0.80 m"', '"1e300 m"', " gauge.board.zero"),
        ("an uncertainty of 1e300", T, "0.03 mm", "1e300 mm", " reach[1].diameter"),
        ("an exponent of a thousand figures", R, "670,655", "670,1e" + "9" * 1000, " row 3, T2 [mm]"),
        ("a number of ten thousand figures", R, "670,655", "670," + "7" * 10_000, " row 3, T2 [mm]"),
        ("a unit to the power of a million", T, '"0.80 m"', '"0.80 m^1000000"', " gauge.board.zero"),
        ("a calibration of 1e90", "dial.csv", "40,40.1", "40,1e90", " row 5, true [kPa]"),
    ],
)

_FLOWS = cells(
    "bench",
    "flow or temperature that cannot be",
    [
        ("a negative flow", R, "02,0.25", "02,-0.25", " row 3, flow [L/s]"),
        ("no flow", R, "02,0.25", "02,", " row 3, flow [L/s]"),
        ("no column of flows", R, "flow [L/s]", "note 2", " row 1"),
        ("no column of temperatures", R, "temperature [degC]", "note 2", " row 1"),
        ("no column of runs", R, "run,", "note 3,", " row 1"),
        ("no column of chainages", P, "chainage [m]", "note", " row 1"),
        ("boiling water", R, "18.2", "180", " row 3, temperature [degC]"),
        ("ice", R, "18.2", "-3", " row 3, temperature [degC]"),
        ("no temperature", R, "18.2", "", " row 3, temperature [degC]"),
        ("below absolute zero", R, "18.2", "-300", " row 3, temperature [degC]"),
        ("a run without readings", R, "670,655,641,10.9", ",,,", " row 3, run"),
    ],
) + cells(
    "branch",
    "flow or temperature that cannot be",
    [
        ("an off-take that takes it all", R, "0.25,0.05", "0.25,0.25", " row 3, lane [L/s]"),
        ("an off-take that takes more", R, "0.25,0.05", "0.25,0.5", " row 3, lane [L/s]"),
        ("a negative off-take", R, "0.25,0.05", "0.25,-0.05", " row 3, lane [L/s]"),
        ("an empty off-take", R, "0.25,0.05", "0.25,", " row 3, lane [L/s]"),
        ("an off-take without a column", R, "lane [L/s]", "note", " row 1"),
    ],
)

#: Every fault of these kinds.
CASES = [*_UNITS, *_NAMES, *_LABELS, *_CELLS, *_HUGE, *_FLOWS]
