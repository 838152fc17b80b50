"""`check` and `reduce` on surveys in one file: where results go, and the exit codes of wrong use."""

from __future__ import annotations

from pathlib import Path

import pytest
from typer.testing import CliRunner

from gradeline.cli.app import app
from tests.files.conftest import BENCH

OPTIONS = ["--diameter", "26.6 mm", "--flow", "0.84 L/s", "--temperature", "18 degC"]


@pytest.fixture
def heads(tmp_path: Path) -> Path:
    folder = tmp_path / "Rohr in München"
    folder.mkdir()
    path = folder / "heads.csv"
    path.write_text("chainage [m];head [mm]\n0,5;812,5\n1;751\n1,5;690,2\n2;629,1\n", "utf-16")
    return path


def run(*arguments: str | Path) -> tuple[int, str, str]:
    result = CliRunner().invoke(app, [str(each) for each in arguments])
    return result.exit_code, result.stdout, result.stderr


def test_a_table_of_heads_is_reduced_beside_itself(heads: Path) -> None:
    code, out, _ = run("reduce", heads, *OPTIONS, "--formats", "json,csv")
    assert code == 0
    assert "friction factor" in out
    assert {path.name for path in heads.parent.iterdir()} == {"heads.csv", "heads_reduction"}
    assert (heads.parent / "heads_reduction" / "reduction.json").is_file()


def test_a_workbook_is_reduced_beside_itself(workbook) -> None:
    path = workbook()
    assert run("reduce", path, "--formats", "json")[0] == 0
    assert (path.parent / "bench_reduction" / "reduction.json").is_file()
    assert run("reduce", path, "--formats", "json")[0] == 4  # results are there already


@pytest.mark.parametrize("command", ["check", "reduce"])
def test_what_is_missing_beside_a_table_is_wrong_use(heads: Path, command: str) -> None:
    code, out, told = run(command, heads, "--diameter", "26.6 mm")
    assert (code, out) == (2, "")
    assert told.startswith(
        f"{heads}: one table of heads needs the flow and the temperature beside it; add "
        '--flow "0.84 L/s" --temperature "18 degC"'
    )


@pytest.mark.parametrize("command", ["check", "reduce"])
def test_options_beside_a_folder_are_wrong_use(command: str) -> None:
    code, _, told = run(command, BENCH, "--flow", "1 L/s")
    assert (code, told) == (2, f"{BENCH}: the survey says its flow itself; leave out --flow\n")


def test_check_tells_what_it_understood(heads: Path, workbook) -> None:
    code, out, _ = run("check", heads, *OPTIONS)
    assert code == 0
    assert "decimals of heads.csv are set off by a comma" in out
    assert run("check", workbook())[0] == 0


def test_a_table_at_fault_has_problems(heads: Path) -> None:
    heads.write_text("chainage [m],head [mm]\n0.5,x\n1,2\n", "utf-8")
    code, _, told = run("reduce", heads, *OPTIONS)
    assert code == 3
    assert "heads.csv row 2, head [mm]: 'x' is not a number" in told


def test_several_surveys_go_into_one_folder(heads: Path, tmp_path: Path) -> None:
    other = heads.with_name("second.csv")
    other.write_bytes(heads.read_bytes())
    assert run("reduce", heads, other, *OPTIONS, "--formats", "json", "--out", tmp_path / "all")[0] == 0
    assert {path.name for path in (tmp_path / "all").iterdir()} == {"heads", "second", "summary.csv"}
