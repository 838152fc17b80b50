from collections.abc import Callable, Mapping
from pathlib import Path

import pytest

TOML = """\
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
diameter = "20.22 mm +/- 0.03 mm"
wall = "copper"

[[fitting]]
name = "valve"
at = "4.5 m"
loss_coefficient = "fit"

[gauge.board]
kind = "piezometer"
zero = "0.80 m"

[gauge.bourdon]
kind = "pressure gauge"

[uncertainty]
reading = "0.5 mm"
chainage = "1 mm"
flow = "0.4 %"
flow_scale = "0.3 %"
temperature = "0.2 K"
"""

TAPS = """\
tap,chainage [m],elevation [m],gauge
T1,0.5,0,board
T2,1.5,0.1,board
T3,2500e-3,0.2,board
T4,5,0.3,bourdon
"""

READINGS = """\
run,flow [L/s],temperature [degC],T1 [mm],T2 [mm],T3 [mm],T4 [kPa],note
01,0,18,500,500,500,2.1,still
02,0.25,18.2,480,455,431,1.4,
NA,0.5,18.4,430,,310,-0.2,pump two
"""

GOOD: Mapping[str, str] = {"survey.toml": TOML, "taps.csv": TAPS, "readings.csv": READINGS}

WriteSurvey = Callable[..., Path]


@pytest.fixture
def write_survey(tmp_path: Path) -> WriteSurvey:
    """Write the good survey with changes: ("file", old text, new text), or files given whole or as None."""

    def write(*changes: tuple[str, str, str], **whole: str | bytes | None) -> Path:
        files: dict[str, str | bytes | None] = dict(GOOD)
        files |= {name.replace("_", "."): content for name, content in whole.items()}
        for name, old, new in changes:
            content = files[name]
            assert isinstance(content, str)
            assert content.count(old) == 1, f"{old!r} stands {content.count(old)} times in {name}"
            files[name] = content.replace(old, new)
        folder = tmp_path / "hill_main"
        folder.mkdir(exist_ok=True)
        for name, content in files.items():
            if content is not None:
                folder.joinpath(name).write_bytes(content if isinstance(content, bytes) else content.encode())
        return folder

    return write
