"""Fluids other than water: their formulas against tables, and their uncertainties on the way to the results."""

from dataclasses import replace

import numpy as np
import pytest

from gradeline.hydraulics.fluid import water_density
from gradeline.hydraulics.viscosity import (
    air_viscosity,
    expanded_density,
    interpolated_properties,
    two_point_viscosity,
)
from gradeline.quantities import Measured
from gradeline.reduction.fluids import flowing_properties, fluid_inputs
from gradeline.survey import Fluid, PropertyTable

# Unused engine oil, K and 1e-6 m²/s: Incropera and DeWitt, Fundamentals of Heat and Mass Transfer, table A.5 (from
# memory).
ENGINE_OIL = {
    300: 550,
    310: 288,
    320: 161,
    330: 96.6,
    340: 61.7,
    350: 41.7,
    360: 29.7,
    370: 22.0,
    380: 16.9,
    390: 13.3,
}


def test_two_viscosities_tell_those_between_them():
    kelvin, nu = np.array(list(ENGINE_OIL)), np.array(list(ENGINE_OIL.values())) * 1e-6
    found = two_point_viscosity(kelvin, 310.0, 288e-6, 390.0, 13.3e-6)
    # The table is itself smoothed from old measurements; a straight line of ln ν over T would be 48 % off at 350 K.
    np.testing.assert_allclose(found, nu, rtol=0.04)


def test_both_given_viscosities_are_met_whichever_comes_first():
    at = [283.15, 353.15]
    thin = two_point_viscosity(
        at, 283.15, 1.5e-6, 353.15, 0.4e-6
    )  # below 2 mm²/s the exponential term counts
    np.testing.assert_allclose(thin, [1.5e-6, 0.4e-6], rtol=1e-12)
    turned = two_point_viscosity(300.0, 353.15, 0.4e-6, 283.15, 1.5e-6)
    np.testing.assert_allclose(turned, two_point_viscosity(300.0, 283.15, 1.5e-6, 353.15, 0.4e-6), rtol=1e-12)


@pytest.mark.parametrize(
    ("arguments", "told"),
    [
        ((300.0, 310.0, 46e-6, 370.0, 50e-6), "the warmer one must be the smaller"),
        ((300.0, 310.0, 46e-6, 310.0, 46e-6), "the warmer one must be the smaller"),
        ((-1.0, 310.0, 46e-6, 370.0, 7e-6), "must be above 0 K: -1"),
        ((300.0, 310.0, 46e-6, 370.0, 1e-8), "lies outside 2.1e-7 to 20 m2/s: 1e-08"),
    ],
)
def test_two_viscosities_that_are_none(arguments, told):
    with pytest.raises(ValueError, match=told):
        two_point_viscosity(*arguments)


def test_viscosity_of_air_is_that_of_tables():
    # 288.15 K: U.S. Standard Atmosphere 1976, 1.7894e-5 Pa s; 300 and 350 K: Incropera table A.4, 184.6 and 208.2e-7
    # (all from memory).
    np.testing.assert_allclose(
        air_viscosity([288.15, 300.0, 350.0]), [1.7894e-5, 1.846e-5, 2.082e-5], rtol=5e-3
    )
    assert float(air_viscosity(288.15)) == pytest.approx(1.7894e-5, rel=3e-5)


def test_air_at_the_pressure_of_the_line():
    # CHECKS F8: 22.3 °C, 748.1 mmHg, 37 %: 1.17194 by Jones 1978, 1.17200 by CIPM-2007 (argon revision).
    air = Fluid("air", line_pressure=Measured(748.1 * 133.322387), humidity=0.37)
    density, viscosity = flowing_properties(air, np.array([295.45]))
    assert density[0] == pytest.approx(1.17200, abs=2e-5)
    assert viscosity[0] * density[0] == pytest.approx(float(air_viscosity(295.45)))
    # Density goes as the pressure, ν against it, but for the vapour and 5e-5 of compressibility.
    double = Fluid("air", line_pressure=Measured(2 * 748.1 * 133.322387), humidity=0.0)
    dry = Fluid("air", line_pressure=Measured(748.1 * 133.322387), humidity=0.0)
    ratio = flowing_properties(double, np.array([295.45]))[0] / flowing_properties(dry, np.array([295.45]))[0]
    assert ratio[0] == pytest.approx(2.0, rel=1e-3)


def test_a_table_of_water_gives_water():
    # IAPWS-95 every 5 K as a table of a liquid, CHECKS W3 between its entries: 22.5 °C is none of its rows.
    celsius = np.arange(0.5, 60, 5.0)
    density, viscosity = water_density(celsius + 273.15), 1.79e-6 * np.exp(-0.025 * celsius)
    rho, nu = interpolated_properties(np.array([22.5, 25.0]) + 273.15, celsius + 273.15, density, viscosity)
    assert rho[1] == pytest.approx(997.04764, rel=1e-5)
    np.testing.assert_allclose(nu, 1.79e-6 * np.exp(-0.025 * np.array([22.5, 25.0])), rtol=1e-9)


def test_a_table_makes_no_wave():
    at, nu = [280.0, 290.0, 300.0, 310.0], [100e-6, 99e-6, 20e-6, 19e-6]
    _, found = interpolated_properties(np.linspace(280, 310, 301), at, [880, 874, 868, 862], nu)
    assert (np.diff(found) <= 0).all()
    with pytest.raises(ValueError, match=r"the temperature lies outside the table, 280 to 310 K: 310\.1"):
        interpolated_properties(310.1, at, [880, 874, 868, 862], nu)


def test_expansion_is_that_of_water_over_a_short_span():
    # CHECKS W3: 25 °C 997.04764, 30 °C 995.64945 kg/m³: β is the ratio less one, over 5 K.
    beta = (997.04764 / 995.64945 - 1) / 5
    assert expanded_density(303.15, 997.04764, 298.15, beta) == pytest.approx(995.64945)


OILS = {
    "two viscosities": Fluid(
        "oil",
        Measured(868.0, 1.0),
        viscosity_at=((313.15, Measured(46e-6, 0.5e-6)), (373.15, Measured(6.8e-6, 0.1e-6))),
        density_temperature=288.15,
        expansion=Measured(7e-4, 3e-5),
    ),
    "air": Fluid("air", line_pressure=Measured(105e3, 300.0)),
    "table": Fluid(
        "oil", table=PropertyTable("oil.csv", (280.0, 320.0), (880.0, 860.0), (9e-5, 2e-5), 0.002, 0.01)
    ),
    "dynamic": Fluid("oil", Measured(868.0, 2.0), Measured(0.031, 0.001)),
}


def _shifted(fluid, name, subject):
    """The fluid with one stated input one standard uncertainty higher."""
    if name == "line pressure":
        return replace(fluid, line_pressure=Measured(105e3 + 300.0))
    if name == "expansion":
        return replace(fluid, expansion=Measured(7e-4 + 3e-5))
    if subject == "oil.csv":
        table = fluid.table
        scale = 1 + (table.density_u if name == "density" else table.viscosity_u)
        key = "density" if name == "density" else "kinematic_viscosity"
        return replace(fluid, table=replace(table, **{key: tuple(scale * v for v in getattr(table, key))}))
    if name == "density":
        return replace(fluid, density=Measured(fluid.density.value + fluid.density.u))
    if fluid.viscosity is not None:
        return replace(fluid, viscosity=Measured(fluid.viscosity.value + fluid.viscosity.u))
    points = tuple(
        (at, Measured(value.value + value.u) if subject.startswith(f"{at - 273.15:g}") else value)
        for at, value in fluid.viscosity_at
    )
    return replace(fluid, viscosity_at=points)


@pytest.mark.parametrize("fluid", OILS.values(), ids=OILS.keys())
def test_each_stated_uncertainty_moves_density_and_viscosity_as_its_input_does(fluid):
    temperature = np.array([290.0, 305.0])
    inputs = fluid_inputs(fluid, temperature)
    assert inputs
    before = flowing_properties(fluid, temperature)
    for one in inputs:
        after = flowing_properties(_shifted(fluid, one.name, one.subject), temperature)
        for new, old, told in zip(after, before, (one.density, one.viscosity), strict=True):
            np.testing.assert_allclose(np.log(new / old), told, rtol=0.03, atol=2e-7)
