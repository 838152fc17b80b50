"""One table of chainages and heads, with bore, flow and temperature beside it."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from gradeline.errors import UsageError
from gradeline.loader import read_survey
from gradeline.reduction import reduce
from tests.files.conftest import problems_of, write_workbook

GIVEN = {"diameter": "26.6 mm +/- 0.1 mm", "flow": "0.84 L/s +/- 0.4 %", "temperature": "18 degC +/- 0.2 K"}
CHAINAGE = [0.5, 1.0, 1.5, 2.25, 3.0]
HEAD = [812.5, 751.0, 690.2, 598.6, 507.1]
ROWS = "".join(f"{x},{h}\n" for x, h in zip(CHAINAGE, HEAD, strict=True))


def heads_file(folder: Path, text: str = "chainage [m],head [mm]\n" + ROWS) -> Path:
    path = folder / "heads of pipe ä.csv"
    path.write_text(text, "utf-8")
    return path


def test_heads_are_piezometric_heads(tmp_path: Path) -> None:
    """Headed ``head``, the slope is the straight line's by numpy, to rounding.

    A piezometric head z + p/(ρ g) is what a column of the fluid alone would show: the air has no part in it. Taken as
    open columns, as they once were, heads that were worked out from pressures gave slopes 0.12 % too low.
    """
    reduction = reduce(read_survey(heads_file(tmp_path), **GIVEN))
    expected = -np.polyfit(CHAINAGE, HEAD, 1)[0] / 1000
    assert reduction.runs["slope"].tolist() == [pytest.approx(expected, rel=1e-12)]


@pytest.mark.parametrize("headed", ["reading", "column height"])
def test_readings_are_open_columns(tmp_path: Path, headed: str) -> None:
    """Against a straight line by numpy, and the hydrostatics of air beside water: h = R (1 − ρa/ρ).

    Densities at 18 °C: water 998.6 kg/m³ (IAPWS, rounded), air 1.21 kg/m³ (ideal gas, 101.3 kPa).
    """
    text = f"chainage [m],{headed} [mm]\n" + ROWS
    survey = read_survey(heads_file(tmp_path, text), **GIVEN)
    expected = -np.polyfit(CHAINAGE, HEAD, 1)[0] / 1000 * (1 - 1.21 / 998.6)
    assert reduce(survey).runs["slope"].tolist() == [pytest.approx(expected, rel=2e-5)]
    assert "the weight of the air beside them counts (0.12 %)" in survey.assumptions[0]


def test_heads_from_pressures_give_what_the_pressures_give(tmp_path: Path) -> None:
    """The kind ``head`` in a folder: h = z + p/(ρ g) by hand, against the same pressures read by gauges.

    Gauges at the taps' own elevation, all at 0 m, so that there is no air between them.
    """
    survey = read_survey(heads_file(tmp_path), **GIVEN)
    density = 998.595  # water at 18 °C, IAPWS-95 tables
    pressure = np.array(HEAD) / 1000 * density * 9.80665
    found = []
    for kind, unit, values in (("head", "mm", HEAD), ("pressure gauge", "Pa", pressure.tolist())):
        folder = tmp_path / kind
        folder.mkdir()
        (folder / "survey.toml").write_text(
            '[survey]\ntitle = "x"\n[[reach]]\nname = "line"\nfrom = "0.5 m"\nto = "3 m"\nwall = "pipe"\n'
            f'diameter = "26.6 mm"\n[gauge.g]\nkind = "{kind}"\n[site]\ngravity = "9.80665 m/s^2"\n',
            "utf-8",
        )
        (folder / "taps.csv").write_text(
            "tap,chainage [m],elevation [m]\n" + "".join(f"T{i},{x},0\n" for i, x in enumerate(CHAINAGE, 1))
        )
        (folder / "readings.csv").write_text(
            f"run,flow [L/s],temperature [degC],{','.join(f'T{i} [{unit}]' for i in range(1, 6))}\n"
            f"1,0.84,18,{','.join(map(repr, values))}\n"
        )
        found.append(reduce(read_survey(folder)))
    heads, gauges = found
    assert heads.runs["slope"].iloc[0] == pytest.approx(gauges.runs["slope"].iloc[0], rel=1e-5)
    assert heads.runs["slope"].iloc[0] == pytest.approx(reduce(survey).runs["slope"].iloc[0], rel=1e-12)
    assert any("are piezometric heads z + p/(ρ g) above datum" in one for one in heads.assumptions)


def test_two_columns_of_heads_are_one_too_many(tmp_path: Path) -> None:
    text = "chainage [m],head [mm],reading [mm]\n1,2,3\n2,1,2\n"
    assert problems_of(heads_file(tmp_path, text), **GIVEN)[0].endswith(
        "reading: the column 'head' holds the heads already; keep one of the two"
    )


def test_what_is_given_is_what_a_folder_would_say(tmp_path: Path) -> None:
    """The same as a survey written out in full, to the last digit."""
    folder = tmp_path / "written out"
    folder.mkdir()
    (folder / "survey.toml").write_text(
        '[survey]\ntitle = "x"\n[[reach]]\nname = "line"\nfrom = "0.5 m"\nto = "3 m"\nwall = "pipe"\n'
        'diameter = "26.6 mm +/- 0.1 mm"\n[gauge.heads]\nkind = "head"\n'
        '[uncertainty]\nflow = "0.4 %"\ntemperature = "0.2 K"\n',
        "utf-8",
    )
    (folder / "taps.csv").write_text(
        "tap,chainage [m]\n" + "".join(f"T{i},{x}\n" for i, x in enumerate(CHAINAGE, 1))
    )
    (folder / "readings.csv").write_text(
        f"run,flow [L/s],temperature [degC],{','.join(f'T{i} [mm]' for i in range(1, 6))}\n"
        f"1,0.84,18,{','.join(map(str, HEAD))}\n"
    )
    found, expected = reduce(read_survey(heads_file(tmp_path), **GIVEN)), reduce(read_survey(folder))
    for name in ("runs", "walls", "heads", "taps", "budget"):
        pd.testing.assert_frame_equal(getattr(found, name), getattr(expected, name), rtol=1e-14)


def test_named_taps_other_units_and_a_workbook(tmp_path: Path) -> None:
    plain = read_survey(heads_file(tmp_path), **GIVEN)
    rows = [["tap", "head [m]", "chainage [cm]", "note"]]
    rows += [[f"P{i}", h / 1000, 100 * x, ""] for i, (x, h) in enumerate(zip(CHAINAGE, HEAD, strict=True))]
    survey = read_survey(write_workbook(tmp_path / "heads.xlsx", {"Sheet1": rows}), **GIVEN)
    assert [tap.name for tap in survey.taps] == ["P0", "P1", "P2", "P3", "P4"]
    np.testing.assert_allclose(survey.readings, plain.readings, rtol=1e-15)
    np.testing.assert_allclose([tap.chainage for tap in survey.taps], CHAINAGE, rtol=1e-15)


def test_what_was_taken_for_granted_is_told(tmp_path: Path) -> None:
    survey = read_survey(heads_file(tmp_path), **GIVEN)
    name = "heads of pipe ä.csv"
    assert survey.title == "heads of pipe ä"
    assert [file.name for file in survey.files] == [name]
    assert survey.assumptions[:3] == (
        f"{name} is one run of water: its heads are taken as piezometric heads z + p/(ρ g) above one datum, worked out "
        "already; where they are the heights of open columns, head them 'column height'.",
        "The line is taken as one reach of one bore and one wall, from the first tap to the last, without fittings and "
        "not at an inlet.",
        "The taps have no names: they are called T1 to T5 in the order of the rows.",
    )


@pytest.mark.parametrize(
    ("given", "told"),
    [
        (
            {},
            'one table of heads needs the diameter, the flow and the temperature beside it; add --diameter "26.6 mm" '
            '--flow "0.84 L/s" --temperature "18 degC" (in Python diameter="26.6 mm", flow="0.84 L/s", '
            'temperature="18 degC")',
        ),
        (
            {"diameter": "26.6 mm", "temperature": "18 degC"},
            'one table of heads needs the flow beside it; add --flow "0.84 L/s" (in Python flow="0.84 L/s")',
        ),
        (
            {**GIVEN, "diameter": "26.6"},
            "--diameter '26.6': '26.6' has no unit; give a unit such as m, mm, cm, ft, in",
        ),
        ({**GIVEN, "flow": "0 L/s"}, "--flow '0 L/s': it must be above 0; write it as '0.84 L/s'"),
    ],
)
def test_what_is_missing_or_at_fault_beside_the_table_is_told(tmp_path: Path, given, told) -> None:
    with pytest.raises(UsageError) as caught:
        read_survey(heads_file(tmp_path), **given)
    assert str(caught.value) == told


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("chainage [m],head\n1,2\n", "row 1, head: a unit is missing; give a unit such as m, mm, cm, ft, in"),
        ("chainage [m]\n1\n2\n", "row 1: the column 'head [m]' is missing; add it"),
        (
            "chainage [m],head [mm],heads\n1,2,3\n",
            "row 1, heads: unknown column 'heads'; did you mean 'head'?",
        ),
        ("chainage [m],head [mm]\n1,2\n", "a friction slope needs taps at two chainages or more; add rows"),
        (
            "chainage [m],head [mm]\n1,2x\n2,1\n",
            "row 2, head [mm]: '2x' is not a number; leave the cell empty if the tap was not read",
        ),
        (
            "chainage [m],head [mm]\n1,2\n2x,1\n3,0\n",
            "row 3, chainage [m]: '2x' is not a number; give the tap's chainage",
        ),
        (
            "chainage [m],head [mm]\n2,2\n1,1\n",
            "row 3, chainage [m]: 1 m does not come after 2 m of tap 'T1'; list the taps in order of chainage, each at "
            "its own",
        ),
    ],
)
def test_a_table_at_fault_is_told(tmp_path: Path, text: str, told: str) -> None:
    problems = problems_of(heads_file(tmp_path, text), **GIVEN)
    assert [
        problem.removeprefix("heads of pipe ä.csv").removeprefix(":").strip() for problem in problems
    ] == [told]


def test_a_value_that_cannot_be_is_told_at_its_option(tmp_path: Path) -> None:
    given = {**GIVEN, "temperature": "118 degC"}
    assert problems_of(heads_file(tmp_path), **given)[0].startswith("--temperature: 118 degC ")


def test_a_survey_that_says_them_itself_takes_none(workbook) -> None:
    for path in (workbook(), workbook().parent):
        with pytest.raises(UsageError) as caught:
            read_survey(path, diameter="26.6 mm", flow="1 L/s")
        assert (
            str(caught.value)
            == "the survey says its diameter and flow itself; leave out --diameter and --flow"
        )
