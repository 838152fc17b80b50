"""Comparisons: what passes from the reductions to the tables, what is said, what is refused."""

from __future__ import annotations

import dataclasses

import numpy as np
import pandas as pd
import pytest

import gradeline
from gradeline.comparison.odd import odd_ones, theil_sen
from gradeline.comparison.tables import COMPARISON_TABLES
from gradeline.errors import UsageError
from tests.calibration.coverage import DIAMETER


def test_tables_have_their_columns(ageing) -> None:
    found = gradeline.compare(ageing, until="2035-01-01")
    for table, columns in COMPARISON_TABLES.items():
        assert list(getattr(found, table).columns) == list(columns), table


def test_growth_by_thirty_per_cent_is_found_with_its_rate(ageing) -> None:
    """The truth behind the surveys: ε of 53.2 µm, 3.19 µm a year, by 2035-01-01 100.6 µm."""
    found = gradeline.compare(ageing, until="2035-01-01")
    wall, rows = found.walls.iloc[0], found.surveys
    assert wall["changed"]
    assert rows["changed"].tolist()[2]
    assert wall["roughness_rate_low"] < 0.3 * 2e-3 * DIAMETER / 5 < wall["roughness_rate_high"]
    assert wall["roughness_rate_low"] > 0
    end = found.ageing.iloc[-1]
    assert end["date"] == "2035-01-01"
    assert end["beyond_surveys"]
    assert end["roughness_low"] < 2e-3 * DIAMETER * (1 + 0.06 * 14.84) < end["roughness_high"]
    assert end["friction_factor_low"] < end["friction_factor"] < end["friction_factor_high"]
    assert any("further than the 5 years" in text for text in found.cautions)


def test_flagged_readings_are_said_with_their_fate(unchanged) -> None:
    first, second = unchanged
    run, tap = first.heads.loc[first.heads["used"].fillna(False), ["run", "tap"]].iloc[0]
    flag = dict.fromkeys(first.flags.columns) | {"kind": "reading", "run": run, "tap": tap}
    flags = pd.concat([first.flags, pd.DataFrame([flag]).astype(object)], ignore_index=True)
    here = (first.heads["run"] == run) & (first.heads["tap"] == tap)
    for used, fate in ((True, "kept"), (False, "left out")):
        heads = first.heads.assign(used=first.heads["used"].mask(here, used))
        found = gradeline.compare([dataclasses.replace(first, flags=flags, heads=heads), second])
        (said,) = (text for text in found.cautions if "flagged (" in text)
        assert said.endswith(f"1 reading was flagged (run {run} tap {tap}) and {fate}.")


def test_what_the_surveys_found_alone_stands_beside(ageing) -> None:
    rows = gradeline.compare(ageing).surveys
    for row, reduction in zip(rows.to_dict("records"), ageing, strict=True):
        wall = reduction.walls.iloc[0]
        for name in ("roughness", "roughness_low", "roughness_high", "roughness_upper95"):
            assert row[name] == wall[name]


def test_the_order_is_that_of_the_dates(ageing) -> None:
    found = gradeline.compare(ageing[::-1], labels=["third", "second", "first"])
    assert found.dated
    assert found.surveys["survey"].tolist() == ["first", "second", "third"]


def test_a_common_bore_leaves_a_change_surer_than_the_two_intervals_say(unchanged) -> None:
    found = gradeline.compare(unchanged)
    row = found.surveys.iloc[1]
    apart = np.hypot(*(found.surveys["friction_factor_u"] / found.surveys["friction_factor"]))
    assert row["log_factor_change_u"] < 0.95 * apart
    same = gradeline.compare(unchanged, same_meter=True).surveys.iloc[1]
    assert same["log_factor_change_u"] < 0.8 * row["log_factor_change_u"]
    shared = found.shared.set_index("input")["common"]
    assert shared["bore"]
    assert shared["tap chainage"]
    assert not shared["flow calibration"]


def test_a_wall_not_told_from_smooth_is_compared_by_f(smooth) -> None:
    found = gradeline.compare(smooth)
    row = found.surveys.iloc[1]
    assert np.isfinite(row["log_factor_change"])
    assert np.isnan(row["roughness_change"])
    assert not found.walls["changed"].iloc[0]
    assert found.walls["reason"].iloc[0] == "no survey tells the roughness from zero: no rate of growth"


def test_a_bore_stated_otherwise_is_no_change_and_is_said(make) -> None:
    """One pipe, of which the second survey states a bore 2 % larger."""
    found = gradeline.compare(make((2e-3, 2e-3), (None, None), bores=(DIAMETER, 1.02 * DIAMETER)))
    assert found.shared.set_index("input")["common"]["bore"]
    assert not found.walls["changed"].iloc[0]
    assert any(
        "the stated bores differ beyond their uncertainties (26.6 mm in survey 1, 27.132 mm in survey 2)"
        in text
        for text in found.cautions
    )


def test_a_common_reynolds_number_outside_the_tests_is_said(unchanged) -> None:
    found = gradeline.compare(unchanged, reynolds=1e6)
    assert found.walls["reynolds"].iloc[0] == 1e6
    assert any("the common Re 1e+06 lies outside what was tested" in text for text in found.cautions)


def test_surveys_may_be_given_unreduced() -> None:
    survey = gradeline.read_survey("data_demo/copper_bench")
    later = dataclasses.replace(survey, source="later")
    found = gradeline.compare([survey, later])
    assert found.surveys["survey"].tolist() == ["copper_bench", "later"]
    assert found.walls["unchanged_p"].iloc[0] == pytest.approx(1.0)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"until": "2035"}, "'2035' is not a date; write it as 2035-01-01"),
        (
            {"until": "2021-01-01"},
            "until 2021-01-01, but the last survey is of 2025-03-01; give a later date",
        ),
        ({"reynolds": 2500.0}, "the common Reynolds number is 2500; roughness shows in turbulent flow alone"),
        (
            {"labels": ["a", "a", "b"]},
            "3 surveys have the labels a, a, b; give each a label of its own",
        ),
        ({"level": 0.99}, "intervals of level 0.95, and 0.99 is asked for; reduce all at one level"),
    ],
)
def test_what_cannot_be_used_is_refused(ageing, change, message) -> None:
    with pytest.raises(UsageError) as refused:
        gradeline.compare(ageing, **change)
    assert message in str(refused.value)


def test_one_survey_is_no_comparison(ageing) -> None:
    with pytest.raises(UsageError, match="takes two surveys or more; found 1"):
        gradeline.compare(ageing[:1])


def test_no_dates_no_line(unchanged) -> None:
    with pytest.raises(UsageError, match=r"give \[survey\] date in each survey.toml"):
        gradeline.compare(unchanged, until="2035-01-01")


def test_walls_of_other_names_are_not_matched(unchanged) -> None:
    bench = gradeline.reduce(gradeline.read_survey("data_demo/copper_bench"), monte_carlo=False)
    with pytest.raises(UsageError, match="no two surveys have a wall of one name"):
        gradeline.compare([unchanged[0], bench])


def test_the_score_is_the_distance_from_the_median() -> None:
    """Median 2, median absolute deviation 1: by hand, in units of u = 4, so that the stated uncertainties stand."""
    found = odd_ones(np.array([0.0, 1.0, 2.0, 2.0, 3.0, 50.0]), np.full(6, 4.0))
    assert found.widened == 1.0
    assert found.score.tolist() == [-0.5, -0.25, 0.0, 0.0, 0.25, 12.0]
    assert found.odd.tolist() == [False] * 5 + [True]


def test_uncertainties_too_small_are_widened_by_the_median_deviation() -> None:
    """1.4826 times a median absolute deviation of 1 (Rousseeuw and Croux 1993 for the factor, from memory), u = 0.1."""
    found = odd_ones(np.array([0.0, 1.0, 2.0, 2.0, 3.0, 4.0]), np.full(6, 0.1))
    assert found.widened == pytest.approx(14.826, rel=1e-4)
    assert not found.odd.any()


def test_five_are_too_few_to_call_one_odd() -> None:
    assert odd_ones(np.array([0.0, 0.0, 0.0, 0.0, 9.0]), np.ones(5)) is None


@pytest.mark.parametrize("count", [8, 12, 40])
@pytest.mark.parametrize("factor", [1.0, 3.0])
def test_sound_surveys_are_called_odd_in_one_case_of_twenty(count: int, factor: float) -> None:
    """Whether their uncertainties are right or three times too small."""
    rng = np.random.default_rng(count)
    cases = 2000
    odd = sum(
        bool(odd_ones(factor * rng.standard_normal(count), np.ones(count)).odd.any()) for _ in range(cases)
    )
    assert odd / cases <= 0.05 + 3 * np.sqrt(0.05 * 0.95 / cases)


def test_theil_and_sen_follow_the_many() -> None:
    times = np.arange(9.0)
    values = 0.5 * times
    values[-1] = 40.0
    assert theil_sen(values, times) == 0.5
