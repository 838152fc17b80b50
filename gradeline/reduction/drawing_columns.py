"""The columns of the tables that stand beside the results: what figures, page and record need."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

from gradeline.reduction.columns import METRES, NUMBER, TEXT, TRUTH, Column, number

__all__ = ["DRAWING_TABLES"]

#: What the figures and the page need beside the result tables. Not part of ``reduction.json``.
DRAWING_TABLES: Mapping[str, Mapping[str, Column]] = MappingProxyType(
    {
        # the fitted lines of each run at every place where they bend, and between
        "grade_lines": {
            "run": TEXT,
            "chainage": METRES,
            "energy_head": METRES,
            "energy_head_u": METRES,
            "piezometric_head": METRES,
            "velocity_head": METRES,
            "elevation": METRES,
            "crown": METRES,
        },
        # taps in order, with the pipe's axis and where their gauge refers
        "layout": {"what": TEXT, "name": TEXT, "chainage": METRES, "elevation": METRES, "note": TEXT},
        # f Re / 64 of the laminar runs: 1 for the true bore and flow
        "laminar": {"run": TEXT, "reach": TEXT, "ratio": NUMBER, "ratio_u": NUMBER, "constant": NUMBER},
        # what half the uncertainty of the input that pays most would do: an uncertainty, or an upper bound
        "improvements": {
            "quantity": TEXT,
            "subject": TEXT,
            "input": TEXT,
            "value": NUMBER,
            "u": NUMBER,
            "u_halved": NUMBER,
            "bound": NUMBER,
            "bound_halved": NUMBER,
        },
        # the rise of chi-square over the roughness of a wall; the interval and the bound are where it is at most the
        # rises given; the roughness below which the fastest run finds the wall smooth
        "likelihood": {
            "wall": TEXT,
            "roughness": METRES,
            "chi_square_rise": NUMBER,
            "interval_rise": NUMBER,
            "bound_rise": NUMBER,
            "smooth_limit": METRES,
            "reynolds": NUMBER,
        },
        # the unit in which each column of readings was read, and how many SI units it has
        "reading_units": {
            "tap": TEXT,
            "gauge": TEXT,
            "kind": TEXT,
            "dimension": TEXT,
            "unit": TEXT,
            "si_per_unit": NUMBER,
        },
        # S proportional to V^n, per reach and regime
        "exponents": {
            "reach": TEXT,
            "regime": TEXT,
            "exponent": NUMBER,
            "exponent_u": NUMBER,
            "exponent_low": NUMBER,
            "exponent_high": NUMBER,
            "runs_used": NUMBER,
            "reason": TEXT,
        },
        # where laminar flow ends and turbulent flow begins, between two runs each; rising and falling flows apart
        "transition": {
            "reach": TEXT,
            "direction": TEXT,
            "lower_from": number("m/s"),
            "lower_to": number("m/s"),
            "upper_from": number("m/s"),
            "upper_to": number("m/s"),
            "lower_reynolds_from": NUMBER,
            "lower_reynolds_to": NUMBER,
            "upper_reynolds_from": NUMBER,
            "upper_reynolds_to": NUMBER,
            "laminar_runs": NUMBER,
            "turbulent_runs": NUMBER,
            "reason": TEXT,
        },
        # each law of friction at the roughness that suits it best, all on the same slopes with one covariance
        "laws": {
            "wall": TEXT,
            "law": TEXT,
            "roughness": METRES,
            "chi_square": NUMBER,
            "chi_square_above": NUMBER,
            "needed": NUMBER,
            "slopes_used": NUMBER,
            "verdict": TEXT,
            "fit_p": NUMBER,
            "reason": TEXT,
        },
        # how the slopes depart from the fitted law: a trend of ln f per decade of Re, or an intercept of S
        "departures": {
            "wall": TEXT,
            "departure": TEXT,
            "value": NUMBER,
            "value_u": NUMBER,
            "chi_square_fall": NUMBER,
            "beyond_chance": TRUTH,
            "reason": TEXT,
        },
        # Hazen-Williams C (m^0.37/s) and Manning n (s/m^(1/3)) of each run
        "conveyance": {
            "run": TEXT,
            "reach": TEXT,
            "hazen_williams_c": NUMBER,
            "hazen_williams_c_u": NUMBER,
            "manning_n": NUMBER,
            "manning_n_u": NUMBER,
        },
        # the same at the highest flow that entered the wall's fit, and whether the formulas are meant for it
        "wall_conveyance": {
            "wall": TEXT,
            "run": TEXT,
            "reach": TEXT,
            "hazen_williams_c": NUMBER,
            "hazen_williams_c_u": NUMBER,
            "manning_n": NUMBER,
            "manning_n_u": NUMBER,
            "caution": TEXT,
        },
        # published roughness of known surfaces, nearest first
        "surfaces": {
            "wall": TEXT,
            "surface": TEXT,
            "low": METRES,
            "high": METRES,
            "source": TEXT,
            "agrees": TRUTH,
        },
        # the wall's roughness against what was stated of it
        "roughness_checks": {
            "wall": TEXT,
            "against": TEXT,
            "source": TEXT,
            "roughness": METRES,
            "roughness_u": METRES,
            "verdict": TEXT,
            "chi_square_above": NUMBER,
            "needed": NUMBER,
            "reason": TEXT,
        },
        # what a tap reads more in one static run than in the one before it
        "zero_drift": {
            "tap": TEXT,
            "run": TEXT,
            "run_2": TEXT,
            "drift": METRES,
            "drift_u": METRES,
            "beyond_chance": TRUTH,
        },
        # what ails taps and line over all runs: of a tap its offset, its error over the velocity head and its chainage error,
        # of the line its loss over the velocity head and the change of its slope; evidence as fall of chi-square
        "ailments": {
            "what": TEXT,
            "name": TEXT,
            "ailment": TEXT,
            "start": METRES,
            "end": METRES,
            "offset": METRES,
            "offset_u": METRES,
            "edge_coefficient": NUMBER,
            "edge_coefficient_u": NUMBER,
            "chainage_error": METRES,
            "chainage_error_u": METRES,
            "loss_coefficient": NUMBER,
            "loss_coefficient_u": NUMBER,
            "slope_change": NUMBER,
            "slope_change_u": NUMBER,
            "evidence": NUMBER,
            "rival": NUMBER,
            "fate": TEXT,
        },
        # the error of each ailing tap or gauge in every run, the head that it should show, and what each pattern gives
        "ailment_runs": {
            "name": TEXT,
            "run": TEXT,
            "velocity_head": METRES,
            "slope": NUMBER,
            "expected": METRES,
            "error": METRES,
            "error_u": METRES,
            "by_offset": METRES,
            "by_edge": METRES,
            "by_chainage": METRES,
        },
        # energy heads above the line carried on from upstream of what nobody listed, and the fitted line: over the velocity
        # head for a loss (dimensionless), over S for a change of slope (m); numbered as the rows of the line in ailments
        "break_heads": {
            "number": NUMBER,
            "run": TEXT,
            "tap": TEXT,
            "chainage": METRES,
            "departure": NUMBER,
            "fitted": NUMBER,
            "used": TRUTH,
        },
        # how the readings of each gauge scatter: sigma^2 = base^2 + (surge V^2/2g)^2
        "scatter": {
            "gauge": TEXT,
            "base": METRES,
            "surge": NUMBER,
            "stated": METRES,
            "dof": NUMBER,
            "note": TEXT,
        },
        # the slips of the pen that fit behind each flag, in the unit of the file; the named ones are worth a word
        "slips": {
            "flag": TEXT,
            "run": TEXT,
            "tap": TEXT,
            "kind": TEXT,
            "written": NUMBER,
            "repaired": NUMBER,
            "expected": NUMBER,
            "expected_u": NUMBER,
            "score": NUMBER,
            "chance": NUMBER,
            "unit": TEXT,
            "named": TRUTH,
            "words": TEXT,
        },
        # the wall's roughness if the bore were a little different
        "bore_sensitivity": {
            "wall": TEXT,
            "diameter_change": NUMBER,
            "friction_factor_change": NUMBER,
            "roughness": METRES,
        },
        # what stands beside each fitted K: usable taps on either side, the published value of its kind, the trend over Re
        "losses": {
            "fitting": TEXT,
            "kind": TEXT,
            "length": METRES,
            "runs_used": NUMBER,
            "taps_upstream": NUMBER,
            "taps_downstream": NUMBER,
            "reynolds": NUMBER,
            "equivalent_length_u": METRES,
            "published": NUMBER,
            "published_low": NUMBER,
            "published_high": NUMBER,
            "published_for": TEXT,
            "source": TEXT,
            "verdict": TEXT,
            "trend": NUMBER,
            "trend_u": NUMBER,
            "trend_p": NUMBER,
            "depends_on_reynolds": TRUTH,
            "note": TEXT,
        },
        # K of each flowing run; u with the shared errors
        "loss_runs": {
            "run": TEXT,
            "fitting": TEXT,
            "reynolds": NUMBER,
            "loss_coefficient": NUMBER,
            "loss_coefficient_u": NUMBER,
            "used": TRUTH,
            "reason": TEXT,
        },
        # what the survey and the caller stated, group by group; `quantity` names the kind of the value (SI), a value
        # that nobody stated is missing, and `text` stands for what is no number
        "inputs": {
            "group": TEXT,
            "name": TEXT,
            "what": TEXT,
            "text": TEXT,
            "quantity": TEXT,
            "value": NUMBER,
            "value_u": NUMBER,
        },
        "stated_reaches": {
            "reach": TEXT,
            "start": METRES,
            "end": METRES,
            "diameter": METRES,
            "diameter_u": METRES,
            "wall": TEXT,
        },
        "stated_taps": {
            "tap": TEXT,
            "chainage": METRES,
            "chainage_u": METRES,
            "elevation": METRES,
            "elevation_u": METRES,
            "gauge": TEXT,
            "gauge_elevation": METRES,
            "reading_u": number("m or Pa"),
        },
        # one row a run and observation, as read
        "raw_readings": {"run": TEXT, "tap": TEXT, "reading": number("m or Pa"), "repeats": NUMBER},
        # a logger's record, thinned for drawing: from the least to the greatest sample of each stretch, in the file's unit
        "record_trace": {
            "column": TEXT,
            "role": TEXT,
            "unit": TEXT,
            "time": number("s"),
            "low": NUMBER,
            "mean": NUMBER,
            "high": NUMBER,
        },
    }
)
