"""Faults of whole files: missing, empty, of another kind or encoding, rows that do not fit, folders in their place."""

from __future__ import annotations

from tests.broken.kinds.case import Broken, P, R, T, U, also, cells, recoded, swap, whole, without

__all__ = ["CASES"]

_MISSING = [
    *(
        Broken("missing file", f"no {name}", base, without(name), name)
        for base, name in (
            ("bench", T),
            ("bench", P),
            ("bench", R),
            ("bench", "dial.csv"),
            ("listed", U),
            ("meter", "meter.csv"),
            ("oil", "oil.csv"),
            ("parquet", T),
        )
    ),
    Broken("missing file", "nothing at all", "bench", without(T, P, R, "dial.csv"), T),
    Broken(
        "missing file",
        "a workbook in place of a table",
        "bench",
        also(without(P), whole("taps.xlsx", b"PK\x03\x04")),
        P,
    ),
]

_ENCODINGS = [
    Broken("encoding", "Latin-1", "bench", recoded(P, "latin-1", "T2", "Té2"), f"{P} row 3"),
    Broken(
        "encoding",
        "Latin-1 in the description",
        "bench",
        recoded(T, "latin-1", "Hill", "Hügel"),
        f"{T} row 2",
    ),
    Broken(
        "encoding", "half a letter at the end", "bench", swap(R, "pump two\n", b"pump tw\xc3"), f"{R} row 4"
    ),
    Broken("encoding", "UTF-32", "bench", recoded(P, "utf-32"), P),
    Broken(
        "encoding",
        "half a UTF-16 letter",
        "bench",
        lambda files: files.update({P: files[P].decode().encode("utf-16")[:-1]}),
        P,
    ),
    Broken("encoding", "a nought", "bench", swap(R, "pump two", b"pump\x00two"), R),
    Broken("encoding", "an escape sequence", "bench", swap(R, "pump two", "pump \x1b[31m two"), f"{R} row 4"),
    Broken("encoding", "a surrogate", "bench", swap(R, "pump two", b"pump \xed\xa0\x80"), f"{R} row 4"),
    Broken("encoding", "an overlong letter", "bench", swap(R, "pump two", b"pump \xc0\xaf"), f"{R} row 4"),
    Broken("encoding", "bytes of any kind", "bench", whole(P, bytes(range(256)) * 4), P),
]

_ROWS = [
    *cells(
        "bench",
        "row",
        [
            ("a cell too few", R, "02,0.25,", "02,", " row 3"),
            ("a cell too many", R, "02,0.25,", "02,0.25,1,", " row 3"),
            ("a heading too few", R, ",note", "", " row 2"),
            ("a tap's row cut short", P, "T4,5,0.3,dial", "T4,5", " row 5"),
            ("a quotation mark left open", R, "02,0.25", '"02,0.25', " row 3"),
            ("a quotation mark within a cell", R, "02,0.25", '"0"2,0.25', " row 3"),
            ("a column without a heading", R, ",note", ",", " row 1"),
            ("another separator in one row", R, "02,0.25,18.2,670", "02;0.25;18.2;670", " row 3"),
        ],
    ),
    Broken(
        "row",
        "two kinds of decimals",
        "bench",
        whole(
            R,
            "run;flow [L/s];temperature [degC];T1 [mm];T2 [mm];T3 [mm];T4 [kPa]\n1;0,2;18.5;600;590;580;9,1\n",
        ),
        f"{R} row 2, temperature [degC]",
    ),
    Broken(
        "row",
        "nothing below the heading",
        "bench",
        whole(R, "run,flow [L/s],temperature [degC],T1 [mm]\n"),
        R,
    ),
    Broken(
        "row",
        "no heading",
        "bench",
        lambda files: files.update({P: files[P].split(b"\n", 1)[1]}),
        f"{P} row 1",
    ),
]

_EMPTY = [
    *(
        Broken("empty file", f"{name} of no bytes", base, whole(name, b""), name + more)
        for base, name, more in (
            ("bench", T, " reach"),
            ("bench", P, ""),
            ("bench", R, ""),
            ("bench", "dial.csv", ""),
            ("listed", U, ""),
            ("meter", "meter.csv", ""),
            ("oil", "oil.csv", ""),
            ("heads", "heads.csv", ""),
            ("workbook", "bench.xlsx", ""),
            ("parquet", "readings.parquet", ""),
        )
    ),
    Broken("empty file", "blanks", "bench", whole(R, " \n\n ,,\n"), R),
    Broken("empty file", "a byte order mark alone", "bench", whole(R, b"\xef\xbb\xbf"), R),
    Broken("empty file", "a comment alone", "bench", whole(T, "# nothing\n"), f"{T} reach"),
]

_FOLDERS = [
    Broken("folder for a file", name, base, without(name), place, folders=(name,))
    for base, name, place in (
        ("bench", T, T),
        ("bench", P, P),
        ("bench", R, R),
        ("bench", "dial.csv", "dial.csv"),
        ("listed", U, U),
        ("heads", "heads.csv", "{source}"),
        ("workbook", "bench.xlsx", "{source}"),
        ("parquet", "readings.parquet", "readings.parquet"),
    )
]

_FILES_OF_ANOTHER_KIND = [
    Broken("file of another kind", "a workbook as csv", "bench", whole(R, b"PK\x03\x04" + bytes(200)), R),
    Broken("file of another kind", "a parquet file as csv", "bench", whole(R, b"PAR1" + bytes(200)), R),
    Broken("file of another kind", "a PDF as csv", "bench", whole(R, b"%PDF-1.7\n"), R),
    Broken(
        "file of another kind", "a gzip archive as csv", "bench", whole(R, b"\x1f\x8b\x08" + bytes(90)), R
    ),
    Broken(
        "file of another kind",
        "a page as csv",
        "bench",
        whole(R, "<html>\n<body>\n</body>\n</html>\n"),
        f"{R} row 1",
    ),
    Broken(
        "file of another kind",
        "the description as csv",
        "bench",
        lambda files: files.update({R: files[T]}),
        f"{R} row 1",
    ),
    Broken(
        "file of another kind",
        "a table as the description",
        "bench",
        lambda files: files.update({T: files[R]}),
        f"{T} row 1",
    ),
    Broken(
        "file of another kind", "JSON as the description", "bench", whole(T, '{"survey": {}}'), f"{T} row 1"
    ),
]

#: Every fault of these kinds.
CASES = [*_MISSING, *_ENCODINGS, *_ROWS, *_EMPTY, *_FOLDERS, *_FILES_OF_ANOTHER_KIND]
