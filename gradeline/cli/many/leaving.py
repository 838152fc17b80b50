"""A worker that is asked to leave: at once, but not in the midst of writing."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any

__all__ = ["held", "leave"]

_state = {"asked": False, "held": 0}


def leave(_signal: int, _frame: Any) -> None:
    """End what is under way as an error would; for ``signal.signal``.

    Raises
    ------
    SystemExit
        Here, or at the end of what is `held`.
    """
    _state["asked"] = True
    if not _state["held"]:
        raise SystemExit(1)


@contextmanager
def held() -> Iterator[None]:
    """Do something to its end before leaving.

    Examples
    --------
    >>> with held():
    ...     print("written whole")
    written whole
    """
    _state["held"] += 1
    try:
        yield
    finally:
        _state["held"] -= 1
    if _state["asked"]:
        raise SystemExit(1)
