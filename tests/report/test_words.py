"""Sentences, terminal and page: what they say, and what they never say."""

from __future__ import annotations

import dataclasses
import os
import re
import subprocess
import sys
from html.parser import HTMLParser

import pandas as pd
import pytest

from gradeline.reduction.tables import Reduction
from gradeline.report import summarise, terminal_summary
from gradeline.report.figures import pictures
from gradeline.report.inputs import raw_reading_tables
from gradeline.report.outline import handling
from gradeline.report.page import page
from gradeline.report.tables import (
    flag_table,
    reach_table,
    reading_units,
    run_table,
    scatter_table,
    tap_table,
    wall_table,
)

NO_NUMBER = re.compile(r"\b(nan|inf|none|null|<na>)\b", re.IGNORECASE)


def changed(reduction: Reduction, table: str, **cells: object) -> Reduction:
    data = getattr(reduction, table).copy()
    for column, value in cells.items():
        data[column] = value
    return dataclasses.replace(reduction, **{table: data})


def flagged(reduction: Reduction, kind: str, **cells: object) -> Reduction:
    data = reduction.flags.copy()
    data.loc[0, ["kind", "run", "tap"]] = [kind, cells.pop("run", None), cells.pop("tap", None)]
    for column, value in cells.items():
        data[column] = value
    return dataclasses.replace(reduction, flags=data)


def test_an_unresolved_roughness_is_a_bound_not_a_value(bench: Reduction) -> None:
    text = " ".join(summarise(bench).found)
    # the invented bound is 2.6 × 1.2 µm
    assert "copper is not resolved: it is smaller than 0.0031 mm (95 %), from 6 turbulent runs" in text
    assert "hydraulically smooth" in text
    assert "0.0012" not in text


def test_a_resolved_roughness_has_its_interval(field: Reduction) -> None:
    text = " ".join(summarise(field).found)
    assert "cast iron is 0.40 mm (95 % interval 0.28 to 0.56 mm), from 4 turbulent runs" in text
    assert "hydraulically smooth" not in text
    assert "K = 2.400 ± 0.040 (95 % interval 2.310 to 2.490)" in text


def test_the_level_is_named(field: Reduction) -> None:
    assert "99 % interval" in " ".join(summarise(dataclasses.replace(field, level=0.99)).found)


def test_a_given_loss_coefficient_is_not_told_as_found(field: Reduction) -> None:
    given = changed(field, "fittings", loss_coefficient_u=float("nan"))
    assert "K =" not in " ".join(summarise(given).found)


def test_laminar_runs_check_the_bore(bench: Reduction) -> None:
    assert "f·Re/64" in " ".join(summarise(bench).found)
    assert "no contradiction to the stated bore" in " ".join(summarise(bench).found)
    laminar = bench.laminar.copy()
    laminar.loc[laminar["run"] == "R3", ["ratio", "ratio_u"]] = [1.2, 0.011]
    text = " ".join(summarise(dataclasses.replace(bench, laminar=laminar)).found)
    assert "1.200 ± 0.011 (run R3)" in text
    assert (
        "In run R3 that is not 1 within two standard uncertainties: check the bore (it enters as D⁴)" in text
    )


def test_a_flagged_reading_is_told_with_what_was_expected(bench: Reduction, field: Reduction) -> None:
    row = bench.flags.iloc[0]
    text = " ".join(summarise(bench).look)
    assert (
        f"Run R7, tap T4: {1e3 * row['reading']:.0f} mm was read, {1e3 * row['expected']:.0f} mm expected"
        in text
    )
    assert "it was left out of the fit" in text
    heads = bench.heads.copy()
    heads["used"] = True
    assert "it was kept in the fit" in " ".join(summarise(dataclasses.replace(bench, heads=heads)).look)
    row = field.flags.iloc[0]
    assert f"{row['reading'] / 1e3:.1f} kPa was read" in " ".join(summarise(field).look)
    assert set(reading_units(field).values()) == {("kPa", 1e3)}
    assert set(reading_units(bench).values()) == {("mm", 1e-3)}


def test_runs_off_the_law_and_no_flags(bench: Reduction) -> None:
    run = flagged(bench, "run", run="R9", suggestion="a flow 4 % lower would bring it onto the law")
    assert "Run R9 lies off the friction law that the other runs follow (score 20). A flow 4 %" in " ".join(
        summarise(run).look
    )
    assert (
        summarise(dataclasses.replace(bench, flags=bench.flags.iloc[:0])).look[0]
        == "No reading and no run was flagged."
    )


def test_a_misfit_of_the_law_is_told_once_and_only_where_it_was_flagged(bench: Reduction) -> None:
    strong = changed(bench, "walls", law_trend=-0.035, law_trend_u=0.008)
    assert "law does not" not in " ".join(summarise(strong).look)
    law = flagged(strong, "law", suggestion="wall 'copper': f falls by 3.5 % ± 0.8 % per decade of Re")
    told = [sentence for sentence in summarise(law).look if "per decade" in sentence]
    assert told == [
        "The friction law does not fit: wall 'copper': f falls by 3.5 % ± 0.8 % per decade of Re."
    ]
    bare = flagged(strong, "law", suggestion=None)
    told = [sentence for sentence in summarise(bare).look if "per decade" in sentence]
    assert told == [
        "The friction law does not describe the wall copper: against it f falls with Re, by (−3.50 ± 0.80) % per decade."
    ]


def test_flagged_taps_are_told_before_the_cautions(bench: Reduction) -> None:
    look = summarise(flagged(bench, "tap", tap="T4", suggestion="off in the same way in 7 of 9 runs")).look
    assert look[0] == "Tap T4: off in the same way in 7 of 9 runs."
    assert "No reading and no run was flagged." not in look
    assert "are listed" in look[-1]


def test_readings_that_were_not_judged_are_not_called_sound(bench: Reduction) -> None:
    inputs = bench.inputs.copy()
    inputs.loc[inputs["what"] == "single readings", "text"] = "not judged: no freedom left in the runs"
    quiet = dataclasses.replace(bench, flags=bench.flags.iloc[:0], inputs=inputs)
    assert (
        summarise(quiet).look[0]
        == "No run was flagged. Single readings were not judged: no freedom left in the runs."
    )


def test_readings_left_out_by_hand_are_named_by_tap(bench: Reduction) -> None:
    heads = bench.heads.copy()
    out = (heads["tap"] == "T2") | ((heads["tap"] == "T9") & heads["run"].isin(["R3", "R5"]))
    out |= (heads["tap"] == "T10") & (heads["run"] == "R4")
    heads.loc[out, "flag"] = "excluded"
    heads.loc[out, "reason"] = "left out by hand"
    text = " ".join(summarise(dataclasses.replace(bench, heads=heads)).look)
    assert "Left out by hand: T2 in all runs; T9 in runs R3 and R5; T10 in run R4." in text
    assert "by hand" not in " ".join(summarise(bench).look)


def test_flowing_and_static_readings_are_counted_apart(bench: Reduction) -> None:
    # ten taps: nine flowing runs with one reading flagged, and a static one
    first = summarise(bench).found[0]
    assert first == "9 flowing runs with 90 readings, 89 of them used; 1 static run with 10 readings."
    raw = bench.raw_readings.copy()
    raw["repeats"] = 3.0
    assert (
        "90 readings (means of repeats where there are any)"
        in summarise(dataclasses.replace(bench, raw_readings=raw)).found[0]
    )


def test_what_is_missing_is_told_with_its_reason(field: Reduction) -> None:
    bare = changed(field, "walls", roughness=float("nan"), reason="fewer than two turbulent runs")
    bare = changed(
        bare,
        "fittings",
        loss_coefficient=float("nan"),
        loss_coefficient_u=float("nan"),
        reason="one tap downstream only",
    )
    summary = summarise(bare)
    assert (
        "The roughness of the wall cast iron could not be determined: fewer than two turbulent runs."
        in summary.missing
    )
    assert (
        "The loss coefficient of gate valve could not be determined: one tap downstream only."
        in summary.missing
    )
    assert "is not resolved" not in " ".join(summary.found)


def test_a_static_run_is_no_failure(bench: Reduction) -> None:
    assert summarise(bench).missing == ()


def raised(reduction: Reduction, by: float = 0.3) -> Reduction:
    """The same line above another datum: every elevation and head is greater by as much."""
    lines = reduction.grade_lines.copy()
    lines[["energy_head", "piezometric_head", "elevation", "crown"]] += by
    return dataclasses.replace(reduction, grade_lines=lines)


def test_below_the_crown_is_told_with_its_place(bench: Reduction) -> None:
    text = next(sentence for sentence in summarise(raised(bench)).look if "crown" in sentence)
    lines = bench.grade_lines[bench.grade_lines["run"] == "R10"]
    margin = (lines["piezometric_head"] - lines["crown"]).to_numpy()
    # the crossing by hand: the line is straight between its first and last place
    x = lines["chainage"].to_numpy()
    crossing = x[0] + margin[0] / (margin[0] - margin[-1]) * (x[-1] - x[0])
    assert (
        f"In run R10 the hydraulic grade line lies below the pipe's crown between chainage {crossing:.2f} and 5.50 m"
        in text
    )
    assert "drawn in" in text


def test_without_elevations_nothing_is_said_of_the_pressure(bench: Reduction) -> None:
    # the bench's axis lies at 0 everywhere: nobody gave elevations
    assert "crown" not in " ".join(summarise(bench).look)
    assert [head for head, _ in handling(bench)] == ["Trapped pressure."]
    assert len(handling(raised(bench))) == 2


def test_runs_off_the_law_do_not_bound_the_friction_factor(bench: Reduction) -> None:
    fastest = bench.runs.iloc[-1]
    assert f"at Re {fastest['reynolds'] / 1e3:.0f}" in " ".join(summarise(bench).found)
    off = flagged(bench, "run", run=fastest["run"])
    assert f"at Re {fastest['reynolds'] / 1e3:.0f}" not in " ".join(summarise(off).found)


@pytest.mark.parametrize("name", ["bench", "field", "many", "hostile"])
def test_nothing_is_overclaimed_and_no_nan_is_printed(name: str, request: pytest.FixtureRequest) -> None:
    reduction = request.getfixturevalue(name)
    text = terminal_summary(reduction)
    assert "do not replace local codes or licensed practice" in text
    assert not NO_NUMBER.search(text)
    assert max(len(line) for line in text.splitlines()) <= 100
    assert text.isprintable() or set(filter(lambda letter: not letter.isprintable(), text)) <= {
        "\n",
        "\u202f",
    }


def test_the_terminal_shows_the_numbers_of_the_page(bench: Reduction) -> None:
    text = terminal_summary(bench)
    assert text.splitlines()[0] == "Copper test length, invented bench, 2026-05-06"
    assert (
        text.index("Found")
        < text.index("To look at")
        < text.index("Runs")
        < text.index("Walls")
        < text.index("Cautions")
    )
    table = run_table(bench)
    for row in table.rows:
        line = next(line for line in text.splitlines() if re.match(rf"  {row[0]}\s", line))
        assert row[table.heads.index("friction slope S (mm/m)")] in line
        assert row[table.heads.index("friction factor f")] in line


def test_the_terminal_holds_its_width_whatever_the_names(field: Reduction) -> None:
    long = field.runs.copy()
    long["run"] = long["run"] + " a very long label of a run that somebody typed 測定結果" * 2
    long["reach"] = "the reach between the old works and the new reservoir " * 2
    text = terminal_summary(dataclasses.replace(field, runs=long))
    assert max(len(line) for line in text.splitlines()) <= 100


def test_escape_sequences_do_not_reach_the_terminal(bench: Reduction) -> None:
    text = terminal_summary(dataclasses.replace(bench, survey={**bench.survey, "title": "\x1b[31mred\x07"}))
    assert "\x1b" not in text
    assert "\x07" not in text


def test_many_runs_are_cut_with_a_word(make) -> None:
    text = terminal_summary(make["many"](60))
    assert "and 20 more in runs.csv" in text


def test_tables_round_to_two_digits_of_the_uncertainty_and_note_what_is_missing(bench: Reduction) -> None:
    table = run_table(bench)
    slope = table.heads.index("friction slope S (mm/m)")
    assert table.rows[0][slope] == "–"
    assert table.notes[int(table.rows[0][-1]) - 1] == "static run: no flow, no slope"
    value, u = (float(part) for part in table.rows[6][slope].split(" ± "))
    run = bench.runs.iloc[6]
    assert value == pytest.approx(run["slope"] * 1e3, abs=0.005)
    assert u == pytest.approx(run["slope_u"] * 1e3, rel=0.05)
    walls = wall_table(bench)
    assert "Hazen–Williams C" not in walls.heads  # nothing to show yet
    assert flag_table(bench).rows[0][:4] == ("reading", "outlying reading", "R7", "T4")


class Reader(HTMLParser):
    """What a page holds: its tags with their attributes, and its text."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.words: list[str] = []
        self.feed(text)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attrs)))

    def handle_data(self, data: str) -> None:
        self.words.append(data)


def made(reduction: Reduction) -> str:
    return page(reduction, pictures(reduction, png=False), "1.2.3")


@pytest.fixture(scope="module")
def bench_page(bench: Reduction) -> str:
    return made(bench)


@pytest.mark.parametrize("name", ["field", "many", "hostile"])
def test_the_page_prints_no_nan_and_runs_no_script(name: str, request: pytest.FixtureRequest) -> None:
    text = made(request.getfixturevalue(name))
    reader = Reader(text)
    style = next(n for n, word in enumerate(reader.words) if ":root" in word)
    words = " ".join(reader.words[:style] + reader.words[style + 1 :])
    assert not re.search(r"\bnan\b|\binf\b|<NA>", words, re.IGNORECASE)
    tags = {tag for tag, _ in reader.tags}
    assert not tags & {"script", "img", "iframe", "link", "object", "embed", "form", "base"}
    for _, attributes in reader.tags:
        assert not [key for key in attributes if key.startswith("on")]
        for key in ("href", "src", "xlink:href"):
            assert (attributes.get(key) or "#").startswith("#")


def test_hostile_names_are_shown_as_they_are(hostile: Reduction) -> None:
    text = made(hostile)
    assert "<script" not in text.lower()
    assert "<img" not in text.lower()
    assert "<script>alert('x')</script>" in "".join(Reader(text).words)


def test_the_page_loads_nothing(bench_page: str) -> None:
    outside = re.findall(r"""(?:src|href)\s*=\s*["'](?!#)|url\((?!#)|@import""", bench_page)
    assert outside == []
    assert "default-src 'none'" in bench_page


def test_the_sections_stand_in_order(bench_page: str) -> None:
    reader = Reader(bench_page)
    order = [attributes["id"] for tag, attributes in reader.tags if tag == "h2"]
    assert order == [
        "summary",
        "grade-lines",
        "residuals-by-tap",
        "taps-and-line",
        "laws",
        "what-the-laws-say",
        "tables",
        "flags",
        "readings",
        "inputs",
        "assumptions",
        "cautions",
        "provenance",
    ]
    targets = {attributes["href"] for tag, attributes in reader.tags if tag == "a"}
    ids = [attributes["id"] for _, attributes in reader.tags if attributes.get("id")]
    assert {target.removeprefix("#") for target in targets if target} <= set(ids)
    assert len(ids) == len(set(ids))


def test_the_page_can_be_read_without_seeing_it(bench_page: str) -> None:
    reader = Reader(bench_page)
    assert ("html", {"lang": "en"}) in reader.tags
    figures = [attributes for tag, attributes in reader.tags if tag == "figure"]
    assert len(figures) == 13
    assert all(figure["aria-label"] for figure in figures)
    assert "flagged: T4" in str(figures[6]["aria-label"])
    count = [tag for tag, _ in reader.tags].count
    assert count("caption") == count("table") == count("thead")
    heads = [attributes for tag, attributes in reader.tags if tag == "th"]
    assert all(attributes["scope"] in ("col", "row") for attributes in heads)


def test_the_page_tells_cautions_and_where_it_came_from(bench_page: str, bench: Reduction) -> None:
    words = " ".join(Reader(bench_page).words)
    for part in (
        *bench.assumptions,
        *bench.cautions,
        "gradeline 1.2.3",
        "ab" * 32,
        "readings.csv",
        "9.80665 m/s²",
    ):
        assert part in words
    assert "Trapped pressure." in words
    assert "Mercury." not in words
    assert words.count("do not replace local codes or licensed practice") == 2


def test_handling_notes_stand_where_the_survey_has_what_they_speak_of(bench: Reduction) -> None:
    dry = dataclasses.replace(bench, cautions=(), grade_lines=bench.grade_lines.iloc[:0])
    assert [head for head, _ in handling(dry)] == ["Trapped pressure."]
    low = dataclasses.replace(dry, cautions=("run R4: the line lies below the pipe's crown at P5",))
    assert [head for head, _ in handling(low)] == ["Trapped pressure.", "Pressure below the atmosphere's."]
    silver = dataclasses.replace(dry, cautions=("gauge 'U1' holds mercury",))
    assert [head for head, _ in handling(silver)] == ["Trapped pressure.", "Mercury."]


def test_the_page_says_what_was_put_in(bench_page: str, bench: Reduction) -> None:
    words = [word.strip() for word in Reader(bench_page).words]
    at = words.index("What was put in", words.index("Flags") + 1)
    text = " | ".join(word for word in words[at:] if word)
    # bore 26.64 mm with the ± 0.03 mm, the gauge's 0.6 mm and the flow's 0.4 % that the fixture states
    for part in ("26.640 ± 0.030", "0.6 mm", "0.4 %", "not stated", "piezometer", "Readings as read"):
        assert part in text
    reading = bench.raw_readings["reading"].iloc[13] * 1e3
    assert any(abs(float(word) - reading) < 0.06 for word in words if re.fullmatch(r"\d+\.\d+", word))


def test_readings_are_printed_as_they_were_read(bench: Reduction) -> None:
    raw = bench.raw_readings.copy()
    raw.loc[:, "reading"] = 0.5585
    raw.loc[1, "reading"] = float("nan")
    raw.loc[2, "reading"] = 1.4
    (table,) = raw_reading_tables(dataclasses.replace(bench, raw_readings=raw))
    assert table.heads[-1] == "T10 (mm)"
    assert table.rows[0][-10:-6] == ("558.5", "–", "1400.0", "558.5")
    assert len(raw_reading_tables(bench, limit=3)[0].rows) == 3


def test_many_taps_make_several_tables_of_readings(bench: Reduction) -> None:
    raw = bench.raw_readings.copy()
    more = raw.assign(tap=raw["tap"] + "b")
    first, second = raw_reading_tables(
        dataclasses.replace(bench, raw_readings=pd.concat([raw, more], ignore_index=True))
    )
    assert [head.partition(" (")[0] for head in (*first.heads[-12:], *second.heads[-8:])] == [
        *(f"T{n}" for n in range(1, 11)),
        *(f"T{n}b" for n in range(1, 11)),
    ]
    assert {row[0] for row in first.rows} == {row[0] for row in second.rows} == set(raw["run"])


def test_a_shared_curve_is_called_one_only_beyond_one_in_a_hundred(bench: Reduction) -> None:
    for p, verdict in (
        (0.021, "not told from tap errors (p = 0.021)"),
        (0.004, "all runs share a curve (p = 0.004)"),
    ):
        assert verdict in reach_table(changed(bench, "reaches", shared_curve_p=p)).rows[0]
    assert "curve of all runs" not in reach_table(bench).heads


def test_no_table_speaks_of_what_this_version_does_not_show(bench: Reduction) -> None:
    later = "edge coefficient and diagnosis: not estimated in this version"
    taps = changed(bench, "taps", reason=f"offset in the static runs, not taken off; {later}")
    table = tap_table(taps)
    assert table.notes == ()
    assert table.caption.endswith("Offset in the static runs, not taken off.")
    assert table.heads == ("tap", "offset (mm)")
    assert (
        tap_table(changed(bench, "taps", reason=later)).caption
        == tap_table(changed(bench, "taps", reason=None)).caption
    )


def test_another_level_leaves_the_upper_bound_at_95(bench: Reduction) -> None:
    table = wall_table(dataclasses.replace(bench, level=0.99))
    assert "99 % interval (mm)" in table.heads
    assert "one-sided 95 % upper bound (mm)" in table.heads
    assert "It is one of 95 %, whatever the level of the intervals (99 %)." in table.caption
    assert "whatever" not in wall_table(bench).caption


def test_the_scatter_names_the_gauges_of_its_kind(bench: Reduction) -> None:
    table = scatter_table(changed(bench, "scatter", gauge="piezometer"))
    assert table.rows[0][:2] == ("piezometer", "board")


def test_asking_for_the_report_draws_nothing_yet() -> None:
    code = "import sys, gradeline.report; print([m for m in ('pandas', 'matplotlib', 'jinja2', 'scipy') if m in sys.modules])"
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True, env=os.environ
    )
    assert done.stdout.strip() == "[]"
