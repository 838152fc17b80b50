"""Units at the edge: text with a unit and a stated uncertainty to SI and back, and the printing of values."""

from gradeline.quantities.measured import Measured

__all__ = ["Measured"]
