"""Side valves: what is said of those that were shut, of those that were not, and where nobody said."""

from __future__ import annotations

import pytest
from typer.testing import CliRunner

import gradeline
from gradeline.cli.app import app
from gradeline.cli.understood import understood
from gradeline.errors import SurveyError
from gradeline.report.inputs import side_valve_table

PITOT = """
[flow]
method = "hydrant pitot"
u_pitot = "1 kPa"
u_scale = "1 %"
u_zero = "1 kPa"
[[flow.outlet]]
name = "north"
bore = "10 mm +/- 0.1 mm"
discharge_coefficient = "0.9 +/- 0.02"
"""
PITOTS = """\
run,pitot north [kPa],temperature [degC],T1 [mm],T2 [mm],T3 [mm],T4 [kPa]
01,0,18,500,500,500,2.1
02,6,18.2,480,455,431,1.4
"""


def valve(name="mill", state="shut", at=None):
    place = "" if at is None else f'at = "{at} m"\n'
    return f'\n[[side_valve]]\nname = "{name}"\nstate = "{state}"\n{place}'


@pytest.fixture
def read(write_survey):
    """Read the good survey with more text at the end of survey.toml."""

    def make(text: str, **files: str):
        folder = write_survey(**files)
        toml = folder / "survey.toml"
        toml.write_text(toml.read_text(encoding="utf-8") + text, encoding="utf-8")
        return gradeline.read_survey(folder)

    return make


def test_those_shut_are_told_as_an_assumption(read):
    survey = read(valve() + valve("scour"))
    assert (
        "Side valves stated shut: mill, scour; no flow is taken to leave the line there."
        in survey.assumptions
    )
    assert not any("ide valve" in text for text in survey.cautions)


# Taps lie at 0.5, 1.5, 2.5 and 5 m; one at the chainage of a tap takes its flow downstream of it.
@pytest.mark.parametrize(
    ("at", "where"),
    [
        (None, "between T1 and T4"),
        (2, "between T2 and T3"),
        (2.5, "between T3 and T4"),
        (0.2, "upstream of T1"),
        (5.5, "downstream of T4"),
    ],
)
def test_an_open_one_tells_where_flow_may_have_left(read, at, where):
    assert (
        f"Side valve 'mill' was open: flow may have left the line {where}, and no off-take is reckoned for it. Shut it and "
        "repeat, or measure what it takes and state it as [[offtake]]."
    ) in read(valve(state="open", at=at)).cautions


def test_an_unknown_one_is_a_caution(read):
    assert (
        "Whether side valve 'mill' was shut is not known: flow may have left the line between T1 and T2. See to it and state "
        "it."
    ) in read(valve(state="unknown", at=1)).cautions


NONE_STATED = (
    "The flow was measured at hydrants: were all side valves shut? None is stated ([[side_valve]]); flow that left the line "
    "elsewhere is not in the measured one."
)


def test_a_flow_by_hydrants_asks_for_them(read):
    assert NONE_STATED in read(PITOT, readings_csv=PITOTS).cautions
    assert NONE_STATED not in read(PITOT + valve(), readings_csv=PITOTS).cautions
    assert NONE_STATED not in read("").cautions


def test_the_page_has_a_checklist(read):
    reduction = gradeline.reduce(read(valve(at=1) + valve("farm", "unknown", at=2)))
    found = side_valve_table(reduction)
    assert found.caption == "Isolation checklist: were all side valves shut? Here 1 of 2 are stated shut."
    assert [list(row) for row in found.rows] == [
        ["mill", "between T1 and T2", "shut"],
        ["farm", "between T2 and T3", "unknown"],
    ]
    whole = side_valve_table(gradeline.reduce(read(valve())))
    assert whole.caption == "Isolation checklist: were all side valves shut? Here all are stated shut."


def test_check_lists_them(read):
    assert "farm        between T2 and T3  unknown" in understood(read(valve("farm", "unknown", at=2)))


@pytest.mark.parametrize(
    ("text", "problem"),
    [
        (
            valve(state="closed"),
            "survey.toml side_valve[1].state: unknown 'closed'; known are open, shut, unknown",
        ),
        (
            valve() + valve(),
            "survey.toml side_valve[2].name: another side valve is called 'mill'; give each its own name",
        ),
        (
            '\n[[side_valve]]\nname = "mill"\n',
            'survey.toml side_valve[1].state: the key is missing; add it, such as state = "shut"',
        ),
    ],
)
def test_a_fault_is_told_with_its_place_and_remedy(read, text, problem):
    with pytest.raises(SurveyError) as told:
        read(text)
    assert problem in str(told.value)


def test_a_new_survey_shows_how_to_state_one(tmp_path, read):
    created = CliRunner().invoke(app, ["new", str(tmp_path / "mine")])
    assert created.exit_code == 0
    text = (tmp_path / "mine" / "survey.toml").read_text(encoding="utf-8")
    block = text[text.index("#     [[side_valve]]") :].partition("\n\n")[0].replace("#     ", "")
    (valve,) = read("\n" + block).side_valves
    assert (valve.name, valve.state, valve.where) == ("lane valve", "shut", "downstream of T4")
