"""What ails taps and line on the page, in the summary and in its figures."""

from __future__ import annotations

import dataclasses

import numpy as np
import pandas as pd
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from gradeline.quantities.printing import SI_DISPLAY, Display, DisplayUnit
from gradeline.reduction import reduce
from gradeline.reduction.tables import Reduction
from gradeline.report.ailments import ailment_sentences, ailment_table
from gradeline.report.cautions import further_cautions
from gradeline.report.figures import draw_break, draw_grade_lines, draw_tap_error, pictures
from gradeline.report.figures.style import styled
from gradeline.report.page import page
from gradeline.report.sentences import summarise
from gradeline.report.tables import flag_table
from gradeline.report.terminal import terminal_summary
from tests.calibration.diagnosis import ailing_survey

INCHES = Display(
    {
        **SI_DISPLAY.units,
        "small head": DisplayUnit("in", 1 / 0.0254),
        "head": DisplayUnit("ft", 1 / 0.3048),
        "chainage": DisplayUnit("ft", 1 / 0.3048),
        "length": DisplayUnit("ft", 1 / 0.3048),
    }
)
SOUND = "Every tap and every stretch between taps was held against all runs: none is off beyond chance."


def made(case: str) -> Reduction:
    return reduce(ailing_survey(np.random.default_rng(1), case, 2e-3)[0], monte_carlo=False)


@pytest.fixture(scope="module")
def offset() -> Reduction:
    return made("offset")


@pytest.fixture(scope="module")
def chainage() -> Reduction:
    return made("chainage")


@pytest.fixture(scope="module")
def stuck() -> Reduction:
    return made("stuck line")


@pytest.fixture(scope="module")
def step() -> Reduction:
    return made("step")


@pytest.fixture(scope="module")
def offtake() -> Reduction:
    return made("off-take")


@pytest.fixture
def ax():
    with styled():
        figure = Figure(figsize=(6.2, 4))
        FigureCanvasAgg(figure)
        yield figure.add_axes((0.14, 0.15, 0.8, 0.7))


def cells(reduction: Reduction, display: Display = SI_DISPLAY) -> dict[str, str]:
    table = ailment_table(reduction, display)
    (row,) = table.rows
    return dict(zip(table.heads, row, strict=True))


# ------------------------------------------------------------------------------------------------ words


def test_the_table_of_an_offset(offset: Reduction) -> None:
    row, truth = cells(offset), offset.ailments.iloc[0]
    size = SI_DISPLAY.text("small head", truth["offset"], truth["offset_u"], unit=True)
    assert row["what"] == "tap T3"
    assert row["ailment"] == "datum offset"
    assert row["size"] == f"offset {size}"
    assert " mm" in size
    assert row["what was done"] == "left out of the fits"
    assert float(row["evidence Δχ²"]) == pytest.approx(truth["evidence"], rel=0.01)
    assert "best rival Δχ²" not in row


def test_sizes_stand_in_the_units_of_the_reader(offset: Reduction, step: Reduction) -> None:
    inches = 1000 * offset.ailments["offset"][0] / 25.4
    size = cells(offset, INCHES)["size"]
    assert size.endswith(") in")
    assert float(size.split("(")[1].split(" ")[0]) == pytest.approx(inches, rel=0.02)
    # 2.467 to 3.033 m
    assert cells(step, INCHES)["where"] == "8.093 to 9.952 ft"
    assert cells(step)["where"] == "2.467 to 3.033 m"


def test_the_table_of_a_tap_that_is_not_told_apart_gives_both(chainage: Reduction) -> None:
    size = cells(chainage)["size"]
    assert size.startswith("edge coefficient −0.01")
    assert " or chainage off by (1" in size


def test_the_table_of_breaks(step: Reduction, offtake: Reduction) -> None:
    row = cells(step)
    assert row["what"] == "line"
    assert row["ailment"] == "unlisted loss"
    assert row["size"].startswith("K = 0.99")
    assert row["what was done"] == "fitted in every run"
    best, rival = (float(row[key].replace("\u202f", "")) for key in ("evidence Δχ²", "best rival Δχ²"))
    assert best > rival > 0
    size = cells(offtake)["size"]
    assert size.startswith("energy head rises by (0.2")
    assert size.endswith(" % flatter downstream")


def test_sentences_where_nothing_was_found_or_looked_for(bench: Reduction, offset: Reduction) -> None:
    assert ailment_sentences(bench) == (SOUND,)
    assert ailment_sentences(offset)[0].startswith("Every tap and every stretch between taps was held")
    assert SOUND not in ailment_sentences(offset)
    inputs = offset.inputs.copy()
    inputs.loc[inputs["what"] == "taps and line over all runs", "text"] = "not judged: fewer than 3 runs"
    bare = dataclasses.replace(offset, inputs=inputs, ailments=offset.ailments.iloc[:0])
    assert ailment_sentences(bare) == ("No tap and no stretch between taps is named: fewer than 3 runs.",)


def test_a_finding_is_told_once(offset: Reduction, step: Reduction) -> None:
    for reduction, words in ((offset, "datum offset"), (step, "a loss that nobody listed")):
        assert any(words in text for text in reduction.cautions)
        look = summarise(reduction).look
        assert sum(words in text for text in look) == 1
        assert further_cautions(reduction, look) == ()
        told, _, tables = terminal_summary(reduction).partition("\nRuns\n")
        assert " ".join(told.split()).count(words) == 1
        assert "Cautions" not in tables
        assert not any("caution" in text for text in look)


def test_what_nobody_listed_is_no_finding_but_stands_with_its_k_among_what_deserves_a_look(
    step: Reduction,
) -> None:
    name = step.fittings["fitting"].item()
    assert name == "unlisted loss 2.467–3.033 m"
    summary = summarise(step)
    assert not any("loss coefficient" in text for text in summary.found)
    (look,) = [text for text in summary.look if "a loss that nobody listed, K = 0.99" in text]
    assert "Δχ²" not in look
    lost = step.fittings.assign(loss_coefficient=np.nan, reason="too few taps")
    (missing,) = summarise(dataclasses.replace(step, fittings=lost)).missing
    assert missing == f"The loss coefficient of {name!r} could not be determined: too few taps."


def test_the_flag_tables_say_what_a_flag_is_of(
    offset: Reduction, step: Reduction, offtake: Reduction
) -> None:
    expected = ("datum offset", "unlisted loss 2.467–3.033 m", "change of slope 2.467–3.033 m")
    for reduction, words in zip((offset, step, offtake), expected, strict=True):
        table = flag_table(reduction)
        assert table.heads[:2] == ("kind", "what")
        assert [row[1] for row in table.rows if row[0] != "reading"] == [words]
        # Where no reading is flagged there is none to show.
        assert ("read" in table.heads) == (reduction.flags["kind"] == "reading").any()
        assert words in terminal_summary(reduction).partition("\nFlags\n")[2]
    assert flag_table(step, INCHES).rows[-1][1] == "unlisted loss 8.093–9.952 ft"


def test_other_cautions_stay(offset: Reduction) -> None:
    more = dataclasses.replace(offset, cautions=(*offset.cautions, "the flow meter is old"))
    look = summarise(more).look
    assert further_cautions(more, look) == ("the flow meter is old",)
    assert any(text.startswith("1 caution and ") for text in look)
    assert "the flow meter is old" in terminal_summary(more)


def test_a_break_is_no_misfit_of_the_friction_law(step: Reduction, offtake: Reduction) -> None:
    for reduction in (step, offtake):
        look = summarise(reduction).look
        assert any(text.startswith("Between 2.467 m and 3.033 m (95 %) ") for text in look)
        assert not any("friction law does not fit" in text for text in look)


def test_taps_left_out_for_an_ailment_were_not_left_out_by_hand(offset: Reduction) -> None:
    assert not any("by hand" in text for text in summarise(offset).look)


def test_a_gauge_is_not_called_a_tap(offset: Reduction) -> None:
    ailments = offset.ailments.assign(what="gauge")
    look = summarise(dataclasses.replace(offset, ailments=ailments)).look
    assert any(text.startswith("Gauge T3: datum offset") for text in look)


def test_the_page_has_a_section(offset: Reduction, bench: Reduction) -> None:
    text = page(offset, pictures(offset, png=False), "0")
    section = text[text.index('<h2 id="taps-and-line">') : text.index('<h2 id="laws">')]
    assert '<figure id="tap_error_1"' in section
    assert "datum offset" in section
    assert '<a href="#taps-and-line">' in text
    quiet = page(bench, (), "0")
    section = quiet[quiet.index('<h2 id="taps-and-line">') : quiet.index('<h2 id="laws">')]
    assert SOUND in section
    assert "<table" not in section


# ------------------------------------------------------------------------------------------------ figures


def test_the_error_of_a_tap_against_the_velocity_head(ax, offset: Reduction) -> None:
    drawn = draw_tap_error(ax, offset, "T3")
    rows = offset.ailment_runs
    np.testing.assert_allclose(drawn.runs.lines[0].get_xdata(), rows["velocity_head"])
    np.testing.assert_allclose(drawn.runs.lines[0].get_ydata(), 1000 * rows["error"])
    (low, high) = drawn.runs.lines[2][0].get_segments()[0][:, 1]
    # 1.96 standard uncertainties to either side
    assert (high - low) / 2 == pytest.approx(1.959964 * 1000 * rows["error_u"][0], rel=1e-6)
    assert list(drawn.patterns) == ["offset"]
    np.testing.assert_allclose(drawn.patterns["offset"].get_ydata(), 1000 * offset.ailments["offset"][0])
    assert (ax.get_xlabel(), ax.get_ylabel()) == ("velocity head V²/2g (m)", "error of tap T3 (mm)")
    assert {label.get_text() for label in drawn.labels} <= set(rows["run"])
    assert len(drawn.labels) >= 6


def test_units_of_the_axes(ax, offset: Reduction) -> None:
    drawn = draw_tap_error(ax, offset, "T3", display=INCHES)
    rows = offset.ailment_runs
    np.testing.assert_allclose(drawn.runs.lines[0].get_xdata(), rows["velocity_head"] / 0.3048)
    np.testing.assert_allclose(drawn.runs.lines[0].get_ydata(), rows["error"] / 0.0254)
    assert (ax.get_xlabel(), ax.get_ylabel()) == ("velocity head V²/2g (ft)", "error of tap T3 (in)")


def test_both_patterns_are_drawn_where_they_are_not_told_apart(ax, chainage: Reduction) -> None:
    drawn = draw_tap_error(ax, chainage, "T3")
    assert list(drawn.patterns) == ["edge", "chainage"]
    x, y = (np.asarray(data, float) for data in drawn.patterns["edge"].get_data())
    row = chainage.ailments.iloc[0]
    np.testing.assert_allclose(y, 1000 * row["edge_coefficient"] * x, atol=1e-9)
    rows = chainage.ailment_runs.sort_values("velocity_head")
    np.testing.assert_allclose(
        np.asarray(drawn.patterns["chainage"].get_ydata(), float)[1:],
        -1000 * row["chainage_error"] * rows["slope"],
    )


def test_a_line_that_does_not_follow_is_drawn_against_its_head(ax, stuck: Reduction) -> None:
    drawn = draw_tap_error(ax, stuck, "T3")
    rows = stuck.ailment_runs
    x, y = (np.asarray(data, float) for data in drawn.runs.lines[0].get_data())
    # as read: what it should show, and its error
    heads = stuck.heads[(stuck.heads["tap"] == "T3")]["head"].to_numpy(float)
    np.testing.assert_allclose(x + y / 1000, heads, atol=1e-9)
    np.testing.assert_allclose(x, rows["expected"])
    still_x, still_y = (np.asarray(data, float) for data in drawn.patterns["still"].get_data())
    assert (still_y[1] - still_y[0]) / (still_x[1] - still_x[0]) == pytest.approx(-1000)
    assert ax.get_xlabel() == "head that the other readings give (m)"


def test_the_heads_about_an_unlisted_loss(ax, step: Reduction) -> None:
    drawn = draw_break(ax, step, 0)
    row = step.ailments.iloc[0]
    assert (drawn.place.get_x(), drawn.place.get_x() + drawn.place.get_width()) == pytest.approx(
        (row["start"], row["end"])
    )
    x, y = (np.asarray(data, float) for data in drawn.fitted.get_data())
    assert (y[x < row["start"]] == 0).all()
    np.testing.assert_allclose(y[x > row["end"]], -row["loss_coefficient"], atol=0.05)
    fast_x, fast_y = (np.asarray(data, float) for data in drawn.fast.get_data())
    np.testing.assert_allclose(fast_y, np.where(fast_x > 2.75, -1.0, 0.0), atol=0.1)
    assert len(fast_x) + len(drawn.slow.get_xdata()) > 80
    assert ax.get_xlabel() == "chainage x (m)"
    assert ax.get_ylabel() == "energy head over V²/2g,\nupstream line taken out"


def test_the_heads_about_a_change_of_slope(ax, offtake: Reduction) -> None:
    drawn = draw_break(ax, offtake, 0)
    row = offtake.ailments.iloc[0]
    x, y = (np.asarray(data, float) for data in drawn.fitted.get_data())
    beyond = x > row["end"]
    slope = np.polyfit(x[beyond], y[beyond], 1)[0]
    # over S the line beyond rises by as much as it is flatter
    assert slope == pytest.approx(-row["slope_change"], rel=0.05)
    assert ax.get_ylabel() == "energy head over S (m),\nupstream line taken out"


def test_figures_are_made_for_taps_and_line(offset: Reduction, step: Reduction, bench: Reduction) -> None:
    assert [one.name for one in pictures(offset, png=False) if one.group == "ailments"] == ["tap_error_1"]
    (one,) = [one for one in pictures(step) if one.group == "ailments"]
    assert one.name == "unlisted_1"
    assert one.title == "Unlisted loss between 2.467 and 3.033 m"
    assert one.alt.startswith(one.title)
    assert one.svg.startswith(b"<?xml")
    assert one.png.startswith(b"\x89PNG")
    assert not [one for one in pictures(bench, png=False) if one.group == "ailments"]


def test_at_most_four_taps_get_a_figure(offset: Reduction) -> None:
    ailments = offset.ailments.loc[[0] * 6].assign(name=[f"T{n}" for n in range(1, 7)])
    runs = offset.ailment_runs
    each = pd.concat([runs.assign(name=name) for name in ailments["name"]], ignore_index=True)
    many = dataclasses.replace(
        offset,
        ailments=ailments.reset_index(drop=True),
        ailment_runs=each,
    )
    names = [one.name for one in pictures(many, png=False) if one.group == "ailments"]
    assert names == [f"tap_error_{n}" for n in range(1, 5)]


def test_grade_lines_tell_why_a_tap_was_left_out(ax, offset: Reduction) -> None:
    ax.set_xlim(0, 5.5)
    drawn = draw_grade_lines(ax, offset, "4")
    assert drawn.flagged is None
    assert [label.get_text() for label in drawn.labels] == ["T3 left out: datum offset"]
    assert drawn.left_out.get_markerfacecolor() == "white"
    heads = offset.heads[(offset.heads["run"] == "4") & (offset.heads["tap"] == "T3")]
    np.testing.assert_allclose(drawn.left_out.get_xdata(), heads["chainage"])
