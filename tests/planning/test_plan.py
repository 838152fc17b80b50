"""The whole plan: what it tells, what it recommends, what it refuses."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

import gradeline
from gradeline.errors import ReductionError, UsageError
from gradeline.planning import PLAN_TABLES, Plan, plan
from gradeline.planning.improvements import changes_of
from gradeline.quantities import Measured
from gradeline.survey import Survey, WallHistory
from tests.simulate.surveys import NominalFitting, NominalReach, Uncertainties, make_survey

STATED = Uncertainties(reading=1e-3, flow=0.004, flow_scale=0.003, chainage=1e-3, temperature=0.2)


def bench(*, stated: Uncertainties = STATED, loss: bool = False, count: int = 8) -> Survey:
    return make_survey(
        np.random.default_rng(0),
        chainage=np.linspace(0.2, 5.3, count),
        reaches=[NominalReach(0.0, 5.5, 0.0266, 3e-5, 3e-5)],
        flows=np.geomspace(2e-4, 1.5e-3, 6),
        stated=stated,
        fittings=[NominalFitting(2.75, 2.0)] if loss else [],
    )[0]


@pytest.fixture(scope="module")
def told() -> Plan:
    return plan(bench(), roughness=3e-5)


def test_every_table_has_its_columns_and_kinds(told: Plan) -> None:
    for name, columns in PLAN_TABLES.items():
        table = getattr(told, name)
        assert list(table.columns) == list(columns), name
        kinds = {"number": "float64", "text": "object", "truth": "boolean"}
        assert [str(kind) for kind in table.dtypes] == [kinds[one.kind] for one in columns.values()], name


def test_entrance_length_by_hand(told: Plan) -> None:
    """4.4 Re^(1/6) D: at Re 10 000, 4.64 × 4.4 = 20.4 bores (Munson, Young and Okiishi, from memory)."""
    for row in told.runs.to_dict("records"):
        assert row["entrance_length"] == pytest.approx(4.4 * row["reynolds"] ** (1 / 6) * 0.0266)
    bores = 4.4 * 1e4 ** (1 / 6)
    assert bores == pytest.approx(20.4, abs=0.05)


def test_roughness_reynolds_number(told: Plan) -> None:
    """ε⁺ = ε √(g D S/4)/ν: u*² = g R S with the hydraulic radius D/4."""
    viscosity = told.runs["velocity"] * 0.0266 / told.runs["reynolds"]
    shear = np.sqrt(9.80665 * 0.0266 / 4 * told.runs["slope"])
    assert told.runs["roughness_reynolds"].to_numpy() == pytest.approx((3e-5 * shear / viscosity).to_numpy())


def test_the_plan_as_it_is_comes_first_and_the_rest_by_what_it_buys(told: Plan) -> None:
    rows = told.improvements
    assert rows["change"].iloc[0] == "the plan as it is"
    assert rows["width_ratio"].iloc[0] == 1.0
    ratios = rows["width_ratio"].iloc[1:].to_numpy()
    assert (np.diff(ratios) > -2e-4).all()
    assert ratios.min() < 0.95
    assert {"the bore known twice as well", "every run done twice"} <= set(rows["change"])


def test_what_is_recommended_tells_more(told: Plan) -> None:
    assert told.layout_reason is None
    after = told.comparison.set_index("quantity")
    assert after.loc["slope_u", "recommended"] < after.loc["slope_u", "now"]
    width = after["now"] * 0
    for column in ("now", "recommended"):
        width[column] = after.loc["roughness_high", column] - after.loc["roughness_low", column]
    assert width["recommended"] < width["now"]
    assert told.flows["recommended_flow"].max() <= told.flows["flow"].max() * (1 + 1e-9)
    assert told.flows["recommended_flow"].min() >= told.flows["flow"].min() * (1 - 1e-9)


def test_twice_the_runs_halve_what_the_runs_add() -> None:
    """Nothing stated but the flows and readings: all errors are the runs' own, and the interval shrinks by √2."""
    survey = bench(stated=Uncertainties(reading=1e-3, flow=0.02))
    exact = tuple(replace(one, diameter=Measured(one.diameter.value)) for one in survey.reaches)
    found = plan(replace(survey, reaches=exact), roughness=3e-4).improvements.set_index("change")
    assert found.loc["every run done twice", "width_ratio"] == pytest.approx(1 / np.sqrt(2), rel=0.02)


def test_a_fitting_gets_its_uncertainty() -> None:
    found = plan(bench(loss=True), roughness=3e-5, loss={"fitting 1": 2.0})
    (row,) = found.fittings.to_dict("records")
    assert row["source"] == "given"
    assert 0 < row["loss_coefficient_u"] < 0.2
    assert (found.comparison["quantity"] == "loss_coefficient_u").sum() == 1


def test_too_short_a_board_is_said_with_the_greatest_flow() -> None:
    survey = bench()
    board = replace(survey.gauges[0], span=(0.0, 0.5))
    found = plan(replace(survey, gauges=(board,)), roughness=3e-5)
    assert found.levels["fits"].tolist() != [True] * 6
    (caution,) = (
        text for text in found.cautions if "cannot" not in text and "not all columns can be read" in text
    )
    assert "the greatest flow of the range that can is" in caution
    # The head between the end taps at that flow fills the scale, to one step of the flows that are tried.
    least = found.levels[found.levels["fits"].to_numpy(bool)]["flow"].max()
    assert least <= found.greatest_flow < found.levels["flow"].max()
    assert found.flows["recommended_flow"].max() == pytest.approx(found.greatest_flow)
    assert found.boards["head_high"].iloc[0] - found.boards["head_low"].iloc[0] == pytest.approx(
        0.5, rel=0.002
    )


def test_the_greatest_flow_fills_the_scale() -> None:
    """At it S × (distance of the end taps) is the length of the board: f of an independent law."""
    from tests.simulate.line import friction_factor  # noqa: PLC0415 (only here)

    survey = bench()
    board = replace(survey.gauges[0], span=(0.0, 0.5))
    flow = plan(replace(survey, gauges=(board,)), roughness=3e-5).greatest_flow
    area = np.pi * 0.0266**2 / 4
    velocity = np.array([flow, flow + (1.5e-3 - 2e-4) / 79]) / area
    nu = 1.139e-6  # water at 15 °C (tables, from memory)
    fall = friction_factor(velocity * 0.0266 / nu, 3e-5 / 0.0266) * velocity**2 / (2 * 9.80665 * 0.0266) * 5.1
    assert fall[0] <= 0.5 <= fall[1] * 1.002


@pytest.mark.parametrize(
    ("wall", "source"),
    [("drawn copper", "drawn tubing"), ("cast iron", "cast iron"), ("wall", "for want of a better")],
)
def test_the_assumed_surface_goes_by_the_name_of_the_wall(wall: str, source: str) -> None:
    survey = bench()
    named = tuple(replace(one, wall=wall) for one in survey.reaches)
    found = plan(replace(survey, reaches=named))
    assert source in found.walls["source"].iloc[0]
    assert any(source in text for text in found.assumptions)
    wanting = [text for text in found.cautions if "No published surface is called like the wall" in text]
    assert len(wanting) == (wall == "wall")


def test_what_the_survey_says_of_the_wall_goes_before_a_surface() -> None:
    known = WallHistory("wall", earlier=Measured(7e-5), earlier_source="2019")
    found = plan(replace(bench(), wall_histories=(known,)))
    assert found.walls["roughness"].tolist() == [7e-5]
    assert found.walls["source"].tolist() == ["found earlier (2019)"]


def test_an_unstated_reading_is_assumed_and_said() -> None:
    survey = bench(stated=replace(STATED, reading=None))
    found = plan(survey, roughness=3e-5)
    (said,) = (text for text in found.assumptions if "one reading" in text)
    assert "1.0 mm is assumed" in said
    half = plan(survey, roughness=3e-5, reading=5e-4)
    assert half.runs["slope_u"].iloc[0] < found.runs["slope_u"].iloc[0]
    assert not any("is assumed (--reading" in text for text in half.assumptions)


def test_a_pressure_gauge_without_a_statement_is_refused() -> None:
    survey = gradeline.read_plan("data_demo/cast_main")
    gauges = tuple(replace(one, reading_u=None, span=None) for one in survey.gauges)
    bare = replace(survey, gauges=gauges, stated=replace(survey.stated, reading_pressure=None))
    with pytest.raises(
        ReductionError, match=r"gauge 'logger': the uncertainty of one reading is not stated.*--reading"
    ):
        plan(bare)
    assert plan(bare, reading_pressure=200.0).runs["slope_u"].notna().all()


def test_a_smooth_wall_and_laminar_runs_are_said() -> None:
    found = plan(gradeline.read_plan("data_demo/copper_bench"), roughness=0.0)
    assert found.thresholds["rough_above"].isna().all()
    assert any("will not tell the roughness of 'drawn copper' from zero" in text for text in found.cautions)
    assert any("Re lies between 2000 and 4000" in text for text in found.cautions)
    slow = plan(
        gradeline.read_plan("data_demo/copper_bench", flows="0.02 to 0.04 L/s", runs=4), roughness=0.0
    )
    assert slow.flows_reason == "no flow in the range of the plan is turbulent in every reach and can be read"
    assert slow.walls["roughness_high"].isna().all()
    assert slow.walls["reason"].notna().all()


@pytest.mark.parametrize(
    ("more", "message"),
    [
        ({"roughness": {"wal": 1e-5}}, "roughness: there is no wall 'wal'; walls are wall"),
        ({"roughness": -1e-5}, "is below zero; give 0 for a smooth wall"),
        (
            {"loss": {"valve": 2.0}},
            "loss: there is no fitting 'valve' whose K is to be fitted; there is none",
        ),
        ({"fixed": ["T9"]}, "fixed: there is no tap 'T9'; taps are T1, T2"),
        ({"spacing": 0.0}, "spacing: 0.0 m is not above 0"),
        ({"level": 95.0}, "between 0 and 1, such as 0.95; found 95.0"),
    ],
)
def test_arguments_that_do_not_fit(more: dict[str, object], message: str) -> None:
    with pytest.raises(UsageError, match=message.replace("(", r"\(")):
        plan(bench(), **more)  # type: ignore[arg-type]  # keys of several types


def test_taps_are_recommended_where_the_flow_has_surely_recovered() -> None:
    """800 m is the gate valve's place and 203 mm the bore: `survey.toml`."""
    found = plan(gradeline.read_plan("data_demo/cast_main"))
    layout = found.layout.set_index("tap")
    bores = (layout.loc["M8", "recommended_chainage"] - 800.0) / 0.203
    assert layout.loc["M8", "recommended_bores_downstream"] == pytest.approx(bores)
    assert layout["recommended_bores_downstream"].min() >= 30
    assert not any(text.startswith("At its recommended chainage") for text in found.cautions)


def test_recommended_taps_that_the_reduction_will_doubt_are_said() -> None:
    """Where a line is too short for 30 bores the stated recovery holds, and what is doubtful is said."""
    survey, _ = make_survey(
        np.random.default_rng(1),
        chainage=[0.5, 1.5, 2.5, 3.4, 4.6, 4.9],
        reaches=[NominalReach(0.0, 5.0, 0.05, 5e-5)],
        flows=[2e-3, 3e-3, 4e-3],
        fittings=[NominalFitting(4.0, 2.0)],
    )
    found = plan(survey, spacing=0.2, reading=0.0005)
    assert found.layout_reason is None
    doubtful = found.layout[found.layout["recommended_bores_downstream"] < 30]
    assert len(doubtful)
    for row in doubtful.to_dict("records"):
        assert any(
            text.startswith(f"At its recommended chainage: tap {row['tap']} lies") for text in found.cautions
        )


def test_runs_without_flow_are_refused() -> None:
    survey = bench()
    with pytest.raises(ReductionError, match="nothing flows in any run; give --flows"):
        plan(replace(survey, runs=survey.runs.assign(flow=0.0)))


def test_changes_are_surveys_of_their_own() -> None:
    """Each change leaves the plan as it was and has one effect."""
    survey = bench()
    before = survey.runs.copy(), survey.gauges
    for name, changed in changes_of(survey):
        assert changed is not survey, name
    pd.testing.assert_frame_equal(survey.runs, before[0])
    assert survey.gauges == before[1]


def test_gauge_fluids_are_tried() -> None:
    found = plan(gradeline.read_plan("data_demo/mercury_bench"))
    changes = set(found.improvements["change"])
    assert "a heavy liquid of 1600 kg/m³ in m1, m2, m3" in changes
    assert "oil of 800 kg/m³ in a1, a2, a3" in changes
    assert found.flows_reason is not None
    assert "weighing tank" in found.flows_reason


def test_a_layout_that_cannot_be_read_is_not_recommended() -> None:
    found = plan(gradeline.read_plan("data_demo/mercury_bench"))
    assert found.layout_reason == (
        "with the taps at D-optimal chainages not every run could be read; the present ones stay"
    )
    assert found.layout["recommended_chainage"].isna().all()
