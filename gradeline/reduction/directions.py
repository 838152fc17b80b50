"""Rising and falling flows compared: friction that goes with the direction tells of a lag, of air or of loose deposits."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import stdtrit

from gradeline.hydraulics.friction import colebrook_white
from gradeline.reduction.friction import Friction
from gradeline.reduction.line import Line
from gradeline.reduction.runs import Flowing
from gradeline.reduction.walls import Wall
from gradeline.survey import Survey

__all__ = ["compare_directions"]

Array = NDArray[np.float64]

#: Runs a direction needs for its mean to have a spread.
_FEWEST = 2


def compare_directions(
    survey: Survey, line: Line, flowing: Flowing, friction: Friction, walls: tuple[Wall, ...], *, level: float
) -> tuple[list[str], list[str]]:
    """Return (assumptions, cautions) on f in rising against falling runs.

    Parameters
    ----------
    survey, line, flowing, friction, walls
        The survey and what its runs say.
    level : float
        Coverage at which a difference is one.

    Returns
    -------
    tuple
        One sentence for each reach with at least two runs either way at like Re; a caution where the difference exceeds
        its uncertainty. ln f is compared after the law at the wall's own roughness is taken off, in turbulent runs within
        the range of Re that both directions cover (widened by a tenth); the spread of the runs is the uncertainty.
    """
    if "direction" not in survey.runs.columns:
        return [], []
    said = survey.runs["direction"].to_numpy(object)[flowing.rows]
    assumptions, cautions = [], []
    for k, reach in enumerate(survey.reaches):
        rough = next((w.fit.roughness for w in walls if w.name == reach.wall), np.nan)
        relative = np.clip(np.nan_to_num(rough) / line.diameter[k], 0.0, 0.1)
        reynolds = flowing.reynolds[:, k]
        known = (friction.regime[:, k] == "turbulent") & np.isfinite(friction.factor[:, k])
        law = np.asarray(colebrook_white(np.maximum(reynolds, 1.0), relative))
        off = np.log(np.where(known, friction.factor[:, k], 1.0) / law)
        either = [known & (said == name) for name in ("rising", "falling")]
        if not all(mine.any() for mine in either):
            continue
        low = 0.9 * max(reynolds[mine].min() for mine in either)
        high = 1.1 * min(reynolds[mine].max() for mine in either)
        rising, falling = (off[mine & (reynolds >= low) & (reynolds <= high)] for mine in either)
        if min(len(rising), len(falling)) < _FEWEST:
            assumptions.append(
                f"Rising and falling flows in reach {reach.name!r} are not compared: fewer than {_FEWEST} turbulent runs "
                "either way at like Re."
            )
            continue
        difference, u, dof = _difference(rising, falling)
        sentence = (
            f"In reach {reach.name!r} f of the {len(rising)} rising runs lies {100 * abs(difference):.2g} % ± {100 * u:.1g} % "
            f"{'above' if difference > 0 else 'below'} that of the {len(falling)} falling runs at like Re"
        )
        if abs(difference) > float(stdtrit(dof, 0.5 + level / 2.0)) * u:
            cautions.append(
                f"{sentence}, more than their scatter explains: wait longer before reading, bleed the lines of air, and look "
                "for deposits that the flow moves."
            )
        else:
            assumptions.append(f"{sentence}: no difference beyond their scatter.")
    return assumptions, cautions


def _difference(first: Array, second: Array) -> tuple[float, float, float]:
    """Difference of two means, its standard uncertainty by the pooled spread, and its degrees of freedom."""
    dof = len(first) + len(second) - 2
    squares = float(((first - first.mean()) ** 2).sum() + ((second - second.mean()) ** 2).sum())
    u = np.sqrt(squares / dof * (1.0 / len(first) + 1.0 / len(second)))
    return float(first.mean() - second.mean()), float(u), float(dof)
