"""Figures: what their artists hold, first; that they are the same every time; that names cannot break out."""

from __future__ import annotations

import dataclasses
import itertools
import xml.etree.ElementTree as ET

import matplotlib as mpl
import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import to_hex
from matplotlib.figure import Figure

from gradeline.reduction.tables import Reduction
from gradeline.report.figures import (
    draw_friction_factor,
    draw_grade_lines,
    draw_pipe,
    draw_residuals,
    draw_slope_velocity,
    embedded,
    pictures,
)
from gradeline.report.figures.grade_lines import pipe_fits_the_scale, run_title
from gradeline.report.figures.style import COLOURS, RC, log_ticks, one_two_five, styled

SVG = "{http://www.w3.org/2000/svg}"


@pytest.fixture
def ax():
    with styled():
        figure = Figure(figsize=(6.2, 4))
        FigureCanvasAgg(figure)
        yield figure.add_axes((0.14, 0.15, 0.8, 0.7))


def of(table, run):
    return table[table["run"] == run]


def test_grade_lines_hold_the_fitted_lines_and_the_readings(ax, bench: Reduction) -> None:
    drawn = draw_grade_lines(ax, bench, "R7")
    lines, heads = of(bench.grade_lines, "R7"), of(bench.heads, "R7")
    np.testing.assert_array_equal(drawn.hgl.get_xdata(), lines["chainage"])
    np.testing.assert_array_equal(drawn.hgl.get_ydata(), lines["piezometric_head"])
    np.testing.assert_array_equal(drawn.egl.get_ydata(), lines["energy_head"])
    used = heads["used"].to_numpy(bool)
    np.testing.assert_array_equal(drawn.used.get_ydata(), heads["head"][used])
    np.testing.assert_array_equal(drawn.left_out.get_ydata(), heads["head"][~used])
    np.testing.assert_array_equal(drawn.flagged.get_xdata(), heads["chainage"][heads["flag"] == "outlier"])
    assert [label.get_text() for label in drawn.labels] == ["T4: off the fitted line by +12.0 mm"]
    assert ax.get_xlabel() == "chainage x (m)"
    assert ax.get_ylabel() == "head above datum (m)"
    assert "flow" in [text.get_text() for text in ax.texts]


def test_the_band_is_the_interval_of_the_line(ax, bench: Reduction) -> None:
    drawn = draw_grade_lines(ax, bench, "R5")
    lines = of(bench.grade_lines, "R5")
    corners = drawn.band.get_paths()[0].vertices
    at_start = corners[corners[:, 0] == lines["chainage"].iloc[0]][:, 1]
    # the invented slopes have intervals of 2.2 standard uncertainties to either side
    expected = lines["piezometric_head"].iloc[0] + 2.2 * lines["energy_head_u"].iloc[0] * np.array([-1, 1])
    np.testing.assert_allclose([at_start.min(), at_start.max()], expected, rtol=1e-12)
    assert drawn.band.get_label() == "95 % band"


def test_ring_labels_stand_clear_of_the_lines_and_inside(ax, bench: Reduction) -> None:
    drawn = draw_grade_lines(ax, bench, "R7")
    renderer = ax.figure.canvas.get_renderer()
    ax.figure.draw(renderer)
    box = drawn.labels[0].get_tightbbox(renderer)
    text = type(drawn.labels[0]).__mro__[1].get_window_extent(drawn.labels[0], renderer)
    assert ax.bbox.x0 <= box.x0
    assert box.y1 <= ax.bbox.y1
    for line in (drawn.hgl, drawn.egl):
        points = ax.transData.transform(np.column_stack([line.get_xdata(), line.get_ydata()]))
        x = np.linspace(text.x0, text.x1, 50)
        y = np.interp(x, points[:, 0], points[:, 1])
        assert not ((y > text.y0) & (y < text.y1)).any()


def test_a_static_run_has_no_flow_arrow_and_a_sane_height(ax, bench: Reduction) -> None:
    draw_grade_lines(ax, bench, "S0")
    assert "flow" not in [text.get_text() for text in ax.texts]
    assert np.ptp(ax.get_ylim()) >= 0.01
    assert run_title(bench, "S0") == "Run S0: no flow"


def test_the_pipe_with_taps_and_fittings(ax, field: Reduction) -> None:
    drawn = draw_pipe(ax, field)
    taps = field.layout[field.layout["what"] == "tap"]
    np.testing.assert_array_equal(drawn.taps.get_xdata(), taps["chainage"])
    np.testing.assert_array_equal(drawn.taps.get_ydata(), taps["elevation"])
    assert set(taps["name"]) | {"gate valve"} <= {text.get_text() for text in drawn.names}
    assert (drawn.crown.get_ydata() > drawn.axis.get_ydata()).all()
    np.testing.assert_allclose(drawn.fittings.get_offsets()[0], [410, 31.75])


def test_below_the_crown_is_marked(ax, bench: Reduction) -> None:
    # a line that falls below the pipe shares its axes and is hatched there, with an entry in the legend
    lines = bench.grade_lines.copy()
    lines[["energy_head", "piezometric_head", "elevation", "crown"]] += 0.3
    high = dataclasses.replace(bench, grade_lines=lines)
    assert pipe_fits_the_scale(high, "R10")
    assert not pipe_fits_the_scale(high, "R5")
    drawn = draw_grade_lines(ax, high, "R10", with_pipe=True)
    assert drawn.below_crown.get_hatch()
    assert "HGL below crown" in [text.get_text() for text in ax.get_legend().get_texts()]
    ax.clear()
    # an axis at 0 everywhere: nobody gave elevations
    assert draw_grade_lines(ax, bench, "R10", with_pipe=True).below_crown is None


def test_residuals_of_rounding_make_no_figure_of_their_own(ax, bench: Reduction) -> None:
    heads = bench.heads.assign(residual=1e-17, flag=None, used=True)
    draw_residuals(ax, dataclasses.replace(bench, heads=heads, scatter=bench.scatter.iloc[:0]))
    assert ax.get_ylim() == (-1.0, 1.0)
    assert "nothing is left over" in " ".join(text.get_text() for text in ax.texts)


def test_residuals_are_in_millimetres_and_ring_the_flagged(ax, bench: Reduction) -> None:
    drawn = draw_residuals(ax, bench)
    heads = bench.heads
    shown = np.concatenate([line.get_ydata() for line in drawn.used.values()])
    np.testing.assert_allclose(np.sort(shown), np.sort(heads["residual"][heads["used"]] * 1e3))
    assert set(drawn.used) == {"laminar", "critical", "turbulent", "static"}
    assert len(drawn.flagged.get_xdata()) == 1
    assert round(float(drawn.flagged.get_xdata()[0])) == 3  # T4 is the fourth tap
    assert drawn.labels[0].get_text().startswith("run R7: +11.")
    assert drawn.beyond
    assert abs(drawn.flagged.get_ydata()[0]) < ax.get_ylim()[1]
    assert ax.get_ylabel() == "measured − fitted energy head (mm)"
    assert [label.get_text() for label in ax.get_xticklabels()] == [f"T{n}" for n in range(1, 11)]
    # two sigma of 0.6 mm
    assert drawn.still.get_paths()[0].vertices[:, 1].max() == pytest.approx(1.2)


def test_slope_against_velocity_with_its_power(ax, bench: Reduction) -> None:
    drawn = draw_slope_velocity(ax, bench)
    turbulent = bench.runs[bench.runs["regime"] == "turbulent"]
    x, y = drawn.runs["test length", "turbulent"].lines[0].get_data()
    np.testing.assert_allclose(x, turbulent["velocity"])
    np.testing.assert_allclose(y, turbulent["slope"] * 1e3)
    line = drawn.powers["test length", "turbulent"]
    power = np.diff(np.log(line.get_ydata())) / np.diff(np.log(line.get_xdata()))
    assert power == pytest.approx(1.79)
    assert line.get_label() == "S ∝ Vⁿ, n = 1.790 ± 0.012"
    assert (ax.get_xscale(), ax.get_yscale()) == ("log", "log")
    assert ax.get_xlabel() == "mean velocity V (m/s)"
    assert ax.get_ylabel() == "friction slope S (mm/m)"


def test_friction_factor_with_its_laws(ax, bench: Reduction) -> None:
    drawn = draw_friction_factor(ax, bench)
    re, f = drawn.laminar.get_data()
    np.testing.assert_allclose(f * re, 64)
    assert re.max() <= 2000
    re, f = (np.asarray(data) for data in drawn.smooth.get_data())
    # Prandtl's law of the smooth pipe, 1/sqrt f = 2 log10(Re sqrt f / 2.51)
    np.testing.assert_allclose(1 / np.sqrt(f), 2 * np.log10(re * np.sqrt(f) / 2.51), rtol=1e-9)
    assert re.min() >= 4000
    fitted = np.asarray(drawn.fitted["test length"].get_ydata())
    assert (fitted > f).all()
    band = drawn.bands["test length"].get_paths()[0].vertices
    at_end = band[band[:, 0] == re[-1]][:, 1]
    assert at_end.min() < fitted[-1] < at_end.max()
    # the law's own 2 % with a normal factor of 1.96 is inside the band
    assert at_end.max() / fitted[-1] >= 1 + 1.959 * 0.02
    assert drawn.critical.get_x() == 2000
    assert drawn.critical.get_width() == 2000
    assert {label.get_text() for label in drawn.labels} == {f"R{n}" for n in range(2, 11)}
    assert ax.get_xlabel() == "Reynolds number Re"
    assert ax.get_ylabel() == "Darcy friction factor f"


def test_an_interval_that_leaves_the_axis_ends_in_an_arrowhead(ax, bench: Reduction) -> None:
    sound = bench.runs.copy()
    for name in ("slope", "friction_factor"):
        sound[f"{name}_low"], sound[f"{name}_high"] = sound[name] * 0.99, sound[name] * 1.01
    wide = sound.copy()
    wide.loc[wide["run"] == "R2", ["friction_factor_low", "slope_low"]] = -0.01
    for draw in (draw_friction_factor, draw_slope_velocity):
        ax.clear()
        assert draw(ax, dataclasses.replace(bench, runs=sound)).open_ends == ()
        ax.clear()
        (head,) = draw(ax, dataclasses.replace(bench, runs=wide)).open_ends
        column = "reynolds" if draw is draw_friction_factor else "velocity"
        np.testing.assert_allclose(head.get_xdata(), wide[column][wide["run"] == "R2"])
        np.testing.assert_allclose(head.get_ydata(), ax.get_ylim()[0])


def test_labels_of_runs_cover_neither_marks_nor_each_other(ax, bench: Reduction) -> None:
    # three runs side by side, nearer to each other than their labels are wide
    runs = bench.runs.copy()
    for n, row in enumerate((6, 7, 8)):
        runs.loc[row, ["reynolds", "friction_factor"]] = [30000 * (1 + 0.05 * n), 0.0235 * (1 + 0.01 * n)]
    drawn = draw_friction_factor(ax, dataclasses.replace(bench, runs=runs))
    renderer = ax.figure.canvas.get_renderer()
    boxes = [label.get_window_extent(renderer) for label in drawn.labels]
    marks = np.concatenate([one.lines[0].get_xydata() for one in drawn.runs.values()])
    for n, box in enumerate(boxes):
        assert not [other for other in boxes[:n] if box.overlaps(other)]
        for x, y in ax.transData.transform(marks):
            assert not (box.x0 < x < box.x1 and box.y0 < y < box.y1)


def test_a_band_too_narrow_to_be_seen_is_not_in_the_legend(ax, bench: Reduction) -> None:
    wide = draw_grade_lines(ax, bench, "R5")
    assert "95 % band" in [text.get_text() for text in ax.get_legend().get_texts()]
    ax.clear()
    lines = bench.grade_lines.assign(energy_head_u=1e-3 * bench.grade_lines["energy_head_u"])
    narrow = draw_grade_lines(ax, dataclasses.replace(bench, grade_lines=lines), "R5")
    assert wide.band is not None
    assert narrow.band is not None
    assert "95 % band" not in [text.get_text() for text in ax.get_legend().get_texts()]


@pytest.mark.parametrize(("low", "high"), [(8e4, 4.3e5), (1e3, 9e4), (2.1e5, 2.3e5), (900, 3e6)])
def test_labels_of_a_log_axis_do_not_touch(ax, low: float, high: float) -> None:
    log_ticks(ax, "x", low, high)
    renderer = ax.figure.canvas.get_renderer()
    boxes = [label.get_window_extent(renderer) for label in ax.get_xticklabels() if label.get_text().strip()]
    assert len(boxes) >= 2
    for one, other in itertools.pairwise(boxes):
        assert other.x0 - one.x1 > 2


def test_a_flagged_run_is_ringed(ax, bench: Reduction) -> None:
    flags = bench.flags.copy()
    flags.loc[0, ["kind", "run", "tap"]] = ["run", "R9", None]
    drawn = draw_friction_factor(ax, dataclasses.replace(bench, flags=flags))
    assert drawn.flagged.get_xdata()[0] == bench.runs["reynolds"].iloc[8]


def test_two_reaches_are_told_apart_by_name(ax, field: Reduction) -> None:
    drawn = draw_friction_factor(ax, field)
    assert set(drawn.fitted) == {"upper main", "lower main"}
    words = [text.get_text() for text in ax.get_legend().get_texts()]
    assert "fitted law, upper main" in words
    assert "lower main, turbulent" in words


@pytest.mark.parametrize("name", ["bench", "field"])
def test_marks_are_told_apart_without_colour(ax, name: str, request: pytest.FixtureRequest) -> None:
    drawn = draw_residuals(ax, request.getfixturevalue(name))
    looks = {(line.get_marker(), to_hex(line.get_markerfacecolor())) for line in drawn.used.values()}
    assert len({marker for marker, _ in looks}) == len(drawn.used)


def test_colours_are_those_of_okabe_and_ito() -> None:
    # Okabe and Ito, "Color Universal Design" (2008), the eight RGB triples of the palette; from memory
    triples = {
        (0, 0, 0),
        (230, 159, 0),
        (86, 180, 233),
        (0, 158, 115),
        (240, 228, 66),
        (0, 114, 178),
        (213, 94, 0),
        (204, 121, 167),
    }
    assert {tuple(int(colour[at : at + 2], 16) for at in (1, 3, 5)) for colour in COLOURS.values()} == triples


@pytest.mark.parametrize(("low", "high"), [(0.0134, 0.03), (600, 9e4), (0.02, 0.021), (1e3, 1e8), (3, 700)])
def test_log_axes_always_have_ticks_enough(low: float, high: float) -> None:
    ticks = one_two_five(low, high)
    assert 4 <= len(ticks) <= 16
    assert low <= ticks[0] < ticks[-1] <= high


def test_labels_of_flagged_neighbours_do_not_cover_each_other(ax, bench: Reduction) -> None:
    heads = bench.heads.copy()
    for run, tap in (("R5", "T3"), ("R6", "T3"), ("R8", "T4"), ("R5", "T10"), ("R6", "T10")):
        row = (heads["run"] == run) & (heads["tap"] == tap)
        heads.loc[row, ["residual", "flag", "used"]] = [0.02, "outlier", False]
    drawn = draw_residuals(ax, dataclasses.replace(bench, heads=heads))
    renderer = ax.figure.canvas.get_renderer()
    boxes = [label.get_window_extent(renderer) for label in drawn.labels]
    assert len(boxes) == 6
    for n, one in enumerate(boxes):
        assert one.x0 >= ax.bbox.x0
        assert one.x1 <= ax.bbox.x1
        assert not [other for other in boxes[:n] if one.overlaps(other)]


def test_drawing_leaves_the_users_settings_alone(bench: Reduction) -> None:
    before = dict(mpl.rcParams)
    with mpl.rc_context({"font.size": 22, "axes.grid": False}):
        big = pictures(bench, png=False)
        assert mpl.rcParams["font.size"] == 22
    assert dict(mpl.rcParams) == before
    assert [one.svg for one in big] == [one.svg for one in pictures(bench, png=False)]
    assert RC["svg.fonttype"] == "none"


def test_a_figure_does_not_depend_on_those_drawn_before_it(bench: Reduction) -> None:
    # axes are used again from run to run; nothing of an earlier run may stay on them
    later = dataclasses.replace(bench, runs=bench.runs.iloc[6:].reset_index(drop=True))
    alone = {one.title: one.png for one in pictures(later, svg=False) if one.group == "grade lines"}
    after = {one.title: one.png for one in pictures(bench, svg=False) if one.title in alone}
    assert len(alone) == 4
    assert alone == after


def test_many_runs_are_panels(many: Reduction) -> None:
    drawn = pictures(many, png=False)
    sheets = [one for one in drawn if one.group == "grade lines"]
    assert [one.name for one in sheets] == [
        "grade_lines_sheet_1",
        "grade_lines_sheet_2",
        "grade_lines_sheet_3",
    ]
    words = "".join(ET.fromstring(sheets[1].svg).itertext())
    for run in range(13, 25):
        assert f"R{run} · " in words
    assert "T9" in words


def test_text_in_a_picture_is_text_and_cannot_break_out(hostile: Reduction) -> None:
    for picture in pictures(hostile, png=False):
        root = ET.fromstring(picture.svg)  # well formed, or it raises
        assert not root.findall(f".//{SVG}script")
    run = next(one for one in pictures(hostile, png=False) if one.name.startswith("grade_lines_07"))
    words = [text.text for text in ET.fromstring(run.svg).iter(f"{SVG}text")]
    assert "<script>aler…: off the fitted line by +12.0 mm"[:12] in "".join(word or "" for word in words)
    assert run.name == "grade_lines_07_etc"


def test_control_characters_do_not_spoil_a_picture(bench: Reduction) -> None:
    layout = bench.layout.copy()
    layout.loc[0, "name"] = "T\x001\n2"
    for picture in pictures(dataclasses.replace(bench, layout=layout), png=False):
        ET.fromstring(picture.svg)


def test_embedded_pictures_share_no_identity(bench: Reduction) -> None:
    seen: set[str] = set()
    for picture in pictures(bench, png=False):
        text = embedded(picture)
        root = ET.fromstring(text)
        own = [element.attrib["id"] for element in root.iter() if "id" in element.attrib]
        assert len(own) == len(set(own))
        assert not seen & set(own)
        seen |= set(own)
        # what is referred to is there
        for element in root.iter():
            for key, value in element.attrib.items():
                if key.endswith("href"):
                    assert value.removeprefix("#") in own
                if value.startswith("url(#"):
                    assert value[5:-1] in own
        assert "width" not in root.attrib
        assert root.attrib["viewBox"]


def empty(reduction: Reduction, *tables: str) -> Reduction:
    return dataclasses.replace(reduction, **{table: getattr(reduction, table).iloc[:0] for table in tables})


@pytest.mark.parametrize(
    "tables",
    [
        ("grade_lines",),
        ("heads", "flags"),
        ("layout",),
        ("walls", "exponents", "scatter"),
        ("runs", "heads", "grade_lines", "flags", "walls", "reaches", "layout", "scatter", "exponents"),
    ],
)
def test_missing_tables_make_poorer_pictures_not_faults(field: Reduction, tables: tuple[str, ...]) -> None:
    for picture in pictures(empty(field, *tables)):
        ET.fromstring(picture.svg)
        assert picture.png.startswith(b"\x89PNG")


def test_only_static_runs(bench: Reduction) -> None:
    still = dataclasses.replace(
        bench,
        runs=bench.runs.iloc[:1],
        heads=bench.heads[bench.heads["run"] == "S0"],
        grade_lines=bench.grade_lines.iloc[:0],
        flags=bench.flags.iloc[:0],
    )
    words = ["".join(ET.fromstring(one.svg).itertext()) for one in pictures(still, png=False)]
    assert "no run has a friction slope above zero" in words[-2]
    assert "no run has a friction factor" in words[-1]
