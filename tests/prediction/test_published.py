"""Worked examples of textbooks, the properties and the roughness taken as they give them."""

from __future__ import annotations

import numpy as np
import pytest

from gradeline.hydraulics.friction import relative_roughness
from gradeline.prediction import predict
from tests.prediction.made import FOOT, INCH, made_line


def test_head_loss_of_a_stainless_pipe() -> None:
    """Çengel and Cimbala, Fluid Mechanics, ex. 8-3: 96.5 kPa, 9.85 m and 579 W with f = 0.0172 off the chart (0.4 %)."""
    line = made_line(diameter=0.05, length=60.0, density=999.0, kinematic_viscosity=1.138e-3 / 999.0)
    found = predict(line, flow="6 L/s", roughness="0.002 mm")
    row, whole = found.reaches.iloc[0], found.flows.iloc[0]
    assert row["velocity"] == pytest.approx(3.06, abs=0.005)
    assert row["friction_factor"] == pytest.approx(0.0172, abs=5e-5)
    assert whole["head_loss"] == pytest.approx(9.85, rel=4e-3)
    assert 999.0 * 9.81 * whole["head_loss"] == pytest.approx(96.5e3, rel=4e-3)
    assert whole["pump_power"] == pytest.approx(579.0, rel=4e-3)


def test_laminar_glycerin() -> None:
    """Çengel and Cimbala, ex. 8-1: Re 489, 1291 kPa, 4.87 kW at a mean velocity of 3 m/s (half the 6 m/s at the axis)."""
    line = made_line(diameter=0.04, length=70.0, density=1252.0, kinematic_viscosity=0.3073 / 1252.0)
    found = predict(line, flow=[3.0 * np.pi / 4 * 0.04**2])
    row = found.reaches.iloc[0]
    assert row["regime"] == "laminar"
    assert row["reynolds"] == pytest.approx(489, abs=0.5)
    assert 1252.0 * 9.81 * row["head_loss"] == pytest.approx(1291e3, abs=0.5e3)
    assert found.flows["pump_power"].iloc[0] == pytest.approx(4.87e3, abs=5.0)


@pytest.mark.parametrize(
    ("roughness", "factor", "loss", "tolerance"),
    [(0.002 * 3 * INCH, 0.0255, 8.6, 0.05), (0.0, 0.316 / 80000**0.25, 6.35, 0.06)],
)
def test_smooth_against_rough(roughness: float, factor: float, loss: float, tolerance: float) -> None:
    """Vennard and Street, ex. 9.2 and 9.3: Re 80 000 in 3 in, 1000 ft: 8.6 ft at ε/D = 0.002, 6.35 ft smooth.

    Smooth they take Blasius' law, which lies within 1 % of Prandtl's at this Re.
    """
    bore, viscosity = 3 * INCH, 0.729e-5 * FOOT**2
    line = made_line(
        diameter=bore, length=1000 * FOOT, density=1000.0, kinematic_viscosity=viscosity, gravity=32.2 * FOOT
    )
    flow = 80000 * viscosity / bore * np.pi / 4 * bore**2
    found = predict(line, flow=[flow], roughness=roughness)
    assert found.reaches["friction_factor"].iloc[0] == pytest.approx(factor, rel=1e-2)
    assert found.flows["head_loss"].iloc[0] / FOOT == pytest.approx(loss, abs=tolerance)


def test_ninety_gallons_a_minute() -> None:
    """Vennard and Street, ex. 9.6: 90 US gal/min through 3000 ft of smooth 3 in at f = 0.018 off the chart: 56.0 ft.

    The smooth law has 0.0182 there.
    """
    bore, viscosity = 3 * INCH, 1.0e-6
    line = made_line(
        diameter=bore, length=3000 * FOOT, density=1000.0, kinematic_viscosity=viscosity, gravity=32.2 * FOOT
    )
    row = predict(line, flow="90 US_gal/min", roughness=0.0).reaches.iloc[0]
    assert row["friction_factor"] == pytest.approx(0.018, rel=0.015)
    assert row["head_loss"] / FOOT * 0.018 / row["friction_factor"] == pytest.approx(56.0, abs=0.05)


def test_friction_factor_from_a_measured_loss_and_back() -> None:
    """Vennard and Street, ex. 9.1: 17.5 ft over 100 ft of 6 in at 15 ft/s means f = 0.025."""
    bore, viscosity = 6 * INCH, 1.0e-6
    line = made_line(
        diameter=bore, length=100 * FOOT, density=1000.0, kinematic_viscosity=viscosity, gravity=32.2 * FOOT
    )
    velocity = 15 * FOOT
    rough = float(relative_roughness(0.02504, velocity * bore / viscosity)) * bore
    found = predict(line, flow=[velocity * np.pi / 4 * bore**2], roughness=rough)
    assert found.flows["head_loss"].iloc[0] / FOOT == pytest.approx(17.5, abs=0.05)


def test_the_flow_of_a_gradient() -> None:
    """Subramanya, Fluid Mechanics, ex. 10.19: D 0.25 m, ε 0.15 mm, S 0.025, ν 1e-6: 127.9 L/s and 3.13 kW in 100 m."""
    line = made_line(diameter=0.25, length=100.0, density=998.0, kinematic_viscosity=1.0e-6)
    found = predict(line, available_head="2.5 m", roughness="0.15 mm")
    assert 1000 * found.capacity["flow"].iloc[0] == pytest.approx(127.9, abs=0.05)
    assert found.flows["pump_power"].iloc[0] == pytest.approx(3.13e3, abs=8.0)


def test_oil_in_a_steel_pipe() -> None:
    """Crane TP-410M, ex. 7.13: 2 in schedule 40, 2 US gal/s of 2.7 cSt, 100 ft: 66.5 kPa with f = 0.0230 off the chart.

    The chart's f lies 1.3 % above the law that it was drawn from.
    """
    density = 0.815 * 999.1
    line = made_line(diameter=0.0525, length=100 * FOOT, density=density, kinematic_viscosity=2.7e-6)
    found = predict(line, flow="120 US_gal/min", roughness="0.0018 in")
    row = found.reaches.iloc[0]
    assert row["friction_factor"] == pytest.approx(0.0230, rel=0.015)
    pressure = density * 9.81 * row["head_loss"] * 0.0230 / row["friction_factor"]
    assert pressure == pytest.approx(66.5e3, rel=3e-3)


def test_pressures_along_a_house_pipe() -> None:
    """Munson, Young and Okiishi, ex. 8.8 (c): copper 3/4 in, 0.0267 ft³/s, f = 0.0215, four elbows, valve and faucet.

    Their gauge pressures along the pipe in psi, the faucet's jet of 1/2 in in the open. At each elbow before it.
    """
    bore, flow, gravity = 0.0625 * FOOT, 0.0267 * FOOT**3, 32.2 * FOOT
    density, viscosity = 1.94 * 515.3788, 2.34e-5 / 1.94 * FOOT**2
    speed = flow / (np.pi / 4 * bore**2)
    jet = flow / (np.pi / 4 * (0.5 * INCH) ** 2)
    ends = [15.0, 25.0, 30.0, 40.0, 50.0]
    losses = [1.5, 1.5, 1.5, 1.5, 10.0]
    line = made_line(
        diameter=bore,
        length=60 * FOOT,
        density=density,
        kinematic_viscosity=viscosity,
        gravity=gravity,
        fittings=(
            *((f"at {x:g}", x * FOOT, k) for x, k in zip(ends, losses, strict=True)),
            ("faucet", 60 * FOOT, 2.0),
        ),
        taps=tuple(
            (f"{x:g} ft", x * FOOT, z * FOOT)
            for x, z in ((0, 0), (15, 0), (25, 10), (30, 10), (40, 20), (50, 20), (60, 20))
        ),
    )
    rough = float(relative_roughness(0.0215, speed * bore / viscosity)) * bore
    end = 20 * FOOT + (jet**2 - speed**2) / (2 * gravity)
    found = predict(line, flow=[flow], roughness=rough, end_head=end)
    heads = found.grade_lines
    pressure = density * gravity * (heads["piezometric_head"] - heads["elevation"]) / 6894.757
    published = [30.5, 27.8, 27.1, 21.0, 20.2, 19.3, 18.5, 12.4, 11.7, 9.93, 4.84, 3.09]
    assert found.reaches["reynolds"].iloc[0] == pytest.approx(45000, rel=0.01)
    np.testing.assert_allclose(pressure[: len(published)], published, atol=0.08)
