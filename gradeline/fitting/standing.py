"""Which slopes stand: a set that is fitted, judged by its scores and changed, until what is left out lies beyond chance."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import stdtrit

__all__ = ["Standing", "critical_score"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Probability, over all runs of a sound wall, that one is called off the law.
_RUN_FALSE_ALARM = 0.05
#: The same where the scatter is judged by the runs alone: size and place of it are searched for too.
_RUN_FALSE_ALARM_ALONE = 0.02
#: Sets tried in one way before the next is turned to.
_SETTLED = 12
#: Fewer slopes are never judged against each other.
_FEWEST = 4


def critical_score(count: int, dof: float, *, alone: bool) -> float:
    """Return the score beyond which a slope is off the law.

    Parameters
    ----------
    count : int
        Slopes that are judged.
    dof : float
        Degrees of freedom of the scores, dimensionless; may be infinite.
    alone : bool
        Whether the scatter is judged by the slopes alone.

    Returns
    -------
    float
        The two-sided Bonferroni point of Student's t, dimensionless.

    Examples
    --------
    >>> round(critical_score(6, float("inf"), alone=False), 3)
    2.638
    """
    alarm = _RUN_FALSE_ALARM_ALONE if alone else _RUN_FALSE_ALARM
    return float(stdtrit(dof, 1.0 - alarm / (2.0 * count)))


class Standing:
    """The course of sets, from all that are beyond chance at once to one at a time.

    Slopes that leave and come back together may go round in a ring: two slips cover for each other, or one makes a sound
    neighbour look off. Then the worst half of them leaves at a time, at least one; where that does not settle either,
    slopes only come back, so that in the end each that is left out has a score beyond the critical one.

    Parameters
    ----------
    candidates : (R, K) bool array
        All slopes that are judged.
    """

    def __init__(self, candidates: Mask) -> None:
        self.candidates = candidates
        self._seen: list[bytes] = []
        self._stage = 0

    def after(self, used: Mask, score: Array, critical: float) -> Mask:
        """Return the next set; the same as `used` where it stands.

        Parameters
        ----------
        used : (R, K) bool array
            The set that was fitted.
        score : (R, K) array
            Of all candidates by that fit, dimensionless.
        critical : float
            The score beyond which a slope is off, dimensionless.

        Returns
        -------
        (R, K) bool array
            Never half of the candidates or fewer: then it is the law that is off.

        Examples
        --------
        >>> all_four = np.ones((4, 1), dtype=bool)
        >>> Standing(all_four).after(all_four, np.array([[0.3], [-4.0], [1.0], [0.2]]), 2.5)[:, 0].tolist()
        [True, False, True, True]
        """
        within = self.candidates & (np.abs(score) <= critical)
        if self._stage == 0:
            now = within
            if self._too_few(now):
                now = used if self._seen else self.candidates
            if (now == used).all() and not (within & ~used).any():
                return used
            if now.tobytes() not in self._seen and len(self._seen) <= _SETTLED and (now != used).any():
                self._seen.append(used.tobytes())
                return now
            # A ring: everything in it is taken back, and leaves again more slowly; nothing does where the law is off.
            self._stage, self._seen = (2 if self._too_few(within) else 1), []
            if ((used | within) != used).any():
                return used | within
        if self._stage == 1:
            now = self._slowly(used, within, np.abs(score))
            if (now == used).all():
                return used
            if now.tobytes() not in self._seen and len(self._seen) <= _SETTLED:
                self._seen.append(used.tobytes())
                return now
            self._stage = 2
        return np.asarray(used | within)

    def _slowly(self, used: Mask, within: Mask, size: Array) -> Mask:
        """Leave out the worst half of those in use that are beyond chance; where there is none, take back."""
        beyond = np.flatnonzero((used & ~within).ravel())
        if len(beyond):
            worst = beyond[np.argsort(-size.ravel()[beyond], kind="stable")][: max(1, len(beyond) // 2)]
            now = used.copy()
            now.ravel()[worst] = False
            if not self._too_few(now):
                return now
        return np.asarray(used | within)

    def _too_few(self, now: Mask) -> bool:
        whole = int(self.candidates.sum())
        return bool(now.sum() * 2 <= whole or now.sum() < 2 or whole < _FEWEST)
