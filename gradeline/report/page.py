"""The page: one HTML file that needs nothing else."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from jinja2 import Environment, PackageLoader, StrictUndefined
from markupsafe import Markup

from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.reduction.tables import Reduction
from gradeline.report.figures.render import MOST_PANELS, Picture, embedded
from gradeline.report.inputs import (
    fitting_input_table,
    gauge_table,
    raw_reading_tables,
    side_valve_table,
    stated_reach_table,
    stated_tap_table,
    statements,
    uncertainty_table,
)
from gradeline.report.printed import PrintedTable, percent
from gradeline.report.sentences import summarise
from gradeline.report.tables import (
    bore_table,
    budget_table,
    elevations_known,
    exponent_table,
    fitting_table,
    flag_table,
    reach_table,
    run_table,
    scatter_table,
    tap_table,
    wall_table,
)

__all__ = ["page"]

_MOST_ROWS = 1000

_MOST_READINGS = 200

_TRAPPED = (
    "Trapped pressure.",
    "A closed tap, hose or gauge line can hold the pressure of an earlier run. Open bleed valves slowly, away from "
    "the face, and take a line apart only when it has been seen to be empty.",
)
_BELOW = (
    "Pressure below the atmosphere's.",
    "Where the hydraulic grade line lies below the pipe's crown, air or dirty water can be drawn in through joints, "
    "taps and air valves, and the water column can part and close again with a blow.",
)
_MERCURY = (
    "Mercury.",
    "Its vapour is poisonous. Keep a trap in the line, do not let the column be blown over by opening a tap on one "
    "side only, and collect spills by the rules of the place.",
)


def handling(reduction: Reduction) -> tuple[tuple[str, str], ...]:
    """Return what people at this line should know: trapped pressure always, the rest where the survey has it."""
    said = " ".join((*reduction.cautions, *reduction.assumptions, *reduction.inputs["text"].dropna())).lower()
    lines = reduction.grade_lines
    below = "below the pipe's crown" in said or (
        elevations_known(reduction)
        and bool((lines["piezometric_head"] < lines["crown"]).to_numpy(bool).any())
    )
    return (_TRAPPED, *([_BELOW] if below else []), *([_MERCURY] if "mercury" in said else []))


def page(
    reduction: Reduction, pictures: Sequence[Picture], version: str, display: Display = SI_DISPLAY
) -> str:
    """Return the report as one self-contained HTML page.

    Parameters
    ----------
    reduction : Reduction
        What is reported.
    pictures : sequence of Picture
        Its figures, with their SVG.
    version : str
        Of the program.
    display : Display
        Units of the reader.

    Returns
    -------
    str
        HTML. Everything that came from files is escaped; the page loads nothing.
    """
    environment = Environment(
        loader=PackageLoader("gradeline.report"),
        autoescape=True,
        trim_blocks=True,
        lstrip_blocks=True,
        undefined=StrictUndefined,
    )
    environment.filters["together"] = _together
    template = environment.get_template("report.html.jinja")
    survey = reduction.survey
    return template.render(
        title=str(survey.get("title") or "Survey"),
        date=survey.get("date"),
        source=survey.get("source"),
        files=dict(survey.get("files") or {}),
        summary=summarise(reduction, display),
        figures=_by_group(pictures),
        panels_of=MOST_PANELS if reduction.runs["run"].nunique() > MOST_PANELS else None,
        tables=_tables(reduction, display),
        assumptions=reduction.assumptions,
        cautions=reduction.cautions,
        handling=handling(reduction),
        statements=statements(reduction, display),
        level=percent(reduction.level),
        gravity=f"{reduction.gravity:.5f}",
        version=version,
        raw=raw_reading_tables(reduction, display, limit=_MOST_READINGS),
        left_over={
            **{name: max(len(getattr(reduction, name)) - _MOST_ROWS, 0) for name in ("runs", "flags")},
            "raw": max(reduction.raw_readings["run"].nunique() - _MOST_READINGS, 0),
        },
    )


def _together(text: str) -> str:
    """Keep a value and its uncertainty, and a number and its unit, on one line."""
    joined = str(text).replace(" ± ", "\u00a0±\u00a0")
    for unit in ("%", "mm", "m", "kPa"):
        joined = (
            joined.replace(f" {unit}.", f"\u00a0{unit}.")
            .replace(f" {unit} ", f"\u00a0{unit} ")
            .replace(f" {unit})", f"\u00a0{unit})")
        )
    return joined


def _by_group(pictures: Sequence[Picture]) -> dict[str, list[dict[str, Any]]]:
    groups: dict[str, list[dict[str, Any]]] = {}
    for picture in pictures:
        # drawn by our own code with every text escaped, so it may stand as it is
        groups.setdefault(picture.group, []).append(
            {
                "name": picture.name,
                "title": picture.title,
                "alt": picture.alt,
                "svg": Markup(embedded(picture)),
            }
        )
    return groups


def _tables(reduction: Reduction, display: Display) -> dict[str, PrintedTable]:
    return {
        "runs": run_table(reduction, display, limit=_MOST_ROWS),
        "walls": wall_table(reduction, display),
        "fittings": fitting_table(reduction, display),
        "flags": flag_table(reduction, limit=_MOST_ROWS),
        "reaches": reach_table(reduction, display),
        "exponents": exponent_table(reduction),
        "scatter": scatter_table(reduction, display),
        "taps": tap_table(reduction, display),
        "bore": bore_table(reduction, display),
        "budget": budget_table(reduction),
        "stated_reaches": stated_reach_table(reduction, display),
        "stated_fittings": fitting_input_table(reduction, display),
        "side_valves": side_valve_table(reduction, display),
        "stated_taps": stated_tap_table(reduction, display),
        "gauges": gauge_table(reduction, display),
        "uncertainties": uncertainty_table(reduction, display),
    }
