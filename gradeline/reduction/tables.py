"""What a reduction is: its tables, their columns, and the kind and unit of each column."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any, Literal

import pandas as pd

__all__ = ["DRAWING_TABLES", "RESULT_TABLES", "Column", "Reduction"]


@dataclass(frozen=True)
class Column:
    """A column of a result table.

    Parameters
    ----------
    kind : {"text", "number", "truth"}
        What its cells hold: text or None, float (NaN where missing), nullable boolean.
    unit : str
        SI unit as printed, empty for text and for numbers without dimension.
    """

    kind: Literal["text", "number", "truth"]
    unit: str = ""


_TEXT, _TRUTH, _NUMBER = Column("text"), Column("truth"), Column("number")


def _number(unit: str) -> Column:
    return Column("number", unit)


_M, _FLOW = _number("m"), _number("m3/s")

#: The tables of ``reduction.json`` and the csv files, in order, each with its columns in order.
RESULT_TABLES: Mapping[str, Mapping[str, Column]] = MappingProxyType(
    {
        "reaches": {
            "reach": _TEXT,
            "wall": _TEXT,
            "length": _M,
            "diameter": _M,
            "shared_curve_p": _NUMBER,
            "reason": _TEXT,
        },
        "runs": {
            "run": _TEXT,
            "reach": _TEXT,
            "flow": _FLOW,
            "velocity": _number("m/s"),
            "temperature": _number("K"),
            "density": _number("kg/m3"),
            "kinematic_viscosity": _number("m2/s"),
            "reynolds": _NUMBER,
            "regime": _TEXT,
            "slope": _NUMBER,
            "slope_u": _NUMBER,
            "slope_u_random": _NUMBER,
            "slope_dof": _NUMBER,
            "slope_low": _NUMBER,
            "slope_high": _NUMBER,
            "friction_factor": _NUMBER,
            "friction_factor_u": _NUMBER,
            "friction_factor_low": _NUMBER,
            "friction_factor_high": _NUMBER,
            "roughness": _M,
            "roughness_low": _M,
            "roughness_high": _M,
            "roughness_signed": _M,
            "observations_used": _NUMBER,
            "straightness_p": _NUMBER,
            "reason": _TEXT,
        },
        "walls": {
            "wall": _TEXT,
            "roughness": _M,
            "roughness_low": _M,
            "roughness_high": _M,
            "roughness_upper95": _M,
            "roughness_resolved": _TRUTH,
            "hydraulically_smooth": _TRUTH,
            "roughness_reynolds": _NUMBER,
            "law_trend": _NUMBER,
            "law_trend_u": _NUMBER,
            "runs_used": _NUMBER,
            "hazen_williams_c": _NUMBER,
            "manning_n": _NUMBER,
            "reason": _TEXT,
        },
        "fittings": {
            "fitting": _TEXT,
            "loss_coefficient": _NUMBER,
            "loss_coefficient_u": _NUMBER,
            "loss_coefficient_low": _NUMBER,
            "loss_coefficient_high": _NUMBER,
            "equivalent_length": _M,
            "reason": _TEXT,
        },
        "taps": {
            "tap": _TEXT,
            "offset": _M,
            "offset_u": _M,
            "edge_coefficient": _NUMBER,
            "edge_coefficient_u": _NUMBER,
            "diagnosis": _TEXT,
            "reason": _TEXT,
        },
        "heads": {
            "run": _TEXT,
            "gauge": _TEXT,
            "tap": _TEXT,
            "tap_2": _TEXT,
            "chainage": _M,
            "head": _M,
            "energy_head": _M,
            "fitted_head": _M,
            "residual": _M,
            "standardized_residual": _NUMBER,
            "used": _TRUTH,
            "flag": _TEXT,
            "reason": _TEXT,
        },
        "flags": {
            "kind": _TEXT,
            "run": _TEXT,
            "tap": _TEXT,
            "reading": _number("m or Pa"),
            "expected": _number("m or Pa"),
            "score": _NUMBER,
            "suggestion": _TEXT,
        },
        "budget": {
            "quantity": _TEXT,
            "subject": _TEXT,
            "input": _TEXT,
            "contribution_u": _NUMBER,
            "variance_share": _NUMBER,
        },
    }
)

#: What the figures and the page need beside the result tables. Not part of ``reduction.json``.
DRAWING_TABLES: Mapping[str, Mapping[str, Column]] = MappingProxyType(
    {
        # the fitted lines of each run at every place where they bend, and between
        "grade_lines": {
            "run": _TEXT,
            "chainage": _M,
            "energy_head": _M,
            "energy_head_u": _M,
            "piezometric_head": _M,
            "velocity_head": _M,
            "elevation": _M,
            "crown": _M,
        },
        # taps in order, with the pipe's axis and where their gauge refers
        "layout": {"what": _TEXT, "name": _TEXT, "chainage": _M, "elevation": _M, "note": _TEXT},
        # f Re / 64 of the laminar runs: 1 for the true bore and flow
        "laminar": {"run": _TEXT, "reach": _TEXT, "ratio": _NUMBER, "ratio_u": _NUMBER, "constant": _NUMBER},
        # the unit in which each column of readings was read, and how many SI units it has
        "reading_units": {"tap": _TEXT, "gauge": _TEXT, "kind": _TEXT, "unit": _TEXT, "si_per_unit": _NUMBER},
        # S proportional to V^n, per reach and regime
        "exponents": {
            "reach": _TEXT,
            "regime": _TEXT,
            "exponent": _NUMBER,
            "exponent_u": _NUMBER,
            "exponent_low": _NUMBER,
            "exponent_high": _NUMBER,
            "runs_used": _NUMBER,
            "reason": _TEXT,
        },
        # how the readings of each gauge scatter: sigma^2 = base^2 + (surge V^2/2g)^2
        "scatter": {
            "gauge": _TEXT,
            "base": _M,
            "surge": _NUMBER,
            "stated": _M,
            "dof": _NUMBER,
            "note": _TEXT,
        },
        # the wall's roughness if the bore were a little different
        "bore_sensitivity": {
            "wall": _TEXT,
            "diameter_change": _NUMBER,
            "friction_factor_change": _NUMBER,
            "roughness": _M,
        },
        # what the survey and the caller stated, group by group; `quantity` names the kind of the value (SI), a value
        # that nobody stated is missing, and `text` stands for what is no number
        "inputs": {
            "group": _TEXT,
            "name": _TEXT,
            "what": _TEXT,
            "text": _TEXT,
            "quantity": _TEXT,
            "value": _NUMBER,
            "value_u": _NUMBER,
        },
        "stated_reaches": {
            "reach": _TEXT,
            "start": _M,
            "end": _M,
            "diameter": _M,
            "diameter_u": _M,
            "wall": _TEXT,
        },
        "stated_taps": {
            "tap": _TEXT,
            "chainage": _M,
            "chainage_u": _M,
            "elevation": _M,
            "elevation_u": _M,
            "gauge": _TEXT,
            "gauge_elevation": _M,
            "reading_u": _number("m or Pa"),
        },
        # one row a run and observation, as read
        "raw_readings": {"run": _TEXT, "tap": _TEXT, "reading": _number("m or Pa"), "repeats": _NUMBER},
    }
)


@dataclass(frozen=True, repr=False)
class Reduction:
    """All that was reduced from a survey: one DataFrame a table, in SI units.

    A missing number is NaN, a missing text None, a missing boolean ``pd.NA``; `reason` columns say why.

    Parameters
    ----------
    survey : mapping
        ``title``, ``date``, ``source`` and ``files`` (a mapping from each input file's name to its SHA-256).
    assumptions, cautions : tuple of str
        Every default and choice made; what a reader must know.
    reaches, runs, walls, fittings, taps, heads, flags, budget : DataFrame
        The tables of `RESULT_TABLES`, with exactly those columns.
    grade_lines, layout, laminar, reading_units, exponents, scatter, bore_sensitivity : DataFrame
        Tables of `DRAWING_TABLES`: what figures need.
    inputs, stated_reaches, stated_taps, raw_readings : DataFrame
        Tables of `DRAWING_TABLES`: what was put in.
    level : float
        Coverage of the intervals, 0.95 unless asked otherwise.
    gravity : float
        Local gravity, m/s².
    friction_law_u : float
        Relative standard uncertainty of f by the friction law, for its band; NaN where not stated.
    """

    survey: Mapping[str, Any]
    assumptions: tuple[str, ...]
    cautions: tuple[str, ...]
    reaches: pd.DataFrame
    runs: pd.DataFrame
    walls: pd.DataFrame
    fittings: pd.DataFrame
    taps: pd.DataFrame
    heads: pd.DataFrame
    flags: pd.DataFrame
    budget: pd.DataFrame
    grade_lines: pd.DataFrame
    layout: pd.DataFrame
    laminar: pd.DataFrame
    reading_units: pd.DataFrame
    exponents: pd.DataFrame
    scatter: pd.DataFrame
    bore_sensitivity: pd.DataFrame
    inputs: pd.DataFrame
    stated_reaches: pd.DataFrame
    stated_taps: pd.DataFrame
    raw_readings: pd.DataFrame
    level: float
    gravity: float
    friction_law_u: float

    def __repr__(self) -> str:
        flowing = self.runs["run"][(self.runs["regime"] != "static").to_numpy(bool)].nunique()
        counts = ((flowing, "flowing run"), (len(self.walls), "wall"), (len(self.flags), "flag"))
        words = ", ".join(f"{count} {noun}{'' if count == 1 else 's'}" for count, noun in counts)
        return f"Reduction({self.survey.get('title')!r}, {words})"
