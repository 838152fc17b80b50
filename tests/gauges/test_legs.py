"""Compound manometers: elevations with their uncertainty, and the spread of repeats."""

from __future__ import annotations

import numpy as np
import pytest

import gradeline
from gradeline.errors import SurveyError
from gradeline.reduction.heads import heads_of
from gradeline.reduction.media import media_of
from tests.gauges.conftest import FLOWS, RHO
from tests.gauges.test_reduction import ENDS, FALL, LEGS, MERCURY

# a lower meniscus kept at a mark by hand, the upper one read
MARKED = """
[gauge.c1]
kind = "compound manometer"
upstream = "T1"
downstream = "T6"
[[gauge.c1.leg]]
fluid = "water"
from = "T1"
to = "-0.4 m +/- 2 mm"
[[gauge.c1.leg]]
fluid = "mercury"
from = "-0.4 m"
to = "b"
[[gauge.c1.leg]]
fluid = "water"
from = "b"
to = "T6"
"""
COLUMN = {"c1 b [m]": -0.4 + FALL * RHO / (MERCURY - RHO)}


def heads_from(folder):
    survey = gradeline.read_survey(folder)
    return survey, heads_of(survey, media_of(survey))


def test_the_elevation_of_a_mark_is_one_error_of_both_its_legs(bench):
    """By hand: water ends and mercury begins 2 mm higher, so the head falls by (ρ_m/ρ − 1) 2 mm, 25 mm, in every run."""
    survey, heads = heads_from(bench(MARKED, COLUMN, ENDS))
    assert heads.observed[:, 0] == pytest.approx(FALL, abs=1e-5)
    (found,) = [one for one in heads.inputs if one.name == "gauge leg elevation"]
    assert found.subject == "c1"
    assert np.abs(found.heads[:, 0]) == pytest.approx((MERCURY / RHO - 1) * 0.002, rel=1e-5)
    assert not any("fixed elevation" in text for text in survey.cautions)
    runs = gradeline.reduce(survey, correct="none").runs
    shared = np.sqrt(runs["slope_u"] ** 2 - runs["slope_u_random"].fillna(0.0) ** 2).to_numpy(float)[1:]
    assert shared == pytest.approx((MERCURY / RHO - 1) * 0.002 / 5.1, rel=1e-4)


def test_the_mark_may_be_stated_from_either_leg(bench):
    other = (
        MARKED.replace('"-0.4 m +/- 2 mm"', '"X"')
        .replace('"-0.4 m"', '"-0.4 m +/- 2 mm"')
        .replace('"X"', '"-0.4 m"')
    )
    (one,), (two,) = (
        [
            each
            for each in heads_from(bench(toml, COLUMN, ENDS))[1].inputs
            if each.name == "gauge leg elevation"
        ]
        for toml in (MARKED, other)
    )
    assert one.heads == pytest.approx(two.heads)


def test_the_open_end_of_a_chain_has_its_error_too(bench):
    """By hand: mercury with a free surface 3 mm higher is ρ_m/ρ times 3 mm of head more, less the air's thousandth."""
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
to = "0.3 m +/- 3 mm"
"""
    _, heads = heads_from(bench(gauge, {"c1 a [m]": np.full(len(FLOWS), -0.2)}, {"T6": ("", 0.0)}))
    (found,) = [one for one in heads.inputs if one.name == "gauge leg elevation"]
    assert found.heads[:, 0] == pytest.approx((MERCURY - 1.2) / RHO * 0.003, rel=1e-4)


def test_an_elevation_without_uncertainty_is_a_caution(bench):
    survey, _ = heads_from(bench(MARKED.replace(" +/- 2 mm", ""), COLUMN, ENDS))
    assert (
        "The uncertainty of the fixed elevation of gauge 'c1' (-0.4 m) is not stated: it contributes nothing to the results."
        in survey.cautions
    )


def test_the_elevation_of_a_tap_has_its_uncertainty_in_the_table_of_taps(bench):
    gauge = MARKED.replace('from = "T1"', 'from = "0 m +/- 1 mm"')
    with pytest.raises(SurveyError) as caught:
        gradeline.read_survey(bench(gauge, COLUMN, ENDS))
    assert [str(problem) for problem in caught.value.problems] == [
        "survey.toml gauge.c1.leg[1].from: it is the elevation of the tap 'T1', whose uncertainty stands in taps.csv; write "
        "the tap's name here"
    ]


def test_repeats_of_a_compound_manometer_give_its_spread(bench):
    """Levels 1 and 3 mm apart in two repeats: standard deviations 1/√2 and 3/√2 mm, pooled √5/√2 mm by hand."""
    deflection = FALL * RHO / (MERCURY - RHO)
    folder = bench(LEGS, {"c1 a [m]": -deflection / 2 - 0.9, "c1 b [m]": deflection / 2 - 0.9}, ENDS)
    file = folder / "readings.csv"
    rows = file.read_text(encoding="utf-8").splitlines()
    cells = rows[-1].split(",")
    again = [*cells[:3], repr(float(cells[3]) + 0.001), repr(float(cells[4]) - 0.003)]
    file.write_text("\n".join([*rows, ",".join(again)]) + "\n", encoding="utf-8")
    survey = gradeline.read_survey(folder)
    assert survey.repeats["c1"].tolist() == [1, 1, 1, 1, 1, 2]
    assert survey.spreads["c1"].iloc[-1] == pytest.approx(0.001 * np.sqrt(5 / 2), rel=1e-9)
    assert survey.spreads["c1"].iloc[:-1].isna().all()


def test_that_spread_is_the_scatter_of_an_unstated_reading(bench):
    """Repeats 1 mm apart at both levels: 1/√2 mm each, so √2 (ρ_m/ρ − 1)/√2 mm of head over the 5.1 m between the taps."""
    deflection = FALL * RHO / (MERCURY - RHO)
    levels = {"c1 a [m]": -deflection / 2 - 0.9, "c1 b [m]": deflection / 2 - 0.9}
    folder = bench(LEGS.replace('uncertainty = "0.5 mm"\n', ""), levels, ENDS)
    file = folder / "readings.csv"
    heading, *rows = file.read_text(encoding="utf-8").splitlines()
    doubled = [
        ",".join([*cells[:3], *(repr(float(cell) + step) for cell in cells[3:])])
        for cells in (row.split(",") for row in rows)
        for step in (-0.0005, 0.0005)
    ]
    file.write_text("\n".join([heading, *doubled]) + "\n", encoding="utf-8")
    runs = gradeline.reduce(gradeline.read_survey(folder), correct="none").runs
    expected = 0.001 * (MERCURY / RHO - 1) / np.sqrt(2) / 5.1
    assert runs["slope_u_random"].to_numpy(float)[1:] == pytest.approx(expected, rel=0.05)
