"""Limbs of two bores: the surface tension is known of water under a gas, and asked for otherwise."""

from __future__ import annotations

import numpy as np
import pytest

import gradeline
from gradeline.errors import SurveyError
from gradeline.reduction.heads import heads_of
from gradeline.reduction.media import media_of
from tests.gauges.conftest import GRAVITY, RHO
from tests.gauges.test_reduction import ENDS, FALL, UTUBE

INVERTED = UTUBE.replace('"u-tube"', '"inverted u-tube"')
BORES = 'left_bore = "3 mm"\nright_bore = "6 mm"\n'
OIL = INVERTED.replace("mercury", "kerosene") + 'gauge_fluid_density = "800 kg/m^3"\n' + BORES
COLUMN = {"m1 [m]": FALL * RHO / (RHO - 800.0)}


def observed(folder):
    survey = gradeline.read_survey(folder)
    return heads_of(survey, media_of(survey)).observed[:, 0]


def test_an_oil_over_unequal_bores_needs_its_surface_tension(bench):
    with pytest.raises(SurveyError) as caught:
        gradeline.read_survey(bench(OIL, COLUMN, ENDS))
    assert [str(problem) for problem in caught.value.problems] == [
        "survey.toml gauge.m1.left_bore: with unequal bores the capillary rises do not cancel, and the surface tension between "
        'water and kerosene is not known; add it, such as surface_tension = "0.03 N/m"'
    ]


def test_with_its_surface_tension_the_oils_capillary_rise_is_taken_off(bench):
    """Jurin by hand: 4 x 0.048 / ((998.9 - 800) x 9.80665) (1/3 mm - 1/6 mm) is the reading's excess, 16.4 mm."""
    told = OIL + 'surface_tension = "0.048 N/m"\n'
    excess = 4 * 0.048 / ((RHO - 800.0) * GRAVITY) * (1 / 0.003 - 1 / 0.006)
    assert excess == pytest.approx(0.0164, abs=5e-5)
    expected = FALL - (RHO - 800.0) / RHO * excess
    assert observed(bench(told, COLUMN, ENDS)) == pytest.approx(expected, abs=2e-7)


def test_equal_bores_cancel_and_need_none(bench):
    equal = OIL.replace('"6 mm"', '"3 mm"')
    assert observed(bench(equal, COLUMN, ENDS)) == pytest.approx(FALL, abs=1e-7)


@pytest.mark.parametrize(
    "fluid",
    ["air", 'nitrogen"\ngauge_fluid_density = "1.17 kg/m^3'],
)
def test_water_under_a_gas_has_a_known_tension(bench, fluid):
    """Water at 14.85 degC: 0.0735 N/m (IAPWS table, from memory); 4 x 0.0735/(998 x 9.807) x 166.7/m is 5.0 mm."""
    gauge = INVERTED.replace("mercury", fluid) + BORES
    excess = 4 * 0.0735 / ((RHO - 1.2) * GRAVITY) * (1 / 0.003 - 1 / 0.006)
    found = observed(bench(gauge, {"m1 [m]": FALL * RHO / (RHO - 1.2)}, ENDS))
    assert found - FALL == pytest.approx(np.full(FALL.shape, -excess), abs=1e-4)


def test_a_line_of_another_liquid_needs_it_too(bench):
    gauge = INVERTED.replace("mercury", "air") + BORES + 'line_fluid = "mercury"\n'
    with pytest.raises(SurveyError) as caught:
        gradeline.read_survey(bench(gauge, {"m1 [m]": FALL}, ENDS))
    assert any(
        "the surface tension between mercury and air is not known" in str(problem)
        for problem in caught.value.problems
    )
