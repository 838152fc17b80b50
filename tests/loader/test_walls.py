"""What ``[wall.NAME]`` says beforehand: read, refused with the place and the remedy, and held against the result."""

from __future__ import annotations

import pytest

import gradeline
from gradeline.errors import SurveyError


@pytest.fixture
def read(write_survey):
    """Read the good survey with more text at the end of survey.toml."""

    def make(text: str):
        folder = write_survey()
        toml = folder / "survey.toml"
        toml.write_text(toml.read_text(encoding="utf-8") + text, encoding="utf-8")
        return gradeline.read_survey(folder)

    return make


def test_what_was_known_of_a_wall_is_read(read):
    survey = read(
        """
        [wall.copper]
        published_roughness = "1.5 um"
        published_source = "Moody 1944"
        earlier_roughness = "0.0001 in +/- 0.00002 in"
        """
    )
    (history,) = survey.wall_histories
    assert history.wall == "copper"
    assert history.published.value == pytest.approx(1.5e-6)
    assert history.published.u is None
    assert history.published_source == "Moody 1944"
    assert history.earlier.value == pytest.approx(2.54e-6)
    assert history.earlier.u == pytest.approx(0.508e-6)
    assert history.earlier_source is None
    assert not any("earlier roughness" in text for text in survey.cautions)


def test_an_earlier_roughness_without_its_uncertainty_is_a_caution(read):
    survey = read('\n[wall.copper]\nearlier_roughness = "2 um"\n')
    assert (
        "The uncertainty of the earlier roughness of wall 'copper' is not stated: the comparison takes it as exact."
        in survey.cautions
    )


@pytest.mark.parametrize(
    ("text", "told"),
    [
        (
            '[wall.coper]\nearlier_roughness = "2 um"',
            "survey.toml wall.coper: no reach has the wall 'coper'; did you mean 'copper'?",
        ),
        (
            '[wall.copper]\nearlier_rough = "2 um"',
            "survey.toml wall.copper.earlier_rough: unknown key 'earlier_rough'; did you mean 'earlier_roughness'?",
        ),
        (
            '[wall.copper]\npublished_roughness = "0 mm"',
            "survey.toml wall.copper.published_roughness: '0 mm' must be above 0; write it as '0.12 mm +/- 0.02 mm'",
        ),
        (
            '[wall.copper]\npublished_roughness = "1.5 m"',
            "survey.toml wall.copper.published_roughness: '1.5 m' is too large; write it as '0.12 mm +/- 0.02 mm'",
        ),
        (
            "[wall.copper]\npublished_roughness = 0.0015",
            "survey.toml wall.copper.published_roughness: 0.0015 has no unit; write it in quotes with its unit, such as "
            "'0.12 mm +/- 0.02 mm'",
        ),
        (
            '[wall.copper]\nearlier_source = "1998"',
            "survey.toml wall.copper.earlier_source: the source has no roughness beside it; give earlier_roughness, or take "
            "the source away",
        ),
        (
            "[wall]\ncopper = 3",
            "survey.toml wall.copper: 3 stands here; write the table [wall.copper] with its keys",
        ),
        (
            '[wall.copper]\nearlier_roughness = "2 um"\n[wall." copper"]\nearlier_roughness = "3 um"',
            "survey.toml wall. copper: another wall is called 'copper'; describe each of them once",
        ),
    ],
)
def test_faults_name_key_rule_and_remedy(read, text, told):
    with pytest.raises(SurveyError) as caught:
        read("\n" + text + "\n")
    assert str(caught.value) == told


def test_a_wall_that_is_no_table(write_survey):
    folder = write_survey()
    toml = folder / "survey.toml"
    toml.write_text('wall = "copper"\n' + toml.read_text(encoding="utf-8"), encoding="utf-8")
    with pytest.raises(SurveyError) as caught:
        gradeline.read_survey(folder)
    assert "survey.toml wall: 'copper' stands here; describe each wall with [wall.NAME]" in str(caught.value)
