"""The summary over all surveys: where it goes, and its writing, whole or not at all."""

from __future__ import annotations

import os
import tempfile
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import typer

from gradeline.errors import OutputError

__all__ = ["check_summary", "summary_path", "write_summary"]

_ENDINGS = (".csv", ".parquet")


def summary_path(
    asked: Path | None, out: Path | None, targets: Sequence[Path | None], *, several: bool
) -> Path | None:
    """Return where the summary goes; None where there is none.

    Parameters
    ----------
    asked : Path or None
        What ``--summary`` says.
    out : Path or None
        What ``--out`` says: of several surveys, the summary goes there unless another place was asked for.
    targets : sequence of Path or None
        Where the results of the surveys go.
    several : bool
        Whether there are several surveys.

    Raises
    ------
    typer.BadParameter
        Where the name has another ending than .csv or .parquet, or is that of a survey's results.
    """
    path = asked if asked is not None else out / "summary.csv" if several and out is not None else None
    if path is None:
        return None
    if path.suffix.lower() not in _ENDINGS:
        raise typer.BadParameter(f"--summary {path}: the name must end in .csv or .parquet")
    if path in targets:
        raise typer.BadParameter(
            f"the results of a survey go to {path}, where the summary would go; name another file with --summary"
        )
    return path


def check_summary(path: Path, *, overwrite: bool) -> None:
    """Refuse a place for the summary before hours are spent.

    Parameters
    ----------
    path : Path
        Where it is to go.
    overwrite : bool
        Whether an earlier summary may be replaced. A file that is none never is.

    Raises
    ------
    OutputError
        Where something is there that may not be replaced.
    UsageError
        Where parquet is asked for and pyarrow is not installed.
    """
    if path.suffix.lower() == ".parquet":
        from gradeline.report.summary import summary_parquet  # noqa: PLC0415 (loaded when asked for: start-up time)

        summary_parquet([])
    if path.is_dir():
        raise OutputError(f"{path} is a folder, not a file; name another file with --summary")
    if not path.exists():
        return
    if not overwrite:
        raise OutputError(
            f"{path} is there already, so nothing was reduced; replace it with --overwrite, or name another file with "
            "--summary"
        )
    if not _is_summary(path):
        raise OutputError(
            f"{path} is no summary of surveys, so it is not replaced; move it away or name another file with --summary"
        )


def write_summary(path: Path, rows: Sequence[Mapping[str, Any]]) -> None:
    """Write the summary beside its place and move it there.

    Parameters
    ----------
    path : Path
        Where it goes; its ending says in which format.
    rows : sequence of mapping
        In order.

    Raises
    ------
    OutputError
        Where the disk refuses; what was there before stays.
    """
    from gradeline.report.summary import summary_csv, summary_parquet  # noqa: PLC0415 (loaded when asked for: start-up time)

    content = summary_parquet(rows) if path.suffix.lower() == ".parquet" else summary_csv(rows)
    fresh: Path | None = None
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        handle, name = tempfile.mkstemp(prefix=f".{path.name}-", dir=path.parent)
        fresh = Path(name)
        with os.fdopen(handle, "wb") as file:
            file.write(content)
        fresh.chmod(0o666 & ~_mask())  # as a file that is simply opened has it
        fresh.replace(path)
    except OSError as error:
        why = error.strerror or str(error)
        raise OutputError(
            f"{path}: the summary could not be written ({why}); name another file with --summary"
        ) from error
    finally:
        if fresh is not None:
            fresh.unlink(missing_ok=True)


def _mask() -> int:
    mask = os.umask(0o022)
    os.umask(mask)
    return mask


def _is_summary(path: Path) -> bool:
    """Whether a file is an earlier summary: its heading, or the names of its columns, are those of one."""
    from gradeline.report.summary import SUMMARY_COLUMNS  # noqa: PLC0415 (loaded when asked for: start-up time)

    names = list(SUMMARY_COLUMNS)
    try:
        if path.suffix.lower() == ".csv":
            heading = (",".join(names) + "\n").encode()
            with path.open("rb") as file:
                return file.read(len(heading)) == heading
        import pyarrow as pa  # noqa: PLC0415 (an extra)
        from pyarrow import parquet  # noqa: PLC0415 (an extra)

        try:
            return bool(parquet.read_schema(path).names == names)
        except pa.ArrowException:
            return False
    except OSError:
        return False
