"""Which of a few values stand out from the others, several at once."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import stdtrit

__all__ = ["standing_out"]


def standing_out(values: ArrayLike, *, most: int, false_alarm: float) -> NDArray[np.bool_]:
    """Tell which values lie too far from the others to be of one normal distribution with them.

    Parameters
    ----------
    values : (n,) array_like
        Finite, of one unit whatever it is, dimensionless here.
    most : int
        As many as this may stand out, dimensionless; fewer than n - 2.
    false_alarm : float
        Probability that any is named where all are of one distribution, between 0 and 1, dimensionless.

    Returns
    -------
    (n,) bool array
        True for those that stand out; none of fewer than 4 values.

    Notes
    -----
    The generalised extreme studentised deviate: the farthest is taken out `most` times, R_i = max |x - mean| / s of the
    m values left each time; as many stand out as the last i with R_i above (m - 1) t / √((m - 2 + t²) m), t being Student's
    t of m - 2 degrees of freedom at 1 - α/2m. So two that hide each other are found as well. B. Rosner (1983), Percentage
    points for a generalized ESD many-outlier procedure, Technometrics 25, 165–172, doi:10.1080/00401706.1983.10487848.

    Examples
    --------
    >>> standing_out([0.1, -0.2, 0.0, 0.3, -0.1, 8.0, 0.2, 7.9], most=2, false_alarm=0.01).nonzero()[0].tolist()
    [5, 7]
    """
    x = np.asarray(values, dtype=np.float64)
    left = np.arange(len(x))
    taken: list[int] = []
    count = 0
    for _ in range(most if len(x) > 3 else 0):
        m = len(left)
        spread = float(x[left].std(ddof=1)) if m > 3 else 0.0
        if not spread > 0:
            break
        away = np.abs(x[left] - x[left].mean())
        far = int(away.argmax())
        t = float(stdtrit(m - 2, 1 - false_alarm / (2 * m)))
        taken.append(int(left[far]))
        if away[far] / spread > (m - 1) * t / np.sqrt((m - 2 + t**2) * m):
            count = len(taken)
        left = np.delete(left, far)
    found = np.zeros(len(x), dtype=bool)
    found[taken[:count]] = True
    return found
