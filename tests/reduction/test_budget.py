"""The uncertainty budget: each contribution against central differences of whole reductions, and sums against the tables."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gradeline.quantities import Measured
from gradeline.reduction import reduce
from gradeline.reduction.budget import grouped
from gradeline.reduction.heads import Input
from gradeline.survey import Site
from tests.reduction.benches import (
    FAST,
    MAIN,
    main,
    tube,
    with_bore,
    with_gauge,
    with_runs,
    with_stated,
    with_tap,
)
from tests.simulate.surveys import NominalReach, Uncertainties

#: Of the stated value, in standard uncertainties, to either side.
STEP = 0.05
STATED = Uncertainties(reading=5e-3, flow=4e-3, flow_scale=3e-3, temperature=0.2)


def quick(survey, **more):
    return reduce(survey, monte_carlo=False, **more)


@pytest.fixture(scope="module")
def survey():
    """Two bores, a contraction, a valve whose K is fitted, all that can be stated stated; readings without noise."""
    made, _ = main(stated=STATED)
    made = with_gauge(made, scale_u=1e-3)
    for place, reach in enumerate(MAIN):
        made = with_bore(made, place, reach.diameter, (4e-4, 3e-4)[place])
    return with_tap(with_tap(made, 2, chainage_u=0.05), 7, chainage_u=0.08)


@pytest.fixture(scope="module")
def there(survey):
    return quick(survey)


def values(reduction):
    """S and f of every run and reach, ε and K by name, as the budget names them."""
    runs = reduction.runs
    found = {}
    for row in runs.to_dict("records"):
        subject = f"run {row['run']}, {row['reach']}"
        found["slope", subject] = row["slope"]
        found["friction_factor", subject] = row["friction_factor"]
    for row in reduction.walls.to_dict("records"):
        found["roughness", row["wall"]] = row["roughness"]
    for row in reduction.fittings.to_dict("records"):
        found["loss_coefficient", row["fitting"]] = row["loss_coefficient"]
    return found


def hold(there, name, shifts, *, rtol=0.01):
    """Hold all contributions of an input against the root sum of squares of (y₊ − y₋)/2 h over its parts."""
    squares = {}
    for shift in shifts:
        above, below = (values(quick(shift(part))) for part in (STEP, -STEP))
        for key in above:
            squares[key] = squares.get(key, 0.0) + ((above[key] - below[key]) / (2 * STEP)) ** 2
    rows = there.budget[there.budget["input"] == name]
    assert len(rows) >= 8, "of S and f in both reaches, of ε and of K"
    for row in rows.to_dict("records"):
        assert row["contribution_u"] == pytest.approx(
            np.sqrt(squares[row["quantity"], row["subject"]]), rel=rtol
        ), (row["quantity"], row["subject"])


def test_the_bores(survey, there):
    hold(
        there,
        "bore",
        [
            lambda part, place=place: with_bore(
                survey, place, MAIN[place].diameter + part * (4e-4, 3e-4)[place], (4e-4, 3e-4)[place]
            )
            for place in (0, 1)
        ],
    )


def test_the_calibration_of_the_flow(survey, there):
    hold(
        there,
        "flow calibration",
        [lambda part: with_runs(survey, flow=survey.runs["flow"] * (1 + part * 3e-3))],
    )


def test_the_flow_of_each_run(survey, there):
    def one(run):
        def shift(part):
            flow = survey.runs["flow"].to_numpy(float).copy()
            flow[run] *= 1 + part * 4e-3
            return with_runs(survey, flow=flow)

        return shift

    hold(there, "flow of each run", [one(run) for run in range(len(survey.runs))])


def test_the_chainages_of_two_taps(survey, there):
    hold(
        there,
        "tap chainage",
        [
            lambda part, place=place, u=u: with_tap(
                survey, place, chainage=survey.taps[place].chainage + part * u
            )
            for place, u in ((2, 0.05), (7, 0.08))
        ],
        rtol=0.02,
    )


def test_the_scale_of_the_board(survey, there):
    def shift(part):
        return replace(survey, readings=survey.readings * (1 + part * 1e-3))

    hold(there, "gauge scale", [shift])


def test_the_shares_are_of_the_variance_in_the_tables(there):
    budget = there.budget
    sums = budget.groupby(["quantity", "subject"])
    np.testing.assert_allclose(sums["variance_share"].sum(), 1.0, rtol=1e-12)
    total = sums["contribution_u"].agg(lambda part: np.sqrt((part**2).sum()))
    runs = {f"run {row['run']}, {row['reach']}": row for row in there.runs.to_dict("records")}
    for (quantity, subject), u in total.items():
        if quantity in ("slope", "friction_factor"):
            assert u == pytest.approx(runs[subject][f"{quantity}_u"], rel=1e-7)
        if quantity == "loss_coefficient":
            row = there.fittings[there.fittings["fitting"] == subject].iloc[0]
            assert u == pytest.approx(row["loss_coefficient_u"], rel=1e-7)
    assert {"slope", "friction_factor", "roughness", "loss_coefficient"} <= {key[0] for key in total.index}


def test_a_resolved_roughness_is_as_uncertain_as_half_its_interval(there):
    """Where ε is far from zero its likelihood is all but normal, so u is half the interval over 1.96."""
    wall = there.walls.iloc[0]
    own = there.budget[there.budget["quantity"] == "roughness"]
    u = np.sqrt((own["contribution_u"] ** 2).sum())
    assert u == pytest.approx((wall["roughness_high"] - wall["roughness_low"]) / 2 / 1.96, rel=0.05)


def test_only_the_fastest_a_middle_and_the_slowest_turbulent_run_have_one(there):
    own = there.budget[there.budget["quantity"] == "slope"]
    first = there.runs["reach"].iloc[0]
    shown = [subject for subject in dict.fromkeys(own["subject"]) if subject.endswith(first)]
    assert shown == [f"run {run}, {first}" for run in ("6", "4", "1")]
    assert any("fastest, a middle and the slowest" in said for said in there.assumptions)


def test_half_the_input_that_pays_most_is_what_a_survey_with_half_of_it_says(survey, there):
    """The improvement of ε against a second reduction in which the named uncertainty is halved."""
    rows = there.improvements[there.improvements["quantity"] == "roughness"]
    row = rows.iloc[0]
    halves = {
        "bore": lambda: with_bore(with_bore(survey, 0, MAIN[0].diameter, 2e-4), 1, MAIN[1].diameter, 1.5e-4),
        "flow calibration": lambda: with_stated(survey, flow_scale=1.5e-3),
        "reading scatter": lambda: with_gauge(survey, reading_u=2.5e-3),
    }
    now = {}
    for name, half in halves.items():
        wall = quick(half()).walls.iloc[0]
        now[name] = (wall["roughness_high"] - wall["roughness_low"]) / 2 / 1.96
    assert row["input"] == min(now, key=now.get)
    assert row["u_halved"] == pytest.approx(now[row["input"]], rel=0.02)
    wall = there.walls.iloc[0]
    assert row["u"] == pytest.approx((wall["roughness_high"] - wall["roughness_low"]) / 2 / 1.96, rel=0.02)


def test_a_wall_not_told_from_smooth_has_the_budget_of_its_upper_bound():
    smooth = NominalReach(0.0, 5.5, 0.02664, 1e-7)
    survey, _ = tube(FAST, stated=Uncertainties(reading=2e-4), reaches=[smooth])
    found = quick(with_bore(survey, 0, 0.02664, 1e-4))
    wall = found.walls.iloc[0]
    assert not wall["roughness_resolved"]
    own = found.budget[found.budget["subject"] == wall["wall"]]
    assert set(own["quantity"]) == {"roughness_upper95"}
    # Near zero the law is all but linear in ε: the bound lies 1.645 standard uncertainties above the estimate.
    u = np.sqrt((own["contribution_u"] ** 2).sum())
    assert u == pytest.approx((wall["roughness_upper95"] - wall["roughness"]) / 1.645, rel=0.02)
    assert any("not told from zero" in said and "upper bound" in said for said in found.assumptions)
    row = found.improvements[found.improvements["quantity"] == "roughness_upper95"].iloc[0]
    assert row["bound"] == pytest.approx(wall["roughness_upper95"], rel=0.02)
    # The readings without noise lie on the law, so a survey with half the uncertainty shows what was to be expected.
    bore = quick(with_bore(survey, 0, 0.02664, 5e-5)).walls["roughness_upper95"].iloc[0]
    reading = (
        quick(with_gauge(with_bore(survey, 0, 0.02664, 1e-4), reading_u=1e-4))
        .walls["roughness_upper95"]
        .iloc[0]
    )
    assert row["input"] == ("bore" if bore < reading else "reading scatter")
    assert row["bound_halved"] == pytest.approx(min(bore, reading), rel=0.02)


def test_what_nobody_stated_is_in_no_budget():
    survey, _ = tube(FAST, stated=Uncertainties(reading=2e-4))
    assert set(quick(survey).budget["input"]) == {"reading scatter"}


def test_gravity_enters_once():
    """f and S: u(g)/g each, S of open columns none."""
    survey, _ = tube(FAST, stated=Uncertainties(reading=2e-4))
    survey = replace(survey, site=Site(gravity=Measured(9.80665, 0.002)))
    own = quick(survey).budget
    own = own[own["input"] == "gravity"]
    assert set(own["quantity"]) >= {"friction_factor"}
    found = own[own["quantity"] == "friction_factor"].iloc[0]["contribution_u"]
    f = quick(survey).runs["friction_factor"].iloc[-1]
    assert found == pytest.approx(f * 0.002 / 9.80665, rel=1e-3)


def test_contributions_of_one_name_stand_together():
    """JCGM 100:2008, H.1, table H.1: 25, 9.7, 2.9 and 16.6 nm make u_c = 32 nm; 9.7 = √(5.8² + 3.9² + 6.7²)."""
    parts = grouped(
        [
            Input("comparator", "random"),
            Input("comparator", "1"),
            Input("comparator", "2"),
            Input("standard"),
        ],
        np.array([5.8, 3.9, -6.7, 25.0]),
        {"expansion": 2.9, "temperature": 16.6, "none": 0.0},
    )
    assert list(parts) == ["standard", "temperature", "comparator", "expansion"]
    assert parts["comparator"] == pytest.approx(9.7, abs=0.05)
    assert np.sqrt(sum(one**2 for one in parts.values())) == pytest.approx(32, abs=0.5)
