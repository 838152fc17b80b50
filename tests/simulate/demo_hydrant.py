"""The demo survey `hydrant_main`: one gauge carried from hydrant to hydrant, flow by pitots in the jets."""

from __future__ import annotations

import numpy as np

from tests.simulate.demo_files import Draws, commented, gravity, listed, stepped, table
from tests.simulate.line import TrueLine, TrueReach
from tests.simulate.water import ZERO_CELSIUS, air_density, density, kinematic_viscosity


def hydrant_main() -> dict[str, str]:
    """Six hydrants along a lined main, five flows out of one outlet or two, and one static run."""
    draws = Draws(1712)
    latitude, altitude, air = 52.3, 30.0, ZERO_CELSIUS + 12.0
    level, entry_loss, length = 96.0, 3.0, 940.0
    chainage = np.array([22.0, 195.0, 388.0, 561.0, 742.0, 915.0])
    axis = np.array([31.25, 28.40, 26.85, 29.60, 34.10, 30.55])
    above = np.array(
        [1.30, 1.25, 1.40, 1.30, 1.20, 1.35]
    )  # the gauge above the axis, on the hydrant's outlet
    flow = np.array([0, 20.0, 28.0, 36.0, 54.0, 68.0]) * 1e-3
    second = np.array([0, 0, 0, 0, 0.48, 0.49])  # share of the second outlet
    celsius = np.array([9.4, 9.4, 9.5, 9.5, 9.6, 9.6])

    # the truth, drawn from what the survey states
    outside, wall, lining = 0.222 + draws.one(0.0005), 0.0063 + draws.one(0.0002), 0.003 + draws.one(0.0003)
    reach = TrueReach(0.0, length, outside - 2 * wall - 2 * lining, 0.3e-3)
    line = TrueLine((reach,), gravity=gravity(latitude, altitude))
    true_chainage = chainage + draws.many(0.5, chainage.size)
    true_axis = axis + draws.many(0.05, axis.size)
    kelvin = celsius + ZERO_CELSIUS + draws.one(0.3)
    rho = density(kelvin)
    scale, offset = draws.one(0.002), draws.one(2000.0)

    start = level - entry_loss * (flow / flow.max()) ** 2
    heads = start[:, None] + line.heads(true_chainage, flow, kinematic_viscosity(kelvin))
    gauge = true_axis + above
    # against the air at the gauge, where it is thinner than at the datum
    head_at_gauge = heads - gauge + air_density(air, altitude) / rho[:, None] * gauge
    pressure = rho[:, None] * line.gravity * head_at_gauge
    cells = stepped((pressure * (1 + scale) + offset + draws.many(600.0, *heads.shape)) / 1e3, 0.5, 1)

    bores = np.array([0.0635 + draws.one(0.0002), 0.0635 + draws.one(0.0002)])
    coefficients = np.array([0.90 + draws.one(0.01), 0.90 + draws.one(0.01)])
    split = np.stack([flow * (1 - second), flow * second], axis=1)
    jet = rho[:, None] / 2 * (split / (coefficients * np.pi / 4 * bores**2)) ** 2
    pitot_scale, pitot_zero = draws.one(0.005), draws.one(300.0)
    shown = np.where(jet > 0, jet * (1 + pitot_scale) + pitot_zero + draws.many(500.0, *jet.shape), 0.0)
    pitots = stepped(shown / 1e3, 0.5, 1)

    head = [
        "Invented data with a known truth, written by tests/simulate/make_demo.py.",
        "Nobody measured them; the main, its hydrants and the gauges do not exist.",
        "",
        "Truth: roughness 0.30 mm. Drawn from the uncertainties stated below:",
        f"  bore {1e3 * reach.diameter:.2f} mm: outside diameter {1e3 * outside:.2f} mm, wall {1e3 * wall:.2f} mm, lining",
        f"  {1e3 * lining:.2f} mm",
        f"  outlets of {1e3 * bores[0]:.2f} mm and {1e3 * bores[1]:.2f} mm, discharge coefficients {coefficients[0]:.4f} and "
        f"{coefficients[1]:.4f}",
        f"  pitot gauge: scale {100 * pitot_scale:+.2f} %, zero {pitot_zero / 1e3:+.2f} kPa",
        f"  temperature {kelvin[0] - ZERO_CELSIUS - celsius[0]:+.2f} K from what the thermometer says",
        f"  taps off their chainages by {listed(true_chainage - chainage, '+z.2f')} m",
        f"  and off their elevations by {listed(1e3 * (true_axis - axis), '+z.0f')} mm",
        f"  the gauge that is carried along: scale {100 * scale:+.3f} %, zero {offset / 1e3:+.2f} kPa, the same at every tap",
        "True flows, run by run after the static one:",
        f"  {listed(1e3 * flow[1:], '.1f')} L/s",
        "Readings scatter by 0.6 kPa, pitots by 0.5 kPa. There is no wrong reading. All side valves were shut, also the one",
        "of which nobody knew.",
    ]
    survey = f"""
[survey]
title = "Lined main between hydrants"
date = 2026-10-08

[fluid]
name = "water"

[site]
latitude = "{latitude} deg"
altitude = "{altitude:.0f} m"

# Ductile iron with a mortar lining; the bore is the outside diameter less wall and lining, twice.
[[reach]]
name = "main"
from = "0 m"
to = "{length:.0f} m"
nominal = "222 mm +/- 0.5 mm"
wall_thickness = "6.3 mm +/- 0.2 mm"
lining = "3 mm +/- 0.3 mm"
wall = "mortar lining"

# Isolation: flow that leaves by a side valve is not in the pitots.
[[side_valve]]
name = "mill"
at = "110 m"
state = "shut"

[[side_valve]]
name = "school"
at = "300 m"
state = "shut"

[[side_valve]]
name = "scour"
at = "390 m"
state = "shut"

[[side_valve]]
name = "farm branch"
at = "655 m"
state = "unknown"

[gauge.carried]                 # one gauge, carried from hydrant to hydrant
kind = "pressure gauge"
uncertainty = "0.6 kPa"
resolution = "0.5 kPa"
u_zero = "2 kPa"
u_scale = "0.2 %"
range = "0 to 1000 kPa"

[flow]
method = "hydrant pitot"
read = "in order"
u_pitot = "0.5 kPa"
u_scale = "0.5 %"
u_zero = "0.3 kPa"

[[flow.outlet]]
name = "A"
bore = "63.5 mm +/- 0.2 mm"
discharge_coefficient = "0.90 +/- 0.01"

[[flow.outlet]]
name = "B"
bore = "63.5 mm +/- 0.2 mm"
discharge_coefficient = "0.90 +/- 0.01"

[uncertainty]
chainage = "0.5 m"
elevation = "50 mm"
temperature = "0.3 K"
friction_law = "2 %"
"""
    names = [f"H{number}" for number in range(1, chainage.size + 1)]
    taps = [["tap", "chainage [m]", "elevation [m]", "gauge elevation [m]"]]
    taps += [
        [name, f"{at:.1f}", f"{z:.2f}", f"{z + up:.2f}"]
        for name, at, z, up in zip(names, chainage, axis, above, strict=True)
    ]
    runs = [
        ["run", "pitot A [kPa]", "pitot B [kPa]", "temperature [degC]", *(f"{name} [kPa]" for name in names)]
    ]
    runs += [
        ["static" if number == 0 else str(number), *pitots[number], f"{celsius[number]:.1f}", *row]
        for number, row in enumerate(cells)
    ]
    return {"survey.toml": commented(head) + survey, "taps.csv": table(taps), "readings.csv": table(runs)}
