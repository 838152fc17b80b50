"""The page: one HTML file that needs nothing else."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from jinja2 import Environment, PackageLoader, StrictUndefined
from markupsafe import Markup

from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.reduction.tables import Reduction
from gradeline.report.figures.render import Picture, embedded
from gradeline.report.outline import outline
from gradeline.report.printed import together

__all__ = ["page"]


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
    environment.filters["together"] = together
    template = environment.get_template("report.html.jinja")
    return template.render(
        report=outline(reduction, version, display), figures=_by_group(pictures), version=version
    )


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
