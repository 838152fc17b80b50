"""What a flag is of, in a few words: for tables in which its sentence has no room."""

from __future__ import annotations

import math
from collections.abc import Callable

from gradeline.quantities.printing import MISSING, SI_DISPLAY, Display
from gradeline.reduction.tables import Reduction
from gradeline.report.printed import Row, known, records
from gradeline.report.slips import named_slips

__all__ = ["flag_words"]

#: Flags of a law by what their sentences hold, the first that fits.
_OF_LAW = (
    ("the head rises downstream", "rising head"),
    ("in the laminar runs of", "laminar f·Re"),
    ("rather than Colebrook–White", "sand-grain law"),
    ("heads whose error grows with the chainage", "intercept of S"),
    ("per decade of Re", "trend of f"),
    ("below that of a smooth wall", "f below smooth"),
    ("wall ", "implausible f"),
)


def flag_words(reduction: Reduction, display: Display = SI_DISPLAY) -> Callable[[Row], str]:
    """Return what says of a row of the flags what it is of.

    Parameters
    ----------
    reduction : Reduction
        Its ailments and slips name some.
    display : Display
        Units of the reader.

    Returns
    -------
    callable
        From a row to such as ``"datum offset"``, ``"unlisted loss 2.6–3.1 m"``, ``"trend of f"``; a slip that was named ends
        in a question mark.
    """
    ailments = records(reduction.ailments)
    of_taps = {row["name"]: str(row["ailment"]) for row in ailments if row["what"] != "line"}
    of_line = [row for row in ailments if row["what"] == "line"]
    slips = named_slips(reduction)

    def slip(flag: Row) -> str | None:
        for row in slips:
            of_tap = flag["kind"] == "run" or row["tap"] == flag["tap"] or flag["tap"] is None
            if row["flag"] == flag["kind"] and row["run"] == flag["run"] and of_tap:
                return f"{row['kind']}?"
        return None

    def words(flag: Row) -> str:
        suggestion = str(flag["suggestion"] or "")
        match flag["kind"]:
            case "reading":
                return slip(flag) or "outlying reading"
            case "run":
                return slip(flag) or "off the law"
            case "tap":
                return of_taps.get(flag["tap"]) or (
                    "zero drift" if "drift" in suggestion else "shared misfit"
                )
        for row in of_line:
            # The score of a break is the root of its evidence.
            if known(flag["score"]) and math.isclose(flag["score"] ** 2, row["evidence"], rel_tol=1e-9):
                ends = [f"{display.value('chainage', row[end]):.4g}" for end in ("start", "end")]
                return f"{row['ailment']} {'–'.join(ends)} {display.unit('chainage')}"
        return next((name for needle, name in _OF_LAW if needle in suggestion), MISSING)

    return words
