"""A survey whose truth is known, written to a folder: level taps read by one pressure gauge kind."""

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

REACH = """
[[reach]]
name = "{name}"
from = "{start} m"
to = "{end} m"
{bore}
wall = "{wall}"
"""
FLUID = 'name = "oil"\ndensity = "870 kg/m^3"\nkinematic_viscosity = "20 mm^2/s"'
GRAVITY = 9.80665

WriteLine = Callable[..., Path]


@pytest.fixture
def write_line(tmp_path: Path) -> WriteLine:
    """Write a survey; `pressures` (runs × taps) are in Pa, `columns` go before them in readings.csv."""

    def write(
        reaches,
        chainage,
        pressures,
        columns: dict[str, list],
        *,
        fluid: str = FLUID,
        more: str = "",
        uncertainty: str = 'reading = "1 Pa"',
        files: dict[str, str] | None = None,
    ) -> Path:
        text = f'[survey]\ntitle = "Line"\n\n[fluid]\n{fluid}\n\n[site]\ngravity = "{GRAVITY} m/s^2"\n'
        for number, (start, end, bore) in enumerate(reaches, start=1):
            text += REACH.format(name=f"R{number}", start=start, end=end, bore=bore, wall="steel")
        text += f'\n{more}\n[gauge.cell]\nkind = "pressure gauge"\n\n[uncertainty]\n{uncertainty}\n'
        names = [f"T{i + 1}" for i in range(len(chainage))]
        taps = "tap,chainage [m],elevation [m],gauge elevation [m]\n" + "".join(
            f"{name},{x},0,0\n" for name, x in zip(names, chainage, strict=True)
        )
        heading = ["run", *columns, *(f"{name} [Pa]" for name in names)]
        rows = [
            [str(run + 1), *(str(column[run]) for column in columns.values()), *(f"{p:.9g}" for p in row)]
            for run, row in enumerate(np.asarray(pressures))
        ]
        readings = "".join(",".join(row) + "\n" for row in [heading, *rows])
        folder = tmp_path / "line"
        folder.mkdir(exist_ok=True)
        written = {"survey.toml": text, "taps.csv": taps, "readings.csv": readings, **(files or {})}
        for name, content in written.items():
            folder.joinpath(name).write_text(content, encoding="utf-8")
        return folder

    return write
