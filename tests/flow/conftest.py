from collections.abc import Callable, Mapping, Sequence
from pathlib import Path

import numpy as np
import pytest

BORE, ROUGHNESS, NU, RHO, G = 0.02664, 6e-5, 1.0e-6, 998.0, 9.80665
PLACES = np.array([0.4, 1.2, 2.0, 2.8, 3.6, 4.4, 5.2])
FLOWS = (0.4e-3, 0.6e-3, 0.8e-3, 1.0e-3, 1.2e-3)
NAMES = [f"T{place}" for place in range(1, len(PLACES) + 1)]

TOML = f"""\
[survey]
title = "Bench"
date = 2026-05-06
[fluid]
name = "brine"
density = "{RHO} kg/m^3"
kinematic_viscosity = "1.0 mm^2/s"
[site]
gravity = "{G} m/s^2"
[[reach]]
name = "tube"
from = "0 m"
to = "5.5 m"
diameter = "26.64 mm +/- 0.02 mm"
wall = "copper"
[gauge.board]
kind = "piezometer"
zero = "0 m"
uncertainty = "0.5 mm"
[uncertainty]
chainage = "0.5 mm"
"""


def friction_slope(flow):
    """Colebrook and White by fixed-point iteration."""
    velocity = flow / (np.pi * BORE**2 / 4)
    reynolds, root = velocity * BORE / NU, 7.0
    for _ in range(60):
        root = -2 * np.log10(ROUGHNESS / (3.7 * BORE) + 2.51 * root / reynolds)
    return velocity**2 / (2 * G * BORE * root**2)


def columns_of(flow: float, *, level: float = 9.0) -> np.ndarray:
    """Heights of the columns, m, with a scatter of 0.3 mm that is always the same."""
    scatter = 3e-4 * np.sin(37.0 * PLACES + 1e5 * flow)
    return level - friction_slope(flow) * PLACES + scatter


WriteFlow = Callable[..., Path]


@pytest.fixture
def write_flow(tmp_path: Path) -> WriteFlow:
    """Write a bench survey: the text of [flow], and in each run's row what stands in place of the flow."""

    def write(
        flow_toml: str,
        columns: Mapping[str, Sequence[object]],
        *,
        flows: Sequence[float] = FLOWS,
        heads: Sequence[np.ndarray] | None = None,
        runs: Sequence[str] | None = None,
        uncertainty: str = "",
        **files: str,
    ) -> Path:
        folder = tmp_path / f"bench {len(list(tmp_path.iterdir()))}"
        folder.mkdir()
        (folder / "survey.toml").write_text(TOML + uncertainty + flow_toml, encoding="utf-8")
        taps = [f"{name},{place}" for name, place in zip(NAMES, PLACES, strict=True)]
        (folder / "taps.csv").write_text("\n".join(["tap,chainage [m]", *taps]), encoding="utf-8")
        rows = [",".join(["run", *columns, *(f"{name} [m]" for name in NAMES)])]
        for place, flow in enumerate(flows):
            of_run = columns_of(flow) if heads is None else heads[place]
            label = str(place + 1) if runs is None else runs[place]
            cells = [str(values[place]) for values in columns.values()]
            rows.append(",".join([label, *cells, *(f"{head:.9g}" for head in of_run)]))
        (folder / "readings.csv").write_text("\n".join(rows), encoding="utf-8")
        for name, text in files.items():
            (folder / name.replace("_", ".")).write_text(text, encoding="utf-8")
        return folder

    return write
