"""Broken surveys: each a sound one with one fault, of a kind, with the place that the message has to name.

    python -m tests.broken.corpus FOLDER

writes them all, a folder each. The tests write each one where they need it.
"""

from __future__ import annotations

import sys
from functools import cache
from pathlib import Path

from tests.broken.bases import BASES, Files, write_files
from tests.broken.kinds import description, files, formats, instruments, tables
from tests.broken.kinds.case import GIVEN, Broken, source_in

__all__ = ["CASES", "GIVEN", "Broken", "files_of", "source_in", "write_case"]

#: Every broken survey.
CASES: tuple[Broken, ...] = (
    *description.CASES,
    *tables.CASES,
    *instruments.CASES,
    *files.CASES,
    *formats.CASES,
)


@cache
def _base(name: str) -> Files:
    return BASES[name]()


def files_of(case: Broken) -> Files:
    """Return the files of a broken survey."""
    files = dict(_base(case.base))
    case.change(files)
    return files


def write_case(case: Broken, folder: Path) -> Path:
    """Write a broken survey into a folder; return what is to be given to the program."""
    write_files(folder, files_of(case))
    for name in case.folders:
        (folder / name).mkdir()
    return source_in(folder, case.base)


if __name__ == "__main__":
    for number, each in enumerate(CASES):
        write_case(each, Path(sys.argv[1]) / f"{number:03d}")
        print(f"{number:03d} {each.kind}: {each.name} ({each.place})")
