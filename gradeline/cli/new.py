"""The survey that `gradeline new` writes to be filled in."""

from __future__ import annotations

import textwrap
from importlib.resources import files
from pathlib import Path

from gradeline.cli.flow_lines import flow_template
from gradeline.errors import OutputError
from gradeline.fitting_kinds import CHANGES_OF_BORE, fitting_kinds
from gradeline.gauge_kinds import GAUGE_KINDS, GaugeKey
from gradeline.loader.gauge_keys import EXAMPLES

__all__ = ["NEW_FILES", "write_new"]

#: The files that are written.
NEW_FILES = ("survey.toml", "taps.csv", "readings.csv")

_LEGS = (
    "#   [[gauge.board.leg]]           # from the upstream tap on, as many as there are",
    '#   fluid = "mercury"             # or any name with density = "1594 kg/m^3"',
    '#   from = "T1"                   # a tap, an elevation such as "1.2 m +/- 1 mm", or the name of a level',
    "#   to = \"a\"                     # that is read: then readings.csv has a column 'board a [mm]'",
)


def write_new(folder: Path) -> None:
    """Write a commented survey to fill in.

    Parameters
    ----------
    folder : Path
        Absent or empty.

    Raises
    ------
    OutputError
        Where the folder holds anything already or cannot be written.
    """
    if folder.exists() and (not folder.is_dir() or any(folder.iterdir())):
        raise OutputError(f"{folder} exists already and is not empty; name a new folder")
    template = files("gradeline.cli").joinpath("template")
    try:
        folder.mkdir(parents=True, exist_ok=True)
        for name in NEW_FILES:
            text = template.joinpath(name).read_text(encoding="utf-8")
            if name == "survey.toml":
                text = (
                    text.replace("{kinds}", _kinds())
                    .replace("{keys}", _gauge_keys())
                    .replace("{flow}", flow_template())
                    .replace("{fittings}", _fittings())
                )
            folder.joinpath(name).write_text(text, encoding="utf-8")
    except OSError as error:
        raise OutputError(f"{folder} cannot be written ({error.strerror}); name another folder") from error


def _fittings() -> str:
    """The kinds of fittings as comments; those at a change of bore stand between two reaches."""
    named = ", ".join(name for name in fitting_kinds() if name not in CHANGES_OF_BORE)
    changes = ", ".join(CHANGES_OF_BORE)
    told = textwrap.wrap(f"{named}; and between two reaches: {changes}", 86)
    return "\n".join(f"{'#':<32}# {line}" for line in told)


def _kinds() -> str:
    return " or ".join(f'"{kind}"' for kind in GAUGE_KINDS)


def _gauge_keys() -> str:
    """The keys of each gauge kind as comments; the zero of the piezometer is left to be filled in."""
    lines: list[str] = []
    for name, key in GAUGE_KINDS["piezometer"].keys.items():
        asked = name == "zero"
        lines.append(_key_line("" if asked else "# ", name, '"? m"' if asked else _example(key), key.meaning))
    told: dict[str, list[str]] = {}
    seen: set[str] = set()
    for kind, known in GAUGE_KINDS.items():
        fresh = {name: key for name, key in known.keys.items() if f"{name} {key.meaning}" not in seen}
        keys = [
            _key_line("#   ", name, _example(key), key.meaning + (" (needed)" if key.required else ""))
            for name, key in fresh.items()
        ]
        again = [name for name in known.keys if name not in fresh]
        keys += [f"#   as above: {', '.join(again)}"] if again else []
        keys += list(_LEGS) if known.legs else []
        same = next((text for text, kinds in told.items() if GAUGE_KINDS[kinds[0]].keys == known.keys), None)
        told.setdefault(same or "\n".join(keys), []).append(kind)
        seen |= {f"{name} {key.meaning}" for name, key in known.keys.items()}
    for text, kinds in list(told.items())[1:]:
        named = " or ".join(f'"{kind}"' for kind in kinds)
        none = f"# kind = {named} takes none: its readings are piezometric heads, worked out already"
        lines += [f"# kind = {named} takes:", text] if text else [none]
    return "\n".join(lines)


def _example(key: GaugeKey) -> str:
    return f'"{key.example or EXAMPLES.get(key.dimension, "1")}"'


def _key_line(mark: str, name: str, value: str, meaning: str) -> str:
    return f"{f'{mark}{name} = {value}':<31} # {meaning}"
