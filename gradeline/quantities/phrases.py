"""One sentence for several things of which the same is to be said."""

from __future__ import annotations

from collections.abc import Iterable

__all__ = ["told_once"]

_MOST = 8


def told_once(said: Iterable[tuple[str, str]], noun: str = "gauge") -> list[str]:
    """Return each sentence once, with the names of all things it speaks of.

    Parameters
    ----------
    said : iterable of (str, str)
        A name, and a sentence with ``{gauge}`` (or another noun) where it is named. Sentences of several names have
        their noun in the plural; nothing else of them changes.
    noun : str
        What the names are names of.

    Returns
    -------
    list of str
        In the order of first sight; more than nine names are cut to eight.

    Examples
    --------
    >>> told_once([("a", "The zero of {gauge} is not given."), ("b", "The zero of {gauge} is not given.")])
    ["The zero of gauges 'a' and 'b' is not given."]
    """
    names: dict[str, list[str]] = {}
    for name, sentence in said:
        of = names.setdefault(sentence, [])
        if name not in of:
            of.append(name)
    return [
        sentence.replace(f"{{{noun}}}", f"{noun if len(of) == 1 else _plural(noun)} {_listed(of)}")
        for sentence, of in names.items()
    ]


def _plural(noun: str) -> str:
    return f"{noun}es" if noun.endswith("ch") else f"{noun}s"


def _listed(names: list[str]) -> str:
    quoted = [repr(name) for name in names]
    if len(quoted) > _MOST + 1:
        return f"{', '.join(quoted[:_MOST])} and {len(quoted) - _MOST} more"
    return " and ".join([", ".join(quoted[:-1]), quoted[-1]]) if len(quoted) > 1 else quoted[0]
