"""Faults of ``survey.toml``: its syntax, its keys, their types, and what lies where along the line."""

from __future__ import annotations

from tests.broken.kinds.case import Broken, P, T, also, cells, swap, whole

__all__ = ["CASES"]

_SYNTAX = cells(
    "bench",
    "toml syntax",
    [
        ("a quotation mark left open", T, '"Hill main"', '"Hill main', " row 2"),
        ("no equals sign", T, 'title = "Hill main"', 'title "Hill main"', " row 2"),
        ("a value left out", T, 'latitude = "53.4 deg"', "latitude =", " row 9"),
        ("a bare word", T, '"copper"', "copper", " row 17"),
        ("a header left open", T, "[site]", "[site", " row 8"),
        ("a key twice", T, 'altitude = "38 m"', 'altitude = "38 m"\naltitude = "39 m"', " row 11"),
        ("a table twice", T, "[uncertainty]", "[site]", " row 41"),
        ("a list and a table of one name", T, "[[fitting]]", "[reach]", " row 26"),
        ("a bad escape", T, '"Hill main"', '"Hill \\q main"', " row 2"),
        ("an impossible date", T, "2026-05-06", "2026-13-46", " row 3"),
        ("a list left open", T, 'temperature = "0.2 K"', "temperature = [1,", " row 46"),
        ("a decimal comma", T, '"53.4 deg"', "53,4", " row 9"),
        ("a tab in a quoted line break", T, '"Hill main"', '"Hill\nmain"', " row 2"),
        ("a huge integer", T, '"0.80 m"', "9" * 5000, ""),
    ],
)

_KEYS = cells(
    "bench",
    "unknown or missing key",
    [
        ("an unknown table", T, "[uncertainty]", "[uncertainties]", " uncertainties"),
        ("an unknown key of a gauge", T, 'zero = "0.80 m"', 'zeros = "0.80 m"', " gauge.board.zeros"),
        ("an unknown key of a reach", T, 'wall = "copper"', 'wal = "copper"', " reach[1].wal"),
        (
            "a key of another kind of gauge",
            T,
            'zero = "0.80 m"',
            'full_scale = "1 kPa"',
            " gauge.board.full_scale",
        ),
        ("an unknown key at the top", T, "[survey]", "colour = 1\n[survey]", " colour"),
        ("an unknown key of the site", T, "altitude", "hight", " site.hight"),
        ("no name of a reach", T, 'name = "upper"\n', "", " reach[1].name"),
        ("no start of a reach", T, 'from = "0 m"\n', "", " reach[1].from"),
        ("no wall of a reach", T, 'wall = "steel"\n', "", " reach[2].wall"),
        (
            "no bore of a reach",
            T,
            'diameter = "26.64 mm +/- 0.03 mm"\nwall = "copper"',
            'wall = "copper"',
            " reach[1].diameter",
        ),
        ("no kind of a gauge", T, 'kind = "piezometer"\n', "", " gauge.board.kind"),
        ("no place of a fitting", T, 'at = "4.5 m"\n', "", " fitting[1].at"),
        ("no loss coefficient", T, 'loss_coefficient = "fit"\n', "", " fitting[1].loss_coefficient"),
        ("no name of the fluid", T, 'name = "water"\n', "", " fluid.name"),
        ("an unknown kind of gauge", T, '"piezometer"', '"piezometre"', " gauge.board.kind"),
        (
            "an unknown kind of fitting",
            T,
            'at = "4.5 m"',
            'at = "4.5 m"\nkind = "gate walve"',
            " fitting[1].kind",
        ),
        ("an unknown fluid", T, '"water"', '"watter"', " fluid.name"),
        ("an unknown choice", T, "[survey]", '[survey]\nchainage_is = "guessed"', " survey.chainage_is"),
    ],
)

_TYPES = [
    *cells(
        "bench",
        "wrong type",
        [
            ("a number for a quantity", T, '"0.80 m"', "0.80", " gauge.board.zero"),
            ("a list for a quantity", T, '"0.80 m"', '["0.80 m"]', " gauge.board.zero"),
            ("a truth for a quantity", T, '"0.80 m"', "true", " gauge.board.zero"),
            ("a table for a text", T, '"copper"', "{name = 1}", " reach[1].wall"),
            ("a number for a name", T, '"upper"', "1", " reach[1].name"),
            ("a text for a truth", T, 'wall = "copper"', 'wall = "copper"\ninlet = "yes"', " reach[1].inlet"),
            ("a text for a date", T, "2026-05-06", '"last Tuesday"', " survey.date"),
            ("an infinite number", T, '"fit"', "inf", " fitting[1].loss_coefficient"),
            ("no number", T, '"fit"', "nan", " fitting[1].loss_coefficient"),
            ("an empty name", T, '"upper"', '""', " reach[1].name"),
            ("a name with a line break", T, '"upper"', '"up\\nper"', " reach[1].name"),
            ("a name with an escape sign", T, '"upper"', '"up\\u001bper"', " reach[1].name"),
            ("a value still to be filled in", T, '"0.80 m"', '"? m"', " gauge.board.zero"),
        ],
    ),
    Broken(
        "wrong type",
        "a number for the reaches",
        "bench",
        whole(T, "reach = 5\n[gauge.board]\nkind = 'head'\n"),
        f"{T} reach",
    ),
    Broken(
        "wrong type",
        "a text for the site",
        "bench",
        also(
            swap(T, "[survey]", "site = 1\n[survey]"),
            swap(T, '[site]\nlatitude = "53.4 deg"\naltitude = "38 m"\n', ""),
        ),
        f"{T} site",
    ),
    Broken(
        "wrong type", "a number for a gauge", "bench", whole(T, "[gauge]\nboard = 3\n"), f"{T} gauge.board"
    ),
    Broken(
        "wrong type",
        "a list of gauges",
        "bench",
        swap(T, "[gauge.board]", "[[gauge.board]]"),
        f"{T} gauge.board",
    ),
]

_PLACES = cells(
    "bench",
    "place along the line",
    [
        ("a tap beyond the line", P, "T4,5,", "T4,6.5,", " row 5, chainage [m]"),
        ("a tap before the line", P, "T1,0.5,", "T1,-0.5,", " row 2, chainage [m]"),
        ("taps in millimetres", P, "chainage [m]", "chainage [km]", " row 2, chainage [km]"),
        ("taps out of order", P, "T2,1.5", "T2,2.9", " row 4, chainage [m]"),
        ("two taps at one place", P, "T2,1.5", "T2,0.5", " row 3, chainage [m]"),
        ("a gap between reaches", T, 'from = "3 m"', 'from = "3.1 m"', " reach[2].from"),
        ("reaches that overlap", T, 'from = "3 m"', 'from = "2.9 m"', " reach[2].from"),
        ("a reach that runs backwards", T, 'to = "3 m"', 'to = "-3 m"', " reach[1].to"),
        ("a reach of no length", T, 'to = "6 m"', 'to = "3 m"', " reach[2].to"),
        ("a fitting beyond the line", T, 'at = "4.5 m"', 'at = "7 m"', " fitting[1].at"),
        ("a bore of nothing", T, "26.64 mm +/- 0.03 mm", "0 mm", " reach[1].diameter"),
        ("a negative bore", T, "26.64 mm +/- 0.03 mm", "-26.64 mm", " reach[1].diameter"),
        ("a bore of metres", T, "26.64 mm +/- 0.03 mm", "26.64 m", " reach[1].diameter"),
        ("a bore longer than the reach", T, "26.64 mm +/- 0.03 mm", "3.5 m", " reach[1].diameter"),
        ("a place beyond the pole", T, "53.4 deg", "95 deg", " site.latitude"),
    ],
) + cells(
    "branch",
    "place along the line",
    [
        (
            "an off-take within a reach",
            T,
            'name = "lane"\nat = "3 m"',
            'name = "lane"\nat = "2 m"',
            " offtake[1].at",
        ),
        (
            "an off-take at the end",
            T,
            'name = "lane"\nat = "3 m"',
            'name = "lane"\nat = "6 m"',
            " offtake[1].at",
        ),
        ("an unknown state of a valve", T, '"shut"', '"ajar"', " side_valve[1].state"),
    ],
)

#: Every fault of these kinds.
CASES = [*_SYNTAX, *_KEYS, *_TYPES, *_PLACES]
