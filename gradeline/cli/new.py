"""The survey that `gradeline new` writes to be filled in."""

from __future__ import annotations

from importlib.resources import files
from pathlib import Path

from gradeline.errors import OutputError
from gradeline.survey import GAUGE_KINDS

__all__ = ["NEW_FILES", "write_new"]

#: The files that are written.
NEW_FILES = ("survey.toml", "taps.csv", "readings.csv")

_EXAMPLES = {"length": '"? m"', "angle": '"30 deg"', "temperature": '"18 degC"', "text": '"water"'}


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
                text = text.replace("{kinds}", _kinds()).replace("{keys}", _gauge_keys())
            folder.joinpath(name).write_text(text, encoding="utf-8")
    except OSError as error:
        raise OutputError(f"{folder} cannot be written ({error.strerror}); name another folder") from error


def _kinds() -> str:
    return " or ".join(f'"{kind}"' for kind in GAUGE_KINDS)


def _gauge_keys() -> str:
    """The keys of each gauge kind as comments; the zero of the piezometer is left to be filled in."""
    lines: list[str] = []
    for kind, known in GAUGE_KINDS.items():
        if kind != "piezometer":
            lines.append(f"# a {kind} (readings such as kPa, bar, psi, mH2O) takes instead:")
        for name, key in known.keys.items():
            asked = name == "zero"
            value = _EXAMPLES[key.dimension] if asked or key.dimension != "length" else '"4 mm"'
            written = f"{'' if asked else '# '}{name} = {value}"
            lines.append(f"{written:<31} # {key.meaning}")
    return "\n".join(lines)
