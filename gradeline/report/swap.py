"""A new folder put in the place of an old one, so that at any moment one of them is there or comes back."""

from __future__ import annotations

import os
import shutil
import tempfile
from collections.abc import Callable
from pathlib import Path

__all__ = ["exchanged", "leftovers", "new_place", "put_in_place", "settle"]

_NEW, _OLD = "new", "old"
_AT_FOLDER, _EXCHANGE = -100, 2  # AT_FDCWD and RENAME_EXCHANGE of <fcntl.h> and <linux/fs.h>
_RANDOM = 8  # letters that `tempfile.mkdtemp` puts behind a prefix


def new_place(target: Path) -> Path:
    """Make a hidden folder beside the target and, in it, an empty folder ``new`` to be filled; return that."""
    work = Path(tempfile.mkdtemp(prefix=f".{target.name}-", dir=target.parent))
    fresh = work / _NEW
    try:
        fresh.mkdir()
    except OSError:
        work.rmdir()
        raise
    return fresh


def put_in_place(fresh: Path, target: Path) -> None:
    """Put a filled folder where the target is.

    Where the system can exchange two folders in one step (Linux, on most file systems), no moment is without a result.
    Elsewhere the old one goes to ``old`` beside the new one first; `settle` brings it back, in this process or, where
    this one is killed in between, in the next.

    Parameters
    ----------
    fresh : Path
        From `new_place`, filled. It may hold the old result afterwards.
    target : Path
        Absent, or a folder that may be replaced.

    Raises
    ------
    OSError
        Where the system refuses; `settle` has then to be called, as it has in any case.
    """
    if not target.exists():
        fresh.rename(target)
    elif not exchanged(fresh, target):
        target.rename(fresh.with_name(_OLD))
        fresh.rename(target)


def settle(work: Path, target: Path) -> bool:
    """Bring an old result back that was left aside half-way, and remove the hidden folder.

    Parameters
    ----------
    work : Path
        The hidden folder, in whatever state.
    target : Path
        The folder of results.

    Returns
    -------
    bool
        Whether an old result was put back.

    Raises
    ------
    OSError
        Where it cannot be put back; then it stays in ``old`` of the hidden folder.

    Examples
    --------
    >>> with tempfile.TemporaryDirectory() as place:
    ...     target = Path(place) / "a"
    ...     fresh = new_place(target)
    ...     fresh.with_name("old").mkdir()  # killed between the two steps
    ...     print(settle(fresh.parent, target), target.exists(), fresh.exists())
    True True False
    """
    old, new = work / _OLD, work / _NEW
    back = old.is_dir() and new.is_dir() and not target.exists()
    if back:
        old.rename(target)
    shutil.rmtree(work, ignore_errors=True)
    return back


def leftovers(target: Path, is_ours: Callable[[Path], bool]) -> list[Path]:
    """Return the hidden folders that killed writers of a target left.

    Parameters
    ----------
    target : Path
        The folder of results.
    is_ours : callable
        Whether a folder holds nothing but files of such results, or is empty.
    """
    prefix = f".{target.name}-"
    found = []
    for entry in sorted(target.parent.iterdir()):
        random = entry.name.removeprefix(prefix)
        if entry.name == random or len(random) != _RANDOM or entry.is_symlink() or not entry.is_dir():
            continue
        inside = list(entry.iterdir())
        if all(one.name in (_NEW, _OLD) and not one.is_symlink() and one.is_dir() for one in inside) and all(
            map(is_ours, inside)
        ):
            found.append(entry)
    return found


def exchanged(one: Path, other: Path) -> bool:
    """Let two folders take each other's place in one step.

    By ``renameat2`` with ``RENAME_EXCHANGE`` (Linux manual page rename(2)), which Python has not.

    Parameters
    ----------
    one, other : Path
        Both there, on one file system.

    Returns
    -------
    bool
        Whether it was done; False, with nothing changed, where the system or its file system cannot.
    """
    import ctypes  # noqa: PLC0415 (loaded when asked for: start-up time)

    try:
        rename = ctypes.CDLL(None).renameat2  # Linux, glibc 2.28 and later
    except (OSError, AttributeError, TypeError):  # no such call, or no such library
        return False
    rename.argtypes = (ctypes.c_int, ctypes.c_char_p, ctypes.c_int, ctypes.c_char_p, ctypes.c_uint)
    rename.restype = ctypes.c_int
    done: int = rename(_AT_FOLDER, os.fsencode(one), _AT_FOLDER, os.fsencode(other), _EXCHANGE)
    return done == 0
