"""Writing a report whole or not at all."""

from __future__ import annotations

import re
from collections.abc import Collection
from importlib.metadata import PackageNotFoundError
from importlib.metadata import version as installed_version
from pathlib import Path
from typing import Literal

from gradeline.errors import OutputError
from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.reduction.tables import RECORD_TABLES, RESULT_TABLES, Reduction
from gradeline.report.folder import Contents, write_folder
from gradeline.report.formats import DEFAULT_FORMATS, FORMATS, PAPERS
from gradeline.report.record import as_csv, as_json, carried_json, result_rows, tables_of

__all__ = ["program_version", "write"]

_FIGURE = re.compile(
    r"(record|grade_lines_\d{2,}(_[A-Za-z0-9_-]{1,40})?|grade_lines_sheet_\d+|residuals|slope_velocity|friction_factor|tap_error_\d+|unlisted_\d+|uncertainty_budget|likelihood_\d+|loss_coefficient_\d+)\.(svg|png)"
)
_REPORT = Contents(
    "report",
    frozenset(
        {
            "report.html",
            "reduction.json",
            "carried.json",
            "report.pdf",
            "reduction.xlsx",
            *(f"{table}.csv" for table in (*RESULT_TABLES, *RECORD_TABLES)),
        }
    ),
    _FIGURE,
)


def program_version() -> str:
    """Return the version of the installed program; ``unknown`` where it is not installed."""
    try:
        return installed_version("gradeline")
    except PackageNotFoundError:
        return "unknown"


def write(
    reduction: Reduction,
    folder: Path,
    *,
    formats: Collection[str] = DEFAULT_FORMATS,
    overwrite: bool = False,
    display: Display = SI_DISPLAY,
    paper: Literal["a4", "letter"] = "a4",
) -> None:
    """Write a reduction to a folder: page, record, tables and figures, all of them or none.

    Everything is made in a temporary folder beside the target and moved into place at the end. An earlier report
    stays where it is until then, and stays for good where something fails.

    Parameters
    ----------
    reduction : Reduction
        What is written.
    folder : Path
        The target. It may be absent or empty.
    formats : collection of str
        Any of ``html`` (report.html), ``json`` (reduction.json), ``csv`` (one file a table), ``svg`` and ``png``
        (the folder ``figures``), ``pdf`` (report.pdf) and ``xlsx`` (reduction.xlsx). The last two only where asked for.
    overwrite : bool
        Whether an earlier report in `folder` may be replaced. Files that are no part of a report are never removed.
    display : Display
        Units of page, PDF and figures; json, csv and xlsx are SI.
    paper : {"a4", "letter"}
        Sheets of the PDF.

    Raises
    ------
    OutputError
        Where the folder is not empty and `overwrite` is off, where it holds files of somebody else, where `formats`
        names an unknown format or `paper` an unknown size, or where the disk refuses.
    """
    unknown = sorted(set(formats) - set(FORMATS))
    if unknown or not formats:
        named = f"unknown format {unknown[0]!r}" if unknown else "no format is named"
        raise OutputError(f"{named}; choose from {', '.join(FORMATS)}")
    if paper not in PAPERS:
        raise OutputError(f"unknown paper {paper!r}; choose from {', '.join(PAPERS)}")
    write_folder(
        folder,
        _REPORT,
        lambda fresh: _fill(reduction, fresh, frozenset(formats), display, paper),
        overwrite=overwrite,
    )


def _fill(
    reduction: Reduction,
    folder: Path,
    formats: frozenset[str],
    display: Display,
    paper: Literal["a4", "letter"],
) -> None:
    """Make every file of a report in an empty folder."""
    version = program_version()
    rows = result_rows(reduction) if formats & {"json", "csv"} else None
    if "json" in formats:
        (folder / "reduction.json").write_bytes(as_json(reduction, version, rows=rows))
        (folder / "carried.json").write_bytes(carried_json(reduction))
    if "csv" in formats:
        for table in tables_of(reduction):
            (folder / f"{table}.csv").write_bytes(as_csv(reduction, table, rows=rows))
    if "xlsx" in formats:
        from gradeline.report.xlsx import as_xlsx  # noqa: PLC0415 (loaded when asked for: start-up time)

        (folder / "reduction.xlsx").write_bytes(as_xlsx(reduction, version))
    if not formats & {"html", "svg", "png", "pdf"}:
        return
    # matplotlib, jinja2 and fpdf2 only where something is drawn or a page is made
    from gradeline.report.figures import pictures  # noqa: PLC0415 (loaded when asked for: start-up time)

    drawn = pictures(
        reduction,
        svg=bool(formats & {"html", "svg"}),
        png="png" in formats,
        paper="pdf" in formats,
        display=display,
    )
    for kind in sorted(formats & {"svg", "png"}):
        (folder / "figures").mkdir(exist_ok=True)
        for picture in drawn:
            (folder / "figures" / f"{picture.name}.{kind}").write_bytes(
                picture.svg if kind == "svg" else picture.png
            )
    if "html" in formats:
        from gradeline.report.page import page  # noqa: PLC0415 (loaded when asked for: start-up time)

        (folder / "report.html").write_bytes(
            page(reduction, drawn, version, display).encode("utf-8", "backslashreplace")
        )
    if "pdf" in formats:
        from gradeline.report.pdf import as_pdf  # noqa: PLC0415 (loaded when asked for: start-up time)

        (folder / "report.pdf").write_bytes(as_pdf(reduction, drawn, version, display, paper))
