"""Tables of a terminal: they break into parts where they are too wide, and no number is cut."""

from __future__ import annotations

import pytest

from gradeline.report.printed import PrintedTable
from gradeline.report.text import WIDTH, text_table

NUMBERS = tuple(f"0.0030908{n} to 0.0031194{n}" for n in range(6))


def printed(names: int = 1) -> PrintedTable:
    heads = ("flow Q (L/s)", *("reach",) * (names - 1), *(f"head {n} (m)" for n in range(6)))
    row = ("0.1000", *("upper main",) * (names - 1), *NUMBERS)
    return PrintedTable("", heads, (row, row), frozenset(range(1, names)))


@pytest.mark.parametrize("names", [1, 2])
def test_a_wide_table_stands_in_parts_with_its_names(names: int) -> None:
    told = text_table("Runs", printed(names), set())
    assert max(map(len, told.splitlines())) <= WIDTH
    assert "…" not in told
    for number in NUMBERS:
        assert told.count(number) == 2  # once a row
    parts = told.split("\n\n")
    assert len(parts) > 1
    for part in parts:
        assert "flow Q" in part
        assert part.count("0.1000") == 2
        assert part.count("upper main") == 2 * (names - 1)


def test_an_interval_stays_beside_its_value() -> None:
    heads = ("flow Q", *(word for n in range(4) for word in (f"value {n} (m)", "interval (m)")))
    row = ("1", *(cell for n in range(4) for cell in (f"0.{n}23456", NUMBERS[n])))
    for part in text_table("Runs", PrintedTable("", heads, (row,), frozenset()), set()).split("\n\n"):
        for n in range(4):
            assert (f"0.{n}23456" in part) == (NUMBERS[n] in part)


def test_a_name_alone_too_long_is_cut() -> None:
    table = PrintedTable("", ("reach", "L (m)"), (("x" * 200, "12.5"),), frozenset({0}))
    told = text_table("Reaches", table, set())
    assert max(map(len, told.splitlines())) <= WIDTH
    assert "…  12.5" in told
