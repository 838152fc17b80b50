"""A folder of results: written whole or not at all, and never over the files of somebody else."""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from gradeline.errors import OutputError
from gradeline.report.one_writer import PATIENCE, TakenError, one_writer
from gradeline.report.swap import leftovers, new_place, put_in_place, settle

__all__ = ["Contents", "write_folder"]

#: Left behind by file managers; nobody's work.
_LITTER = frozenset({".DS_Store", "Thumbs.db", "desktop.ini"})


@dataclass(frozen=True)
class Contents:
    """What a folder of one kind holds, so that it can be told from the work of others.

    Parameters
    ----------
    name : str
        What messages call it: report, plan.
    files : frozenset of str
        Every name it may hold.
    figures : Pattern or None
        Names in its folder ``figures``; None where it has none.
    """

    name: str
    files: frozenset[str]
    figures: re.Pattern[str] | None = None


def write_folder(
    folder: Path, contents: Contents, fill: Callable[[Path], None], *, overwrite: bool = False
) -> None:
    """Make a folder of results beside the target and move it into place at the end.

    What was there stays where it is until then, and stays for good where something fails. A process that is killed leaves
    the old result or the new one; what else it left is cleared away by the next call. Only one process at a time writes to
    a target: a second one waits, and finds then what the first one made.

    Parameters
    ----------
    folder : Path
        The target. It may be absent or empty, but no link: a survey of somebody else's could lead anywhere with one.
    contents : Contents
        What such a folder holds.
    fill : callable
        Writes every file into the empty folder it is given.
    overwrite : bool
        Whether earlier results of the same kind may be replaced. Files that are no part of them are never removed.

    Raises
    ------
    OutputError
        Where the target holds something that may not be replaced, the disk refuses, or another process writes there for
        longer than is waited.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as place:
    ...     write_folder(Path(place) / "a", Contents("note", frozenset({"n.txt"})), lambda at: (at / "n.txt").touch())
    ...     print([one.name for one in (Path(place) / "a").iterdir()])
    ['n.txt']
    """
    folder = Path(folder)
    made: list[Path] = []
    done = False
    try:
        target = folder.resolve()
        _check(target, folder, contents, overwrite=overwrite)
        made = _make_parents(target.parent)
        with one_writer(target) as alone:
            back = alone and _tidied(target, contents)
            # again: another may have written
            _check(target, folder, contents, overwrite=overwrite, back=back)
            _make(target, folder, contents, fill, overwrite=overwrite)
        done = True
    except OutputError:
        raise
    except TakenError:
        raise OutputError(
            f"{folder}: another process was writing there for more than {PATIENCE:.0f} s, so this {contents.name} was not "
            "written; the folder holds what was there before or what that one made, whole; wait until it has ended, or choose "
            "another folder with --out"
        ) from None
    except OSError as error:
        why = error.strerror or str(error)
        raise OutputError(
            f"{folder}: the {contents.name} could not be written ({why}); {_what_is_there(folder, contents)}; choose "
            "another folder with --out"
        ) from error
    finally:
        if not done:
            for parent in made:
                _remove_if_empty(parent)


def _make(
    target: Path, shown: Path, contents: Contents, fill: Callable[[Path], None], *, overwrite: bool
) -> None:
    """Fill a folder beside the target and put it in its place."""
    fresh = new_place(target)
    try:
        fill(fresh)
        _check(target, shown, contents, overwrite=overwrite)  # again: drawing took its time
        put_in_place(fresh, target)
    finally:
        try:
            settle(fresh.parent, target)
        except OSError as error:
            raise OutputError(
                f"{shown}: the {contents.name} could not be put in the place of the earlier one, nor that one back "
                f"({error.strerror or error}); the earlier one stands whole in {error.filename} and comes back with the next "
                f"call, or move it to {shown}"
            ) from error


def _tidied(target: Path, contents: Contents) -> bool:
    """Clear away what killed writers left; whether one of them had put an earlier result aside, which is back now."""
    back = False
    for work in leftovers(target, lambda inside: _foreign(inside, contents) is None):
        back |= settle(work, target)
    return back


def _what_is_there(folder: Path, contents: Contents) -> str:
    """What a failed call leaves, in words."""
    try:
        kept = folder.is_dir() and any(folder.iterdir())
    except OSError:
        return f"nothing of this {contents.name} was kept"
    return f"the earlier {contents.name} there stands unchanged" if kept else "nothing was left there"


def _check(target: Path, shown: Path, contents: Contents, *, overwrite: bool, back: bool = False) -> None:
    """Refuse a target that leads elsewhere, or that holds something we may not replace."""
    if shown.is_symlink():
        raise OutputError(f"{shown} is a link to {target}; give the folder itself with --out")
    if not target.exists():
        return
    if not target.is_dir():
        raise OutputError(f"{shown} is a file, not a folder; choose another folder with --out")
    entries = sorted(target.iterdir())
    if not entries:
        return
    if not overwrite:
        returned = f": the earlier {contents.name}, back from a call that was killed" if back else ""
        raise OutputError(
            f"{shown} is not empty (it holds {entries[0].name}){returned}; choose another folder with --out, or replace an "
            f"earlier {contents.name} with --overwrite"
        )
    foreign = _foreign(target, contents)
    if foreign is not None:
        raise OutputError(
            f"{shown} holds {foreign}, which is no part of a {contents.name}, so nothing was replaced; move it away or "
            "choose another folder with --out"
        )


def _foreign(target: Path, contents: Contents) -> str | None:
    """Name a file under `target` that this program does not write; None where there is none."""
    for entry in sorted(target.iterdir()):
        if contents.figures is not None and entry.name == "figures" and _own(entry, Path.is_dir):
            for figure in sorted(entry.iterdir()):
                ours = contents.figures.fullmatch(figure.name) or figure.name in _LITTER
                if not ours or not _own(figure, Path.is_file):
                    return f"figures/{figure.name}"
        elif entry.name not in contents.files | _LITTER or not _own(entry, Path.is_file):
            return entry.name
    return None


def _own(path: Path, kind: Callable[[Path], bool]) -> bool:
    """Whether it is of its kind itself, and no link to one."""
    return kind(path) and not path.is_symlink()


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
