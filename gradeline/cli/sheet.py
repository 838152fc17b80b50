"""`gradeline sheet`: a survey's blank recording sheet as a file."""

from __future__ import annotations

from pathlib import Path
from typing import Any, Literal

from gradeline.errors import OutputError

__all__ = ["NAME", "write_sheet"]

#: What the file is called.
NAME = "recording_sheet.pdf"


def write_sheet(
    source: Path,
    out: Path | None,
    *,
    runs: int,
    repeats: int,
    paper: Literal["a4", "letter"],
    overwrite: bool,
) -> dict[str, Any]:
    """Write the recording sheet of a survey.

    Parameters
    ----------
    source : Path
        The survey, with or without readings.
    out : Path or None
        The file; None: ``recording_sheet.pdf`` in the survey's folder, or beside a survey in one file.
    runs, repeats : int
        Rows.
    paper : {"a4", "letter"}
        Size of the sheets.
    overwrite : bool
        Whether a file that is there may be replaced.

    Returns
    -------
    dict
        ``written_to``, ``columns``, the headings in order, and ``listed``, those of readings that are listed one a row.

    Raises
    ------
    OutputError
        Where the file is there already, or cannot be written.
    """
    target = out or (source / NAME if source.is_dir() else source.with_name(f"{source.stem}_{NAME}"))
    from gradeline.loader.recording import read_recording  # noqa: PLC0415 (loaded when asked for: start-up time)

    recording = read_recording(source)
    if target.is_symlink():
        raise OutputError(f"{target} is a link; name the file itself with --out")
    if target.is_dir():
        raise OutputError(f"{target} is a folder; name a file, such as {target / NAME}")
    if target.exists() and not overwrite:
        raise OutputError(
            f"{target} exists already; name another file with --out, or replace it with --overwrite"
        )
    from gradeline.report.file import write_file  # noqa: PLC0415 (loaded when asked for: start-up time)
    from gradeline.report.output import program_version  # noqa: PLC0415 (loaded when asked for: start-up time)
    from gradeline.report.recording_sheet import (  # noqa: PLC0415 (loaded when asked for: start-up time)
        SheetColumn,
        recording_sheet,
    )

    content = recording_sheet(
        recording.title,
        [
            # a note's heading begins so in the file; on the sheet that stands below it
            SheetColumn(column.heading.removeprefix("note "), "note", column.static)
            if column.heading.startswith("note ")
            else SheetColumn(column.heading, column.under, column.static)
            for column in recording.columns
        ],
        recording.gauges,
        program_version(),
        runs=runs,
        repeats=repeats,
        paper=paper,
        listed=recording.listed,
        read=[SheetColumn(one.heading, one.under) for one in recording.read],
    )
    try:
        target.parent.mkdir(parents=True, exist_ok=True)
        write_file(target, content)
    except OSError as error:
        raise OutputError(
            f"{target}: the sheet could not be written ({error.strerror or error}); name another file with --out"
        ) from error
    return {
        "written_to": str(target),
        "columns": [column.heading for column in recording.columns],
        "listed": list(recording.listed),
    }
