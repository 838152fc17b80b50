"""Every slip with a gauge is told at its place, with the rule and the remedy."""

from __future__ import annotations

import numpy as np
import pytest

import gradeline
from gradeline.errors import SurveyError
from gradeline.reduction.gauge_ranges import gauge_ranges
from tests.gauges.conftest import NAMES, RHO, heads
from tests.gauges.test_reduction import ENDS, FALL, LEGS, MERCURY, UTUBE
from tests.published.example import write_example

DEFLECTION = 1000 * FALL * RHO / (MERCURY - RHO)
COLUMN = {"m1 [mm]": DEFLECTION}
LIMBS = {"m1 left [mm]": 300 - DEFLECTION / 2, "m1 right [mm]": 300 + DEFLECTION / 2}
LEVELS = {"c1 a [mm]": -DEFLECTION / 2 - 900, "c1 b [mm]": DEFLECTION / 2 - 900}


def problems_of(folder) -> list[str]:
    with pytest.raises(SurveyError) as caught:
        gradeline.read_survey(folder)
    return [str(problem) for problem in caught.value.problems]


ONE_CHANGE = [
    (
        "a lighter fluid below",
        (UTUBE.replace("mercury", "air"), COLUMN, ENDS),
        "survey.toml gauge.m1.gauge_fluid: 'air' (1.2 kg/m³) is not heavier than the fluid in the lines (998.2 kg/m³), as "
        "in kind 'u-tube'; mend the fluid, or is it kind = 'inverted u-tube'?",
    ),
    (
        "a heavier fluid above",
        (UTUBE.replace('"u-tube"', '"inverted u-tube"'), COLUMN, ENDS),
        "survey.toml gauge.m1.gauge_fluid: 'mercury' (13546 kg/m³) is not lighter than the fluid in the lines (998.2 "
        "kg/m³), as in kind 'inverted u-tube'; mend the fluid, or is it kind = 'u-tube'?",
    ),
    (
        "a fluid that nobody knows",
        (UTUBE.replace("mercury", "brine"), COLUMN, ENDS),
        "survey.toml gauge.m1.gauge_fluid: no density is known for 'brine'; add gauge_fluid_density, or choose from air, "
        "mercury, water",
    ),
    (
        "an expansion without a density",
        (UTUBE + 'gauge_fluid_expansion = "0.001 1/K"\n', COLUMN, ENDS),
        "survey.toml gauge.m1.gauge_fluid_expansion: the key needs gauge_fluid_density beside it; add gauge_fluid_density",
    ),
    (
        "bores without a surface tension",
        (UTUBE + 'left_bore = "4 mm"\nright_bore = "5 mm"\n', COLUMN, ENDS),
        "survey.toml gauge.m1.left_bore: the key needs surface_tension beside it; add surface_tension",
    ),
    (
        "mercury that is frozen",
        (UTUBE + 'gauge_temperature = "-60 degC"\n', COLUMN, ENDS),
        "survey.toml gauge.m1.gauge_temperature: its temperature is missing or does not lie above -20 degC and up to 100 "
        "degC, where the density of mercury is known; mend the value or the unit",
    ),
    (
        "a tap that is not there",
        (UTUBE.replace('"T6"', '"T7"'), COLUMN, ENDS),
        "survey.toml gauge.m1.downstream: there is no tap 'T7' in taps.csv; known are T1, T6",
    ),
    (
        "taps the wrong way round",
        (UTUBE.replace('"T6"', '"X"').replace('"T1"', '"T6"').replace('"X"', '"T1"'), COLUMN, ENDS),
        "survey.toml gauge.m1.upstream: the tap 'T6' lies downstream of 'T1'; exchange the two (the left limb is the one "
        "joined to the upstream tap)",
    ),
    (
        "one tap for both ends",
        (UTUBE.replace('"T6"', '"T1"'), COLUMN, {"T1": ("", 0.0)}),
        "survey.toml gauge.m1.downstream: the tap 'T1' stands for both ends; name the other tap",
    ),
    (
        "a limb beyond the board",
        (UTUBE + 'range = "0 to 0.33 m"\n', LIMBS, ENDS),
        f"readings.csv row 7, m1 right [mm]: {float(LIMBS['m1 right [mm]'][5])!r} mm lies beyond the scale of gauge "
        "'m1', 0 to 0.33 m; mend the reading or the gauge's range",
    ),
    (
        "no column",
        (UTUBE, {}, ENDS),
        "survey.toml gauge.m1: readings.csv has no readings of the gauge; add the column 'm1 [mm]', or 'm1 left [mm]' and "
        "'m1 right [mm]'",
    ),
    (
        "one limb alone",
        (UTUBE, {"m1 left [mm]": LIMBS["m1 left [mm]"]}, ENDS),
        "survey.toml gauge.m1: readings.csv has no readings of the gauge; add the column 'm1 right [mm]'",
    ),
    (
        "a deflection beside its limbs",
        (UTUBE, COLUMN | LIMBS, ENDS),
        "survey.toml gauge.m1: readings.csv has the columns 'm1' and 'm1 right'; keep the deflection or the limbs",
    ),
    (
        "a well whose both limbs are read",
        (UTUBE + 'area_ratio = "0.02"\n', LIMBS, ENDS),
        "survey.toml gauge.m1.area_ratio: both limbs are read, so that the fall of a well is read as well; take the key away",
    ),
    (
        "a tap that names a differential gauge",
        (UTUBE, COLUMN, {"T1": ("m1", 0.0), "T6": ("", 0.0)}),
        "taps.csv row 2, gauge: the gauge 'm1' reads a difference between two taps, which it names itself as upstream and "
        "downstream; leave the cell empty",
    ),
    (
        "a tap that no gauge reads",
        (UTUBE, COLUMN, {"T1": ("", 0.0), "T3": ("", 0.0), "T6": ("", 0.0)}),
        "taps.csv row 3, tap: no gauge reads the tap 'T3'; take it away, or add its gauge",
    ),
    (
        "a column of a tap without a gauge",
        (UTUBE, COLUMN | {"T1 [mm]": DEFLECTION}, ENDS),
        "readings.csv row 1, T1 [mm]: the tap 'T1' has no gauge in taps.csv, where only differential gauges read it; name its "
        "gauge there, or take the column away",
    ),
    (
        "a gauge and a tap of one name",
        (UTUBE.replace("gauge.m1", "gauge.T1"), {"T1 [mm]": DEFLECTION}, ENDS),
        "survey.toml gauge.T1.kind: a tap is called 'T1' as well, and both name a column of readings; rename the gauge",
    ),
    (
        "a chain that does not close",
        (LEGS.replace('from = "b"', 'from = "a"'), LEVELS, ENDS),
        "survey.toml gauge.c1.leg[3].from: the chain does not close: this leg begins at 'a', but the one before ends at 'b'; "
        "begin it there",
    ),
    (
        "a chain that ends beside its tap",
        (LEGS.replace('to = "T6"', 'to = "1.2 m"'), LEVELS, ENDS),
        "survey.toml gauge.c1.leg[3].to: the chain does not close: it ends at 1.2 m, not at the tap 'T6' (0 m); write to = "
        "'T6'",
    ),
    (
        "a leg of an unknown fluid",
        (LEGS.replace('"mercury"', '"brine"'), LEVELS, ENDS),
        "survey.toml gauge.c1.leg[2].fluid: no density is known for 'brine'; add density, or choose from air, mercury, water",
    ),
    (
        "a level that is not read",
        (LEGS, {"c1 a [mm]": LEVELS["c1 a [mm]"]}, ENDS),
        "survey.toml gauge.c1: readings.csv has no readings of the gauge; add the column 'c1 b [mm]'",
    ),
    (
        "a chain without legs",
        (LEGS.split("[[")[0], {}, ENDS),
        "survey.toml gauge.c1: the gauge has no legs; describe each one with [[gauge.c1.leg]]",
    ),
    (
        "a file outside the folder",
        (UTUBE + 'calibration = "../dial.csv"\n', COLUMN, ENDS),
        "survey.toml gauge.m1.calibration: '../dial.csv' is not the name of a csv file in the survey's folder; write such as "
        "'dial.csv'",
    ),
    (
        "a calibration that is not there",
        (UTUBE + 'calibration = "dial.csv"\n', COLUMN, ENDS),
        "dial.csv: the file is missing; add it to the folder",
    ),
    (
        "a range that runs down",
        (UTUBE + 'range = "1 m to 0 m"\n', COLUMN, ENDS),
        "survey.toml gauge.m1.range: '1 m to 0 m' ends below its beginning; write it as '0 to 1.2 m'",
    ),
]


@pytest.mark.parametrize(
    ("survey", "told"), [case[1:] for case in ONE_CHANGE], ids=[case[0] for case in ONE_CHANGE]
)
def test_one_fault_is_told_at_its_place(bench, survey, told):
    assert problems_of(bench(*survey)) == [told]


def test_metres_on_a_pressure_gauge(bench):
    gauge = '[gauge.dial]\nkind = "pressure gauge"\n'
    columns = {f"{name} [m]": heads()[:, t] for t, name in enumerate(NAMES)}
    (told, *_) = problems_of(bench(gauge, columns, dict.fromkeys(NAMES, ("dial", 0.0))))
    assert told.startswith("readings.csv row 1, T1 [m]: the unit 'm' is a length, not a pressure")
    assert "mH2O" in told


@pytest.mark.parametrize(
    ("table", "told"),
    [
        (
            "reading [mm],true [mm]\n0,0\n10,10\n",
            "dial.csv: a straight line with its uncertainty takes 3 points or more at "
            "different readings; add points",
        ),
        (
            "reading [kPa],true [mm]\n0,0\n10,10\n5,5\n",
            "dial.csv row 1, reading [kPa]: the unit 'kPa' is a pressure, not a "
            "length; give a unit such as m, mm, cm, ft, in",
        ),
        (
            "reading [mm],true [mm]\n0,0\n10,\n5,5\n",
            "dial.csv row 3, true [mm]: the cell is empty; give the value or take the row away",
        ),
    ],
)
def test_a_calibration_at_fault(bench, table, told):
    folder = bench(UTUBE + 'calibration = "dial.csv"\n', COLUMN, ENDS, dial__csv=table)
    assert problems_of(folder) == [told]


def test_a_link_out_of_the_folder_is_refused(bench, tmp_path):
    (tmp_path / "elsewhere.csv").write_text("reading [mm],true [mm]\n0,0\n10,10\n5,5\n", encoding="utf-8")
    folder = bench(UTUBE + 'calibration = "dial.csv"\n', COLUMN, ENDS)
    (folder / "dial.csv").symlink_to(tmp_path / "elsewhere.csv")
    assert problems_of(folder) == [
        "survey.toml gauge.m1.calibration: 'dial.csv' leads out of the survey's folder; put the file itself there"
    ]


def test_a_reading_without_its_limb_is_not_taken(bench):
    left = LIMBS["m1 left [mm]"].copy()
    folder = bench(UTUBE, LIMBS | {"m1 left [mm]": left}, ENDS)
    table = (folder / "readings.csv").read_text("utf-8").replace(f"{float(left[2])!r}", "")
    (folder / "readings.csv").write_text(table, encoding="utf-8")
    readings = gradeline.read_survey(folder).readings["m1"].to_numpy(float)
    assert np.isnan(readings).tolist() == [False, False, True, False, False, False]


def test_labels_of_gas_pressures_are_read(bench):
    board = '[gauge.board]\nkind = "closed multitube manometer"\nzero = "0 m"\ngas_pressure = "150 kPa abs"\n'
    columns = {f"{name} [m]": heads()[:, t] for t, name in enumerate(NAMES)}
    survey = gradeline.read_survey(bench(board, columns, dict.fromkeys(NAMES, ("board", 0.0))))
    pressure = survey.gauge("board").settings["gas_pressure"]
    assert (pressure.value, pressure.absolute) == (150e3, True)
    assert any(
        "The gas pressure of gauge 'board' is absolute" in t for t in gradeline.reduce(survey).assumptions
    )


def test_a_misspelt_gauge_fluid_is_guessed(bench):
    assert problems_of(bench(UTUBE.replace("mercury", "mercuri"), COLUMN, ENDS)) == [
        "survey.toml gauge.m1.gauge_fluid: no density is known for 'mercuri'; did you mean 'mercury'? Otherwise add "
        "gauge_fluid_density"
    ]


def test_a_limb_beyond_the_board_is_told_in_the_unit_of_the_range(bench):
    told = problems_of(bench(UTUBE + 'range = "0 to 30 cm"\n', LIMBS, ENDS))
    assert told
    assert all("lies beyond the scale of gauge 'm1', 0 to 30 cm" in one for one in told)


def ranges_of(folder):
    (one,) = gauge_ranges(gradeline.read_survey(folder))
    return one


def test_differences_are_counted_without_the_offset_at_rest(bench):
    plain = ranges_of(bench(UTUBE, COLUMN, ENDS))
    moved = ranges_of(bench(UTUBE, {"m1 [mm]": DEFLECTION + 5}, ENDS))
    assert (moved.smallest, moved.largest) == pytest.approx((plain.smallest, plain.largest), rel=1e-9)
    assert plain.largest == pytest.approx(FALL.max(), rel=1e-3)


def test_a_step_is_told_only_where_a_resolution_is_known_and_along_the_slope(bench):
    assert np.isnan([one.step for one in ranges_of(bench(UTUBE, COLUMN, ENDS)).choices]).all()
    step = 'resolution = "1 mm"\n'
    upright = ranges_of(bench(UTUBE + step, COLUMN, ENDS)).choices
    sloping = ranges_of(
        bench(UTUBE + step + 'inclination = "30 deg"\n', {"m1 [mm]": 2 * DEFLECTION}, ENDS)
    ).choices
    # sin 30° is a half: along the slope everything is twice as long
    steps = {one.fluid: one.step for one in upright}
    assert {one.fluid: one.step for one in sloping} == pytest.approx({k: v / 2 for k, v in steps.items()})


def test_the_one_limb_of_a_well_begins_at_0(bench):
    found = ranges_of(bench(UTUBE + 'area_ratio = "0.02"\nrange = "0 to 1.2 m"\n', COLUMN, ENDS))
    assert found.low == 0.0
    # handbooks: what stands in the limb and what the well fell by, 1.02 of the reading
    assert found.high == pytest.approx(1.2 * 1.02 * (MERCURY / RHO - 1), rel=1e-6)


@pytest.mark.parametrize(
    ("gauge", "columns", "told"),
    [
        (
            '[gauge.g]\nkind = "closed multitube manometer"\nzero = "0 m"\n',
            {"T1 [m]": 1.0, "T2 [m]": 0.5},
            "survey.toml gauge.g.kind: the weight of the trapped gas goes with the temperature, and that of a run is "
            "missing; give 'temperature [degC]' with the runs",
        ),
        (
            '[gauge.m]\nkind = "u-tube"\nupstream = "T1"\ndownstream = "T2"\ngauge_fluid = "heavy"\n'
            'gauge_fluid_density = "1600 kg/m^3"\ngauge_fluid_expansion = "0.0012 1/K"\n',
            {"m [m]": 0.1},
            "survey.toml gauge.m.gauge_fluid_expansion: the gauge fluid expands with its temperature, and that of a run is "
            "missing; add gauge_temperature",
        ),
    ],
)
def test_a_fluid_of_given_density_leaves_the_gauge_without_a_temperature(tmp_path, gauge, columns, told):
    """Both read as not taken before, without a word; with a temperature they are read."""
    given = {"gauge": "g" if "gauge.g" in gauge else "", "elevations": (0.0, 1.0)}
    bare = write_example(tmp_path / "bare", gauge, {"flow [L/s]": 2, **columns}, **given)
    assert problems_of(bare) == [told]
    full = {"flow [L/s]": 2, "temperature [degC]": 20, **columns}
    survey = gradeline.read_survey(write_example(tmp_path / "full", gauge, full, **given))
    assert np.isfinite(gradeline.reduce(survey, correct="none").runs["slope"]).all()
