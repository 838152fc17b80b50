"""One pipe of which the surveys state the bore otherwise: the truth behind them is known, and no statement makes a change."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from scipy.optimize import bisect

import gradeline
from gradeline.comparison.bores import ALIKE, DIFFER, ONE, UNMATCHED, one_bore
from gradeline.comparison.changes import with_left_out
from gradeline.fitting.joint import Part, freedom_of, joint_levels
from gradeline.fitting.wall import WallData, example_wall, fit_wall
from gradeline.quantities import Measured
from gradeline.reduction.fitted import FittedWall, SharedInput
from gradeline.report.comparison import comparison_found, comparison_text
from gradeline.survey import Survey
from tests.calibration.coverage import CHAINAGE, DIAMETER, FLOWS, STATED
from tests.simulate.surveys import NominalReach, make_survey

#: f goes as D⁵: by hand, 1.01⁵ = 1.0510.
LARGER = 1.01
ROUGH = 2e-3


def colebrook(reynolds: float, relative: float) -> float:
    """f by Colebrook (1939), J. Instn Civ. Engrs 11, eq. as printed in every handbook (from memory)."""

    def away(f: float) -> float:
        return 1 / np.sqrt(f) + 2 * np.log10(relative / 3.71 + 2.51 / (reynolds * np.sqrt(f)))

    return float(bisect(away, 0.005, 0.2, xtol=1e-12))


def drawn(relative: float, seed: int, pipe=None):
    return make_survey(
        np.random.default_rng(seed),
        chainage=CHAINAGE,
        reaches=[NominalReach(0.0, 5.5, DIAMETER, relative * DIAMETER, 0.001 * DIAMETER)],
        flows=FLOWS,
        sigma=1e-3,
        stated=STATED,
        same_pipe=pipe,
    )


def stated(survey: Survey, bore: float, relative_u: float | None, name: str, date: str) -> Survey:
    size = Measured(bore, None if relative_u is None else relative_u * bore)
    reaches = tuple(dataclasses.replace(one, diameter=size) for one in survey.reaches)
    return dataclasses.replace(survey, reaches=reaches, source=name, date=date)


def pair(first: Survey, second: Survey, relative_u: float):
    return gradeline.compare(
        [
            stated(first, DIAMETER, relative_u, "before", "2020-05-01"),
            stated(second, LARGER * DIAMETER, relative_u, "after", "2025-05-01"),
        ]
    )


@pytest.fixture(scope="module")
def one() -> Survey:
    return drawn(ROUGH, 11)[0]


@pytest.fixture(scope="module")
def agreeing(one):
    """The same readings twice, 26.6 and 26.866 mm, each ± 0.4 %: they lie 1.8 u of the difference apart."""
    return pair(one, one, 0.004)


@pytest.fixture(scope="module")
def differing(one):
    return pair(one, one, 0.0004)


def test_statements_that_agree_are_one_bore_and_no_change(agreeing) -> None:
    wall, rows = agreeing.walls.iloc[0], agreeing.surveys
    assert wall["bores"] == ONE
    # Weights 1/u² with u in proportion to the bore, by hand: D (1 + 1/1.01) / (1 + 1/1.01²).
    assert wall["diameter"] == pytest.approx(DIAMETER * (1 + 1 / LARGER) / (1 + 1 / LARGER**2), rel=1e-9)
    assert not wall["changed"]
    assert rows["log_factor_change"][1] == pytest.approx(0.0, abs=2e-3)
    assert rows["friction_factor"][1] == pytest.approx(rows["friction_factor"][0], rel=2e-3)
    assert rows["roughness_change"][1] == pytest.approx(0.0, abs=0.02 * ROUGH * DIAMETER)
    assert wall["roughness_rate_low"] < 0 < wall["roughness_rate_high"]
    assert rows["log_factor_by_bore"][1] == pytest.approx(np.log(LARGER**5), rel=0.01)


def test_the_error_of_the_one_bore_leaves_the_difference(agreeing, one) -> None:
    """Of two statements of one value and of two that agree a change is told as surely."""
    same = gradeline.compare(
        [
            stated(one, DIAMETER, 0.004, "before", "2020-05-01"),
            stated(one, DIAMETER, 0.004, "after", "2025-05-01"),
        ]
    )
    assert same.walls["bores"][0] == ALIKE
    assert agreeing.surveys["log_factor_change_u"][1] == pytest.approx(
        same.surveys["log_factor_change_u"][1], rel=0.02
    )
    assert agreeing.shared.set_index("input")["common"]["bore"]


def test_runs_stand_in_the_one_bore(agreeing) -> None:
    runs = agreeing.runs.pivot_table(index="run", columns="survey", values=["friction_factor", "reynolds"])
    assert runs["friction_factor"]["after"].to_numpy() == pytest.approx(
        runs["friction_factor"]["before"].to_numpy(), rel=1e-6
    )
    assert runs["reynolds"]["after"].to_numpy() == pytest.approx(
        runs["reynolds"]["before"].to_numpy(), rel=1e-6
    )


def test_statements_that_differ_make_no_change(differing) -> None:
    wall, row = differing.walls.iloc[0], differing.surveys.iloc[1]
    assert wall["bores"] == DIFFER
    assert not wall["changed"]
    assert row["log_factor_change"] == pytest.approx(0.0, abs=2e-3)
    assert row["log_factor_by_bore"] == pytest.approx(np.log(LARGER**5), rel=0.01)
    assert np.isnan(row["roughness_change"])
    assert np.isnan(wall["roughness_rate"])
    # Each survey's own f stands beside, apart by what the statements make.
    assert row["friction_factor"] / differing.surveys["friction_factor"][0] == pytest.approx(
        LARGER**5, rel=0.01
    )


def test_that_the_bore_is_stated_differently_is_said(differing, agreeing) -> None:
    said = comparison_found(differing)
    assert said[0] == (
        "The bore is stated differently: 26.600 mm in before and 26.866 mm in after, 1 % larger, which alone makes f differ by "
        "+5.1 % (f goes as D⁵). Compared is therefore S at equal flow, which no statement of a bore touches."
    )
    assert said[1].startswith("No change is told from chance. S at equal flow (near Re ")
    assert said[2] == "The stated bores differ beyond their uncertainties: no rate of growth."
    text = comparison_text(differing)
    assert max(map(len, text.split("\n"))) <= 100
    assert "change of S (%)" in " ".join(text.replace("change of S\n", "change of S (%)").split())
    flat = " ".join(comparison_text(agreeing).split())
    assert "the stated bores agree within their uncertainties and are taken as one, 26.73" in flat
    assert "the column need not subtract to the change" in flat


@pytest.mark.parametrize("relative_u", [0.004, 0.0004])
def test_a_wall_that_did_grow_is_found_whatever_is_stated(relative_u: float) -> None:
    """ε/D grows from 2e-3 to 3e-3: the change of f by the Colebrook–White law, solved here by bisection."""
    first, pipe = drawn(ROUGH, 21)
    second, _ = drawn(1.5 * ROUGH, 22, pipe)
    found = pair(first, second, relative_u)
    row = found.surveys.iloc[1]
    assert found.walls["changed"].iloc[0]
    at = found.walls["reynolds"].iloc[0]
    true = np.log(colebrook(at, 1.5 * ROUGH) / colebrook(at, ROUGH))
    assert row["log_factor_change_low"] < true < row["log_factor_change_high"]


def wall_of(bores: tuple[float, ...], u: tuple[float, ...], names: tuple[str, ...] = ()) -> FittedWall:
    """A wall of as many reaches, eight exact runs."""
    base, count = example_wall(), len(bores)
    data = WallData(
        slope=np.tile(base.slope, count),
        slope_covariance=np.tile(1e-10 * np.eye(count), (8, 1, 1)),
        velocity=np.tile(base.velocity, count),
        diameter=np.array(bores),
        kinematic_viscosity=base.kinematic_viscosity,
        gravity=base.gravity,
        flow_u=base.flow_u,
        own_slope_effect=np.zeros((8, count)),
        viscosity_u=base.viscosity_u,
        slope_effect=np.zeros((8, count, count)),
        diameter_effect=np.diag(u) / np.array(bores)[:, None],
        flow_effect=np.zeros(count),
        viscosity_effect=np.zeros((8, count)),
        gravity_effect=np.zeros(count),
    )
    names = names or tuple(f"reach {n}" for n in range(count))
    inputs = tuple(SharedInput("bore", name, "pipe", bore) for name, bore in zip(names, bores, strict=True))
    return FittedWall("iron", data, fit_wall(data, np.isfinite(data.slope)), inputs, None)


def test_the_surer_statement_weighs_more() -> None:
    """By hand: (50 / 1 + 51 / 0.25) / (1 / 1 + 1 / 0.25) = 50.8 mm."""
    found = one_bore([wall_of((0.05,), (0.001,)), wall_of((0.051,), (0.0005,), ("other name",))])
    assert (found.kind, found.diameter) == (ONE, pytest.approx(0.0508))
    assert [wall.inputs[0] for wall in found.walls] == [found.walls[0].inputs[0]] * 2
    assert found.walls[1].data.diameter_effect[0, 0] == pytest.approx(0.0005 / 0.0508)
    flow = [wall.data.velocity * wall.data.diameter**2 for wall in found.walls]
    assert flow[0] == pytest.approx(wall_of((0.05,), (0.001,)).data.velocity * 0.05**2)
    assert flow[1] == pytest.approx(flow[0] * (0.051 / 0.05) ** 2)


def test_a_statement_that_is_repeated_is_no_new_measurement() -> None:
    walls = [wall_of((0.05,), (0.001,))] * 9 + [wall_of((0.051,), (0.001,))]
    assert one_bore(walls).diameter == pytest.approx(0.0505)


def test_without_stated_uncertainty_a_rounding_is_one_bore_and_a_millimetre_is_not() -> None:
    assert one_bore([wall_of((0.05,), (0.0,)), wall_of((0.05003,), (0.0,))]).kind == ONE
    assert one_bore([wall_of((0.05,), (0.0,)), wall_of((0.051,), (0.0,))]).kind == DIFFER


def test_reaches_that_are_divided_otherwise() -> None:
    """A wall of one bore throughout may be divided as one likes; of two bores nothing tells which stands against which."""
    whole, halves = wall_of((0.05,), (0.001,)), wall_of((0.051, 0.051), (0.001, 0.001))
    assert one_bore([whole, halves]).kind == ONE
    assert one_bore([whole, halves]).walls[1].data.diameter.tolist() == pytest.approx([0.0505, 0.0505])
    assert one_bore([whole, wall_of((0.05, 0.06), (0.001, 0.001))]).kind == UNMATCHED


def left_out_once(scores: tuple[float, ...], relative_scatter: float) -> Part:
    wall = wall_of((0.05,), (0.001,))
    off, score = np.zeros((8, 1), bool), np.zeros((8, 1))
    for run, value in enumerate(scores):
        off[run], score[run] = True, value
    fit = dataclasses.replace(
        wall.fit,
        used=~off,
        off_law=off,
        score=score,
        relative_scatter=relative_scatter,
        reading_scatter=0.0,
        dof=6.0,
    )
    return Part(wall.data, fit, ("bore",), True)


def test_runs_that_chance_may_have_put_off_the_law_are_taken_back() -> None:
    """By hand: the scatter of 1 % with ν = 6 and a run at z = 3 becomes 1 % √((6 + 9)/7) with ν = 7."""
    part = left_out_once((3.0, -5.0), 0.01)
    fit = with_left_out(part).fit
    assert fit.used.ravel().tolist() == [True, False] + [True] * 6
    assert fit.relative_scatter == pytest.approx(0.01 * np.sqrt(15 / 7))
    assert fit.dof == 7.0
    assert with_left_out(left_out_once((3.0,), np.nan)).fit.dof == 6.0
    gross = left_out_once((5.0,), 0.01)
    assert with_left_out(gross) is gross


def test_the_scatter_that_runs_alone_tell_holds_their_own_errors() -> None:
    """Two surveys of eight runs, nothing shared: 6 + 6 degrees of freedom, whatever part of the scatter was stated."""
    part = left_out_once((), 0.01)
    data = dataclasses.replace(part.data, diameter_effect=np.zeros((1, 1)))
    both = [dataclasses.replace(part, data=data, keys=(n,)) for n in range(2)]
    found = joint_levels(both, 1e5, 0.05)
    assert freedom_of(found, np.array([-1.0, 1.0])) == pytest.approx(12.0)
