"""What a reader sees of a comparison: sentences, the table, figures, files."""

from __future__ import annotations

import json

import numpy as np
import pytest
from matplotlib.figure import Figure

import gradeline
from gradeline.errors import OutputError
from gradeline.quantities.printing import US_DISPLAY
from gradeline.report.comparison import comparison_found, comparison_text, survey_table
from gradeline.report.comparison_output import comparison_record, write_comparison
from gradeline.report.figures.comparison import draw_factors, draw_roughness


@pytest.fixture(scope="module")
def grown(ageing):
    return gradeline.compare(ageing, until="2035-01-01")


def test_a_real_change_is_said_with_its_size_its_rate_and_the_date(grown) -> None:
    said = " ".join(comparison_found(grown))
    assert "The friction differs among the 3 surveys beyond chance" in said
    assert "The roughness grows by 0.00" in said
    assert "On 2035-01-01 the roughness is then expected at 0.1" in said


def test_no_change_is_said_with_what_would_have_been_told(unchanged) -> None:
    said = comparison_found(gradeline.compare(unchanged))
    assert len(said) == 1
    assert said[0].startswith("No change is told from chance. f at Re 28\u202f000 differs by ")
    assert "would have been told; ε differs by −0." in said[0]


def test_where_no_roughness_is_told_f_is_compared_and_that_is_said(smooth) -> None:
    said = comparison_found(gradeline.compare(smooth))
    assert "it is f itself that is compared, against the law." in said[0]
    assert said[1] == "No survey tells the roughness from zero: no rate of growth."


def test_the_text_keeps_its_width_and_says_what_was_common(grown) -> None:
    text = comparison_text(grown)
    assert max(map(len, text.split("\n"))) <= 100
    assert "Common to all, and taken out: bore, tap chainage (10)." in text
    assert "ε = ε₀ + α t (Colebrook and White 1937)" in text.replace("\n    ", " ")
    assert "(in)" in comparison_text(grown, US_DISPLAY)


def test_the_table_has_a_row_a_survey(grown) -> None:
    table = survey_table(grown, "wall")
    assert len(table.rows) == 3
    assert table.rows[0][-2:] == ("–", "–")
    assert table.rows[2][-1] == "real"
    assert table.rows[2][-2].startswith("+")


def test_the_roughness_is_drawn_by_date_with_its_line(grown) -> None:
    ax = Figure().subplots()
    drawn = draw_roughness(ax, grown, "wall")
    assert ax.get_ylabel() == "roughness ε (mm)"
    assert ax.get_xlabel() == "date"
    assert drawn.points.get_ydata() == pytest.approx(1e3 * grown.surveys["roughness"].to_numpy())
    assert drawn.points.get_xdata() == pytest.approx([2020.164, 2022.162, 2025.162], abs=0.002)
    assert drawn.beyond.get_ydata()[-1] == pytest.approx(1e3 * grown.ageing["roughness"].iloc[-1])
    assert drawn.beyond.get_ydata()[0] == drawn.line.get_ydata()[-1]


def test_bounds_are_drawn_where_no_roughness_is_told(smooth) -> None:
    drawn = draw_roughness(Figure().subplots(), gradeline.compare(smooth), "wall")
    assert drawn.points is None
    assert len(drawn.bounds.get_ydata()) == 2


def test_all_runs_are_drawn_in_f_against_re(grown) -> None:
    ax = Figure().subplots()
    drawn = draw_factors(ax, grown, "wall")
    assert sum(len(line.get_xdata()) for line in drawn.runs.values()) == len(grown.runs) == 30
    assert set(drawn.laws) == set(drawn.runs)
    assert (ax.get_xlabel(), ax.get_ylabel()) == ("Reynolds number Re", "Darcy friction factor f")
    assert drawn.common.get_xdata()[0] == grown.walls["reynolds"].iloc[0]


def test_the_record_holds_no_nan(grown, smooth) -> None:
    for comparison in (grown, gradeline.compare(smooth)):
        record = json.loads(json.dumps(comparison_record(comparison), allow_nan=False))
        assert [row["survey"] for row in record["surveys"]] == comparison.surveys["survey"].tolist()
        assert record["surveys"][0]["change_p"] is None


def test_files_are_written_whole_and_never_over_anothers(grown, tmp_path) -> None:
    write_comparison(grown, tmp_path / "out")
    assert sorted(path.name for path in (tmp_path / "out").iterdir()) == [
        "ageing.csv",
        "comparison.json",
        "comparison.txt",
        "figures",
        "runs.csv",
        "shared.csv",
        "surveys.csv",
        "walls.csv",
    ]
    assert (tmp_path / "out/figures/roughness_1.png").read_bytes().startswith(b"\x89PNG")
    with pytest.raises(
        OutputError, match=r"is not empty .* or replace an earlier comparison with --overwrite"
    ):
        write_comparison(grown, tmp_path / "out")
    write_comparison(grown, tmp_path / "out", overwrite=True)
    (tmp_path / "out/notes.txt").write_text("mine")
    with pytest.raises(OutputError, match=r"holds notes\.txt, which is no part of a comparison"):
        write_comparison(grown, tmp_path / "out", overwrite=True)
    assert (tmp_path / "out/notes.txt").read_text() == "mine"


def test_an_odd_survey_among_many_is_marked_in_table_and_figure(make) -> None:
    relative = np.full(8, 2e-3)
    relative[5] = 4e-3
    found = gradeline.compare(make(relative, [None] * 8, seed=9))
    assert found.surveys["odd"].tolist() == [False] * 5 + [True] + [False] * 2
    assert "odd" in survey_table(found, "wall").rows[5][-1]
    assert "Odd among the 8: survey 6 (score " in " ".join(comparison_found(found))
    ax = Figure().subplots()
    drawn = draw_roughness(ax, found, "wall")
    assert drawn.odd.get_xdata().tolist() == [5.0]
    assert ax.get_xlabel() == "survey"
    assert set(draw_factors(Figure().subplots(), found, "wall").runs) == {
        "others",
        "survey 1",
        "survey 6",
        "survey 8",
    }
