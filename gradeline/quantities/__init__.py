"""Units at the edge: text with a unit and a stated uncertainty to SI and back, and the printing of values."""

from gradeline.quantities.measured import Measured
from gradeline.quantities.parsing import parse_number, parse_quantity, parse_uncertainty
from gradeline.quantities.printing import Display, format_change, format_interval, rounded
from gradeline.quantities.units import DIMENSIONS, Dimension, Unit, parse_unit

__all__ = [
    "DIMENSIONS",
    "Dimension",
    "Display",
    "Measured",
    "Unit",
    "format_change",
    "format_interval",
    "parse_number",
    "parse_quantity",
    "parse_uncertainty",
    "parse_unit",
    "rounded",
]
