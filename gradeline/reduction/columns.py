"""The columns of the result tables: the kind and unit of each."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Literal

__all__ = [
    "FLOW",
    "METRES",
    "NUMBER",
    "RECORD_TABLES",
    "RESULT_TABLES",
    "TEXT",
    "TRUTH",
    "Column",
    "number",
]


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


def number(unit: str) -> Column:
    """Return a column of numbers with a unit.

    Parameters
    ----------
    unit : str
        SI, as printed.

    Examples
    --------
    >>> number("m/s")
    Column(kind='number', unit='m/s')
    """
    return Column("number", unit)


#: The columns that most tables have: text, boolean, a number without dimension, m, m³/s.
TEXT, TRUTH, NUMBER = Column("text"), Column("truth"), Column("number")
METRES, FLOW = number("m"), number("m3/s")

#: The tables of ``reduction.json`` and the csv files, in order, each with its columns in order.
RESULT_TABLES: Mapping[str, Mapping[str, Column]] = MappingProxyType(
    {
        "reaches": {
            "reach": TEXT,
            "wall": TEXT,
            "length": METRES,
            "diameter": METRES,
            "shared_curve_p": NUMBER,
            "reason": TEXT,
        },
        "runs": {
            "run": TEXT,
            "reach": TEXT,
            "flow": FLOW,
            "velocity": number("m/s"),
            "temperature": number("K"),
            "density": number("kg/m3"),
            "kinematic_viscosity": number("m2/s"),
            "reynolds": NUMBER,
            "regime": TEXT,
            "slope": NUMBER,
            "slope_u": NUMBER,
            "slope_u_random": NUMBER,
            "slope_dof": NUMBER,
            "slope_low": NUMBER,
            "slope_high": NUMBER,
            "friction_factor": NUMBER,
            "friction_factor_u": NUMBER,
            "friction_factor_low": NUMBER,
            "friction_factor_high": NUMBER,
            "roughness": METRES,
            "roughness_low": METRES,
            "roughness_high": METRES,
            "roughness_signed": METRES,
            "observations_used": NUMBER,
            "straightness_p": NUMBER,
            "reason": TEXT,
        },
        "walls": {
            "wall": TEXT,
            "roughness": METRES,
            "roughness_low": METRES,
            "roughness_high": METRES,
            "roughness_upper95": METRES,
            "roughness_resolved": TRUTH,
            "hydraulically_smooth": TRUTH,
            "roughness_reynolds": NUMBER,
            "law_trend": NUMBER,
            "law_trend_u": NUMBER,
            "runs_used": NUMBER,
            "hazen_williams_c": NUMBER,
            "manning_n": NUMBER,
            "reason": TEXT,
        },
        "fittings": {
            "fitting": TEXT,
            "loss_coefficient": NUMBER,
            "loss_coefficient_u": NUMBER,
            "loss_coefficient_low": NUMBER,
            "loss_coefficient_high": NUMBER,
            "equivalent_length": METRES,
            "reason": TEXT,
        },
        "taps": {
            "tap": TEXT,
            "offset": METRES,
            "offset_u": METRES,
            "edge_coefficient": NUMBER,
            "edge_coefficient_u": NUMBER,
            "diagnosis": TEXT,
            "reason": TEXT,
        },
        "heads": {
            "run": TEXT,
            "gauge": TEXT,
            "tap": TEXT,
            "tap_2": TEXT,
            "chainage": METRES,
            "head": METRES,
            "energy_head": METRES,
            "fitted_head": METRES,
            "residual": METRES,
            "standardized_residual": NUMBER,
            "used": TRUTH,
            "flag": TEXT,
            "reason": TEXT,
        },
        "flags": {
            "kind": TEXT,
            "run": TEXT,
            "tap": TEXT,
            "reading": number("m or Pa"),
            "expected": number("m or Pa"),
            "score": NUMBER,
            "suggestion": TEXT,
        },
        "budget": {
            "quantity": TEXT,
            "subject": TEXT,
            "input": TEXT,
            # m of a roughness, without dimension of S, f and K
            "contribution_u": number("1 or m"),
            "variance_share": NUMBER,
        },
    }
)

#: Tables that stand beside them where the runs come from a logger's record, each with its columns in order.
RECORD_TABLES: Mapping[str, Mapping[str, Column]] = MappingProxyType(
    {
        # the stretches of the record whose means are the runs, from its beginning; begins and ends as its file tells time;
        # the change of the flow over the window, over its mean
        "windows": {
            "run": TEXT,
            "start": number("s"),
            "end": number("s"),
            "length": number("s"),
            "begins": TEXT,
            "ends": TEXT,
            "samples": NUMBER,
            "effective_samples": NUMBER,
            "flow_drift": NUMBER,
            "flow_drift_u": NUMBER,
            "found": TRUTH,
            "reason": TEXT,
        },
        # what is wrong with the record
        "record_flags": {
            "column": TEXT,
            "kind": TEXT,
            "start": number("s"),
            "end": number("s"),
            "begins": TEXT,
            "ends": TEXT,
            "run": TEXT,
            "what": TEXT,
        },
    }
)
