"""The units that are written out, held against the library that reads all others."""

import pytest

from gradeline.quantities import units
from gradeline.quantities.units import parse_unit


@pytest.mark.parametrize(
    ("text", "dimension"),
    [("degC", "temperature")] + [(text, name) for name, known in units._COMMON.items() for text in known],
)
def test_the_units_written_out_are_those_of_pint(text, dimension):
    assert parse_unit(text, dimension) == units._by_pint(text, dimension)
