"""Figures, each drawn on axes that the caller gives and returned as named artists."""

from gradeline.report.figures.ailments import BreakArtists, TapErrorArtists, draw_break, draw_tap_error
from gradeline.report.figures.grade_lines import GradeLineArtists, draw_grade_lines
from gradeline.report.figures.laws import (
    FrictionFactorArtists,
    SlopeVelocityArtists,
    draw_friction_factor,
    draw_slope_velocity,
)
from gradeline.report.figures.losses import LossArtists, draw_loss_coefficient
from gradeline.report.figures.pipe import PipeArtists, draw_pipe
from gradeline.report.figures.render import Picture, embedded, pictures
from gradeline.report.figures.residuals import ResidualArtists, draw_residuals

__all__ = [
    "BreakArtists",
    "FrictionFactorArtists",
    "GradeLineArtists",
    "LossArtists",
    "Picture",
    "PipeArtists",
    "ResidualArtists",
    "SlopeVelocityArtists",
    "TapErrorArtists",
    "draw_break",
    "draw_friction_factor",
    "draw_grade_lines",
    "draw_loss_coefficient",
    "draw_pipe",
    "draw_residuals",
    "draw_slope_velocity",
    "draw_tap_error",
    "embedded",
    "pictures",
]
