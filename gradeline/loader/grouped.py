"""Many faults of one cause as one line: the place of the first and how many there are."""

from __future__ import annotations

from collections.abc import Iterable, Mapping

__all__ = ["TOLD_SINGLY", "by_name", "quoted", "rows_phrase"]

#: Up to so many faults of one cause are told one by one.
TOLD_SINGLY = 3

_SPANS = 6


def rows_phrase(lines: Iterable[int]) -> str:
    """Return line numbers as a phrase, neighbours as a span; a long list is cut.

    Examples
    --------
    >>> rows_phrase([5]), rows_phrase([9, 5, 7, 8])
    ('row 5', 'rows 5 and 7 to 9')
    """
    ordered = sorted(set(lines))
    spans: list[list[int]] = []
    for line in ordered:
        if spans and line == spans[-1][1] + 1:
            spans[-1][1] = line
        else:
            spans.append([line, line])
    told = [
        str(first) if first == last else f"{first} to {last}" if last > first + 1 else f"{first}, {last}"
        for first, last in spans
    ]
    if len(told) > _SPANS:
        return f"rows {', '.join(told[: _SPANS - 1])} and others up to {ordered[-1]}"
    joined = " and ".join([", ".join(told[:-1]), told[-1]]) if len(told) > 1 else told[0]
    return f"row{'s' * (len(ordered) > 1)} {joined}"


def quoted(names: Iterable[str], most: int = 3) -> str:
    """Return names in quotation marks; a long list is cut.

    Examples
    --------
    >>> quoted(["T1", "T2"]), quoted("abcde")
    ("'T1' and 'T2'", "'a', 'b', 'c' and 2 more")
    """
    listed = [repr(name) for name in names]
    if len(listed) > most + 1:
        return f"{', '.join(listed[:most])} and {len(listed) - most} more"
    return " and ".join([", ".join(listed[:-1]), listed[-1]]) if len(listed) > 1 else listed[0]


def by_name(names: Iterable[str]) -> Mapping[str, list[int]]:
    """Return where each name stands, in the order of first sight.

    Examples
    --------
    >>> by_name(["a", "b", "a"])
    {'a': [0, 2], 'b': [1]}
    """
    found: dict[str, list[int]] = {}
    for place, name in enumerate(names):
        found.setdefault(name, []).append(place)
    return found
