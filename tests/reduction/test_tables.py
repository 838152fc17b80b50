"""The tables of a reduction: their columns and kinds, a reason where a value is missing, levels, repeatability."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from scipy.stats import t as student

from gradeline.reduction import reduce
from gradeline.reduction.tables import DRAWING_TABLES, RESULT_TABLES
from gradeline.survey import Fitting
from tests.reduction.benches import FAST, FLOWS, TAPS, TUBE, main, tube
from tests.simulate.surveys import NominalFitting, Uncertainties

#: The columns of DESIGN §9, written out again: the specification is not to move unseen.
COLUMNS = {
    "reaches": "reach wall length diameter shared_curve_p reason",
    "runs": "run reach flow velocity temperature density kinematic_viscosity reynolds regime slope slope_u "
    "slope_u_random slope_dof slope_low slope_high friction_factor friction_factor_u friction_factor_low "
    "friction_factor_high roughness roughness_low roughness_high roughness_signed observations_used "
    "straightness_p reason",
    "walls": "wall roughness roughness_low roughness_high roughness_upper95 roughness_resolved "
    "hydraulically_smooth roughness_reynolds law_trend law_trend_u runs_used hazen_williams_c manning_n reason",
    "fittings": "fitting loss_coefficient loss_coefficient_u loss_coefficient_low loss_coefficient_high "
    "equivalent_length reason",
    "taps": "tap offset offset_u edge_coefficient edge_coefficient_u diagnosis reason",
    "heads": "run gauge tap tap_2 chainage head energy_head fitted_head residual standardized_residual used flag reason",
    "flags": "kind run tap reading expected score suggestion",
    "budget": "quantity subject input contribution_u variance_share",
}
VALUES = {"runs": "slope", "walls": "roughness", "fittings": "loss_coefficient"}


def few(runs=None, taps=None, **more):
    """Return the tube cut down to some runs and taps."""
    survey, _ = tube(more.pop("flows", FAST), **more)
    keep = slice(None) if taps is None else slice(taps)
    names = [tap.name for tap in survey.taps[keep]]
    rows = slice(None) if runs is None else slice(runs)
    return replace(
        survey,
        taps=survey.taps[keep],
        observations=survey.observations[keep],
        runs=survey.runs.iloc[rows].reset_index(drop=True),
        **{name: getattr(survey, name).iloc[rows][names] for name in ("readings", "repeats", "spreads")},
    )


def nothing_read():
    survey = few()
    gone = survey.readings.copy()
    gone.iloc[1] = np.nan
    return replace(survey, readings=gone)


def all_zero():
    survey = few()
    return replace(survey, readings=survey.readings * 0.0)


def valves_side_by_side():
    survey, _ = tube(FAST, fittings=[NominalFitting(2.9, 1.5)])
    return replace(survey, fittings=(Fitting("a", 2.7, None), Fitting("b", 2.8, None)))


SURVEYS = {
    "sound": lambda: tube((0.0, *FLOWS), sigma=4e-4, stated=Uncertainties(reading=4e-4, flow=4e-3))[0],
    "main": lambda: main(sigma=5e-3, stated=Uncertainties(reading=5e-3))[0],
    "smooth": lambda: tube(FAST, sigma=2e-3, reaches=[replace(TUBE, roughness=0.0)])[0],
    "one tap": lambda: few(taps=1),
    "two taps": lambda: few(taps=2),
    "three taps": lambda: few(taps=3, sigma=1e-3),
    "one run": lambda: few(runs=1, sigma=1e-3),
    "one run, two taps": lambda: few(runs=1, taps=2),
    "one laminar run, two taps": lambda: few(runs=1, taps=2, flows=FLOWS),
    "only laminar": lambda: few(flows=(1e-5, 2e-5, 3e-5), sigma=1e-5),
    "only static": lambda: few(flows=(0.0, 0.0), sigma=1e-3),
    "one static": lambda: few(flows=(0.0,), sigma=1e-3, taps=1),
    "a run not read": nothing_read,
    "all zero": all_zero,
    "valves side by side": valves_side_by_side,
}


@pytest.fixture(scope="module", params=SURVEYS)
def reduced(request):
    return request.param, reduce(SURVEYS[request.param]())


def test_the_specification_is_that_of_the_design():
    assert {name: " ".join(columns) for name, columns in RESULT_TABLES.items()} == COLUMNS


def test_tables_have_their_columns_and_kinds(reduced):
    _, reduction = reduced
    for name, columns in {**RESULT_TABLES, **DRAWING_TABLES}.items():
        table = getattr(reduction, name)
        assert list(table.columns) == list(columns), name
        for column, kind in columns.items():
            if kind.kind == "number":
                assert table[column].dtype == float, (name, column)
                assert not np.isinf(table[column]).any() or name == "walls", (name, column)
            elif kind.kind == "truth":
                assert table[column].dtype == pd.BooleanDtype(), (name, column)
            else:
                assert table[column].dtype == object, (name, column)
                assert all(value is None or isinstance(value, str) for value in table[column]), (name, column)


def test_a_reason_stands_where_a_value_is_missing(reduced):
    _, reduction = reduced
    for name, value in VALUES.items():
        table = getattr(reduction, name)
        missing = table[table[value].isna()]
        assert missing["reason"].notna().all(), name
    runs = reduction.runs
    for column in ("slope_u", "friction_factor", "roughness", "slope_low"):
        assert runs[runs[column].isna()]["reason"].notna().all(), column
    for table, column in (("walls", "roughness_high"), ("walls", "law_trend"), ("taps", "offset")):
        frame = getattr(reduction, table)
        assert frame[frame[column].isna()]["reason"].notna().all(), column
    heads = reduction.heads
    assert heads[~heads["used"] & (heads["flag"].notna() | heads["head"].isna())]["reason"].notna().all()
    reaches = reduction.reaches
    assert reaches[reaches["shared_curve_p"].isna()]["reason"].notna().all()


def test_every_run_and_reading_has_its_row(reduced):
    name, reduction = reduced
    survey = SURVEYS[name]()
    assert len(reduction.runs) == len(survey.runs) * len(survey.reaches)
    assert len(reduction.heads) == survey.readings.size
    assert reduction.taps["tap"].tolist() == [tap.name for tap in survey.taps]
    assert list(dict.fromkeys(reduction.runs["run"])) == survey.runs["run"].tolist()


@pytest.mark.parametrize(
    ("name", "table", "reason"),
    [
        ("one tap", "runs", "the usable taps do not determine the slope of this reach"),
        ("a run not read", "runs", "no usable reading in this run"),
        ("all zero", "runs", "no loss of head could be measured: S is not above zero"),
        ("one run, two taps", "runs", "no uncertainty without a stated one"),
        ("only laminar", "runs", "laminar: the friction does not depend on the wall"),
        ("only static", "runs", "static run"),
        ("only laminar", "walls", "no turbulent run: only turbulent friction depends on the wall"),
        ("only static", "walls", "no turbulent run"),
        ("all zero", "walls", "in no turbulent run is the slope above zero and twice its uncertainty"),
        ("one run, two taps", "walls", "nothing tells how sure the roughness is"),
        ("smooth", "walls", "not told from zero"),
        ("valves side by side", "fittings", "may lie between the same taps"),
    ],
)
def test_the_reason_is_the_right_one(name, table, reason):
    reasons = getattr(reduce(SURVEYS[name]()), table)["reason"].dropna()
    assert reasons.str.contains(reason, regex=False).any(), reasons.tolist()


def test_two_taps_are_a_difference_of_heads():
    """Nothing stated, two taps: S is the fall between them, and the scatter that of S about the law (Student, runs − 1)."""
    _, truth = tube(FAST)
    found = reduce(few(taps=2)).runs
    np.testing.assert_allclose(found["slope"], truth.slope[:, 0], rtol=1e-5)
    assert (found["slope_dof"] == len(FAST) - 1).all()
    assert (found["slope_u"] > 0).all()


def test_intervals_are_students():
    """The scatter is judged from 4 runs × 8 degrees of freedom; nothing else is stated."""
    survey, _ = tube(FAST, sigma=1e-3, seed=5)
    by_level = {level: reduce(survey, level=level).runs for level in (0.95, 0.99)}
    for level, runs in by_level.items():
        # the pooled scale keeps its runs' freedom (two parameters a run), and may lose some to trimming
        assert (runs["slope_dof"] <= 32).all()
        assert (runs["slope_dof"] > 20).all()
        times = student.ppf(0.5 + level / 2, runs["slope_dof"])
        np.testing.assert_allclose(runs["slope_high"] - runs["slope"], times * runs["slope_u"], rtol=1e-6)
        np.testing.assert_allclose(runs["slope"] - runs["slope_low"], times * runs["slope_u"], rtol=1e-6)
        np.testing.assert_allclose(
            runs["friction_factor_high"] - runs["friction_factor"],
            times * runs["friction_factor_u"],
            rtol=1e-6,
        )
    dof = by_level[0.95]["slope_dof"]
    ratio = student.ppf(0.995, dof) / student.ppf(0.975, dof)
    narrow, wide = by_level[0.95], by_level[0.99]
    np.testing.assert_allclose(
        (wide["slope_high"] - wide["slope_low"]) / (narrow["slope_high"] - narrow["slope_low"]),
        ratio,
        rtol=1e-6,
    )
    np.testing.assert_allclose(wide["slope_u"], narrow["slope_u"], rtol=1e-12)


def test_a_higher_level_widens_the_wall_and_the_fitting():
    survey, _ = main(sigma=1e-2, seed=2)
    narrow, wide = reduce(survey), reduce(survey, level=0.99)
    assert (wide.walls["roughness_low"] < narrow.walls["roughness_low"]).all()
    assert (wide.walls["roughness_high"] > narrow.walls["roughness_high"]).all()
    assert wide.walls["roughness"].item() == pytest.approx(narrow.walls["roughness"].item(), rel=1e-9)
    valve = [one.fittings.iloc[1] for one in (narrow, wide)]
    assert valve[1]["loss_coefficient_high"] > valve[0]["loss_coefficient_high"]
    assert any("intervals cover 99 %" in text for text in wide.assumptions)


def test_two_reductions_are_equal():
    survey, _ = tube((0.0, *FLOWS), sigma=1e-3, seed=3, slips={(4, 2): 0.03})
    one, other = reduce(survey), reduce(survey)
    for name in {**RESULT_TABLES, **DRAWING_TABLES}:
        pd.testing.assert_frame_equal(getattr(one, name), getattr(other, name))
    assert (one.assumptions, one.cautions) == (other.assumptions, other.cautions)


def test_the_survey_is_left_as_it_was():
    survey, _ = tube((0.0, *FAST), sigma=1e-3, seed=3)
    runs, readings = survey.runs.copy(deep=True), survey.readings.copy(deep=True)
    reduce(survey)
    pd.testing.assert_frame_equal(survey.runs, runs)
    pd.testing.assert_frame_equal(survey.readings, readings)


def test_the_grade_lines_join_the_readings():
    """At a tap the drawn hydraulic grade line is the fitted head less the velocity head; it falls by S a metre."""
    survey, truth = tube(FAST)
    found = reduce(survey)
    lines = found.grade_lines[found.grade_lines["run"] == "4"]
    at_taps = lines[lines["chainage"].isin(TAPS)].drop_duplicates("chainage")
    heads = found.heads[found.heads["run"] == "4"]
    np.testing.assert_allclose(at_taps["piezometric_head"], heads["head"], rtol=0, atol=1e-7)
    np.testing.assert_allclose(at_taps["energy_head"], heads["energy_head"], rtol=0, atol=1e-7)
    ends = lines.iloc[[0, -1]]
    fall = ends["energy_head"].iloc[0] - ends["energy_head"].iloc[1]
    assert fall == pytest.approx(5.5 * truth.slope[3, 0], rel=1e-6)
    np.testing.assert_allclose(lines["crown"] - lines["elevation"], TUBE.diameter / 2, rtol=1e-9)


def test_the_bore_that_would_be_told():
    """The roughness on a bore 1 % wider, at the same flows, is that of a survey that states that bore."""
    survey, _ = tube(FAST)
    table = reduce(survey).bore_sensitivity.set_index("diameter_change")["roughness"]
    wider = replace(
        survey,
        reaches=(
            replace(
                survey.reaches[0], diameter=replace(survey.reaches[0].diameter, value=TUBE.diameter * 1.01)
            ),
        ),
    )
    assert table[0.0] == pytest.approx(1e-4, rel=1e-4)
    assert table[0.01] == pytest.approx(reduce(wider).walls["roughness"].item(), rel=0.05)
    changes = reduce(survey).bore_sensitivity["friction_factor_change"].to_numpy(float)
    np.testing.assert_allclose(changes, (1 + table.index.to_numpy(float)) ** 5 - 1, rtol=1e-12)
