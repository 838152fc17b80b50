"""The bytes of a large file, looked at once beside the engine: their SHA-256, and the time of a row in each piece."""

from __future__ import annotations

import hashlib
import itertools
import math
from collections.abc import Callable
from pathlib import Path

__all__ = ["digest_of", "first_backwards"]

_PIECE = 1 << 20
#: From one row to the next a time may go back by this part of itself, which is rounding.
_ROUNDING = 1e-12


def digest_of(path: Path, time_of: Callable[[bytes], float] | None) -> tuple[str, bool]:
    """Return the SHA-256 of a file, and whether times of rows about 1 MB apart never fall.

    Parameters
    ----------
    path : Path
        The file.
    time_of : callable or None
        The time in a line, s; NaN where it has none. None: no times are looked at.
    """
    found = hashlib.sha256()
    rising, before = True, -math.inf
    with path.open("rb") as stream:
        while piece := stream.read(_PIECE):
            found.update(piece)
            if time_of is not None:
                start = piece.find(b"\n") + 1
                end = piece.find(b"\n", start)
                at = time_of(piece[start:end]) if 0 < start < end else math.nan
                if math.isfinite(at):
                    rising &= at >= before - _ROUNDING * abs(at)
                    before = at
    return found.hexdigest(), rising


def first_backwards(
    path: Path, heading_line: int, time_of: Callable[[bytes], float]
) -> tuple[int, int] | None:
    """Return the line of the first row whose time is before that of a row above, and the line of that row.

    It goes line by line, which only a file at fault has to wait for.
    """
    before, before_line = -math.inf, 0
    with path.open("rb") as stream:
        for line, text in enumerate(itertools.islice(stream, heading_line, None), start=heading_line + 1):
            at = time_of(text)
            if at < before:
                return line, before_line
            if math.isfinite(at):
                before, before_line = at, line
    return None
