"""A published worked example as a survey's folder: one bore, the properties as the example gives them, nothing uncertain."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

FOOT, INCH, PSI, GALLON = 0.3048, 0.0254, 6894.757, 231 * 0.0254**3
POUND_PER_CUBIC_FOOT = 16.018463
SLUG_PER_CUBIC_FOOT = 515.3788

TEXT = """\
[survey]
title = "Worked example"
date = 2026-05-06
[fluid]
{fluid}
[site]
gravity = "{gravity!r} m/s^2"
[[reach]]
name = "pipe"
from = "0 m"
to = "{length!r} m"
diameter = "{bore!r} m"
wall = "pipe"
"""


def write_example(
    folder: Path,
    gauges: str,
    readings: Mapping[str, object],
    *,
    density: float = 1000.0,
    kinematic_viscosity: float = 1e-6,
    gravity: float = 9.81,
    bore: float = 0.1,
    length: float = 100.0,
    elevations: tuple[float, float] = (0.0, 0.0),
    gauge: str = "",
    alone: bool = False,
    water: bool = False,
    **files: str,
) -> Path:
    """Write a survey of one run between taps T1 and T2 at both ends of a pipe.

    Parameters
    ----------
    folder : Path
        Where it goes; made.
    gauges : str
        TOML of ``[gauge.…]`` and ``[flow]``.
    readings : mapping
        The run's cells by their headings.
    density, kinematic_viscosity, gravity, bore, length : float
        SI, as the example gives them.
    elevations : tuple of float
        Of the taps, m.
    gauge : str
        Of both taps; empty where a differential gauge names them.
    alone : bool
        Whether T1 is the only tap.
    water : bool
        Whether water by its own properties flows instead; a reading ``temperature [degC]`` then belongs to the run.
    **files : str
        Further files: name with two underscores for the dot, text.
    """
    fluid = (
        'name = "water"'
        if water
        else f'name = "given"\ndensity = "{density!r} kg/m^3"\nkinematic_viscosity = "{kinematic_viscosity!r} m^2/s"'
    )
    taps = [f"T1,0.0,{elevations[0]!r},{gauge}"]
    if not alone:
        taps.append(f"T2,{length!r},{elevations[1]!r},{gauge}")
    texts = {
        "survey.toml": TEXT.format(fluid=fluid, gravity=gravity, length=length, bore=bore) + gauges,
        "taps.csv": "\n".join(["tap,chainage [m],elevation [m],gauge", *taps]) + "\n",
        "readings.csv": ",".join(["run", *readings])
        + "\n"
        + ",".join(["1", *(str(cell) for cell in readings.values())])
        + "\n",
        **{name.replace("__", "."): text for name, text in files.items()},
    }
    folder.mkdir(parents=True, exist_ok=True)
    for name, text in texts.items():
        (folder / name).write_text(text, encoding="utf-8")
    return folder
