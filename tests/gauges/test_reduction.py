"""Whole surveys through each gauge kind: the truth comes back, and what cannot be had is said."""

from __future__ import annotations

import numpy as np
import pytest

import gradeline
from tests.gauges.conftest import AIR, CHAINAGE, FLOWS, GRAVITY, NAMES, RHO, heads, slopes

# kg/m3 at 288 K = 14.85 degC: 13595.08/(1 + 1.8159e-4 t + 5.458e-9 t2 + ...), from memory (Sommer and Poziemski)
MERCURY = 13595.076 / (1 + 1.815868e-4 * 14.85 + 5.45843e-9 * 14.85**2 + 3.498e-11 * 14.85**3)
ENDS = {"T1": ("", 0.0), "T6": ("", 0.0)}
HEADS = heads()
FALL = HEADS[:, 0] - HEADS[:, -1]
UTUBE = """
[gauge.m1]
kind = "u-tube"
upstream = "T1"
downstream = "T6"
gauge_fluid = "mercury"
uncertainty = "0.5 mm"
"""


def slope_of(folder) -> np.ndarray:
    reduction = gradeline.reduce(gradeline.read_survey(folder))
    runs = reduction.runs
    return runs.loc[runs["flow"] > 0, "slope"].to_numpy(float)


def test_a_u_tube_of_mercury_gives_the_slopes(bench):
    folder = bench(UTUBE, {"m1 [mm]": 1000 * FALL * RHO / (MERCURY - RHO)}, ENDS)
    assert slope_of(folder) == pytest.approx(slopes(), rel=2e-5)


def test_a_u_tube_read_at_both_limbs_gives_the_same(bench):
    deflection = FALL * RHO / (MERCURY - RHO)
    limbs = {"m1 left [mm]": 1000 * (0.5 - deflection / 2), "m1 right [mm]": 1000 * (0.5 + deflection / 2)}
    folder = bench(UTUBE, limbs, ENDS)
    assert slope_of(folder) == pytest.approx(slopes(), rel=2e-5)


def test_two_readings_of_a_limb_count_as_two_random_errors(bench):
    deflection = FALL * RHO / (MERCURY - RHO)
    u = {}
    for way, columns in {
        "one": {"m1 [m]": deflection},
        "two": {"m1 left [m]": 0.5 - deflection / 2, "m1 right [m]": 0.5 + deflection / 2},
    }.items():
        runs = gradeline.reduce(gradeline.read_survey(bench(UTUBE, columns, ENDS)), correct="none").runs
        u[way] = runs["slope_u_random"].to_numpy(float)[1:]
    assert u["two"] / u["one"] == pytest.approx(np.sqrt(2), rel=1e-6)
    # 0.5 mm of mercury under water is 6.3 mm of water (13.6 - 1), over the 5.1 m between the taps
    assert u["one"] == pytest.approx(0.0005 * (MERCURY / RHO - 1) / (CHAINAGE[-1] - CHAINAGE[0]), rel=1e-4)


def test_an_inverted_u_tube_has_its_sign_the_other_way_round(bench):
    gauge = UTUBE.replace('"u-tube"', '"inverted u-tube"').replace("mercury", "air")
    air = 1.1992 * 293.15 / 288.0  # by the ideal gas; a thousandth of it is a millionth of the head
    deflection = FALL * RHO / (RHO - air)
    folder = bench(gauge, {"m1 left [m]": 0.7 + deflection / 2, "m1 right [m]": 0.7 - deflection / 2}, ENDS)
    assert slope_of(folder) == pytest.approx(slopes(), rel=2e-5)


def test_an_oil_above_magnifies_the_deflection(bench):
    gauge = UTUBE.replace('"u-tube"', '"inverted u-tube"').replace("mercury", "kerosene")
    gauge += 'gauge_fluid_density = "800 kg/m^3"\n'
    folder = bench(gauge, {"m1 [m]": FALL * RHO / (RHO - 800.0)}, ENDS)
    assert slope_of(folder) == pytest.approx(slopes(), rel=2e-6)


def test_cooler_lines_between_taps_of_different_height_count(bench):
    # the line at 40 degC: its density from the steam tables, 992.22 kg/m3 (IAPWS, any table); taps 3 m apart in height
    line, z = 992.22, 3.0
    deflection = (FALL - (1 - line / RHO) * z) * RHO / (MERCURY - line)
    gauge = UTUBE + 'line_temperature = "40 degC"\n'
    folder = bench(gauge, {"m1 [m]": deflection}, {"T1": ("", z), "T6": ("", 0.0)})
    survey = gradeline.read_survey(folder)
    found = gradeline.reduce(survey, correct="none").heads["head"].to_numpy(float)
    assert found == pytest.approx(FALL, abs=5e-5)
    # left out, the 3 m of lighter lines stand as 20 mm of head
    assert abs((1 - line / RHO) * z) > 0.02


def test_a_differential_transducer_gives_the_slopes(bench):
    gauge = UTUBE.replace('"u-tube"', '"differential transducer"').replace('gauge_fluid = "mercury"\n', "")
    gauge = gauge.replace("0.5 mm", "10 Pa") + 'zero_reading = "0.2 kPa"\n'
    folder = bench(gauge, {"m1 [kPa]": 0.2 + FALL * RHO * GRAVITY / 1000}, ENDS)
    assert slope_of(folder) == pytest.approx(slopes(), rel=1e-6)


LEGS = """
[gauge.c1]
kind = "compound manometer"
upstream = "T1"
downstream = "T6"
uncertainty = "0.5 mm"
[[gauge.c1.leg]]
fluid = "water"
from = "T1"
to = "a"
[[gauge.c1.leg]]
fluid = "mercury"
from = "a"
to = "b"
[[gauge.c1.leg]]
fluid = "water"
from = "b"
to = "T6"
"""


def test_a_compound_manometer_equals_the_u_tube_of_its_legs(bench):
    deflection = FALL * RHO / (MERCURY - RHO)
    columns = {"c1 a [m]": -1.0 - deflection / 2, "c1 b [m]": -1.0 + deflection / 2}
    survey = gradeline.read_survey(bench(LEGS, columns, ENDS))
    runs = gradeline.reduce(survey, correct="none").runs
    assert runs["slope"].to_numpy(float)[1:] == pytest.approx(slopes(), rel=2e-5)
    # both levels are read: 12.6 times 0.5 mm, twice in quadrature
    expected = np.sqrt(2) * 0.0005 * (MERCURY / RHO - 1) / (CHAINAGE[-1] - CHAINAGE[0])
    assert runs["slope_u_random"].to_numpy(float)[1:] == pytest.approx(expected, rel=1e-4)


def test_a_chain_that_ends_open_gives_a_head(bench):
    # T6 read against the air: 0.4 m of water down to a fixed meniscus at -0.4 m, mercury up to b
    gauge = """
[gauge.c1]
kind = "compound manometer"
upstream = "T6"
[[gauge.c1.leg]]
fluid = "water"
from = "T6"
to = "a"
[[gauge.c1.leg]]
fluid = "mercury"
from = "a"
to = "b"
"""
    a = np.full(FLOWS.shape, -0.4)
    # p/g at the tap = rho h; down 0.4 m it is rho (h + 0.4) = mercury (b - a) - air b
    b = (RHO * (HEADS[:, -1] + 0.4) + MERCURY * a) / (MERCURY - AIR)
    board = '[gauge.board]\nkind = "piezometer"\nzero = "0 m"\n'
    columns = {"T1 [m]": HEADS[:, 0] / (1 - AIR / RHO), "c1 a [m]": a, "c1 b [m]": b}
    folder = bench(gauge + board, columns, {"T1": ("board", 0.0), "T6": ("", 0.0)})
    found = gradeline.reduce(gradeline.read_survey(folder), correct="none").heads
    assert found.loc[found["tap"] == "T6", "head"].to_numpy(float) == pytest.approx(HEADS[:, -1], abs=5e-5)


def test_columns_under_unknown_gas_give_slopes_and_say_what_they_cannot(bench):
    rng = np.random.default_rng(3)
    level = rng.uniform(-0.5, 0.5, FLOWS.size)
    board = '[gauge.board]\nkind = "closed multitube manometer"\nzero = "0 m"\nuncertainty = "1 mm"\n'
    columns = {f"{name} [m]": (HEADS[:, t] + level) / (1 - AIR / RHO) for t, name in enumerate(NAMES)}
    folder = bench(board, columns, dict.fromkeys(NAMES, ("board", 0.5)))
    reduction = gradeline.reduce(gradeline.read_survey(folder))
    runs = reduction.runs
    assert runs["slope"].to_numpy(float)[1:] == pytest.approx(slopes(), rel=1e-4)
    told = " ".join(reduction.cautions)
    assert "no absolute head can be had" in told
    assert "the level of its columns is free in each run" in told
    assert "below that of the atmosphere" not in told


def test_columns_under_known_gas_give_heads(bench):
    # 20 kPa of gas hold the columns 2.04 m lower
    board = '[gauge.board]\nkind = "closed multitube manometer"\nzero = "0 m"\ngas_pressure = "20 kPa"\n'
    gas = AIR * 121.325 / 101.325 * 293.15 / 288.0
    columns = {
        f"{name} [m]": (HEADS[:, t] - 20e3 / (RHO * GRAVITY)) / (1 - gas / RHO)
        for t, name in enumerate(NAMES)
    }
    folder = bench(board, columns, dict.fromkeys(NAMES, ("board", 0.0)))
    reduction = gradeline.reduce(gradeline.read_survey(folder), correct="none")
    assert reduction.heads["head"].to_numpy(float).reshape(HEADS.shape) == pytest.approx(HEADS, abs=1e-5)
    assert "no absolute head" not in " ".join(reduction.cautions)


def test_a_floating_board_beside_an_open_one_keeps_its_own_level(bench):
    rng = np.random.default_rng(4)
    level = rng.uniform(-0.5, 0.5, FLOWS.size)
    boards = (
        '[gauge.board]\nkind = "piezometer"\nzero = "0 m"\nuncertainty = "1 mm"\n'
        '[gauge.closed]\nkind = "closed multitube manometer"\nzero = "0 m"\nuncertainty = "1 mm"\n'
    )
    columns = {
        f"{name} [m]": (HEADS[:, t] + (level if t % 2 else 0.0)) / (1 - AIR / RHO)
        for t, name in enumerate(NAMES)
    }
    taps = {name: ("closed" if t % 2 else "board", 0.0) for t, name in enumerate(NAMES)}
    for correct in ("static", "none"):
        reduction = gradeline.reduce(gradeline.read_survey(bench(boards, columns, taps)), correct=correct)
        runs = reduction.runs
        assert runs["slope"].to_numpy(float)[1:] == pytest.approx(slopes(), rel=1e-4)
        assert "no absolute head" not in " ".join(reduction.cautions)
        lines = reduction.grade_lines
        last = lines[(lines["run"] == "6") & (lines["chainage"] == CHAINAGE[-1])]
        assert last["piezometric_head"].to_numpy(float) == pytest.approx(HEADS[-1, -1], abs=1e-3)


def test_a_gauge_carried_from_tap_to_tap_cancels_its_zero(bench):
    gauge = """
[gauge.dial]
kind = "pressure gauge"
uncertainty = "20 Pa"
full_scale = "100 kPa"
accuracy_of_full_scale = "1 %"
"""
    pressure = HEADS * RHO * GRAVITY / 1000
    columns = {f"{name} [kPa]": pressure[:, t] for t, name in enumerate(NAMES)}
    survey = gradeline.read_survey(bench(gauge, columns, dict.fromkeys(NAMES, ("dial", 0.0))))
    runs = gradeline.reduce(survey, correct="none").runs
    fast = runs.iloc[-1]
    assert fast["slope"] == pytest.approx(slopes()[-1], rel=1e-5)
    # the zero cancels; the span error alone, 1 %/sqrt(6) of S, stays beside 20 Pa of scatter and the bore's share
    bore = (
        4 * 0.03 / 26.64 * 0
    )  # the bore does not move S, but for the velocity head that is alike at all taps
    span = 0.01 / np.sqrt(6) * fast["slope"]
    assert fast["slope_u"] == pytest.approx(np.hypot(np.hypot(span, bore), fast["slope_u_random"]), rel=0.01)


def test_a_reference_gauge_takes_out_a_change_during_the_run(bench):
    gauge = '[gauge.dial]\nkind = "transducer"\nuncertainty = "20 Pa"\n'
    taps = dict.fromkeys(NAMES, ("dial", 0.0))
    pressure = HEADS * RHO * GRAVITY
    drift = np.linspace(0.0, 3000.0, len(NAMES))  # the supply rises by 3 kPa while the gauge is carried along
    rows = [
        f"{r + 1},{name},{float(pressure[r, t] + drift[t])!r},{float(50e3 + drift[t])!r}"
        for r in range(FLOWS.size)
        for t, name in enumerate(NAMES)
    ]
    runs = "\n".join(
        [
            "run,flow [m^3/s],temperature [K]",
            *(f"{r + 1},{flow!r},288.0" for r, flow in enumerate(FLOWS.tolist())),
        ]
    )
    listed = "\n".join(["run,tap,reading [Pa],reference [Pa]", *rows])
    folder = bench(gauge, {}, taps, readings__csv=listed + "\n", runs__csv=runs + "\n")
    survey = gradeline.read_survey(folder)
    assert any("reference gauge" in text for text in survey.assumptions)
    reduction = gradeline.reduce(survey, correct="none")
    assert reduction.runs["slope"].to_numpy(float)[1:] == pytest.approx(slopes(), rel=1e-5)


def test_a_calibration_corrects_and_adds_its_uncertainty(bench):
    gauge = '[gauge.dial]\nkind = "pressure gauge"\nuncertainty = "1 Pa"\ncalibration = "dial.csv"\n'
    pressure = HEADS * RHO * GRAVITY
    shown = (pressure - 300.0) / 1.02  # reads 300 Pa and 2 % low
    points = np.linspace(0.0, 40e3, 9)
    noise = np.array([1, -1, 2, 0, -2, 1, -1, 1, -1]) * 20.0
    table = "\n".join(
        [
            "reading [Pa],true [Pa]",
            *(f"{r!r},{r * 1.02 + 300 + e!r}" for r, e in zip(points.tolist(), noise.tolist(), strict=True)),
        ]
    )
    columns = {f"{name} [Pa]": shown[:, t] for t, name in enumerate(NAMES)}
    folder = bench(gauge, columns, dict.fromkeys(NAMES, ("dial", 0.0)), dial__csv=table + "\n")
    runs = gradeline.reduce(gradeline.read_survey(folder), correct="none").runs
    fast = runs.iloc[-1]
    assert abs(fast["slope"] / slopes()[-1] - 1) < 3e-3
    # by hand: u of the slope of a straight line through the points (JCGM 100, H.3.3)
    line = np.polyfit(points, noise, 1)
    rest = noise - np.polyval(line, points)
    u = np.sqrt(rest @ rest / 7 / ((points - points.mean()) ** 2).sum())
    u *= 2.3646 / 1.96  # t of 7 degrees of freedom at 97.5 % (JCGM 100, table G.2: 2.36), over the normal's
    assert fast["slope_u"] == pytest.approx(np.hypot(u * fast["slope"], fast["slope_u_random"]), rel=0.02)


def test_a_reading_outside_the_calibration_is_a_caution(bench):
    gauge = '[gauge.dial]\nkind = "pressure gauge"\ncalibration = "dial.csv"\n'
    columns = {f"{name} [Pa]": HEADS[:, t] * RHO * GRAVITY for t, name in enumerate(NAMES)}
    table = "reading [kPa],true [kPa]\n0,0\n10,10.1\n20,20\n"
    folder = bench(gauge, columns, dict.fromkeys(NAMES, ("dial", 0.0)), dial__csv=table)
    told = " ".join(gradeline.reduce(gradeline.read_survey(folder)).cautions)
    first = 1 + int(
        np.argmax(HEADS[:, 0] * RHO * GRAVITY > 20e3)
    )  # at T6 they stay below, 2 m being 19.6 kPa
    assert f"lie outside the range of its calibration in dial.csv ({first}:T1, " in told


def test_swapped_limbs_are_told(bench):
    folder = bench(UTUBE, {"m1 [m]": -FALL * RHO / (MERCURY - RHO)}, ENDS)
    told = " ".join(gradeline.reduce(gradeline.read_survey(folder)).cautions)
    assert (
        "Gauge 'm1' shows a higher head at the downstream tap T6 in every flowing run: its limbs look swapped"
        in told
    )


def test_two_u_tubes_see_a_fall_each_and_a_bad_reading_shows(bench):
    # three gauges over parts of the tube and one over the whole: one slip of 30 mm of water
    gauges, columns = "", {}
    for n, (a, b) in enumerate([(0, 1), (1, 2), (2, 3), (3, 4), (4, 5), (0, 5), (0, 3), (2, 5)]):
        gauges += (
            f'[gauge.d{n}]\nkind = "differential transducer"\nupstream = "{NAMES[a]}"\ndownstream = "{NAMES[b]}"\n'
            'uncertainty = "5 Pa"\n'
        )
        columns[f"d{n} [Pa]"] = (HEADS[:, a] - HEADS[:, b]) * RHO * GRAVITY
    columns["d5 [Pa]"] = columns["d5 [Pa]"] + 300.0 * (np.arange(FLOWS.size) == 4)
    folder = bench(gauges, columns, dict.fromkeys(NAMES, ("", 0.0)))
    reduction = gradeline.reduce(gradeline.read_survey(folder))
    flags = reduction.flags[reduction.flags["kind"] == "reading"]
    assert flags[["run", "tap"]].to_numpy().tolist() == [["5", "d5"]]
    assert flags["expected"].iloc[0] == pytest.approx(columns["d5 [Pa]"][4] - 300.0, abs=2.0)
    assert reduction.heads["tap_2"].notna().all()
    assert reduction.taps["reason"].str.startswith("read only through differential gauges").all()


def test_a_static_run_takes_off_the_zero_of_a_deflection(bench):
    # limbs that do not stand level at rest: 4 mm of mercury in every run
    deflection = 0.004 + FALL * RHO / (MERCURY - RHO)
    folder = bench(UTUBE, {"m1 [m]": deflection}, ENDS)
    assert slope_of(folder) == pytest.approx(slopes(), rel=2e-5)
    taps = gradeline.reduce(gradeline.read_survey(folder)).heads
    assert taps.loc[taps["run"] == "1", "head"].to_numpy(float) == pytest.approx(0.0, abs=1e-12)


def test_a_differential_gauge_is_disturbed_where_either_tap_is(bench):
    # T6 lies 0.1 m = 3.8 bores downstream of the valve at 5.2 m, within 10
    valve = '[[fitting]]\nname = "valve"\nat = "5.2 m"\nloss_coefficient = 0.0\n'
    second = UTUBE.replace("m1", "m2").replace("T6", "T5")
    columns = {
        "m1 [m]": FALL * RHO / (MERCURY - RHO),
        "m2 [m]": (HEADS[:, 0] - HEADS[:, 4]) * RHO / (MERCURY - RHO),
    }
    folder = bench(valve + UTUBE + second, columns, {"T1": ("", 0.0), "T5": ("", 0.0), "T6": ("", 0.0)})
    heads_table = gradeline.reduce(gradeline.read_survey(folder)).heads
    flowing = heads_table[heads_table["run"] != "1"]
    assert set(flowing.loc[flowing["gauge"] == "m1", "flag"]) == {"disturbed"}
    assert flowing.loc[flowing["gauge"] == "m2", "used"].all()


def test_inches_and_millimetres_give_the_same_reduction(bench):
    deflection = FALL * RHO / (MERCURY - RHO)
    found = [
        slope_of(bench(UTUBE, {f"m1 [{unit}]": deflection / size}, ENDS))
        for unit, size in (("mm", 1e-3), ("in", 0.0254), ("ft", 0.3048))
    ]
    assert found[1] == pytest.approx(found[0], rel=1e-12)
    assert found[2] == pytest.approx(found[0], rel=1e-12)
