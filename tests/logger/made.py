"""A logged survey, invented: steady flows through a smooth tube, correlated noise, written as a logger would."""

from __future__ import annotations

import datetime
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import pandas as pd

SURVEY = """
[survey]
title = "A logged test length"
[fluid]
name = "water"
[site]
gravity = "9.81 m/s^2"
[[reach]]
name = "test length"
from = "0 m"
to = "6 m"
diameter = "30.0 mm +/- 0.03 mm"
wall = "drawn"
[gauge.board]
kind = "piezometer"
zero = "0 m"
uncertainty = "0.3 mm"
u_zero = "1 mm"
[uncertainty]
chainage = "1 mm"
temperature = "0.1 K"
"""
TAPS = {"T1": 0.5, "T2": 1.6, "T3": 2.7, "T4": 3.8, "T5": 4.9}
FLOWS = (0.0, 0.4, 0.8, 1.4)
BEGIN = datetime.datetime(2026, 3, 1, 10, 0, 0)


def slope(flow: float) -> float:
    """Friction slope of a smooth tube by Blasius (1913), f = 0.3164 Re^(-1/4): any plausible fall serves here."""
    bore = 0.030
    velocity = flow / 1000.0 / (np.pi * bore**2 / 4.0)
    if not velocity:
        return 0.0
    return float(0.3164 * (velocity * bore / 1.0e-6) ** -0.25 * velocity**2 / (2 * 9.81 * bore))


def correlated(rng: np.random.Generator, count: int, kept: float = 0.7) -> np.ndarray:
    """An autoregression of first order with unit variance."""
    from scipy.signal import lfilter  # noqa: PLC0415 (only the maker needs it)

    start = rng.standard_normal() * kept
    return np.asarray(
        lfilter([np.sqrt(1 - kept**2)], [1.0, -kept], rng.standard_normal(count), zi=[start])[0]
    )


@dataclass
class Logged:
    """A folder with a logger's file, and the numbers that are in it."""

    folder: Path
    table: pd.DataFrame
    windows: list[tuple[str, float, float]] = field(default_factory=list)

    @property
    def csv(self) -> Path:
        return self.folder / "logger.csv"

    def write(self, *, comma: bool = False, parquet: bool = False) -> None:
        """Write the table as it stands."""
        for name in ("logger.csv", "logger.parquet"):
            (self.folder / name).unlink(missing_ok=True)
        if parquet:
            self.table.to_parquet(self.folder / "logger.parquet", index=False)
        else:
            self.table.to_csv(self.csv, index=False, sep=";" if comma else ",", decimal="," if comma else ".")

    def lines(self) -> list[str]:
        return self.csv.read_text(encoding="utf-8").splitlines()

    def put(self, lines: list[str]) -> None:
        self.csv.write_text("\n".join(lines) + "\n", encoding="utf-8")

    def change(self, line: int, column: str, cell: str) -> None:
        """Change one cell; the heading is line 1."""
        lines = self.lines()
        names = [name.split(" [")[0] for name in lines[0].split(",")]
        cells = lines[line - 1].split(",")
        cells[names.index(column)] = cell
        lines[line - 1] = ",".join(cells)
        self.put(lines)

    def give(self, text: str | None = None) -> None:
        """Write runs.csv."""
        rows = "".join(f"{run},{start},{end}\n" for run, start, end in self.windows)
        (self.folder / "runs.csv").write_text(text or f"run,start [s],end [s]\n{rows}", encoding="utf-8")

    def inside(self, run: str) -> pd.DataFrame:
        """The rows of a window: its start up to, and without, its end."""
        _, start, end = next(window for window in self.windows if window[0] == run)
        time = self.table["time [s]"]
        return self.table[(time >= start) & (time < end)]


def log(folder: Path, *, rate: float = 4.0, seconds: float = 150.0, seed: int = 5) -> Logged:
    """Make a logged survey."""
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "survey.toml").write_text(SURVEY, encoding="utf-8")
    (folder / "taps.csv").write_text(
        "tap,chainage [m]\n" + "".join(f"{tap},{at}\n" for tap, at in TAPS.items()), encoding="utf-8"
    )
    rng = np.random.default_rng(seed)
    count = int(rate * seconds)
    pieces, windows = [], []
    for k, flow in enumerate(FLOWS):
        at = k * seconds + np.arange(count) / rate
        piece = {"time [s]": np.round(at, 3)}
        piece["flow [L/s]"] = np.round(flow * (1 + 0.003 * correlated(rng, count)), 5)
        piece["temperature [degC]"] = np.round(18.0 + 0.01 * rng.standard_normal(count), 3)
        for tap, chainage in TAPS.items():
            fall = 1000.0 * slope(flow) * chainage
            piece[f"{tap} [mm]"] = np.round(900.0 - fall + 1.5 * correlated(rng, count), 2)
        pieces.append(pd.DataFrame(piece))
        windows.append((f"r{k}", k * seconds + 20.0, (k + 1) * seconds - 10.0))
    made = Logged(folder, pd.concat(pieces, ignore_index=True), windows)
    made.write()
    made.give()
    return made


def stamped(table: pd.DataFrame, zone: str) -> pd.DataFrame:
    """The table with timestamps in place of seconds."""
    stamps = [
        (BEGIN + datetime.timedelta(seconds=float(one))).isoformat(timespec="milliseconds") + zone
        for one in table["time [s]"]
    ]
    return pd.DataFrame({"time": stamps, **{name: table[name] for name in table.columns[1:]}})
