"""Several surveys of one line held against each other: is the change real, how fast does the wall age, which is odd."""

from gradeline.comparison.compose import compare
from gradeline.comparison.tables import Comparison

__all__ = ["Comparison", "compare"]
