"""Sound surveys, one for each way to keep a survey; every broken one is one of these with one fault.

The benches are invented. Heads fall evenly along the line, so that each of them can be reduced as well.
"""

from __future__ import annotations

import io
from collections.abc import Callable, Mapping
from pathlib import Path

import pandas as pd
import xlsxwriter

__all__ = ["BASES", "Files", "sheets_of", "workbook_of", "write_files"]

#: The files of a survey by name; a name may lie in a folder below.
Files = dict[str, bytes]

_LINE = """\
[survey]
title = "Hill main"
date = 2026-05-06

[fluid]
name = "water"

[site]
latitude = "53.4 deg"
altitude = "38 m"

[[reach]]
name = "upper"
from = "0 m"
to = "3 m"
diameter = "26.64 mm +/- 0.03 mm"
wall = "copper"

[[reach]]
name = "lower"
from = "3 m"
to = "6 m"
diameter = "26.64 mm +/- 0.03 mm"
wall = "steel"
"""

_FITTING = """
[[fitting]]
name = "valve"
at = "4.5 m"
loss_coefficient = "fit"
"""

_STATED = """
[uncertainty]
reading = "0.5 mm"
chainage = "1 mm"
flow = "0.4 %"
flow_scale = "0.3 %"
temperature = "0.2 K"
"""

_BOARD = """
[gauge.board]
kind = "piezometer"
zero = "0.80 m"
"""

_DIAL = """
[gauge.dial]
kind = "pressure gauge"
uncertainty = "0.05 kPa"
range = "-20 to 60 kPa"
calibration = "dial.csv"
"""

_BOARD_TAPS = """\
tap,chainage [m],elevation [m],gauge
T1,0.5,0,board
T2,1.5,0.1,board
T3,2500e-3,0.2,board
T4,5,0.3,board
"""


def _wide(*flow_columns: str, rows: tuple[str, str, str] = ("0", "0.25", "0.5")) -> str:
    """Readings of four open columns over one static and two flowing runs."""
    heading = ",".join(["run", *flow_columns, "temperature [degC]", *(f"T{n} [mm]" for n in (1, 2, 3, 4))])
    heads = ("700,700,700,700", "670,655,641,603", "610,560,511,386")
    lines = [
        f"{run},{flow},18.2,{head}" for run, flow, head in zip(("01", "02", "NA"), rows, heads, strict=True)
    ]
    return "\n".join([heading, *lines, ""])


def _text(**files: str) -> Files:
    return {name.replace("_", ".", 1): text.encode() for name, text in files.items()}


def _bench() -> Files:
    taps = _BOARD_TAPS.replace("T4,5,0.3,board", "T4,5,0.3,dial")
    readings = (
        "run,flow [L/s],temperature [degC],T1 [mm],T2 [mm],T3 [mm],T4 [kPa],note\n"
        "01,0,18,700,700,700,11.9,still\n"
        "02,0.25,18.2,670,655,641,10.9,\n"
        "NA,0.5,18.4,610,,511,8.6,pump two\n"
    )
    dial = "reading [kPa],true [kPa]\n0,0.1\n10,10.0\n20,19.9\n40,40.1\n"
    return _text(
        survey_toml=_LINE + _FITTING + _BOARD + _DIAL + _STATED,
        taps_csv=taps,
        readings_csv=readings,
        dial_csv=dial,
    )


def _listed() -> Files:
    runs = "run,flow [L/s],temperature [degC]\n01,0,18\n02,0.25,18.2\n03,0.5,18.4\n"
    heads = {"01": (700, 700, 700, 700), "02": (670, 655, 641, 603), "03": (610, 560, 511, 386)}
    rows = [
        f"{run},T{tap},{head},mm" for run, of_run in heads.items() for tap, head in enumerate(of_run, start=1)
    ]
    return _text(
        survey_toml=_LINE + _BOARD + _STATED,
        taps_csv=_BOARD_TAPS,
        runs_csv=runs,
        readings_csv="\n".join(["run,tap,reading,unit", *rows, ""]),
    )


def _by_method(flow: str, readings: str, **more: str) -> Files:
    return _text(
        survey_toml=_LINE + _BOARD + flow + _STATED, taps_csv=_BOARD_TAPS, readings_csv=readings, **more
    )


def _meter() -> Files:
    table = "reading [1],flow [L/s]\n0,0\n10,0.2\n20,0.4\n30,0.6\n"
    flow = '\n[flow]\nmethod = "calibrated meter"\ntable = "meter.csv"\n'
    return _by_method(flow, _wide("meter reading [1]", rows=("0", "12.5", "25")), meter_csv=table)


def _tank() -> Files:
    flow = '\n[flow]\nmethod = "volumetric tank"\nu_time = "0.2 s"\n'
    return _by_method(flow, _wide("volume [L]", "time [s]", rows=("0,", "25,100", "50,100")))


def _plate() -> Files:
    flow = '\n[flow]\nmethod = "orifice plate"\npipe_bore = "26.6 mm"\nthroat_bore = "14 mm"\n'
    return _by_method(flow, _wide("differential [kPa]", rows=("0", "3.5", "14")))


def _notch() -> Files:
    flow = '\n[flow]\nmethod = "v-notch weir"\nnotch_angle = "90 deg"\n'
    return _by_method(flow, _wide("weir head [mm]", rows=("0", "33", "43")))


def _pitot() -> Files:
    flow = (
        '\n[flow]\nmethod = "hydrant pitot"\n[[flow.outlet]]\nname = "north"\nbore = "20 mm"\n'
        'discharge_coefficient = "0.9"\n'
    )
    return _by_method(flow, _wide("pitot north [kPa]", rows=("0", "0.4", "1.6")))


def _branch() -> Files:
    branch = '\n[[offtake]]\nname = "lane"\nat = "3 m"\nu_flow = "2 %"\n'
    files = _by_method(branch, _wide("flow [L/s]", "lane [L/s]", rows=("0,0", "0.25,0.05", "0.5,0.1")))
    valve = b'\n[[side_valve]]\nname = "yard"\nat = "5 m"\nstate = "shut"\n'
    files["survey.toml"] += valve
    return files


def _u_tube() -> Files:
    gauge = """
[gauge.m1]
kind = "u-tube"
upstream = "T1"
downstream = "T3"
gauge_fluid = "mercury"
"""
    readings = "run,flow [L/s],temperature [degC],m1 [mm]\n1,0.5,18,8\n2,1.0,18.2,28\n3,1.5,18.4,60\n"
    taps = "tap,chainage [m]\nT1,0.5\nT3,2.5\n"
    return _text(survey_toml=_LINE + gauge + _STATED, taps_csv=taps, readings_csv=readings)


def _compound() -> Files:
    gauge = """
[gauge.c1]
kind = "compound manometer"
upstream = "T1"
downstream = "T3"

[[gauge.c1.leg]]
fluid = "water"
from = "T1"
to = "a"

[[gauge.c1.leg]]
fluid = "mercury"
from = "a"
to = "b"

[[gauge.c1.leg]]
fluid = "water"
from = "b"
to = "T3"
"""
    readings = (
        "run,flow [L/s],temperature [degC],c1 a [mm],c1 b [mm]\n"
        "1,0.5,18,200,208\n2,1.0,18.2,190,218\n3,1.5,18.4,170,230\n"
    )
    taps = "tap,chainage [m],elevation [m]\nT1,0.5,0\nT3,2.5,0\n"
    return _text(survey_toml=_LINE + gauge + _STATED, taps_csv=taps, readings_csv=readings)


def _oil() -> Files:
    fluid = 'name = "gear oil"\nproperties = "oil.csv"\nu_density = "0.1 %"\nu_viscosity = "1 %"'
    oil = "temperature [degC],density [kg/m^3],viscosity [mPa s]\n10,880,60\n20,873,38\n30,866,25\n"
    return _text(
        survey_toml=(_LINE + _BOARD + _STATED).replace('name = "water"', fluid),
        taps_csv=_BOARD_TAPS,
        readings_csv=_wide("flow [L/s]"),
        oil_csv=oil,
    )


def _air() -> Files:
    fluid = 'name = "air"\nline_pressure = "105 kPa abs"\nrelative_humidity = "50 %"'
    gauge = '\n[gauge.cell]\nkind = "differential transducer"\nupstream = "T1"\ndownstream = "T3"\n'
    readings = "run,flow [L/s],temperature [degC],cell [Pa]\n1,5,18,110\n2,8,18.2,250\n3,11,18.4,430\n"
    return _text(
        survey_toml=(_LINE + gauge).replace('name = "water"', fluid),
        taps_csv="tap,chainage [m]\nT1,0.5\nT3,2.5\n",
        readings_csv=readings,
    )


def _heads() -> Files:
    return {"heads.csv": b"tap,chainage [m],head [mm]\nA,0,900\nB,1,850\nC,2,801\nD,3,752\n"}


def sheets_of(files: Mapping[str, bytes]) -> dict[str, list[list[str | float]]]:
    """Return a survey's text files as the rows of a workbook's sheets, numbers as numbers."""

    def value(cell: str) -> str | float:
        try:
            return float(cell)
        except ValueError:
            return cell

    sheets: dict[str, list[list[str | float]]] = {
        "survey": [[line] for line in files["survey.toml"].decode().splitlines()]
    }
    for name in ("taps", "readings"):
        rows = [line.split(",") for line in files[f"{name}.csv"].decode().splitlines()]
        sheets[name] = [list(rows[0]), *([value(cell) for cell in row] for row in rows[1:])]
    return sheets


def workbook_of(sheets: Mapping[str, list[list[str | float]]]) -> bytes:
    """Return a workbook with these sheets; a text that begins with ``=`` is a formula without a value."""
    out = io.BytesIO()
    with xlsxwriter.Workbook(out, {"in_memory": True, "nan_inf_to_errors": True}) as book:
        for name, rows in sheets.items():
            sheet = book.add_worksheet(name)
            for row, cells in enumerate(rows):
                for column, cell in enumerate(cells):
                    if isinstance(cell, str) and cell.startswith("=#"):
                        sheet.write_formula(row, column, "=1/0", None, cell[1:])
                    elif isinstance(cell, str):
                        sheet.write_string(row, column, cell)
                    else:
                        sheet.write_number(row, column, cell)
    return out.getvalue()


def _workbook() -> Files:
    return {"bench.xlsx": workbook_of(sheets_of(_by_method("", _wide("flow [L/s]"))))}


def _parquet() -> Files:
    files = _by_method("", _wide("flow [L/s]"))
    table = pd.read_csv(io.BytesIO(files.pop("readings.csv")), dtype={"run": str}, keep_default_na=False)
    files["readings.parquet"] = table.to_parquet()
    return files


#: How each base is made, by name.
BASES: Mapping[str, Callable[[], Files]] = {
    "bench": _bench,
    "listed": _listed,
    "meter": _meter,
    "tank": _tank,
    "plate": _plate,
    "notch": _notch,
    "pitot": _pitot,
    "branch": _branch,
    "u-tube": _u_tube,
    "compound": _compound,
    "oil": _oil,
    "air": _air,
    "heads": _heads,
    "workbook": _workbook,
    "parquet": _parquet,
}


def write_files(folder: Path, files: Mapping[str, bytes]) -> None:
    """Write the files of a survey into a folder, which is made."""
    folder.mkdir(parents=True, exist_ok=True)
    for name, content in files.items():
        path = folder / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(content)
