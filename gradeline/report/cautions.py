"""Cautions as a reader sees them: what was told already left out, what nobody stated in one sentence."""

from __future__ import annotations

import re
from collections.abc import Sequence

from gradeline.reduction.tables import Reduction

__all__ = ["further_cautions"]

#: So many of them make one sentence.
_FEWEST_MERGED = 3
_UNSTATED = re.compile(
    r"The (?P<what>(?:[a-z]+ )?uncertaint(?:y|ies) of .+?) (?:is|are) not stated(?P<where>(?: (?:for|at|throughout)[^:]*)?): "
    r"(?:(?:it contributes|they contribute) nothing to (?:the results|that of the bore)"
    r"(?P<beyond> beyond what repeats show)?"
    r"|it is (?P<found>estimated from the scatter where there are taps and runs enough), and otherwise contributes nothing)"
    r"\.(?P<more>.*)"
)
_NOT_JUDGED = "single readings were not judged"
_FEW_TAPS = "with so few taps a wrong reading cannot be told from a right one"


def further_cautions(reduction: Reduction, told: Sequence[str]) -> tuple[str, ...]:
    """Return the cautions that say more than what was told already.

    Parameters
    ----------
    reduction : Reduction
        With its cautions.
    told : sequence of str
        Sentences that a reader has before them: a flag and its caution say the same.

    Returns
    -------
    tuple of str
        In their order; three or more uncertainties that nobody stated are named in one sentence.
    """
    before = [_bare(text) for text in told]
    if any(_NOT_JUDGED in text for text in before):
        before.append(_FEW_TAPS)
    left = [
        caution
        for caution in reduction.cautions
        if not any(_bare(caution) in text for text in before)
        and not (_FEW_TAPS in before and _bare(caution).startswith(_FEW_TAPS))
    ]
    return _merged(left)


def _merged(cautions: Sequence[str]) -> tuple[str, ...]:
    found = [(caution, match) for caution in cautions if (match := _UNSTATED.fullmatch(caution)) is not None]
    if len(found) < _FEWEST_MERGED:
        return tuple(cautions)
    named = {caution for caution, _ in found}
    texts = []
    for _, match in found:
        beside = [match["beyond"] or "", match["found"] or "", match["more"].strip().rstrip(".")]
        notes = "; ".join(note.strip() for note in beside if note.strip())
        texts.append(f"the {match['what']}{match['where']}{f' ({notes})' if notes else ''}")
    sentence = f"Not stated, and so contributing nothing to the results: {'; '.join(texts)}."
    first = min(n for n, caution in enumerate(cautions) if caution in named)
    rest = [caution for caution in cautions if caution not in named]
    return (*rest[:first], sentence, *rest[first:])


def _bare(text: str) -> str:
    return text.strip().rstrip(".").lower()
