"""Hypothesis strategies: any sound survey, in any of its forms, and any fault of it.

The readings of a sound survey are any that its gauges can show: along most of the lines drawn here the head falls as it
should, along some it does anything.
"""

from __future__ import annotations

import io
from collections.abc import Callable
from dataclasses import dataclass, replace

import pandas as pd
from hypothesis import strategies as st

from tests.broken.bases import Files, sheets_of, workbook_of

__all__ = ["Drawn", "faulty_surveys", "sound_surveys"]

_NAMES = st.text(
    st.characters(codec="utf-8", exclude_categories=("C", "Z"), exclude_characters="[](){},;\"'\\#=?\t"),
    min_size=1,
    max_size=6,
).filter(lambda name: name.isprintable() and not name[0].isdigit() and not name.casefold().startswith("note"))
_RESERVED = {
    "run",
    "flow",
    "temperature",
    "tap",
    "reading",
    "unit",
    "direction",
    "reference",
    "repeat",
    "time",
}


@dataclass(frozen=True)
class Drawn:
    """A survey's files, which of them is given to the program (empty: their folder), and its readings, SI, where it is sound."""

    files: Files
    file: str = ""
    readings: tuple[float, ...] = ()

    def __repr__(self) -> str:
        """Show texts, and of other files their size."""
        shown = {
            name: content.decode(errors="backslashreplace")
            if content[:2] != b"PK"
            else f"{len(content)} bytes"
            for name, content in self.files.items()
        }
        return f"Drawn({shown!r}, {self.file!r})"


def _number(value: float) -> str:
    return f"{value:.6g}" if abs(value) < 1e6 else repr(round(value, 6))


def _quoted(text: str) -> str:
    return '"' + text.replace("\\", "\\\\").replace('"', '\\"') + '"'


@dataclass(frozen=True)
class _Line:
    """Where the line lies: the text that says so, its length in m and its bore in m."""

    text: str
    length: float
    bore: float


@st.composite
def _lines(draw: st.DrawFn) -> _Line:
    """Title, site, reaches and perhaps a fitting."""
    bore = draw(st.sampled_from([0.004, 0.02664, 0.15, 0.6]))
    lengths = draw(st.lists(st.sampled_from([20.0, 60.0, 300.0]), min_size=1, max_size=3))
    text = [f"[survey]\ntitle = {_quoted(draw(_NAMES))}"]
    if draw(st.booleans()):
        text.append('[site]\nlatitude = "53.4 deg"\naltitude = "38 m"')
    start = 0.0
    for number, bores in enumerate(lengths):
        end = start + bores * bore
        text.append(
            f'[[reach]]\nname = "reach {number}"\nfrom = "{start!r} m"\nto = "{end!r} m"\n'
            f'diameter = "{1000 * bore!r} mm{draw(st.sampled_from(["", " +/- 0.1 %"]))}"\n'
            f"wall = {_quoted(draw(st.sampled_from(['copper', 'steel'])))}"
        )
        start = end
    if draw(st.booleans()):
        coefficient = draw(st.sampled_from(["fit", "0.2", "1.5 +/- 0.2"]))
        text.append(
            f'[[fitting]]\nname = "valve"\nat = "{0.45 * start!r} m"\nloss_coefficient = "{coefficient}"'
        )
    stated = {"chainage": "1 mm", "flow": "0.4 %", "flow_scale": "0.3 %", "temperature": "0.2 K"}
    kept = draw(st.lists(st.sampled_from(sorted(stated)), unique=True))
    text.append("\n".join(["[uncertainty]", *(f'{key} = "{stated[key]}"' for key in kept)]))
    return _Line("\n\n".join(text) + "\n", start, bore)


#: Fluids: what ``[fluid]`` says, a file beside it, and a kinematic viscosity and density to draw flows by.
_FLUIDS: dict[str, tuple[str, Files, float, float]] = {
    "water": ('name = "water"', {}, 1e-6, 1000.0),
    "oil": ('name = "oil"\ndensity = "868 kg/m^3"\nviscosity = "31 mPa s +/- 1 %"', {}, 3.6e-5, 868.0),
    "tabled": (
        'name = "brine"\nproperties = "brine.csv"',
        {"brine.csv": b"temperature [degC],density [kg/m^3],viscosity [mPa s]\n5,1110,2\n40,1095,1\n"},
        1.4e-6,
        1100.0,
    ),
    "air": ('name = "air"\nline_pressure = "105 kPa abs"', {}, 1.5e-5, 1.25),
}

#: Gauges on one tap: what they say, and the unit they are read in.
_SINGLE: dict[str, tuple[str, str]] = {
    "piezometer": ('kind = "piezometer"\nzero = "0.80 m"\nuncertainty = "0.5 mm"', "mm"),
    "open columns": ('kind = "piezometer"', "mm"),
    "head": ('kind = "head"', "m"),
    "dial": ('kind = "pressure gauge"\nuncertainty = "0.1 kPa"\nu_zero = "0.1 kPa"', "kPa"),
    "transducer": ('kind = "transducer"\nfull_scale = "600 kPa"\naccuracy_of_full_scale = "0.1 %"', "kPa"),
}
#: Gauges between two taps.
_DOUBLE: dict[str, tuple[str, str]] = {
    "u-tube": ('kind = "u-tube"\ngauge_fluid = "mercury"\nresolution = "1 mm"', "mm"),
    "cell": ('kind = "differential transducer"\nuncertainty = "0.05 kPa"', "kPa"),
}

_SI = {"mm": 1e-3, "m": 1.0, "kPa": 1e3, "Pa": 1.0}

#: Ways to measure the flow: what ``[flow]`` says, the heading, and what is read at a flow of Q L/s.
_METHODS: dict[str, tuple[str, str, Callable[[float], float]]] = {
    "direct": ("", "flow [L/s]", lambda flow: flow),
    "hours": ("", "flow [m^3/h]", lambda flow: 3.6 * flow),
    "tank": (
        '[flow]\nmethod = "volumetric tank"\nu_time = "0.2 s"\n',
        "volume [L],time [s]",
        lambda flow: 100 * flow,
    ),
}


@st.composite
def _readings(draw: st.DrawFn, places: list[float], size: float) -> list[float | None]:
    """What each place shows: a fall with some scatter, or anything; now and then nothing."""
    if draw(st.integers(0, 5)) == 0:
        return [draw(st.floats(-900, 900)) for _ in places]
    scatter = draw(st.sampled_from([0.0, 0.002, 0.05]))
    level = draw(st.floats(100, 900))
    shown: list[float | None] = [
        level - size * place + size * scatter * draw(st.floats(-1, 1)) for place in places
    ]
    if draw(st.integers(0, 6)) == 0:
        shown[draw(st.integers(0, len(shown) - 1))] = None
    return shown if any(one is not None for one in shown) else [level for _ in places]


@st.composite
def sound_surveys(draw: st.DrawFn) -> Drawn:
    """Any survey that can be read: line, fluid, gauges, way to measure the flow, layout of the readings, format."""
    line = draw(_lines())
    fluid = draw(st.sampled_from(sorted(_FLUIDS)))
    said, beside, viscosity, _ = _FLUIDS[fluid]
    double = draw(st.integers(0, 3)) == 0
    kinds = _DOUBLE if double else _SINGLE
    if fluid == "air":
        double, kinds = True, {"cell": ('kind = "differential transducer"', "Pa")}
    gauge = draw(st.sampled_from(sorted(kinds)))
    keys, unit = kinds[gauge]
    count = 2 if double else draw(st.integers(2, 8))
    names = draw(st.lists(_NAMES, min_size=count, max_size=count, unique_by=str.casefold))
    names = [name if name.casefold() not in _RESERVED else f"T{place}" for place, name in enumerate(names)]
    shares = sorted(draw(st.lists(st.integers(1, 99), min_size=count, max_size=count, unique=True)))
    if double:
        ends = f"upstream = {_quoted(names[0])}\ndownstream = {_quoted(names[1])}\n"
        keys = f"{keys}\n{ends}"
    text = f"{line.text}\n[fluid]\n{said}\n\n[gauge.g1]\n{keys}\n"
    flow_text, heading, read = _METHODS[draw(st.sampled_from(sorted(_METHODS)))]
    text += flow_text
    runs = draw(st.lists(st.floats(200, 2e5), min_size=1, max_size=5))
    flows = [1000 * reynolds * viscosity * line.bore * 0.785 for reynolds in runs]
    if draw(st.booleans()):
        flows.insert(0, 0.0)
    columns = ["g1"] if double else names
    places = [share / 100 for share in shares]
    shown: list[list[float | None]] = []
    for flow in flows:
        fall = 300 * (flow / max(flows)) ** 2
        if double:
            shown.append([fall * draw(st.floats(0.5, 1.5))])
        else:
            shown.append(draw(_readings(places, fall)))
    timed = "time" in heading
    temperature = draw(st.sampled_from(["18", "18.25", "291.4"]))
    degrees = "K" if temperature.startswith("291") else "degC"
    head = f"run,{heading},temperature [{degrees}]"
    rows = [
        f"{number:02d},{_number(read(flow))}{',100' * timed},{temperature}"
        for number, flow in enumerate(flows)
    ]
    files: Files = {"survey.toml": text.encode(), **beside}
    taps = [f"{name},{_number(place * line.length)}" for name, place in zip(names, places, strict=True)]
    files["taps.csv"] = "\n".join(["tap,chainage [m]", *taps, ""]).encode()

    def cell(value: float | None) -> str:
        return "" if value is None else _number(value)

    if draw(st.booleans()):
        files["runs.csv"] = "\n".join([head, *rows, ""]).encode()
        listed = [
            f"{number:02d},{name},{cell(value)},{unit}"
            for number, values in enumerate(shown)
            for name, value in zip(columns, values, strict=True)
        ]
        files["readings.csv"] = "\n".join(["run,tap,reading,unit", *listed, ""]).encode()
    else:
        head = ",".join([head, *(f"{name} [{unit}]" for name in columns)])
        wide = [",".join([row, *map(cell, values)]) for row, values in zip(rows, shown, strict=True)]
        files["readings.csv"] = "\n".join([head, *wide, ""]).encode()
    taken = [value for values in shown for value in values if value is not None]
    readings = tuple(sorted(float(_number(value)) * _SI[unit] for value in taken))
    return replace(draw(_in_a_form(files)), readings=readings)


@st.composite
def _in_a_form(draw: st.DrawFn, files: Files) -> Drawn:
    """The same survey in another encoding, with other separators, or in another format."""
    form = draw(st.sampled_from(["csv", "csv", "semicolons", "utf-16", "windows", "parquet", "xlsx"]))
    tables = [name for name in files if name.endswith(".csv")]
    files = dict(files)
    if form == "semicolons":
        for name in tables:
            files[name] = files[name].replace(b",", b";").replace(b".", b",")
            names = files["taps.csv"]
        if b"." in files["survey.toml"] and any(b"," in row.split(b";")[0] for row in names.splitlines()[1:]):
            return Drawn(_as_they_were(files))  # a tap's own name had a point, which is a comma now
    elif form == "utf-16":
        files |= {name: files[name].decode().encode("utf-16") for name in tables}
    elif form == "windows":
        files |= {name: b"\xef\xbb\xbf" + files[name].replace(b"\n", b"\r\n") for name in files}
    elif form == "parquet":
        table = pd.read_csv(io.BytesIO(files.pop("readings.csv")), dtype=str, keep_default_na=False)
        files["readings.parquet"] = table.to_parquet()
    elif form == "xlsx" and set(files) <= {"survey.toml", "taps.csv", "readings.csv"}:
        return Drawn({"drawn.xlsx": workbook_of(sheets_of(files))}, "drawn.xlsx")
    return Drawn(files)


def _as_they_were(files: Files) -> Files:
    return {
        name: content.replace(b",", b".").replace(b";", b",") if name.endswith(".csv") else content
        for name, content in files.items()
    }


_NASTY = st.sampled_from(
    [
        *(
            [
                "nan",
                "inf",
                "-inf",
                "1e999",
                "1e90",
                "-1",
                "0",
                "1e-300",
                "-0.0",
                "?",
                "0x10",
                "1_0",
                "٣",
                "12,4",
                "=1+1",
                "@x",
                "+1",
                "--5",
                ".",
            ]
        ),
        *("", " ", '"', "\\", "\x00", "\x1b", "\u2028", "\ufeff", "[", "]", "{", "}", "T1", "run", "m", "kg"),
        *("9" * 400, "x" * 5000, "[" * 3000, "a\nb", "a,b", "true", "1979-05-27", "'''", '"""'),
    ]
)


@st.composite
def faulty_surveys(draw: st.DrawFn) -> Drawn:
    """A survey with a fault, or with a few: a file, a line, a cell or a byte that is gone, doubled or something else."""
    drawn = draw(sound_surveys())
    files = dict(drawn.files)
    for _ in range(draw(st.integers(1, 3))):
        name = draw(st.sampled_from(sorted(files)))
        files[name] = draw(_damaged(files[name]))
    if len(files) > 1 and draw(st.integers(0, 9)) == 0:
        del files[draw(st.sampled_from(sorted(files)))]
    return Drawn(files, drawn.file if drawn.file in files else "")


@st.composite
def _damaged(draw: st.DrawFn, content: bytes) -> bytes:
    what = draw(
        st.sampled_from(["byte", "cut", "line", "line", "cell", "cell", "cell", "word", "word", "all"])
    )
    if not content:
        return draw(st.binary(max_size=40))
    place = draw(st.integers(0, len(content) - 1))
    if what == "byte":
        return content[:place] + draw(st.binary(max_size=4)) + content[place + draw(st.integers(0, 3)) :]
    if what == "cut":
        return content[:place]
    if what == "all":
        return draw(
            st.one_of(
                st.binary(max_size=200),
                st.text(max_size=200).map(lambda text: text.encode("utf-8", "replace")),
            )
        )
    rows = content.split(b"\n")
    row = draw(st.integers(0, len(rows) - 1))
    nasty = draw(_NASTY).encode()
    if what == "line":
        rows[row : row + 1] = draw(st.sampled_from([[], [rows[row]] * 2, [nasty], [rows[row], nasty]]))
    else:
        mark = b"," if what == "cell" else b" "
        cells = rows[row].split(mark)
        cells[draw(st.integers(0, len(cells) - 1))] = nasty
        rows[row] = mark.join(cells)
    return b"\n".join(rows)
