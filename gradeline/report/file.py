"""A single file of results, written whole or not at all."""

from __future__ import annotations

from pathlib import Path

from gradeline.report.one_writer import one_writer

__all__ = ["write_file"]


def write_file(path: Path, content: bytes) -> None:
    """Write a file beside its place and move it there in one step; what was there stays until then.

    What a killed process left (``.name-unfinished``) goes with the next call.

    Parameters
    ----------
    path : Path
        Where it goes; the folder is there.
    content : bytes
        All of it.

    Raises
    ------
    OSError
        Where the disk refuses, or another process writes there for longer than is waited; what was there before stays.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as place:
    ...     write_file(Path(place) / "a", b"whole")
    ...     print([(one.name, one.read_bytes()) for one in Path(place).iterdir()])
    [('a', b'whole')]
    """
    with one_writer(path):
        fresh = path.with_name(f".{path.name}-unfinished")
        fresh.unlink(missing_ok=True)
        try:
            with fresh.open("xb") as stream:  # made anew: no link is followed
                stream.write(content)
            fresh.replace(path)
        finally:
            fresh.unlink(missing_ok=True)
