"""What a reduction is: its tables, their columns, and the kind and unit of each column."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import TYPE_CHECKING, Any, Literal

import pandas as pd

from gradeline.quantities.printing import MISSING, SI_DISPLAY
from gradeline.quantities.shown import Shown, counted, rows_of, shown

if TYPE_CHECKING:
    from gradeline.reduction.fitted import FittedWall

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
        # what half the uncertainty of the input that pays most would do: an uncertainty, or an upper bound
        "improvements": {
            "quantity": _TEXT,
            "subject": _TEXT,
            "input": _TEXT,
            "value": _NUMBER,
            "u": _NUMBER,
            "u_halved": _NUMBER,
            "bound": _NUMBER,
            "bound_halved": _NUMBER,
        },
        # the rise of chi-square over the roughness of a wall; the interval and the bound are where it is at most the
        # rises given; the roughness below which the fastest run finds the wall smooth
        "likelihood": {
            "wall": _TEXT,
            "roughness": _M,
            "chi_square_rise": _NUMBER,
            "interval_rise": _NUMBER,
            "bound_rise": _NUMBER,
            "smooth_limit": _M,
            "reynolds": _NUMBER,
        },
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
        # where laminar flow ends and turbulent flow begins, between two runs each; rising and falling flows apart
        "transition": {
            "reach": _TEXT,
            "direction": _TEXT,
            "lower_from": _number("m/s"),
            "lower_to": _number("m/s"),
            "upper_from": _number("m/s"),
            "upper_to": _number("m/s"),
            "lower_reynolds_from": _NUMBER,
            "lower_reynolds_to": _NUMBER,
            "upper_reynolds_from": _NUMBER,
            "upper_reynolds_to": _NUMBER,
            "laminar_runs": _NUMBER,
            "turbulent_runs": _NUMBER,
            "reason": _TEXT,
        },
        # each law of friction at the roughness that suits it best, all on the same slopes with one covariance
        "laws": {
            "wall": _TEXT,
            "law": _TEXT,
            "roughness": _M,
            "chi_square": _NUMBER,
            "chi_square_above": _NUMBER,
            "needed": _NUMBER,
            "slopes_used": _NUMBER,
            "verdict": _TEXT,
            "fit_p": _NUMBER,
            "reason": _TEXT,
        },
        # how the slopes depart from the fitted law: a trend of ln f per decade of Re, or an intercept of S
        "departures": {
            "wall": _TEXT,
            "departure": _TEXT,
            "value": _NUMBER,
            "value_u": _NUMBER,
            "chi_square_fall": _NUMBER,
            "beyond_chance": _TRUTH,
            "reason": _TEXT,
        },
        # Hazen-Williams C (m^0.37/s) and Manning n (s/m^(1/3)) of each run
        "conveyance": {
            "run": _TEXT,
            "reach": _TEXT,
            "hazen_williams_c": _NUMBER,
            "hazen_williams_c_u": _NUMBER,
            "manning_n": _NUMBER,
            "manning_n_u": _NUMBER,
        },
        # the same at the highest flow that entered the wall's fit, and whether the formulas are meant for it
        "wall_conveyance": {
            "wall": _TEXT,
            "run": _TEXT,
            "reach": _TEXT,
            "hazen_williams_c": _NUMBER,
            "hazen_williams_c_u": _NUMBER,
            "manning_n": _NUMBER,
            "manning_n_u": _NUMBER,
            "caution": _TEXT,
        },
        # published roughness of known surfaces, nearest first
        "surfaces": {
            "wall": _TEXT,
            "surface": _TEXT,
            "low": _M,
            "high": _M,
            "source": _TEXT,
            "agrees": _TRUTH,
        },
        # the wall's roughness against what was stated of it
        "roughness_checks": {
            "wall": _TEXT,
            "against": _TEXT,
            "source": _TEXT,
            "roughness": _M,
            "roughness_u": _M,
            "verdict": _TEXT,
            "chi_square_above": _NUMBER,
            "needed": _NUMBER,
            "reason": _TEXT,
        },
        # what a tap reads more in one static run than in the one before it
        "zero_drift": {
            "tap": _TEXT,
            "run": _TEXT,
            "run_2": _TEXT,
            "drift": _M,
            "drift_u": _M,
            "beyond_chance": _TRUTH,
        },
        # what ails taps and line over all runs: of a tap its offset, its error over the velocity head and its chainage error,
        # of the line its loss over the velocity head and the change of its slope; evidence as fall of chi-square
        "ailments": {
            "what": _TEXT,
            "name": _TEXT,
            "ailment": _TEXT,
            "start": _M,
            "end": _M,
            "offset": _M,
            "offset_u": _M,
            "edge_coefficient": _NUMBER,
            "edge_coefficient_u": _NUMBER,
            "chainage_error": _M,
            "chainage_error_u": _M,
            "loss_coefficient": _NUMBER,
            "loss_coefficient_u": _NUMBER,
            "slope_change": _NUMBER,
            "slope_change_u": _NUMBER,
            "evidence": _NUMBER,
            "rival": _NUMBER,
            "fate": _TEXT,
        },
        # the error of each ailing tap or gauge in every run, the head that it should show, and what each pattern gives
        "ailment_runs": {
            "name": _TEXT,
            "run": _TEXT,
            "velocity_head": _M,
            "slope": _NUMBER,
            "expected": _M,
            "error": _M,
            "error_u": _M,
            "by_offset": _M,
            "by_edge": _M,
            "by_chainage": _M,
        },
        # energy heads above the line carried on from upstream of what nobody listed, and the fitted line: over the velocity
        # head for a loss (dimensionless), over S for a change of slope (m); numbered as the rows of the line in ailments
        "break_heads": {
            "number": _NUMBER,
            "run": _TEXT,
            "tap": _TEXT,
            "chainage": _M,
            "departure": _NUMBER,
            "fitted": _NUMBER,
            "used": _TRUTH,
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
        # the slips of the pen that fit behind each flag, in the unit of the file; the named ones are worth a word
        "slips": {
            "flag": _TEXT,
            "run": _TEXT,
            "tap": _TEXT,
            "kind": _TEXT,
            "written": _NUMBER,
            "repaired": _NUMBER,
            "expected": _NUMBER,
            "expected_u": _NUMBER,
            "score": _NUMBER,
            "chance": _NUMBER,
            "unit": _TEXT,
            "named": _TRUTH,
            "words": _TEXT,
        },
        # the wall's roughness if the bore were a little different
        "bore_sensitivity": {
            "wall": _TEXT,
            "diameter_change": _NUMBER,
            "friction_factor_change": _NUMBER,
            "roughness": _M,
        },
        # what stands beside each fitted K: usable taps on either side, the published value of its kind, the trend over Re
        "losses": {
            "fitting": _TEXT,
            "kind": _TEXT,
            "length": _M,
            "runs_used": _NUMBER,
            "taps_upstream": _NUMBER,
            "taps_downstream": _NUMBER,
            "reynolds": _NUMBER,
            "equivalent_length_u": _M,
            "published": _NUMBER,
            "published_low": _NUMBER,
            "published_high": _NUMBER,
            "published_for": _TEXT,
            "source": _TEXT,
            "verdict": _TEXT,
            "trend": _NUMBER,
            "trend_u": _NUMBER,
            "trend_p": _NUMBER,
            "depends_on_reynolds": _TRUTH,
            "note": _TEXT,
        },
        # K of each flowing run; u with the shared errors
        "loss_runs": {
            "run": _TEXT,
            "fitting": _TEXT,
            "reynolds": _NUMBER,
            "loss_coefficient": _NUMBER,
            "loss_coefficient_u": _NUMBER,
            "used": _TRUTH,
            "reason": _TEXT,
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


def _empty(table: str) -> pd.DataFrame:
    """A table of `DRAWING_TABLES` without rows."""
    kinds = {"text": "object", "number": "float", "truth": "boolean"}
    return pd.DataFrame(
        {name: pd.Series([], dtype=kinds[column.kind]) for name, column in DRAWING_TABLES[table].items()}
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
    grade_lines, layout, laminar, reading_units, exponents, ailments, scatter, bore_sensitivity, losses, loss_runs : DataFrame
        Tables of `DRAWING_TABLES`: what figures need.
    inputs, stated_reaches, stated_taps, raw_readings : DataFrame
        Tables of `DRAWING_TABLES`: what was put in.
    level : float
        Coverage of the intervals, 0.95 unless asked otherwise.
    gravity : float
        Local gravity, m/s².
    friction_law_u : float
        Relative standard uncertainty of f by the friction law, for its band; NaN where not stated.
    transition, laws, departures, conveyance, wall_conveyance, surfaces, roughness_checks, zero_drift : DataFrame
        Tables of `DRAWING_TABLES`: the runs read as a hydraulics laboratory would.
    slips : DataFrame
        Table of `DRAWING_TABLES`: slips of the pen that would explain a flag.
    ailment_runs, break_heads : DataFrame
        Tables of `DRAWING_TABLES`: what ails taps and line, run by run.
    improvements, likelihood : DataFrame
        Tables of `DRAWING_TABLES`: what better inputs would do, and the likelihood of each wall's roughness.
    carried : mapping
        What `gradeline.predict` needs beside the tables: as it stands in ``carried.json``.
    fitted_walls : tuple of FittedWall
        What was fitted to each wall and its shared errors, in memory only: what `gradeline.compare` works from.
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
    losses: pd.DataFrame
    loss_runs: pd.DataFrame
    ailments: pd.DataFrame
    inputs: pd.DataFrame
    stated_reaches: pd.DataFrame
    stated_taps: pd.DataFrame
    raw_readings: pd.DataFrame
    level: float
    gravity: float
    friction_law_u: float
    transition: pd.DataFrame = field(default_factory=lambda: _empty("transition"))
    laws: pd.DataFrame = field(default_factory=lambda: _empty("laws"))
    departures: pd.DataFrame = field(default_factory=lambda: _empty("departures"))
    conveyance: pd.DataFrame = field(default_factory=lambda: _empty("conveyance"))
    wall_conveyance: pd.DataFrame = field(default_factory=lambda: _empty("wall_conveyance"))
    surfaces: pd.DataFrame = field(default_factory=lambda: _empty("surfaces"))
    roughness_checks: pd.DataFrame = field(default_factory=lambda: _empty("roughness_checks"))
    zero_drift: pd.DataFrame = field(default_factory=lambda: _empty("zero_drift"))
    slips: pd.DataFrame = field(default_factory=lambda: _empty("slips"))
    ailment_runs: pd.DataFrame = field(default_factory=lambda: _empty("ailment_runs"))
    break_heads: pd.DataFrame = field(default_factory=lambda: _empty("break_heads"))
    improvements: pd.DataFrame = field(default_factory=lambda: _empty("improvements"))
    likelihood: pd.DataFrame = field(default_factory=lambda: _empty("likelihood"))
    carried: Mapping[str, Any] = field(default_factory=dict)
    fitted_walls: tuple[FittedWall, ...] = ()

    def __repr__(self) -> str:
        flowing = self.runs["run"][(self.runs["regime"] != "static").to_numpy(bool)].nunique()
        counts = ((flowing, "flowing run"), (len(self.walls), "wall"), (len(self.flags), "flag"))
        words = ", ".join(f"{count} {noun}{'' if count == 1 else 's'}" for count, noun in counts)
        return f"Reduction({self.survey.get('title')!r}, {words})"

    def _repr_html_(self) -> str:
        """Show the runs, and the roughness of each wall above them, for notebooks."""
        date = self.survey.get("date")
        flowing = self.runs["run"][(self.runs["regime"] != "static").to_numpy(bool)].nunique()
        lines = [
            counted((flowing, "flowing run"), (len(self.flags), "flag"), (len(self.cautions), "caution"))
        ]
        for wall in rows_of(self.walls):
            span = SI_DISPLAY.interval("roughness", wall["roughness_low"], wall["roughness_high"], unit=True)
            told = span if span != MISSING else wall["reason"] or "not told"
            lines.append(f"{wall['wall']}: roughness {100 * self.level:.4g} % interval {told}")
        return shown(
            f"{self.survey.get('title') or 'Survey'}{f', {date}' if date else ''}",
            lines,
            self.runs,
            (
                Shown("run", "run"),
                *([Shown("reach", "reach")] if len(self.reaches) > 1 else []),
                Shown("flow", "flow", "flow"),
                Shown("Re", "reynolds", "reynolds"),
                Shown("regime", "regime"),
                Shown("S", "slope", "slope"),
                Shown("f", "friction_factor", "number"),
            ),
        )
