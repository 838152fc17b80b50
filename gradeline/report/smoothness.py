"""What hydraulically smooth means of a wall: its roughness Reynolds number, and how far f is from the smooth law all the same."""

from __future__ import annotations

from typing import Any

from gradeline.hydraulics.friction import colebrook_white, roughness_reynolds
from gradeline.quantities.printing import format_number
from gradeline.reduction.tables import Reduction
from gradeline.report.printed import known, records

__all__ = ["smooth_sentence"]

#: ε⁺ below which a wall of sand is hydraulically smooth (Nikuradse 1933).
_SMOOTH = 5.0
#: A rise of f above the smooth law that nobody would call one.
_SMALL = 0.01


def smooth_sentence(reduction: Reduction, wall: dict[str, Any]) -> str:
    """Say that a wall is hydraulically smooth, by which criterion, and what the friction law makes of it.

    Parameters
    ----------
    reduction : Reduction
        Its tables ``runs``, ``reaches``, ``flags`` and ``likelihood`` are read.
    wall : dict
        A row of ``walls``.

    Returns
    -------
    str
        A sentence; empty where the wall is not smooth, or it is not known.

    Notes
    -----
    Below ε⁺ = 5 a wall of sand grains loses no more than a smooth one. By Colebrook–White a wall of many sizes does, as
    its largest grains stand out long before. Of a wall that is not told from zero, both are those of the upper bound.
    """
    size = wall["roughness"] if wall["roughness_resolved"] else wall["roughness_upper95"]
    row = _fastest(reduction, wall["wall"])
    if not (wall["hydraulically_smooth"] and known(size) and row is not None):
        return ""
    reynolds, relative = row["reynolds"], size / row["diameter"]
    law, smooth = (float(colebrook_white(reynolds, one)) for one in (relative, 0.0))
    limits = dict(zip(reduction.likelihood["wall"], reduction.likelihood["smooth_limit"], strict=True))
    plus = (
        _SMOOTH * size / limits[wall["wall"]]
        if wall["wall"] in limits
        else float(roughness_reynolds(size, row["velocity"], law, row["kinematic_viscosity"]))
    )
    start = "" if wall["roughness_resolved"] else "Even at that bound "
    words = f"{start}ε⁺ = {format_number(plus, 2)} at the fastest run, below 5: hydraulically smooth by the sand-grain criterion"
    rise = law / smooth - 1.0
    if rise < _SMALL:
        return f"{words}, and by the Colebrook–White law f lies within 1 % of that of a smooth wall."
    there = "lies" if wall["roughness_resolved"] else "would there lie"
    share = format_number(100 * rise, 2)
    return f"{words}, though by the Colebrook–White law f {there} {share} % above that of a smooth wall."


def _fastest(reduction: Reduction, wall: str) -> dict[str, Any] | None:
    """The turbulent run and reach of the highest Re that is on the law of the wall, with its bore."""
    bores = {row["reach"]: row["diameter"] for row in records(reduction.reaches) if row["wall"] == wall}
    off = {row["run"] for row in records(reduction.flags) if row["kind"] == "run"}
    mine = [
        row | {"diameter": bores[row["reach"]]}
        for row in records(reduction.runs)
        if row["reach"] in bores
        and row["regime"] == "turbulent"
        and known(row["slope"])
        and row["run"] not in off
    ]
    return max(mine, key=lambda row: row["reynolds"], default=None)
