"""Writing a report whole or not at all."""

from __future__ import annotations

import re
import shutil
import tempfile
from collections.abc import Collection
from importlib.metadata import PackageNotFoundError
from importlib.metadata import version as installed_version
from pathlib import Path
from typing import Literal

from gradeline.errors import OutputError
from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.reduction.tables import RESULT_TABLES, Reduction
from gradeline.report.formats import DEFAULT_FORMATS, FORMATS, PAPERS
from gradeline.report.record import as_csv, as_json, carried_json

__all__ = ["program_version", "write"]

_FIGURE = re.compile(
    r"(grade_lines_\d{2,}(_[A-Za-z0-9_-]{1,40})?|grade_lines_sheet_\d+|residuals|slope_velocity|friction_factor|tap_error_\d+|unlisted_\d+|uncertainty_budget|likelihood_\d+|loss_coefficient_\d+)\.(svg|png)"
)
_FILES = frozenset(
    {
        "report.html",
        "reduction.json",
        "carried.json",
        "report.pdf",
        "reduction.xlsx",
        *(f"{table}.csv" for table in RESULT_TABLES),
    }
)
#: Left behind by file managers; nobody's work.
_LITTER = frozenset({".DS_Store", "Thumbs.db", "desktop.ini"})


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
    folder = Path(folder)
    try:
        target = folder.resolve()
        _check(target, folder, overwrite=overwrite)
        made = _make_parents(target.parent)
    except OutputError:
        raise
    except OSError as error:
        raise _refused(folder, error) from error
    work: Path | None = None
    done = False
    try:
        work = Path(tempfile.mkdtemp(prefix=f".{target.name}-", dir=target.parent))
        fresh = work / "new"
        fresh.mkdir()
        _fill(reduction, fresh, frozenset(formats), display, paper)
        _check(target, folder, overwrite=overwrite)  # again: drawing took its time
        _swap(fresh, target, work / "old")
        done = True
    except OutputError:
        raise
    except OSError as error:
        raise _refused(folder, error) from error
    finally:
        if work is not None:
            shutil.rmtree(work, ignore_errors=True)
        if not done:
            for parent in made:
                _remove_if_empty(parent)


def _refused(folder: Path, error: OSError) -> OutputError:
    why = error.strerror or str(error)
    return OutputError(f"{folder}: the report could not be written ({why}); choose another folder with --out")


def _check(target: Path, shown: Path, *, overwrite: bool) -> None:
    """Refuse a target that holds something we may not replace."""
    if not target.exists():
        return
    if not target.is_dir():
        raise OutputError(f"{shown} is a file, not a folder; choose another folder with --out")
    entries = sorted(target.iterdir())
    if not entries:
        return
    if not overwrite:
        raise OutputError(
            f"{shown} is not empty (it holds {entries[0].name}); choose another folder with --out, or replace an "
            "earlier report with --overwrite"
        )
    foreign = _foreign(target)
    if foreign is not None:
        raise OutputError(
            f"{shown} holds {foreign}, which is no part of a report, so nothing was replaced; move it away or choose "
            "another folder with --out"
        )


def _foreign(target: Path) -> str | None:
    """Name a file under `target` that this program does not write; None where there is none."""
    for entry in sorted(target.iterdir()):
        if entry.name == "figures" and entry.is_dir() and not entry.is_symlink():
            for figure in sorted(entry.iterdir()):
                ours = _FIGURE.fullmatch(figure.name) or figure.name in _LITTER
                if not ours or figure.is_symlink() or not figure.is_file():
                    return f"figures/{figure.name}"
        elif entry.name not in _FILES | _LITTER or entry.is_symlink() or not entry.is_file():
            return entry.name
    return None


def _make_parents(parent: Path) -> list[Path]:
    """Make the folders above the target; return those that were made, the deepest first."""
    made = []
    at = parent
    while not at.exists():
        made.append(at)
        at = at.parent
    parent.mkdir(parents=True, exist_ok=True)
    return made


def _remove_if_empty(folder: Path) -> None:
    if folder.is_dir() and not any(folder.iterdir()):
        folder.rmdir()


def _swap(fresh: Path, target: Path, old: Path) -> None:
    """Move the new folder into place; the old one comes back where that fails."""
    had = target.exists()
    if had:
        target.rename(old)
    try:
        fresh.rename(target)
    except OSError:
        if had:
            old.rename(target)
        raise


def _fill(
    reduction: Reduction,
    folder: Path,
    formats: frozenset[str],
    display: Display,
    paper: Literal["a4", "letter"],
) -> None:
    """Make every file of a report in an empty folder."""
    version = program_version()
    if "json" in formats:
        (folder / "reduction.json").write_bytes(as_json(reduction, version))
        (folder / "carried.json").write_bytes(carried_json(reduction))
    if "csv" in formats:
        for table in RESULT_TABLES:
            (folder / f"{table}.csv").write_bytes(as_csv(reduction, table))
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
