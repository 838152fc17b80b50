"""The upper bound of the roughness by the likelihood itself: dense covariance, true scatter, brute-force grid.

Written without a look at `gradeline.fitting.wall` and without its help: the heads themselves, not slopes, all of a survey
in one dense covariance; friction by the Lambert-W solution of the law; water by the simulator's table. For one reach of
open columns. Shared inputs enter to first order, which is exact to a part in a thousand for what is stated here.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import cho_factor, cho_solve
from scipy.special import wrightomega

from gradeline.survey import Survey
from tests.simulate.surveys import AIR, BOARD_ZERO, Uncertainties
from tests.simulate.water import density, kinematic_viscosity

__all__ = ["likelihood_upper_bound"]

Floats = NDArray[np.float64]

#: 95 % point of the standard normal, squared: one-sided, as the scatter is known.
_ONE_SIDED = 1.6448536269514722**2
_STEPS = 160


def likelihood_upper_bound(survey: Survey, stated: Uncertainties, sigma: float, bore_u: float) -> float:
    """Return the roughness, m, above the most likely one at which −2 ln L has risen by 2.71.

    Parameters
    ----------
    survey : Survey
        One reach, open columns, no static run.
    stated : Uncertainties
        What the truth was drawn from.
    sigma : float
        True standard deviation of one reading, m.
    bore_u : float
        Relative standard uncertainty of the bore, dimensionless.
    """
    reach = survey.reaches[0]
    bore, gravity = reach.diameter.value, survey.site.gravity.value
    flow = survey.runs["flow"].to_numpy(float)
    kelvin = survey.runs["temperature"].to_numpy(float)
    x = np.array([tap.chainage for tap in survey.taps])
    runs, taps = len(flow), len(x)
    ratio = (1 - AIR / density(kelvin))[:, None]
    heads = (survey.readings.to_numpy(float) + BOARD_ZERO) * ratio

    def slope(roughness: Floats, diameter: float, factor: float, warmer: float) -> Floats:
        """S of each roughness and run, (G, R)."""
        area = np.pi * diameter**2 / 4
        velocity = flow * factor / area
        reynolds = velocity * diameter / kinematic_viscosity(kelvin + warmer)
        a = roughness[:, None] / diameter / 3.7
        b = 2.51 / reynolds
        c = 2 * b / np.log(10)
        # 1/√f = −2 log10(a + b/√f): with y = 1/√f, y = −(2/ln 10)(ln c + ln ω) and c ω = a + b y.
        omega = wrightomega(a / c - np.log(c)).real
        inverse_root = -(2 / np.log(10)) * (np.log(c) + np.log(omega))
        return velocity**2 / (2 * gravity * diameter * inverse_root**2)

    roughness = np.concatenate([[0.0], bore * np.geomspace(1e-7, 1e-2, _STEPS)])
    law = slope(roughness, bore, 1.0, 0.0)
    step = 1e-4
    # Relative to one standard uncertainty each: (input, size).
    shared = (
        ((slope(roughness, bore * (1 + step), 1.0, 0.0) - law) / step * bore_u),
        ((slope(roughness, bore, 1.0 + step, 0.0) - law) / step * (stated.flow_scale or 0.0)),
        ((slope(roughness, bore, 1.0, 0.01) - law) / 0.01 * (stated.temperature or 0.0)),
    )
    own = (
        ((slope(roughness, bore, 1.0 + step, 0.0) - law) / step * (stated.flow or 0.0)),
        ((slope(roughness, bore, 1.0, 0.01) - law) / 0.01 * (stated.temperature_run or 0.0)),
    )
    # Contrasts within each run that its free level does not move: an orthonormal basis (taps, taps − 1).
    basis = np.linalg.svd(np.eye(taps) - 1.0 / taps)[0][:, : taps - 1]
    seen = heads @ basis
    along = x @ basis
    scale = (sigma * ratio) ** 2
    twice = np.empty(len(roughness))
    for g in range(len(roughness)):
        covariance = np.diag(np.repeat(scale[:, 0], taps - 1))
        for change in shared:
            column = np.outer(change[g], along).ravel()
            covariance += np.outer(column, column)
        for change in own:
            for run in range(runs):
                block = slice(run * (taps - 1), (run + 1) * (taps - 1))
                covariance[block, block] += np.outer(along, along) * change[g, run] ** 2
        for tap in range(taps):
            column = np.outer(law[g], basis[tap]).ravel() * (stated.chainage or 0.0)
            covariance += np.outer(column, column)
        rest = (seen + np.outer(law[g], along)).ravel()
        factor = cho_factor(covariance, lower=True)
        twice[g] = rest @ cho_solve(factor, rest) + 2 * np.log(np.diag(factor[0])).sum()
    best = int(twice.argmin())
    rise = twice - twice[best] - _ONE_SIDED
    over = best + int(np.argmax(rise[best:] > 0))
    low, high = roughness[over - 1], roughness[over]
    share = -rise[over - 1] / (rise[over] - rise[over - 1])
    return float(low + share * (high - low))
