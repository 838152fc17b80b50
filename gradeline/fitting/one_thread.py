"""One thread for the linear algebra of small matrices: faster, and the same bytes on every machine."""

from __future__ import annotations

import functools
from collections.abc import Callable
from typing import ParamSpec, TypeVar

__all__ = ["one_thread"]

P = ParamSpec("P")
R = TypeVar("R")


@functools.cache
def _pools() -> object:
    """The thread pools of the libraries that numpy and scipy were built with: looked for once."""
    import scipy.linalg  # noqa: F401, PLC0415 (its library has to be loaded to be found)
    from threadpoolctl import ThreadpoolController  # noqa: PLC0415 (loaded when asked for: start-up time)

    return ThreadpoolController()


def one_thread(function: Callable[P, R]) -> Callable[P, R]:
    """Make a function whose linear algebra runs in one thread.

    The matrices of a survey are small, so that starting threads costs more than they save; and how a sum is cut among
    threads shows in its last digit.

    Parameters
    ----------
    function : callable
        Any.

    Returns
    -------
    callable
        The same, with the same arguments.

    Examples
    --------
    >>> import numpy as np
    >>> @one_thread
    ... def determinant(matrix):
    ...     return float(np.linalg.det(matrix))
    >>> determinant(np.diag([2.0, 3.0]))
    6.0
    """

    @functools.wraps(function)
    def alone(*args: P.args, **kwargs: P.kwargs) -> R:
        with _pools().limit(limits=1):  # type: ignore[attr-defined]  # the library has no types
            return function(*args, **kwargs)

    return alone
