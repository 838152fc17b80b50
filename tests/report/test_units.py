"""US customary units: the same words, other numbers, and the record in SI all the same."""

from __future__ import annotations

import dataclasses
import re
from pathlib import Path

import pytest

from gradeline.quantities import parse_unit
from gradeline.quantities.printing import SI_DISPLAY, US_DISPLAY
from gradeline.reduction.tables import Reduction
from gradeline.report import summarise, terminal_summary, write
from gradeline.report.blocks import headings
from gradeline.report.converted import converted, converted_text
from gradeline.report.figures import pictures
from gradeline.report.inputs import raw_reading_tables, stated_words
from gradeline.report.outline import outline


# NIST Special Publication 811 (2008), appendix B.8: exact factors, or as many digits as are printed there.
@pytest.mark.parametrize(
    ("quantity", "si", "us", "label"),
    [
        ("chainage", 3.048e-1, 1.0, "ft"),
        ("diameter", 2.54e-2, 1.0, "in"),
        ("roughness", 2.54e-5, 1e-3, "in"),
        ("flow", 6.309020e-5, 1.0, "US gal/min"),
        ("velocity", 3.048e-1, 1.0, "ft/s"),
        ("density", 1.601846e1, 1.0, "lb/ft³"),
        ("kinematic viscosity", 9.290304e-2, 1.0, "ft²/s"),
        ("pressure", 6.894757e3, 1.0, "psi"),
        ("viscosity", 4.788026e1, 1.0, "lbf s/ft²"),
        ("temperature", 273.15 + (212 - 32) / 1.8, 212.0, "°F"),
        ("temperature", 273.15, 32.0, "°F"),
        ("temperature difference", 5 / 9, 1.0, "°F"),
        ("slope", 1e-3, 1.0, "ft/1000 ft"),
    ],
)
def test_factors(quantity: str, si: float, us: float, label: str) -> None:
    assert US_DISPLAY.value(quantity, si) == pytest.approx(us, rel=5e-7)
    assert US_DISPLAY.unit(quantity) == label


def test_every_quantity_has_a_us_unit() -> None:
    assert set(US_DISPLAY.units) == set(SI_DISPLAY.units)


def skeleton(text: str) -> str:
    """A text without its numbers and units."""
    units = sorted(
        {unit.label for display in (SI_DISPLAY, US_DISPLAY) for unit in display.units.values() if unit.label},
        key=len,
        reverse=True,
    )
    bare = re.sub(r"[−-]?\d[\d.,\u202f]*(×10[⁻⁰¹²³⁴⁵⁶⁷⁸⁹]+)?", "#", text)
    # a length of a few millimetres is told in inches, one of metres in feet
    return re.sub(
        rf"#(?P<close>\)?) (?:{'|'.join(map(re.escape, units))})(?!\w)",
        r"#\g<close> unit",
        bare.replace("ft/# ft", "ft/1000 ft"),
    )


@pytest.mark.parametrize("kind", ["bench", "field"])
def test_the_words_are_the_same(kind: str, request: pytest.FixtureRequest) -> None:
    reduction = dataclasses.replace(
        request.getfixturevalue(kind),
        cautions=(
            "The slope changes between 120 m and 140 m.",
            "Meant for bores above 50 mm at 0.3 to 3 m/s.",
        ),
    )
    si, us = summarise(reduction), summarise(reduction, US_DISPLAY)
    for name in ("found", "look", "missing"):
        assert [skeleton(text) for text in getattr(si, name)] == [
            skeleton(text) for text in getattr(us, name)
        ]
    assert si != us
    first, second = outline(reduction, "9.9"), outline(reduction, "9.9", US_DISPLAY)
    assert headings(first) == headings(second)
    text = terminal_summary(reduction, US_DISPLAY)
    assert "(US gal/min)" in text
    assert "The slope changes between 394 ft and 459 ft." in text  # 120/0.3048 and 140/0.3048
    assert not re.search(r"\d (m|mm|L/s|m/s|°C)\b", "\n".join(us.found))


def test_readings_stay_in_the_unit_of_the_record(field: Reduction) -> None:
    us = converted(field, US_DISPLAY)
    assert list(us.flags["suggestion"]) == list(field.flags["suggestion"])
    assert any("kPa was read" in text for text in summarise(field, US_DISPLAY).look)


def test_numbers_and_labels_are_left_alone(bench: Reduction) -> None:
    runs = bench.runs.copy()
    runs["reach"] = "5 m pipe"
    named = dataclasses.replace(bench, runs=runs, cautions=("In 5 m pipe a tap lies 2 m up.",))
    us = converted(named, US_DISPLAY)
    assert us.cautions == ("In 5 m pipe a tap lies 6.6 ft up.",)
    assert us.runs["slope"].equals(named.runs["slope"])
    assert converted(named, SI_DISPLAY) is named


@pytest.mark.parametrize(
    ("si", "us"),
    [
        # worked out with the factors of NIST SP 811: 0.3048 m, 25.4 mm, 6.894757 kPa, 3.785412 L
        ("13 595.08 kg/m³ at 0 °C", "848.7131 lb/ft³ at 32 °F"),
        ("(1.0 ± 0.2) m", "(3.3 ± 0.7) ft"),
        ("−1.2 kPa", "−0.17 psi"),
        ("about 0.069 L/s", "about 1.1 US gal/min"),
        ("(0.017 ± 0.072) mm/m", "(0.017 ± 0.072) ft/1000 ft"),
        ("gauges 'm1' and 'm2', K = 3, 95 % of 12 m²", "gauges 'm1' and 'm2', K = 3, 95 % of 12 m²"),
        ("± 0.5 K of 20.0 °C", "± 0.90 °F of 68.0 °F"),
    ],
)
def test_sentences(si: str, us: str) -> None:
    assert converted_text(si, US_DISPLAY) == us


def test_figures_speak_the_units(bench: Reduction) -> None:
    by_name = {one.name: one.svg.decode() for one in pictures(bench, png=False, display=US_DISPLAY)}
    assert "chainage x (ft)" in by_name["grade_lines_03_R3"]
    assert "mean velocity V (ft/s)" in by_name["slope_velocity"]
    assert "friction slope S (ft/1000 ft)" in by_name["slope_velocity"]
    for name, svg in by_name.items():
        assert not re.search(r"\((m|mm|m/s|mm/m|L/s)\)|\d (L/s|m/s|°C)", svg), name


def test_the_record_is_si_in_any_units(bench: Reduction, tmp_path: Path) -> None:
    for name, display in (("si", SI_DISPLAY), ("us", US_DISPLAY)):
        write(bench, tmp_path / name, formats=("json", "csv"), display=display)
    for path in sorted((tmp_path / "si").iterdir()):
        assert path.read_bytes() == (tmp_path / "us" / path.name).read_bytes()


def test_flow_and_temperature_as_read_stay_in_the_unit_of_the_record(bench: Reduction) -> None:
    units = {**bench.survey, "units": {"flow": "L/min", "temperature": "degC"}}
    (first, *_) = raw_reading_tables(dataclasses.replace(bench, survey=units), US_DISPLAY)
    assert first.heads[:3] == ("run", "flow (L/min)", "t (°C)")
    flowing = bench.runs[bench.runs["regime"] != "static"].iloc[0]
    row = next(row for row in first.rows if row[0] == flowing["run"])
    assert float(row[1]) == pytest.approx(60_000 * flowing["flow"], rel=1e-5)
    assert float(row[2]) == pytest.approx(flowing["temperature"] - 273.15, abs=1e-5)


def test_stated_values_have_no_more_digits_than_were_stated() -> None:
    """1 mm is 0.0393701 in (0.0254 m an inch, exact): six digits of it would be none of the statement's."""
    row = {"quantity": "small head", "value": 0.001, "value_u": None, "text": None}
    assert stated_words(US_DISPLAY, row) == "0.0394 in"
    assert stated_words(SI_DISPLAY, row) == "1 mm"
    assert stated_words(US_DISPLAY, {**row, "quantity": "chainage", "value": 445.0}) == "1460 ft"


def test_a_gallon_is_spelt_one_way_in_sentences_and_read_in_both() -> None:
    assert parse_unit("US gal/min", "flow").factor == parse_unit("US_gal/min", "flow").factor
    assert parse_unit("US_gal/min", "flow").label == US_DISPLAY.unit("flow")
