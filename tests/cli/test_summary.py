"""`gradeline reduce --summary`: where it goes, and what is never replaced."""

import csv

import pytest
from typer.testing import CliRunner

from gradeline.cli.app import app

QUICK = ("--formats", "json", "--no-monte-carlo", "--jobs", "1")


def run(*arguments):
    return CliRunner().invoke(app, [str(argument) for argument in arguments], prog_name="gradeline")


def test_several_surveys_into_one_folder_have_one_with_the_bad_one_in_it(survey, bad_survey, tmp_path):
    out = tmp_path / "out"
    result = run("reduce", survey, bad_survey, "--out", out, *QUICK)
    assert result.exit_code == 3
    good, bad = csv.DictReader((out / "summary.csv").read_text().splitlines())
    assert (good["survey"], good["title"], good["wall"]) == (str(survey), "Bench line", "copper")
    assert (good["exit_code"], good["problem"]) == ("0", "")
    assert (bad["survey"], bad["exit_code"], bad["roughness"]) == (str(bad_survey), "3", "")
    assert "readings.csv row 3, T2 [mm]: '45x' is not a number" in bad["problem"]
    assert result.stderr.endswith(
        f"1 of 2 surveys reduced; results in {out}; summary in {out / 'summary.csv'}\n"
    )


def test_one_survey_has_one_only_where_asked_for(survey, tmp_path):
    assert run("reduce", survey, "--out", tmp_path / "a", *QUICK).exit_code == 0
    assert not list(tmp_path.rglob("summary.csv"))
    result = run(
        "reduce", survey, "--out", tmp_path / "b", "--summary", tmp_path / "made" / "all.csv", *QUICK
    )
    assert result.exit_code == 0
    assert len(list(csv.DictReader((tmp_path / "made" / "all.csv").read_text().splitlines()))) == 1


@pytest.mark.parametrize("ending", ["csv", "parquet"])
def test_an_earlier_one_is_replaced_only_when_asked_for_and_nothing_is_reduced(survey, tmp_path, ending):
    summary = tmp_path / f"all.{ending}"
    asked = ("reduce", survey, "--out", tmp_path / "out", "--summary", summary, *QUICK)
    assert run(*asked).exit_code == 0
    before = summary.read_bytes()
    again = run("reduce", survey, "--out", tmp_path / "other", "--summary", summary, *QUICK)
    assert again.exit_code == 4
    assert again.stderr == (
        f"{summary} is there already, so nothing was reduced; replace it with --overwrite, or name another file with --summary\n"
    )
    assert not (tmp_path / "other").exists()
    assert run(*asked, "--overwrite").exit_code == 0
    assert summary.read_bytes() == before


@pytest.mark.parametrize("ending", ["csv", "parquet"])
def test_a_file_that_is_no_summary_is_never_replaced(survey, tmp_path, ending):
    mine = tmp_path / f"mine.{ending}"
    mine.write_text("name,phone\n")
    result = run("reduce", survey, "--out", tmp_path / "out", "--summary", mine, "--overwrite", *QUICK)
    assert result.exit_code == 4
    assert f"{mine} is no summary of surveys, so it is not replaced" in result.stderr
    assert mine.read_text() == "name,phone\n"


def test_another_ending_is_told_with_the_rule(survey, tmp_path):
    result = run("reduce", survey, "--summary", tmp_path / "all.xlsx", *QUICK)
    assert result.exit_code == 2
    assert "must end in .csv or .parquet" in " ".join(result.stderr.replace("│", " ").split())


def test_a_survey_called_as_the_summary_is_told(survey, bad_survey, tmp_path):
    other = bad_survey.rename(bad_survey.with_name("summary.csv"))
    result = run("reduce", survey, other, "--out", tmp_path / "out", *QUICK)
    assert result.exit_code == 2
    assert "where the summary would go" in " ".join(result.stderr.replace("│", " ").split())
