"""The one place that composes: a survey in, a reduction (a frozen set of tables) out."""

from gradeline.reduction.compose import reduce
from gradeline.reduction.tables import Reduction

__all__ = ["Reduction", "reduce"]
