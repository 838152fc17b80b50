"""Figures, each drawn on axes that the caller gives and returned as named artists."""

from gradeline.report.figures.grade_lines import GradeLineArtists, draw_grade_lines
from gradeline.report.figures.laws import (
    FrictionFactorArtists,
    SlopeVelocityArtists,
    draw_friction_factor,
    draw_slope_velocity,
)
from gradeline.report.figures.pipe import PipeArtists, draw_pipe
from gradeline.report.figures.render import Picture, embedded, pictures
from gradeline.report.figures.residuals import ResidualArtists, draw_residuals

__all__ = [
    "FrictionFactorArtists",
    "GradeLineArtists",
    "Picture",
    "PipeArtists",
    "ResidualArtists",
    "SlopeVelocityArtists",
    "draw_friction_factor",
    "draw_grade_lines",
    "draw_pipe",
    "draw_residuals",
    "draw_slope_velocity",
    "embedded",
    "pictures",
]
