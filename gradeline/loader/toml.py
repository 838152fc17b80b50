"""Text of TOML to tables, with what is wrong with its syntax."""

from __future__ import annotations

import re
import tomllib
from typing import Any

from gradeline.loader.ledger import Ledger

__all__ = ["DOCUMENT", "LARGEST_DOCUMENT", "parse_toml"]

#: The file that describes the line, in a survey's folder.
DOCUMENT = "survey.toml"

#: A larger one is refused, in bytes: its parser takes a second for each MB.
LARGEST_DOCUMENT = 2_000_000

# Time and memory of the parser grow with the square of the parts of a key.
_MOST_PARTS = 50
_SIGNS = re.compile(r"[\"'=,{]")


def parse_toml(ledger: Ledger, text: str) -> dict[str, Any] | None:
    """Return the tables of a text, None (with a problem noted) where its syntax is at fault."""
    if len(text) > LARGEST_DOCUMENT:
        ledger.problem(
            DOCUMENT, None, None, f"the text is longer than {LARGEST_DOCUMENT // 10**6} MB; shorten it"
        )
        return None
    for number, line in enumerate(text.splitlines(), start=1):
        keys = line.partition("#")[0]
        if (
            keys.count(".") > _MOST_PARTS
            and max(each.count(".") for each in _SIGNS.split(keys)) > _MOST_PARTS
        ):
            ledger.problem(DOCUMENT, number, None, f"a key has more than {_MOST_PARTS} parts; write it flat")
            return None
    try:
        return tomllib.loads(text)
    except ValueError as error:
        found = re.search(
            r"(.*?)\s*\(at (?:line (\d+), column (\d+)|end of document)\)", str(error), re.DOTALL
        )
        row = int(found[2]) if found and found[2] else (len(text.rstrip().splitlines()) if found else None)
        column = f", at character {found[3]}" if found and found[3] else ""
        said = found[1] if found else "a number or date is out of range"
        ledger.problem(DOCUMENT, row, None, f"this is not TOML: {said}{column}; mend the line")
    except RecursionError:
        ledger.problem(DOCUMENT, None, None, "the file nests lists or tables too deeply; write them flat")
    return None
