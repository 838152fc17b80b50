"""The script that a practitioner would write for one bore: a line per run, f, and ε by a root finder.

Speed is measured against it, so it is held still. It imports nothing from gradeline.
"""

from __future__ import annotations

import fluids
import numpy as np
import pandas as pd
from scipy.optimize import brentq
from scipy.stats import linregress

LAMINAR_UNTIL = 2000.0
ROUGHEST = 0.05  # ε/D where the Colebrook-White law ends


def reduce_runs(readings, chainage, flow, *, diameter, viscosity, gravity=9.80665):
    """Slope, friction factor and roughness of each run.

    readings: DataFrame of column heights in m, a row per run and a column per tap.
    chainage: of each tap, m. flow: of each run, m3/s, above 0. viscosity: kinematic, of each run, m2/s.
    """
    area = np.pi * diameter**2 / 4
    flow = np.broadcast_to(flow, len(readings))
    viscosity = np.broadcast_to(viscosity, len(readings))
    rows = []
    for number, (run, heights) in enumerate(readings.iterrows()):
        line = linregress(chainage, heights)
        slope = -line.slope
        velocity = flow[number] / area
        reynolds = velocity * diameter / viscosity[number]
        friction_factor = 2 * gravity * diameter * slope / velocity**2
        rows.append(
            {
                "run": run,
                "velocity": velocity,
                "reynolds": reynolds,
                "slope": slope,
                "slope_u": line.stderr,
                "friction_factor": friction_factor,
                "roughness": roughness(float(friction_factor), float(reynolds), diameter),
            }
        )
    return pd.DataFrame(rows).set_index("run")


def roughness(friction_factor, reynolds, diameter):
    """Roughness in m that the Colebrook-White law gives; NaN where the run is laminar or off the law."""
    if reynolds < LAMINAR_UNTIL:
        return np.nan

    def misfit(relative_roughness):
        return fluids.Colebrook(reynolds, relative_roughness) - friction_factor

    if not misfit(0.0) <= 0 <= misfit(ROUGHEST):
        return np.nan
    return diameter * brentq(misfit, 0.0, ROUGHEST)
