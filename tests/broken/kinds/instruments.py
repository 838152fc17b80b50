"""Faults of flow methods, calibration tables and gauges."""

from __future__ import annotations

from tests.broken.kinds.case import R, T, cells

__all__ = ["CASES"]

_METHODS = (
    cells(
        "tank",
        "flow method",
        [
            ("an unknown method", T, '"volumetric tank"', '"bucket"', " flow.method"),
            ("no time", R, "25,100", "25,", " row 3, time [s]"),
            ("a time of nothing", R, "25,100", "25,0", " row 3, time [s]"),
            ("a negative time", R, "25,100", "25,-100", " row 3, time [s]"),
            ("a negative volume", R, "25,100", "-25,100", " row 3, volume [L]"),
            ("no column of times", R, "time [s]", "note", " row 1"),
            ("a mass for a volume", R, "volume [L]", "volume [kg]", " row 1, volume [kg]"),
            ("an uncertainty of another dimension", T, '"0.2 s"', '"0.2 L"', " flow.u_time"),
            ("a key of another method", T, 'u_time = "0.2 s"', 'notch_angle = "90 deg"', " flow.notch_angle"),
        ],
    )
    + cells(
        "plate",
        "flow method",
        [
            ("a throat wider than the pipe", T, '"14 mm"', '"40 mm"', " flow.throat_bore"),
            ("no throat", T, 'throat_bore = "14 mm"\n', "", " flow.throat_bore"),
            (
                "an unknown tapping",
                T,
                'throat_bore = "14 mm"',
                'throat_bore = "14 mm"\ntappings = "middle"',
                " flow.tappings",
            ),
            (
                "a deflection without its fluid",
                R,
                "differential [kPa]",
                "differential [mm]",
                " row 1, differential [mm]",
            ),
            ("a negative differential", R, "02,3.5", "02,-3.5", " row 3, differential [kPa]"),
            (
                "a negative coefficient",
                T,
                'throat_bore = "14 mm"',
                'throat_bore = "14 mm"\ndischarge_coefficient = -1',
                " flow.discharge_coefficient",
            ),
        ],
    )
    + cells(
        "notch",
        "flow method",
        [
            ("a notch of 200 degrees", T, '"90 deg"', '"200 deg"', " flow.notch_angle"),
            ("an empty head", R, "02,33", "02,", " row 3, weir head [mm]"),
        ],
    )
    + cells(
        "pitot",
        "flow method",
        [
            (
                "no outlet",
                T,
                '[[flow.outlet]]\nname = "north"\nbore = "20 mm"\ndischarge_coefficient = "0.9"\n',
                "",
                " flow.outlet",
            ),
            ("an outlet without a column", T, '"north"', '"south"', f"{R} row 1"),
            ("a coefficient above one", T, '"0.9"', '"9"', " flow.outlet[1].discharge_coefficient"),
        ],
    )
)

_TABLES_OF_CALIBRATION = (
    cells(
        "bench",
        "calibration table",
        [
            ("two points", "dial.csv", "20,19.9\n40,40.1\n", "", ""),
            (
                "one reading for all",
                "dial.csv",
                "0,0.1\n10,10.0\n20,19.9\n40,40.1",
                "9,9.1\n9,9.2\n9,9.3",
                "",
            ),
            ("an empty cell", "dial.csv", "20,19.9", "20,", " row 4, true [kPa]"),
            ("no column of true values", "dial.csv", "true [kPa]", "good [kPa]", " row 1"),
            ("lengths for pressures", "dial.csv", "true [kPa]", "true [mm]", " row 1, true [mm]"),
            ("a file in another folder", T, '"dial.csv"', '"../dial.csv"', " gauge.dial.calibration"),
            ("a file at the root", T, '"dial.csv"', '"/etc/passwd"', " gauge.dial.calibration"),
            (
                "a range that ends before it begins",
                T,
                '"-20 to 60 kPa"',
                '"60 to -20 kPa"',
                " gauge.dial.range",
            ),
            ("a reading beyond the range", R, "641,10.9", "641,109", " row 3, T4 [kPa]"),
            ("a word for a range", T, '"-20 to 60 kPa"', '"wide"', " gauge.dial.range"),
        ],
    )
    + cells(
        "meter",
        "calibration table",
        [
            ("a meter's flows that fall", "meter.csv", "20,0.4", "20,0.1", " row 4, flow [L/s]"),
            ("one point of a meter", "meter.csv", "10,0.2\n20,0.4\n30,0.6\n", "", ""),
            ("a meter's empty cell", "meter.csv", "20,0.4", "20,", " row 4, flow [L/s]"),
            (
                "another unit than the meter's table",
                R,
                "meter reading [1]",
                "meter reading [Hz]",
                "survey.toml flow.table",
            ),
        ],
    )
    + cells(
        "oil",
        "calibration table",
        [
            ("properties out of order", "oil.csv", "20,873", "5,873", " row 3, temperature [degC]"),
            ("a density of nothing", "oil.csv", "20,873", "20,0", " row 3, density [kg/m^3]"),
            ("a viscosity left out", "oil.csv", "873,38", "873,", " row 3, viscosity [mPa s]"),
            ("a run beyond the properties", R, "18.2", "48.2", " row 2, temperature [degC]"),
        ],
    )
)

_GAUGES = (
    cells(
        "bench",
        "gauge",
        [
            (
                "an inclination of nothing",
                T,
                'zero = "0.80 m"',
                'inclination = "0 deg"',
                " gauge.board.inclination",
            ),
            (
                "a steep inclination",
                T,
                'zero = "0.80 m"',
                'inclination = "120 deg"',
                " gauge.board.inclination",
            ),
            (
                "an accuracy without a scale",
                T,
                'range = "-20 to 60 kPa"',
                'accuracy_of_full_scale = "1 %"',
                " gauge.dial.accuracy_of_full_scale",
            ),
            (
                "an unknown fluid of the line",
                T,
                'range = "-20 to 60 kPa"',
                'line_fluid = "mercuri"',
                " gauge.dial.line_fluid",
            ),
            (
                "a boiling line",
                T,
                'range = "-20 to 60 kPa"',
                'line_temperature = "120 degC"',
                " gauge.dial.line_temperature",
            ),
            ("a negative uncertainty", T, '"0.05 kPa"', '"-0.05 kPa"', " gauge.dial.uncertainty"),
        ],
    )
    + cells(
        "u-tube",
        "gauge",
        [
            ("an unknown tap upstream", T, 'upstream = "T1"', 'upstream = "T7"', " gauge.m1.upstream"),
            ("one tap for both limbs", T, 'downstream = "T3"', 'downstream = "T1"', " gauge.m1.downstream"),
            (
                "taps the wrong way round",
                T,
                'upstream = "T1"\ndownstream = "T3"',
                'upstream = "T3"\ndownstream = "T1"',
                " gauge.m1.upstream",
            ),
            ("no gauge fluid", T, 'gauge_fluid = "mercury"\n', "", " gauge.m1.gauge_fluid"),
            ("a lighter gauge fluid", T, '"mercury"', '"air"', " gauge.m1.gauge_fluid"),
            ("an unknown gauge fluid", T, '"mercury"', '"treacle"', " gauge.m1.gauge_fluid"),
            (
                "an expansion without a density",
                T,
                'gauge_fluid = "mercury"',
                'gauge_fluid = "mercury"\ngauge_fluid_expansion = "0.001 1/K"',
                " gauge.m1.gauge_fluid_expansion",
            ),
            (
                "one bore of two",
                T,
                'gauge_fluid = "mercury"',
                'gauge_fluid = "mercury"\nleft_bore = "4 mm"',
                " gauge.m1.left_bore",
            ),
            ("one limb of two", R, "m1 [mm]", "m1 left [mm]", "survey.toml gauge.m1"),
        ],
    )
    + cells(
        "compound",
        "gauge",
        [
            ("no legs", T, "gauge.c1.leg", "gauge.c1.foot", " gauge.c1.foot"),
            ("an open chain", T, 'from = "b"', 'from = "c"', " gauge.c1.leg[3].from"),
            ("a leg without a fluid", T, 'fluid = "mercury"\n', "", " gauge.c1.leg[2].fluid"),
            (
                "a leg of an unknown fluid",
                T,
                'fluid = "mercury"',
                'fluid = "treacle"',
                " gauge.c1.leg[2].fluid",
            ),
            ("a level without a column", R, "c1 b [mm]", "note", "survey.toml gauge.c1"),
        ],
    )
    + cells(
        "air",
        "gauge",
        [
            ("no line pressure", T, 'line_pressure = "105 kPa abs"\n', "", " fluid.line_pressure"),
            ("a humidity above one", T, '"50 %"', '"500 %"', " fluid.relative_humidity"),
            ("a pressure below nothing", T, '"105 kPa abs"', '"-105 kPa abs"', " fluid.line_pressure"),
        ],
    )
)

#: Every fault of these kinds.
CASES = [*_METHODS, *_TABLES_OF_CALIBRATION, *_GAUGES]
