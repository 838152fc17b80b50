"""The tables of a reduction, filled from what the fits say."""

from gradeline.reduction.tabulate.ailments import ailment_run_table, break_head_table
from gradeline.reduction.tabulate.budget import budget_table, improvement_table, likelihood_table
from gradeline.reduction.tabulate.drawing import (
    ailment_table,
    exponent_table,
    grade_line_table,
    laminar_table,
    layout_table,
    reading_unit_table,
)
from gradeline.reduction.tabulate.frames import frame
from gradeline.reduction.tabulate.inputs import (
    input_table,
    raw_reading_table,
    stated_reach_table,
    stated_tap_table,
)
from gradeline.reduction.tabulate.losses import fitting_table, loss_run_table, loss_table
from gradeline.reduction.tabulate.readings import head_table, scatter_table, tap_table
from gradeline.reduction.tabulate.record import (
    record_facts,
    record_flag_table,
    record_trace_table,
    window_table,
)
from gradeline.reduction.tabulate.runs import reach_table, run_table
from gradeline.reduction.tabulate.walls import bore_table, wall_table

__all__ = [
    "ailment_run_table",
    "ailment_table",
    "bore_table",
    "break_head_table",
    "budget_table",
    "exponent_table",
    "fitting_table",
    "frame",
    "grade_line_table",
    "head_table",
    "improvement_table",
    "input_table",
    "laminar_table",
    "layout_table",
    "likelihood_table",
    "loss_run_table",
    "loss_table",
    "raw_reading_table",
    "reach_table",
    "reading_unit_table",
    "record_facts",
    "record_flag_table",
    "record_trace_table",
    "run_table",
    "scatter_table",
    "stated_reach_table",
    "stated_tap_table",
    "tap_table",
    "wall_table",
    "window_table",
]
