"""`check` and `gauges` in US customary units: the same words, other numbers, each converted by hand here.

1 ft = 0.3048 m, 1 in = 25.4 mm, 1 US gal = 3.785411784 L, °F = 1.8 °C + 32, 1 lb = 0.45359237 kg, all exact: NIST Special
Publication 811 (2008), appendix B.
"""

from __future__ import annotations

import json
import re
from pathlib import Path

import pytest
from typer.testing import CliRunner

from gradeline.cli.app import app
from gradeline.quantities.printing import SI_DISPLAY, US_DISPLAY

DEMO = Path(__file__).parents[2] / "data_demo"


def told(command: str, survey: Path, *more: str) -> str:
    result = CliRunner().invoke(app, [command, str(survey), *more], prog_name="gradeline")
    assert result.exit_code == 0, result.stderr
    return result.stdout


def words(text: str) -> str:
    """A text without its numbers, its units and the widths of its columns."""
    units = {unit.label for display in (SI_DISPLAY, US_DISPLAY) for unit in display.units.values()}
    label = "|".join(re.escape(unit) for unit in sorted(units - {"", "%", "°"}, key=len, reverse=True))
    bare = re.sub(r"\(?(?<![\w'])-?\d[\d.]*(×10[⁻⁰¹²³⁴⁵⁶⁷⁸⁹]+)?( ± [\d.]+)?\)?", "#", text)
    bare = re.sub(rf"(?<=# )(?:{label})(?![\w/])", "unit", bare)
    bare = re.sub(rf"(?<=, )(?:{label})(?=\s|$)", "unit", bare, flags=re.MULTILINE)
    return re.sub(r" +", " ", bare)


def found_units(text: str) -> str:
    return next(line for line in text.splitlines() if line.startswith("Units as found"))


@pytest.mark.parametrize("command", ["check", "gauges"])
@pytest.mark.parametrize("demo", ["copper_bench", "cast_main", "mercury_bench", "hydrant_main"])
def test_the_same_words(command: str, demo: str) -> None:
    si, us = (told(command, DEMO / demo, "--units", units) for units in ("si", "us"))
    assert si == told(command, DEMO / demo)
    assert si != us
    if command == "check":  # what the files say stays as they say it
        line = found_units(si)
        assert found_units(us) == line
        si, us = si.replace(line, ""), us.replace(line, "")
    assert words(si) == words(us)
    body = us.partition("\n")[2]  # a title stays as it was written
    assert not re.search(r"\d (m|mm|L/s|m/s|°C|K|kPa|kg/m³)\b", body)


def test_values_of_a_survey(survey: Path) -> None:
    text = told("check", survey, "--units", "us")
    lines = [line.split() for line in text.splitlines()]
    # 6 m / 0.3048; 26.64 mm / 25.4 and 0.03 mm / 25.4
    assert ["main", "0", "19.685", "1.04882", "±", "0.0012", "copper"] in lines
    assert ["valve", "9.84252", "0.2", "±", "0.1", "smaller", "bore"] in lines
    assert ["T3", "8.2021", "0", "board", "3", "of", "3"] in lines
    # 0.25 L/s × 60 / 3.785411784; 18 °C × 1.8 + 32
    assert ["2", "3.9626", "64.4", "3", "of", "3", "1"] in lines
    assert ["1", "static", "64.4", "3", "of", "3", "1"] in lines
    # stated in m: feet; in mm: inches
    assert "zero 2.62467 ft" in text
    assert "resolution 0.0393701 in" in text
    assert "Stated uncertainties: reading 0.019685 in, flow 0.4 %" in text
    for head in ("from, ft", "bore, in", "flow, US gal/min", "temperature, °F", "chainage, ft"):
        assert head in text


def test_values_of_a_liquid(survey: Path) -> None:
    toml = survey / "survey.toml"
    fluid = 'name = "brine"\ndensity = "1100 kg/m^3"\nkinematic_viscosity = "1.5 mm^2/s +/- 0.1 mm^2/s"'
    toml.write_text(toml.read_text().replace('name = "water"', fluid))
    # 1100 × 0.3048³ / 0.45359237; 1.5e-6 and 0.1e-6 / 0.3048²
    expected = "brine, density 68.6708 lb/ft³, kinematic viscosity 1.61459×10⁻⁵ ± 1.1×10⁻⁶ ft²/s"
    assert f"Fluid: {expected}" in told("check", survey, "--units", "us")
    assert "density 1100 kg/m³, kinematic viscosity 1.5 ± 0.1 mm²/s" in told("check", survey)


def test_values_of_gauges() -> None:
    bench = DEMO / "mercury_bench"
    si, us = (told("gauges", bench, "--units", units).splitlines() for units in ("si", "us"))
    assert si[3].split() == ["shows", "-5.028", "m", "to", "5.028", "m"]
    assert us[3].split() == ["shows", "-16.5", "ft", "to", "16.5", "ft"]  # 5.028 / 0.3048 = 16.496
    assert si[4].split() == ["resolution", "6.29", "mm"]
    assert us[4].split() == ["resolution", "0.247", "in"]  # 6.29 / 25.4 = 0.2476
    # a board of 0.4 m; a liquid of 1600 kg/m³
    assert us[6].endswith("mercury below, on a board of 1.312 ft")
    assert us[9].split(": ")[0].strip() == "a liquid of 99.88 lb/ft³ below"


@pytest.mark.parametrize("command", ["check", "gauges"])
def test_json_is_si(command: str) -> None:
    bench = DEMO / "mercury_bench"
    si, us = (json.loads(told(command, bench, "--json", "--units", units)) for units in ("si", "us"))
    assert si == us


def test_labels_that_read_like_a_quantity_stay(survey: Path) -> None:
    toml = survey / "survey.toml"
    toml.write_text(toml.read_text().replace('name = "main"', 'name = "26 mm main"'))
    assert "26 mm main" in told("check", survey, "--units", "us")
