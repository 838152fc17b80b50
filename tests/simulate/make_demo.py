"""Write the demo surveys: invented data with a known truth.

Use: ``python tests/simulate/make_demo.py data_demo``. The same bytes come out each time: the random numbers are
those of Python's own generator, which keeps its sequence from version to version.
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np

if __name__ == "__main__":  # run as a script: the repo's top is not on the path
    sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from tests.simulate.demo_files import Draws, commented, gravity, listed, stepped, table
from tests.simulate.demo_hydrant import hydrant_main
from tests.simulate.demo_mercury import mercury_bench
from tests.simulate.line import TrueLine, TrueLoss, TrueReach
from tests.simulate.water import ZERO_CELSIUS, air_density, density, kinematic_viscosity


def copper_bench() -> dict[str, str]:
    """Ten open columns along a drawn copper tube, nine flows and one static run; files by name."""
    draws = Draws(2603)
    latitude, altitude, room = 51.2, 62.0, ZERO_CELSIUS + 19.0
    axis, zero = 0.620, 0.750
    chainage = np.array([0.150, 0.650, 1.200, 1.850, 2.350, 3.000, 3.550, 4.250, 4.750, 5.350])
    flow = np.array([0, 0.032, 0.045, 0.0685, 0.142, 0.250, 0.425, 0.690, 1.06, 1.46]) * 1e-3
    celsius = np.array([15.1, 15.2, 15.4, 15.7, 15.9, 16.2, 16.4, 16.8, 17.1, 17.5])
    tail = (
        np.array([655, 640, 632, 618, 590, 540, 450, 350, 195, 88]) * 1e-3
    )  # the last column, by the outlet valve
    slip_run, slip_tap, slip = 7, 5, 0.030

    # the truth, drawn from what the survey states
    bore = 0.02664 + draws.one(0.00003)
    flow_scale = draws.one(0.003)
    true_chainage = chainage + draws.many(0.001, chainage.size)
    true_flow = flow * (1 + flow_scale + draws.many(0.004, flow.size))
    kelvin = celsius + ZERO_CELSIUS + draws.one(0.2)
    true_zero = zero + draws.one(0.001)
    offsets = draws.sized(0.0005, 0.002, chainage.size)

    reach = TrueReach(0.0, 5.5, bore, 1.5e-6)
    line = TrueLine((reach,), gravity=gravity(latitude, altitude))
    heads = line.heads(true_chainage, true_flow, kinematic_viscosity(kelvin))
    heads += zero + tail[:, None] - heads[:, -1:]
    top = heads / (1 - air_density(room, altitude) / density(kelvin))[:, None]
    velocity_head = reach.velocity(true_flow) ** 2 / (2 * line.gravity)
    sigma = np.hypot(0.0004, 0.003 * velocity_head)
    readings = top - true_zero + offsets + sigma[:, None] * draws.many(1.0, *heads.shape)
    cells = stepped(1e3 * readings, 0.5, 1)
    right = cells[slip_run][slip_tap]
    wrong = f"{float(right) + 1e3 * slip:.1f}"
    cells[slip_run][slip_tap] = wrong

    head = [
        "Invented data with a known truth, written by tests/simulate/make_demo.py.",
        "Nobody measured them; bench, board and meter do not exist.",
        "",
        "Truth: roughness 1.5 um. Friction by Colebrook-White above Re 4000, 64/Re below Re 2000, a straight line",
        "between. Drawn from the uncertainties stated below:",
        f"  bore {1e3 * bore:.4f} mm",
        f"  every flow {100 * flow_scale:+.2f} % from what the meter says, each run another 0.4 % or so at random",
        f"  temperature {kelvin[0] - ZERO_CELSIUS - celsius[0]:+.2f} K from what the thermometer says",
        f"  taps off their chainages by {listed(1e3 * (true_chainage - chainage), '+z.2f')} mm",
        "Columns off by a constant, the same in all runs, which the static run takes away:",
        f"  {listed(1e3 * offsets, '+z.2f')} mm (and the whole scale by {1e3 * (true_zero - zero):+.2f} mm)",
        "Readings scatter by 0.4 mm, and columns surge with the flow by 0.003 of the velocity head.",
        f"Wrong reading: T{slip_tap + 1} in run {slip_run}, where {right} mm was written down as {wrong} mm.",
    ]
    survey = f"""
[survey]
title = "Copper test length, ten columns"
date = 2026-05-06

[fluid]
name = "water"

[site]
latitude = "{latitude} deg"
altitude = "{altitude:.0f} m"

# A calming length of 3.5 m (130 bores) lies upstream of chainage 0.
[[reach]]
name = "test length"
from = "0 m"
to = "5.5 m"
diameter = "26.64 mm +/- 0.03 mm"
wall = "drawn copper"

[gauge.board]
kind = "piezometer"
zero = "{zero:.3f} m"
uncertainty = "0.4 mm"
resolution = "0.5 mm"
u_zero = "1 mm"

[uncertainty]
chainage = "1 mm"
flow = "0.4 %"
flow_scale = "0.3 %"
temperature = "0.2 K"
friction_law = "2 %"
"""
    names = [f"T{number}" for number in range(1, chainage.size + 1)]
    taps = [["tap", "chainage [m]", "elevation [m]"]]
    taps += [[name, f"{at:.3f}", f"{axis:.3f}"] for name, at in zip(names, chainage, strict=True)]
    runs = [["run", "flow [L/s]", "temperature [degC]", *(f"{name} [mm]" for name in names)]]
    runs += [
        [
            "static" if number == 0 else str(number),
            f"{1e3 * flow[number]:.4g}",
            f"{celsius[number]:.1f}",
            *row,
        ]
        for number, row in enumerate(cells)
    ]
    return {"survey.toml": commented(head) + survey, "taps.csv": table(taps), "readings.csv": table(runs)}


def cast_main() -> dict[str, str]:
    """Ten pressure gauges along a main of two bores with a throttled valve, six flows and one static run."""
    draws = Draws(1203)
    latitude, altitude, air = 54.6, 40.0, ZERO_CELSIUS + 13.0
    boundary, valve, level, entry_loss = 430.0, 800.0, 96.0, 4.0
    chainage = np.array([15.0, 140.0, 275.0, 415.0, 445.0, 610.0, 790.0, 815.0, 1000.0, 1195.0])
    axis = np.array([48.20, 44.65, 39.10, 36.80, 36.35, 41.90, 50.75, 52.10, 61.00, 41.45])
    above = np.array([1.35, 0.0, 0.0, 1.10, 1.10, 0.0, -0.40, 0.85, 0.0, 1.20])  # the gauge above the axis
    flow = np.array([0, 25.0, 35.0, 45.0, 55.0, 65.0, 75.0]) * 1e-3
    celsius = np.array([10.6, 10.6, 10.7, 10.7, 10.8, 10.9, 10.9])

    # the truth, drawn from what the survey states
    line = TrueLine(
        (
            TrueReach(0.0, boundary, 0.254 + draws.one(0.001), 0.9e-3),
            TrueReach(boundary, 1210.0, 0.203 + draws.one(0.0008), 0.9e-3),
        ),
        (TrueLoss(boundary, 0.18), TrueLoss(valve, 4.0)),
        gravity(latitude, altitude),
    )
    flow_scale = draws.one(0.01)
    true_chainage = chainage + draws.many(0.3, chainage.size)
    true_flow = flow * (1 + flow_scale + draws.many(0.005, flow.size))
    true_axis = axis + draws.many(0.02, axis.size)
    kelvin = celsius + ZERO_CELSIUS + draws.one(0.3)
    scale, offsets = draws.one(0.001), draws.many(400.0, chainage.size)

    start = level - entry_loss * (true_flow / flow.max()) ** 2
    heads = start[:, None] + line.heads(true_chainage, true_flow, kinematic_viscosity(kelvin))
    rho = density(kelvin)[:, None]
    gauge = true_axis + above
    # against the air at the gauge, where it is thinner than at the datum
    head_at_gauge = heads - gauge + air_density(air, altitude) / rho * gauge
    pressure = rho * line.gravity * head_at_gauge
    readings = pressure * (1 + scale) + offsets + draws.many(300.0, *heads.shape)
    cells = stepped(readings / 1e3, 0.1, 1)

    high = int(np.argmin((heads - true_axis)[-1]))
    clearance = (heads - true_axis)[-1, high] - 0.203 / 2
    upper, lower = (1e3 * reach.diameter for reach in line.reaches)
    head = [
        "Invented data with a known truth, written by tests/simulate/make_demo.py.",
        "Nobody measured them; the main and its gauges do not exist.",
        "",
        "Truth: roughness 0.9 mm in both bores, K = 4.0 of the gate valve, K = 0.18 of the change of bore (of the",
        "velocity head in the smaller bore). Drawn from the uncertainties stated below:",
        f"  bores {upper:.2f} mm and {lower:.2f} mm",
        f"  every flow {100 * flow_scale:+.2f} % from what the meter says, each run another 0.5 % or so at random",
        f"  temperature {kelvin[0] - ZERO_CELSIUS - celsius[0]:+.2f} K from what the thermometer says",
        f"  taps off their chainages by {listed(true_chainage - chainage, '+z.2f')} m",
        f"  and off their elevations by {listed(1e3 * (true_axis - axis), '+z.0f')} mm",
        f"  gauges: scale {100 * scale:+.3f} %",
        "Gauges off by a constant, the same in all runs, which the static run takes away:",
        f"  {listed(offsets / 1e3, '+z.2f')} kPa",
        "Readings scatter by 0.3 kPa. There is no wrong reading.",
        f"At the highest flow the hydraulic grade line passes {clearance:.1f} m above the crown at M{high + 1}, on the hill:",
        "close, but the pressure stays above that of the atmosphere.",
    ]
    survey = f"""
[survey]
title = "Cast-iron main with a throttled gate valve"
date = 2026-03-18

[fluid]
name = "water"

[site]
latitude = "{latitude} deg"
altitude = "{altitude:.0f} m"

[[reach]]
name = "upper main"
from = "0 m"
to = "{boundary:.0f} m"
diameter = "254 mm +/- 1 mm"
wall = "cast iron"

[[reach]]
name = "lower main"
from = "{boundary:.0f} m"
to = "1210 m"
diameter = "203 mm +/- 0.8 mm"
wall = "cast iron"

[[fitting]]
name = "gate valve"
at = "{valve:.0f} m"
kind = "gate valve"
loss_coefficient = "fit"

[gauge.logger]
kind = "pressure gauge"
uncertainty = "0.3 kPa"
resolution = "0.1 kPa"
u_zero = "0.4 kPa"
u_scale = "0.1 %"

[uncertainty]
chainage = "0.3 m"
elevation = "20 mm"
flow = "0.5 %"
flow_scale = "1 %"
temperature = "0.3 K"
friction_law = "2 %"
"""
    names = [f"M{number}" for number in range(1, chainage.size + 1)]
    taps = [["tap", "chainage [m]", "elevation [m]", "gauge elevation [m]"]]
    taps += [
        [name, f"{at:.1f}", f"{z:.2f}", f"{z + up:.2f}"]
        for name, at, z, up in zip(names, chainage, axis, above, strict=True)
    ]
    runs = [["run", "flow [L/s]", "temperature [degC]", *(f"{name} [kPa]" for name in names)]]
    runs += [
        [
            "static" if number == 0 else str(number),
            f"{1e3 * flow[number]:.4g}",
            f"{celsius[number]:.1f}",
            *row,
        ]
        for number, row in enumerate(cells)
    ]
    return {"survey.toml": commented(head) + survey, "taps.csv": table(taps), "readings.csv": table(runs)}


SURVEYS = {
    "copper_bench": copper_bench,
    "cast_main": cast_main,
    "mercury_bench": mercury_bench,
    "hydrant_main": hydrant_main,
}


def write(folder: Path) -> None:
    """Write every survey below `folder`."""
    for name, made in SURVEYS.items():
        (folder / name).mkdir(parents=True, exist_ok=True)
        for file, text in made().items():
            (folder / name / file).write_bytes(text.encode())


if __name__ == "__main__":
    if len(sys.argv) != 2:
        sys.exit("use: python tests/simulate/make_demo.py FOLDER")
    write(Path(sys.argv[1]))
