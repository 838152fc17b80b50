"""A bench of one tube in files, read through any gauges, with its truth."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from pathlib import Path

import numpy as np
import pytest

from tests.simulate.line import TrueLine, TrueReach
from tests.simulate.water import density, kinematic_viscosity

KELVIN, GRAVITY, AIR = 288.0, 9.80665, 1.1992
FLOWS = np.array([0.0, 2e-4, 4e-4, 6e-4, 8e-4, 1e-3])
CHAINAGE = np.linspace(0.2, 5.3, 6)
NAMES = [f"T{n}" for n in range(1, 7)]
LINE = TrueLine((TrueReach(0.0, 5.5, 0.02664, 1e-4),), gravity=GRAVITY)
RHO = float(density(KELVIN))

SURVEY = """\
[survey]
title = "Bench of gauges"
date = 2026-05-06
[site]
gravity = "9.80665 m/s^2"
[[reach]]
name = "tube"
from = "0 m"
to = "5.5 m"
diameter = "26.64 mm +/- 0.03 mm"
wall = "copper"
"""


def heads() -> np.ndarray:
    """True piezometric heads (runs, taps), m: 2 m at the last tap."""
    found = LINE.heads(CHAINAGE, FLOWS, np.full(FLOWS.shape, float(kinematic_viscosity(KELVIN))))
    return found + 2.0 - found[:, -1:]


def slopes() -> np.ndarray:
    """True friction slopes of the flowing runs."""
    nu = np.full(FLOWS.shape, float(kinematic_viscosity(KELVIN)))
    return LINE.reaches[0].slope(FLOWS, nu, GRAVITY)[1:]


WriteBench = Callable[..., Path]


@pytest.fixture
def bench(tmp_path: Path) -> WriteBench:
    """Write a bench: its gauges as TOML, its columns of readings by heading, taps by name: (gauge, elevation)."""

    def write(
        gauges: str,
        columns: Mapping[str, np.ndarray],
        taps: Mapping[str, tuple[str, float]],
        **files: str,
    ) -> Path:
        folder = tmp_path / "bench"
        folder.mkdir(exist_ok=True)
        rows = [
            f"{name},{float(CHAINAGE[NAMES.index(name)])!r},{z!r},{gauge}"
            for name, (gauge, z) in taps.items()
        ]
        texts = {
            "survey.toml": SURVEY + gauges,
            "taps.csv": "\n".join(["tap,chainage [m],elevation [m],gauge", *rows]) + "\n",
            "readings.csv": "\n".join(
                [
                    ",".join(["run", "flow [m^3/s]", "temperature [K]", *columns]),
                    *(
                        ",".join(
                            [str(n + 1), repr(float(flow)), repr(KELVIN)]
                            + [repr(float(values[n])) for values in columns.values()]
                        )
                        for n, flow in enumerate(FLOWS)
                    ),
                ]
            )
            + "\n",
            **{name.replace("__", "."): text for name, text in files.items()},
        }
        for name, text in texts.items():
            (folder / name).write_text(text, encoding="utf-8")
        return folder

    return write
