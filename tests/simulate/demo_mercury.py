"""The demo survey `mercury_bench`: a small tube, mercury for the large differences, air for the small."""

from __future__ import annotations

import numpy as np

from tests.simulate.demo_files import Draws, commented, gravity, listed, stepped, table
from tests.simulate.line import Floats, TrueLine, TrueReach
from tests.simulate.water import ZERO_CELSIUS, air_density, density, kinematic_viscosity

#: Flow of the last run that is read by air, m³/s.
_BY_AIR = 0.10e-3


def mercury_density(celsius: Floats) -> Floats:
    """Density of mercury, kg/m³, at °C (Sommer and Poziemski, from memory)."""
    return 13595.076 / (1 + 1.815868e-4 * celsius + 5.45843e-9 * celsius**2 + 3.498e-11 * celsius**3)


def mercury_bench() -> dict[str, str]:
    """Four taps, three pairs of neighbours with two u-tubes each, nine flows by weighing and one static run."""
    draws = Draws(905)
    latitude, altitude, axis = 57.1, 21.0, 0.900
    chainage = np.array([0.400, 1.600, 2.800, 4.000])
    flow = np.array([0, 0.0085, 0.0125, 0.023, 0.045, 0.070, 0.100, 0.150, 0.210, 0.290]) * 1e-3
    time = np.array([0, 480, 360, 300, 240, 180, 180, 120, 120, 120.0])
    celsius = np.array([13.6, 13.7, 13.7, 13.8, 13.9, 14.0, 14.1, 14.3, 14.4, 14.6])

    # the truth, drawn from what the survey states
    line = TrueLine(
        (TrueReach(0.0, 4.4, 0.0095 + draws.one(0.00002), 0.05e-3),), gravity=gravity(latitude, altitude)
    )
    true_chainage = chainage + draws.many(0.0005, chainage.size)
    kelvin = celsius + ZERO_CELSIUS + draws.one(0.2)
    heads = line.heads(true_chainage, flow, kinematic_viscosity(kelvin))
    fall = -np.diff(heads, axis=1)
    water = density(kelvin)
    mercury, air = mercury_density(kelvin - ZERO_CELSIUS), air_density(float(kelvin.mean()), altitude)
    zeros = draws.many(0.0005, 2, 3)
    scales = 1 + draws.many(0.0005, 2, 3)
    heavy = fall * (water / (mercury - water))[:, None] * scales[0] + zeros[0]
    light = fall * (water / (water - air))[:, None] * scales[1] + zeros[1]
    heavy, light = (deflection + draws.many(0.0005, *fall.shape) for deflection in (heavy, light))

    # what the balance shows: the buoyancy of the air lifts the water more than the weights
    scale, zero = draws.one(0.001), draws.one(0.01)
    shown = flow * time * water * (1 - air / water) / (1 - air / 8000.0)
    mass = np.where(flow > 0, shown * (1 + scale) + zero + draws.many(0.01, flow.size), 0.0)
    read_time = time + draws.many(0.1, time.size)

    cells = {"m": stepped(1e3 * heavy, 0.5, 1), "a": stepped(1e3 * light, 0.5, 1)}
    reach = line.reaches[0]
    head = [
        "Invented data with a known truth, written by tests/simulate/make_demo.py.",
        "Nobody measured them; bench, u-tubes and balance do not exist.",
        "",
        "Truth: roughness 50 um. Friction by Colebrook-White above Re 4000, 64/Re below Re 2000, a straight line",
        "between. Drawn from the uncertainties stated below:",
        f"  bore {1e3 * reach.diameter:.4f} mm",
        f"  balance {100 * scale:+.3f} % and {1e3 * zero:+.1f} g from what was on it",
        f"  temperature {kelvin[0] - ZERO_CELSIUS - celsius[0]:+.2f} K from what the thermometer says",
        f"  taps off their chainages by {listed(1e3 * (true_chainage - chainage), '+z.2f')} mm",
        f"  scales of the u-tubes {listed(100 * (scales.ravel() - 1), '+z.3f')} %",
        "True flows, run by run after the static one:",
        f"  {listed(1e3 * flow[1:], '.4f')} L/s",
        "U-tubes off by a constant, the same in all runs, which the static run takes away:",
        f"  mercury {listed(1e3 * zeros[0], '+z.2f')} mm, air {listed(1e3 * zeros[1], '+z.2f')} mm",
        "Readings scatter by 0.5 mm. There is no wrong reading.",
    ]
    survey = f"""
[survey]
title = "Steel tube of 9.5 mm, mercury and air"
date = 2026-09-17

[fluid]
name = "water"

[site]
latitude = "{latitude} deg"
altitude = "{altitude:.0f} m"

# A calming length of 1.2 m (126 bores) lies upstream of chainage 0.
[[reach]]
name = "test length"
from = "0 m"
to = "4.4 m"
diameter = "9.5 mm +/- 0.02 mm"
wall = "pickled steel"

# Each pair of neighbouring taps has a u-tube of water over mercury, for the large differences, and an inverted one
# with air above, for the small. A valve shuts off the one that is not read; both are read in the static run.
{_gauges()}
[flow]
method = "weighing tank"
u_mass = "0.01 kg"
u_time = "0.1 s"
u_scale = "0.1 %"
u_zero = "0.01 kg"

[uncertainty]
chainage = "0.5 mm"
temperature = "0.2 K"
friction_law = "2 %"
"""
    names = [f"T{number}" for number in range(1, chainage.size + 1)]
    taps = [["tap", "chainage [m]", "elevation [m]"]]
    taps += [[name, f"{at:.3f}", f"{axis:.3f}"] for name, at in zip(names, chainage, strict=True)]
    pairs = range(1, chainage.size)
    runs = [
        ["run", "mass [kg]", "time [s]", "temperature [degC]", *(f"{g}{n} [mm]" for g in "ma" for n in pairs)]
    ]
    for number, true in enumerate(flow):
        unread = [""] * len(pairs)
        by_air, static = 0 < true <= _BY_AIR, true == 0
        runs.append(
            [
                "static" if static else str(number),
                "0" if static else f"{mass[number]:.2f}",
                "" if static else f"{read_time[number]:.1f}",
                f"{celsius[number]:.1f}",
                *(unread if by_air else cells["m"][number]),
                *(cells["a"][number] if by_air or static else unread),
            ]
        )
    return {"survey.toml": commented(head) + survey, "taps.csv": table(taps), "readings.csv": table(runs)}


def _gauges() -> str:
    """The tables of the six u-tubes."""
    found = ""
    for letter, kind, fluid, span in (
        ("m", "u-tube", "mercury", "0 to 400 mm"),
        ("a", "inverted u-tube", "air", "0 to 600 mm"),
    ):
        for number in (1, 2, 3):
            found += f"""
[gauge.{letter}{number}]
kind = "{kind}"
upstream = "T{number}"
downstream = "T{number + 1}"
gauge_fluid = "{fluid}"
range = "{span}"
uncertainty = "0.5 mm"
resolution = "0.5 mm"
u_zero = "0.5 mm"
u_scale = "0.05 %"
"""
    return found
