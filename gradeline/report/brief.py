"""One survey in one line, where many are told."""

from __future__ import annotations

import unicodedata

from gradeline.quantities.printing import SI_DISPLAY, Display
from gradeline.reduction.tables import Reduction
from gradeline.report.printed import Row, known, records

__all__ = ["one_line"]


def one_line(reduction: Reduction, display: Display = SI_DISPLAY) -> str:
    """Return what was found of a survey in one line: the roughness of each wall, and how much there is to look at.

    Parameters
    ----------
    reduction : Reduction
        What was reduced.
    display : Display
        Units of the reader.

    Returns
    -------
    str
        Plain text without a line end, such as ``copper ε 1.5 µm (1.1 to 2.0 µm); 9 runs, 1 flag, 3 cautions``.
    """
    walls = [_wall(row, display) for row in records(reduction.walls)]
    flowing = int((reduction.runs.drop_duplicates("run")["regime"] != "static").sum())
    counts = ", ".join(
        f"{count} {noun}{'s' * (count != 1)}"
        for count, noun in (
            (flowing, "run"),
            (len(reduction.flags), "flag"),
            (len(reduction.cautions), "caution"),
        )
    )
    text = "; ".join([*walls, counts])
    return "".join(
        " " if unicodedata.category(letter) in ("Cc", "Cf", "Zl", "Zp") else letter for letter in text
    )


def _wall(row: Row, display: Display) -> str:
    ends = (row["roughness_low"], row["roughness_high"])
    if row["roughness_resolved"]:
        value = display.within("roughness", row["roughness"], *ends, unit=True)
        return f"{row['wall']} ε {value} ({display.interval('roughness', *ends, unit=True)})"
    if known(row["roughness_upper95"]):
        return (
            f"{row['wall']} ε below {display.within('roughness', row['roughness_upper95'], *ends, unit=True)}"
        )
    return f"{row['wall']} ε not determined"
