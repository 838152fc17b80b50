"""Runs off the law in the figures, and words that a reader took amiss: smooth, not told from zero."""

from __future__ import annotations

import dataclasses
import math

import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from gradeline.reduction.tables import Reduction
from gradeline.report import summarise
from gradeline.report.figures import draw_slope_velocity
from gradeline.report.figures.style import styled
from gradeline.report.smoothness import smooth_sentence
from gradeline.report.tables import fitting_table

from .conftest import NU, colebrook, frame


@pytest.fixture
def ax():
    with styled():
        figure = Figure(figsize=(6.2, 4))
        FigureCanvasAgg(figure)
        yield figure.add_axes((0.14, 0.15, 0.8, 0.7))


def slipped(bench: Reduction, run: str = "R8") -> Reduction:
    """The flow, and so V and Re, of a run sixty times too large, and its flag."""
    runs = bench.runs.copy()
    mine = runs["run"] == run
    runs.loc[mine, ["flow", "velocity", "reynolds"]] *= 60.0
    flags = frame("flags", [{"kind": "run", "run": run, "score": -800.0, "suggestion": "look up its flow"}])
    return dataclasses.replace(bench, runs=runs, flags=flags)


def test_the_power_goes_through_the_runs_that_it_is_of(ax, bench: Reduction) -> None:
    """S = a Vⁿ of the other runs, by least squares with n given and each weighed by its own relative scatter."""
    shown = slipped(bench)
    drawn = draw_slope_velocity(ax, shown)
    x, y = (np.asarray(data) for data in drawn.powers["test length", "turbulent"].get_data())
    others = bench.runs[(bench.runs["regime"] == "turbulent") & (bench.runs["run"] != "R8")]
    weight = (others["slope"] / others["slope_u_random"]) ** 2
    height = np.average(np.log(1e3 * others["slope"] / others["velocity"] ** 1.79), weights=weight)
    np.testing.assert_allclose(y, np.exp(height) * x**1.79, rtol=1e-9)
    assert x.max() < 1.1 * others["velocity"].max()
    on_line = np.exp(np.interp(np.log(others["velocity"]), np.log(x), np.log(y)))
    np.testing.assert_allclose(on_line, 1e3 * others["slope"], rtol=0.12)


def test_the_run_off_the_law_is_ringed_and_named(ax, bench: Reduction) -> None:
    shown = slipped(bench)
    drawn = draw_slope_velocity(ax, shown)
    row = shown.runs[shown.runs["run"] == "R8"].iloc[0]
    assert drawn.flagged is not None
    np.testing.assert_allclose(drawn.flagged.get_xydata(), [[row["velocity"], 1e3 * row["slope"]]])
    assert "R8" in [text.get_text() for text in ax.texts]
    assert "run flagged" in [text.get_text() for text in ax.get_legend().get_texts()]
    ax.clear()
    assert draw_slope_velocity(ax, bench).flagged is None


@pytest.mark.parametrize("run", [None, "R8"])
def test_the_legend_covers_no_run(ax, bench: Reduction, run: str | None) -> None:
    draw_slope_velocity(ax, bench if run is None else slipped(bench, run))
    ax.figure.canvas.draw()
    box = ax.get_legend().get_window_extent()
    for line in (bar.lines[0] for bar in ax.containers):
        for x, y in ax.transData.transform(line.get_xydata()):
            assert not (box.x0 < x < box.x1 and box.y0 < y < box.y1)


def wall(reduction: Reduction, **cells: object) -> dict[str, object]:
    return {**reduction.walls.iloc[0].to_dict(), **cells}


def test_smooth_is_said_by_its_criterion_and_beside_what_the_law_gives(bench: Reduction) -> None:
    """ε⁺ = ε V √(f/8)/ν and f over that of a smooth wall, both from Colebrook–White by fixed point."""
    size = 1.1e-5
    fast = bench.runs.iloc[-1]
    bore = float(bench.reaches["diameter"].iloc[0])
    f, smooth = colebrook(fast["reynolds"], size / bore), colebrook(fast["reynolds"], 0.0)
    plus = size * fast["velocity"] * math.sqrt(f / 8) / NU
    assert plus < 5
    resolved = wall(bench, roughness=size, roughness_resolved=True, hydraulically_smooth=True)
    assert smooth_sentence(bench, resolved) == (
        f"ε⁺ = {plus:.1f} at the fastest run, below 5: hydraulically smooth by the sand-grain criterion, though by the "
        f"Colebrook–White law f lies {100 * (f / smooth - 1):.1f} % above that of a smooth wall."
    )
    bound = wall(bench, roughness_upper95=size, roughness_resolved=False, hydraulically_smooth=True)
    assert smooth_sentence(bench, bound) == (
        f"Even at that bound ε⁺ = {plus:.1f} at the fastest run, below 5: hydraulically smooth by the sand-grain criterion, "
        f"though by the Colebrook–White law f would there lie {100 * (f / smooth - 1):.1f} % above that of a smooth wall."
    )


def test_a_wall_that_no_law_tells_from_smooth_is_said_to_be_so(bench: Reduction) -> None:
    size = 1e-8
    text = smooth_sentence(bench, wall(bench, roughness_upper95=size, roughness_resolved=False))
    assert text.endswith(", and by the Colebrook–White law f lies within 1 % of that of a smooth wall.")
    assert smooth_sentence(bench, wall(bench, hydraulically_smooth=False)) == ""


def test_a_bound_is_spoken_of_only_where_there_is_one(bench: Reduction, field: Reduction) -> None:
    """The wall of the bench is a bound, that of the field a value."""
    assert "smaller than 0.0031 mm (95 %), from 6 turbulent runs. Even at that bound ε⁺ = " in " ".join(
        summarise(bench).found
    )
    assert "that bound" not in " ".join(summarise(field).found)


def test_a_loss_that_is_not_told_from_zero_is_said_to_be_so(field: Reduction) -> None:
    fittings = field.fittings.copy()
    fittings[["loss_coefficient", "loss_coefficient_u"]] = 1.16, 0.87
    fittings[["loss_coefficient_low", "loss_coefficient_high"]] = -0.55, 2.9
    shown = dataclasses.replace(field, fittings=fittings)
    (text,) = [text for text in summarise(shown).found if "K =" in text]
    assert text.startswith(
        "The loss coefficient of gate valve is not told from zero: K = 1.16 ± 0.87 (95 % interval −0.55 to 2.9); faster runs "
        "or steadier readings would tell."
    )
    assert "of straight pipe" not in text
    assert fitting_table(shown).rows
