"""What the page and the terminal say of the laws: every verdict in words, and the figures that go with them."""

from __future__ import annotations

import dataclasses
import re

import numpy as np
import pytest
from matplotlib.figure import Figure

from gradeline.reduction.tables import Reduction
from gradeline.report import summarise, terminal_summary
from gradeline.report.figures.laws import draw_friction_factor, draw_slope_velocity
from gradeline.report.laws import (
    conveyance_table,
    law_sentences,
    law_table,
    roughness_check_table,
    surface_table,
    transition_table,
    zero_drift_table,
)
from gradeline.report.tables import wall_table
from tests.report.conftest import frame


def law_rows(verdict, *, chi=(4.7, 23.6, 792.0), reason=None, wall="copper", roughness=(9.1e-6, 1.2e-5, 0.0)):
    return [
        {
            "wall": wall,
            "law": law,
            "roughness": size,
            "chi_square": square,
            "chi_square_above": square - min(chi),
            "needed": 3.8415,
            "slopes_used": 12,
            "verdict": verdict,
            "fit_p": 0.5,
            "reason": reason,
        }
        for law, size, square in zip(("Colebrook–White", "sand-grain", "smooth"), roughness, chi, strict=True)
    ]


def turning(direction="not stated", *, lower=(0.08, 0.12), upper=(0.08, 0.12), reason=None):
    row = {"reach": "test length", "direction": direction, "reason": reason}
    for name, ends in (("lower", lower), ("upper", upper)):
        for end, value in zip(("from", "to"), ends, strict=True):
            row |= {f"{name}_{end}": value, f"{name}_reynolds_{end}": value and value * 24000}
    return row | {"laminar_runs": 2, "turbulent_runs": 6}


@pytest.fixture
def with_tables(bench: Reduction):
    """The bench with some of its tables of laws filled."""

    def make(**tables: list[dict[str, object]]) -> Reduction:
        return dataclasses.replace(bench, **{name: frame(name, rows) for name, rows in tables.items()})

    return make


@pytest.mark.parametrize(
    ("rows", "told"),
    [
        (
            law_rows("Colebrook–White"),
            "The runs of the wall copper are best described by Colebrook–White: χ² is larger by 19 for the sand-grain "
            "transition and 787 for the smooth law, and 3.84 tells two laws apart.",
        ),
        (
            law_rows("sand-grain", chi=(30.0, 5.0, 900.0)),
            "The runs of the wall copper are best described by the sand-grain transition with ε = 0.012 mm: χ² is larger by "
            "25 for Colebrook–White and 895 for the smooth law, and 3.84 tells two laws apart.",
        ),
        (
            law_rows("smooth", chi=(4.0, 5.0, 6.0)),
            "The smooth law describes the runs of the wall copper as well as any roughness does: its χ² is larger by 2.0 at "
            "most, and 3.84 tells two laws apart.",
        ),
        (
            law_rows("not told apart", chi=(4.0, 5.2, 60.0)),
            "The runs of the wall copper do not tell Colebrook–White from the sand-grain transition: their χ² differ by 1.2, "
            "and 3.84 tells two laws apart; a smooth wall is ruled out (χ² larger by 56).",
        ),
        (
            law_rows(
                "none", reason="against the best of them, smooth, f rises by (9.0 ± 1.1) % per decade of Re"
            ),
            "No law describes the runs of the wall copper: against the best of them, smooth, f rises by (9.0 ± 1.1) % per "
            "decade of Re.",
        ),
        (
            [{"wall": "copper", "reason": "fewer than three turbulent runs"}],
            "Which law the wall copper follows is not told: fewer than three turbulent runs.",
        ),
    ],
)
def test_each_verdict_in_words(with_tables, rows, told) -> None:
    assert told in law_sentences(with_tables(laws=rows))


def test_the_summary_has_only_what_tells(with_tables) -> None:
    usual = summarise(with_tables(laws=law_rows("Colebrook–White")))
    assert not any("described" in text for text in (*usual.found, *usual.look))
    sand = summarise(with_tables(laws=law_rows("sand-grain", chi=(30.0, 5.0, 900.0))))
    assert any("the sand-grain transition" in text for text in sand.found)
    none = summarise(with_tables(laws=law_rows("none", reason="f scatters")))
    assert "No law describes the runs of the wall copper: f scatters." in none.look


def test_critical_velocities_rising_and_falling(with_tables) -> None:
    found = with_tables(
        transition=[
            turning("rising", lower=(0.10, 0.12), upper=(0.10, 0.12)),
            turning("falling", lower=(0.08, 0.09), upper=(0.11, None), reason="the runs overlap"),
        ]
    )
    first, second = law_sentences(found)[:2]
    assert first == (
        "With the flow rising, the critical velocity lies between 0.100 and 0.120 m/s (Re 2\u202f400 to 2\u202f880): no run "
        "lies between, by f itself."
    )
    assert second == (
        "With the flow falling, the lower critical velocity, where laminar flow ends, lies between 0.0800 and 0.0900 m/s (Re "
        "1\u202f920 to 2\u202f160), and the upper one, from which on it is turbulent, above 0.110 m/s (Re above "
        "2\u202f640), by f itself. There the runs overlap."
    )
    assert any("With the flow rising" in text for text in summarise(found).found)
    assert transition_table(found).heads[:4] == (
        "reach",
        "flow",
        "lower critical velocity (m/s)",
        "lower critical Re",
    )
    assert len(transition_table(found).rows) == 2


def test_walls_against_what_was_stated(with_tables) -> None:
    row = {"wall": "copper", "roughness": 2.6e-4, "chi_square_above": 50.0, "needed": 3.84}
    found = with_tables(
        roughness_checks=[
            row | {"against": "published", "source": "Moody 1944", "verdict": "worse"},
            row | {"against": "earlier", "roughness_u": 3e-5, "verdict": "better"},
            row | {"against": "earlier", "roughness_u": 3e-5, "verdict": "not distinguishable"},
            row
            | {
                "against": "published",
                "verdict": None,
                "reason": "the runs do not tell the wall's roughness",
            },
        ]
    )
    told = [
        "The wall copper is worse, that is rougher, than the published roughness of 0.26 mm (Moody 1944).",
        "The wall copper is better, that is smoother, than the earlier roughness of (0.260 ± 0.030) mm.",
        "The wall copper is not distinguishable from the earlier roughness of (0.260 ± 0.030) mm.",
        "The wall copper could not be held against the published roughness of 0.26 mm: the runs do not tell the wall's "
        "roughness.",
    ]
    assert [text for text in law_sentences(found) if "copper" in text] == told
    assert [text for text in summarise(found).found if text in told] == told
    assert roughness_check_table(found).rows[0] == ("copper", "published", "0.26", "Moody 1944", "worse", "")


def test_surfaces_name_their_source(with_tables, bench: Reduction) -> None:
    row = {"wall": "copper", "surface": "glass", "low": 1.5e-6, "high": 1e-5, "source": "A. Author, 1944"}
    assert (
        "The bound on the roughness of the wall copper leaves room for glass, 0.0015 to 0.010 mm (A. Author, 1944), and for "
        "all that is smoother."
    ) in law_sentences(with_tables(surfaces=[row | {"agrees": True}]))
    assert (
        "No surface on the list has a roughness like that of the wall copper; the nearest is glass, 0.0015 to 0.010 mm "
        "(A. Author, 1944)."
    ) in law_sentences(with_tables(surfaces=[row | {"agrees": False}]))
    walls = bench.walls.assign(roughness_resolved=True)
    resolved = dataclasses.replace(
        with_tables(surfaces=[row | {"agrees": True, "high": 1.5e-6}]), walls=walls
    )
    assert (
        "The roughness of the wall copper is typical of glass, 0.0015 mm (A. Author, 1944)."
    ) in law_sentences(resolved)
    assert surface_table(resolved).rows == (("copper", "glass", "0.0015", "yes", "A. Author, 1944"),)


def test_c_and_n_with_their_caution_on_the_page_and_none_on_the_terminal(with_tables) -> None:
    caution = "Manning's formula is meant for fully rough walls (ε⁺ above 70), and ε⁺ is 11 here: n changes with the flow"
    numbers = {
        "hazen_williams_c": 149.51,
        "hazen_williams_c_u": 0.87,
        "manning_n": 0.006915,
        "manning_n_u": 4.0e-5,
    }
    found = with_tables(
        wall_conveyance=[
            {"wall": "copper", "run": "R10", "reach": "test length", "caution": caution} | numbers
        ],
        conveyance=[{"run": "R10", "reach": "test length"} | numbers, {"run": "R2", "reach": "test length"}],
    )
    found = dataclasses.replace(
        found,
        walls=found.walls.assign(
            hazen_williams_c=149.51,
            manning_n=0.006915,
            reason=f"the upper bound is what the readings say; {caution}",
        ),
    )
    assert (
        "At the highest flow (run R10) the wall copper has a Hazen–Williams C of 149.51 ± 0.87 and a Manning n of "
        f"0.006915 ± 0.000040. Caution: {caution}."
    ) in law_sentences(found)
    assert conveyance_table(found).rows == (("R10", "149.51 ± 0.87", "0.006915 ± 0.000040"),)
    printed = wall_table(found)
    assert "149.51 ± 0.87" in printed.rows[0]
    assert any(caution in note for note in printed.notes)
    text = terminal_summary(found)
    assert "Manning" not in text
    assert "the upper bound is what the readings say" in re.sub(r"\s+", " ", text)


def test_an_intercept_is_told_with_its_size(with_tables) -> None:
    row = {
        "wall": "copper",
        "departure": "intercept",
        "value": 0.004,
        "value_u": 0.0003,
        "chi_square_fall": 100.0,
    }
    (beyond,) = law_sentences(with_tables(departures=[row | {"beyond_chance": True}]))
    assert beyond == (
        "Against the law the slopes of the wall copper have an intercept of (4.00 ± 0.30) mm/m, more than chance: an error "
        "of the heads in proportion to the chainage would do that."
    )
    (chance,) = law_sentences(with_tables(departures=[row | {"beyond_chance": False}]))
    assert chance.endswith(
        "no more than chance: no error of the heads in proportion to the chainage is seen."
    )


def test_nothing_is_said_without_tables_and_no_row_is_cut_short(bench: Reduction) -> None:
    assert law_sentences(bench) == ()
    assert law_table(bench).rows == ()


def test_a_sand_grain_wall_has_its_law_drawn(with_tables) -> None:
    ax = Figure().add_subplot()
    drawn = draw_friction_factor(
        ax, with_tables(laws=law_rows("sand-grain", chi=(30.0, 5.0, 900.0), roughness=(1e-4, 2e-4, 0.0)))
    )
    line = drawn.sand["test length"]
    assert line.get_label() == "sand-grain law"
    reynolds, factor = (np.asarray(values) for values in line.get_data())
    plus = 2e-4 / 0.02664 * reynolds * np.sqrt(factor / 8)
    # Fully rough, 1/√f = 2 log₁₀(3.7 D/ε), where it lies beyond the last joint; below the first it is smooth.
    rough = plus > 70
    expected = (2 * np.log10(3.7 * 0.02664 / 2e-4)) ** -2
    np.testing.assert_allclose(factor[rough], expected, rtol=1e-9)
    assert factor.min() < expected
    assert not draw_friction_factor(Figure().add_subplot(), with_tables(laws=law_rows("smooth"))).sand


def test_critical_velocities_are_shaded_in_the_readers_unit(with_tables) -> None:
    found = with_tables(transition=[turning(lower=(0.08, 0.10), upper=(0.10, 0.12))])
    drawn = draw_slope_velocity(Figure().add_subplot(), found)
    assert drawn.transition.get_label() == "critical velocities"
    assert drawn.transition.get_x() == pytest.approx(0.08)
    assert drawn.transition.get_width() == pytest.approx(0.04)
    assert draw_slope_velocity(Figure().add_subplot(), with_tables()).transition is None


def test_the_table_of_laws(with_tables) -> None:
    table = law_table(with_tables(laws=law_rows("smooth")))
    assert table.heads == ("wall", "law", "roughness ε (mm)", "χ²", "above the least", "slopes", "verdict")
    assert table.rows[2] == ("copper", "smooth", "–", "792", "787", "12", "smooth")


def test_the_table_of_drifts(with_tables) -> None:
    row = {"tap": "T4", "run": "S1", "run_2": "S2", "drift": 5.1e-3, "drift_u": 6e-4, "beyond_chance": True}
    table = zero_drift_table(
        with_tables(zero_drift=[row, row | {"tap": "T5", "drift_u": None, "beyond_chance": None}])
    )
    assert table.heads == ("tap", "from static run", "to static run", "drift (mm)", "beyond chance")
    assert table.rows == (("T4", "S1", "S2", "5.10 ± 0.60", "yes"), ("T5", "S1", "S2", "5.1", "–"))
