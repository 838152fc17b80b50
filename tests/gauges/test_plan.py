"""Expected readings of each gauge kind: what the bench's own formulas say that the gauge shows."""

from __future__ import annotations

import numpy as np
import pytest

import gradeline
from gradeline.planning.expected import expected_survey
from tests.gauges.conftest import AIR, FLOWS, GRAVITY, NAMES, RHO
from tests.gauges.test_reduction import ENDS, FALL, HEADS, LEGS, MERCURY, UTUBE

#: A reading of 1e-5 of the largest; densities of mercury and air are known to that.
CLOSE = 2e-5

ONE = {
    "u-tube": (UTUBE, FALL * RHO / (MERCURY - RHO), "m1 [mm]"),
    "oil above": (
        UTUBE.replace('"u-tube"', '"inverted u-tube"').replace("mercury", "kerosene")
        + 'gauge_fluid_density = "800 kg/m^3"\n',
        FALL * RHO / (RHO - 800.0),
        "m1 [mm]",
    ),
    "transducer": (
        UTUBE.replace('"u-tube"', '"differential transducer"')
        .replace('gauge_fluid = "mercury"\n', "")
        .replace("0.5 mm", "10 Pa")
        + 'zero_reading = "0.2 kPa"\n',
        200.0 + FALL * RHO * GRAVITY,
        "m1 [kPa]",
    ),
}


def expected_of(folder, **more):
    return expected_survey(gradeline.read_plan(folder), {"copper": 1e-4}, {}, **more)


@pytest.mark.parametrize("name", list(ONE))
def test_a_gauge_between_two_taps(bench, name):
    gauge, reading, column = ONE[name]
    found = expected_of(bench(gauge, {column: np.zeros(FLOWS.size)}, ENDS))
    assert found.readings[:, 0] == pytest.approx(reading, rel=CLOSE, abs=1e-6)


def test_the_levels_of_a_compound_manometer_move_by_turns(bench):
    blank = np.zeros(FLOWS.size)
    found = expected_of(bench(LEGS, {"c1 a [m]": blank, "c1 b [m]": blank}, ENDS))
    levels = found.survey.levels
    assert levels is not None
    apart = (levels["c1 b"] - levels["c1 a"]).to_numpy(float)
    assert apart == pytest.approx(FALL * RHO / (MERCURY - RHO), rel=CLOSE, abs=1e-6)
    assert levels.sum(axis=1).to_numpy(float) == pytest.approx(0.0, abs=1e-12)


def test_open_columns(bench):
    board = '[gauge.board]\nkind = "piezometer"\nzero = "0 m"\nuncertainty = "1 mm"\n'
    columns = {f"{name} [m]": np.zeros(FLOWS.size) for name in NAMES}
    found = expected_of(bench(board, columns, dict.fromkeys(NAMES, ("board", 0.0))), head=2.0)
    assert found.readings == pytest.approx(HEADS / (1 - AIR / RHO), abs=1e-5)


def test_columns_under_unknown_gas_stand_where_it_holds_them(bench):
    board = '[gauge.board]\nkind = "closed multitube manometer"\nzero = "0 m"\nuncertainty = "1 mm"\nrange = "0 to 2 m"\n'
    columns = {f"{name} [m]": np.zeros(FLOWS.size) for name in NAMES}
    found = expected_of(bench(board, columns, dict.fromkeys(NAMES, ("board", 0.0))))
    fall = found.readings - found.readings[:, -1:]
    assert fall == pytest.approx((HEADS - HEADS[:, -1:]) / (1 - AIR / RHO), abs=1e-4)
    # The middle of the scale lies half-way between the highest and the lowest column.
    assert 0.5 * (found.readings.max(axis=1) + found.readings.min(axis=1)) == pytest.approx(1.0, abs=1e-3)
    assert not found.tells_level
    whole = gradeline.plan(
        gradeline.read_plan(bench(board, columns, dict.fromkeys(NAMES, ("board", 0.0)))), roughness=1e-4
    )
    assert whole.runs["slope_u"].notna().all()
    assert whole.layout_reason is None


def test_a_plan_of_each_kind_is_told(bench):
    """No kind of gauge keeps the whole plan from being made."""
    for name, (gauge, _, column) in ONE.items():
        told = gradeline.plan(
            gradeline.read_plan(bench(gauge, {column: np.zeros(FLOWS.size)}, ENDS)), roughness=1e-4
        )
        assert told.runs["friction_factor_u"].notna().all(), name
