"""Fittings: kinds with the nearest known one, lengths, changes of bore that go the other way."""

from __future__ import annotations

import pytest

from gradeline.errors import SurveyError
from gradeline.fitting_kinds import fitting_kinds
from gradeline.loader import read_survey

T = "survey.toml"
AT = 'at = "4.5 m"'
REDUCER = (
    '\n[[fitting]]\nname = "reducer"\nat = "3 m"\nkind = "{kind}"\nloss_coefficient = "fit"\n\n[gauge.board]'
)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (
            (T, AT, f'{AT}\nkind = "gate valv"'),
            "survey.toml fitting[1].kind: unknown 'gate valv'; did you mean 'gate valve'?",
        ),
        (
            (T, AT, f'{AT}\nlength = "0.2"'),
            "survey.toml fitting[1].length: '0.2' has no unit; give a unit such as m, mm, cm, ft, in",
        ),
        (
            (T, AT, f'{AT}\nlength = "4 m"'),
            "survey.toml fitting[1].length: 4 m with its middle at 4.5 m goes beyond the line (0 m to 6 m); is the unit "
            "right? Mend the length, the chainage or the reach",
        ),
        (
            (T, f'{AT}\nloss_coefficient = "fit"', f'{AT}\nlength = "0.2 m"\nloss_coefficient = 1.2'),
            "survey.toml fitting[1].length: the length counts only for a loss coefficient that is fitted; take it away, or "
            'write loss_coefficient = "fit"',
        ),
        (
            (T, "\n[gauge.board]", REDUCER.format(kind="sudden expansion")),
            "survey.toml fitting[2].kind: the bore narrows at 3 m, where 'sudden expansion' is stated; write 'sudden "
            "contraction', or mend the bores",
        ),
    ],
)
def test_what_is_wrong_and_the_remedy(write_survey, change, message):
    with pytest.raises(SurveyError) as caught:
        read_survey(write_survey(change))
    assert [str(problem) for problem in caught.value.problems] == [message]


@pytest.mark.parametrize(
    "kind", [kind for kind in fitting_kinds() if "bore" not in kind and "sudden" not in kind]
)
def test_every_other_kind_may_stand_anywhere(write_survey, kind):
    survey = read_survey(write_survey((T, AT, f'{AT}\nkind = "{kind}"\nlength = "20 cm"')))
    (fitting,) = survey.fittings
    assert (fitting.kind, fitting.length, fitting.change_of_bore) == (kind, pytest.approx(0.2), False)


def test_a_sudden_contraction_stands_for_the_change_of_bore(write_survey):
    survey = read_survey(write_survey((T, "\n[gauge.board]", REDUCER.format(kind="sudden contraction"))))
    reducer = survey.fittings[1]
    assert (reducer.at, reducer.kind, reducer.change_of_bore) == (3.0, "sudden contraction", True)
