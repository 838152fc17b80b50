"""What became of surveys as one JSON document, a survey at a time, so that none of them is kept."""

from __future__ import annotations

from types import TracebackType

__all__ = ["Records"]


class Records:
    """The document ``{"surveys": [...]}`` on stdout: well formed also where it ends before its time.

    Examples
    --------
    >>> with Records() as records:
    ...     records.add('{"a": 1}')
    ...     records.add('{"b": 2}')
    {
     "surveys": [
      {"a": 1},
      {"b": 2}
     ]
    }
    """

    def __init__(self) -> None:
        self._count = 0

    def __enter__(self) -> Records:
        return self

    def add(self, record: str) -> None:
        """Print one survey's record, JSON of any number of lines."""
        print('{\n "surveys": [' if not self._count else ",")
        print("\n".join(f"  {line}" for line in record.splitlines()), end="", flush=True)
        self._count += 1

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        if self._count:
            print("\n ]\n}", flush=True)
        elif kind is None:
            print('{\n "surveys": []\n}', flush=True)
