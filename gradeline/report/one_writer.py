"""One writer at a time for a folder of results, among all processes that reach it."""

from __future__ import annotations

import errno
import os
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

__all__ = ["PATIENCE", "TakenError", "one_writer"]

#: How long another writer is waited for, s: drawing a large report takes seconds.
PATIENCE = 60.0
_LOOK = 0.05
#: What a file system says that knows no locks.
_NO_LOCKS = frozenset({errno.ENOLCK, errno.ENOSYS, errno.ENOTSUP, errno.EOPNOTSUPP, errno.EINVAL})


class TakenError(OSError):
    """Another process writes there, and went on longer than was waited."""

    def __init__(self) -> None:
        super().__init__(errno.EBUSY, "another process is writing there")


@contextmanager
def one_writer(target: Path, patience: float | None = None) -> Iterator[bool]:
    """Keep every other writer away from a folder.

    The lock is the system's own, on an empty file ``.name.lock`` beside the folder: it ends with the process that holds
    it, however that ends, so that no lock outlives its owner. The file goes away with the last writer; one that a killed
    process left stops nobody.

    Parameters
    ----------
    target : Path
        The folder, absent or not; the one above it is there.
    patience : float, optional
        How long to wait for another writer, s, not negative; `PATIENCE` unless given.

    Yields
    ------
    bool
        Whether others are kept away; False where the file system knows no locks.

    Raises
    ------
    TakenError
        Where another writer takes longer.
    OSError
        Where the lock cannot be made: the folder above is not to be written.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as place, one_writer(Path(place) / "a") as alone:
    ...     print(alone, [one.name for one in Path(place).iterdir()])
    True ['.a.lock']
    """
    path = target.with_name(f".{target.name}.lock")
    until = time.monotonic() + (PATIENCE if patience is None else patience)
    while True:
        descriptor = os.open(path, os.O_RDWR | os.O_CREAT | getattr(os, "O_NOFOLLOW", 0), 0o666)
        try:
            taken = _lock(descriptor)
            if taken is not False and _is(path, descriptor):
                break
        except BaseException:
            os.close(descriptor)
            raise
        os.close(descriptor)
        if taken is False:
            if time.monotonic() >= until:
                raise TakenError()
            time.sleep(_LOOK)
    try:
        yield taken is True
    finally:
        _release(path, descriptor)


def _lock(descriptor: int) -> bool | None:
    """Whether the lock was got; None where the file system knows none."""
    try:
        if sys.platform == "win32":
            import msvcrt  # noqa: PLC0415 (there only)

            msvcrt.locking(descriptor, msvcrt.LK_NBLCK, 1)
        else:
            import fcntl  # noqa: PLC0415 (not on every system)

            fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError as error:
        if error.errno in _NO_LOCKS:
            return None
        if error.errno in (errno.EAGAIN, errno.EACCES, errno.EDEADLK):
            return False
        raise
    return True


def _is(path: Path, descriptor: int) -> bool:
    """Whether the file that was locked is still the one of that name: the writer before took its own away."""
    try:
        return os.path.samestat(path.lstat(), os.fstat(descriptor))
    except FileNotFoundError:
        return False


def _release(path: Path, descriptor: int) -> None:
    """Take the file away while the lock is held, so that nobody's but our own goes; a file with content is not ours."""
    ours = os.fstat(descriptor).st_size == 0
    if sys.platform == "win32":  # which removes no open file: another writer's stays of itself
        os.close(descriptor)
    if ours:
        with suppress(OSError):
            path.unlink()
    if sys.platform != "win32":
        os.close(descriptor)
