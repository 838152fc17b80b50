"""What is known of the observations of all runs before any is judged."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

__all__ = ["Model"]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Model:
    """What is known of the observations before any is judged.

    Parameters
    ----------
    design : (n, p) array
        A of y = A θ; unit of y per unit of θ.
    velocity_head : (R,) array
        V²/2g of each run (of the narrowest bore), m.
    kind : (n,) int array
        Group whose scatter an observation shares.
    floor : (n,) array
        Stated uncertainty of one reading, m; 0 where none was stated.
    resolution : (n,) array, optional
        What the resolution of a reading adds to it, d/√12, m.
    repeats : (R, n) array, optional
        How many readings each observation is the mean of, dimensionless.
    spreads : (R, n) array, optional
        Standard deviation of one reading among its repeats, m; NaN where there are fewer than two.
    persistent : (R, n) array, optional
        Standard uncertainty of each observation from stated errors of single taps that are the same in all runs
        (position, elevation, static reading), m.
    common : (R, n, k) array, optional
        Change of each observation for one standard uncertainty of errors that several observations share (the run's
        own flow, the zero of one gauge among several), m.
    steady : bool
        Whether some of these errors are the same in all runs, so that they are taken out of the scatter tap by tap.
    along_slope : bool
        Whether some of them grow with the slope, the same.
    slope_column : int
        Column of A whose parameter is the (first) friction slope.
    """

    design: Array
    velocity_head: Array
    kind: NDArray[np.intp]
    floor: Array
    resolution: Array | None = None
    repeats: Array | None = None
    spreads: Array | None = None
    persistent: Array | None = None
    common: Array | None = None
    steady: bool = False
    along_slope: bool = False
    slope_column: int = 1

    @property
    def kinds(self) -> int:
        """How many groups there are."""
        return int(self.kind.max(initial=-1)) + 1

    @property
    def is_stated(self) -> bool:
        """Whether an uncertainty of one reading is stated for every observation."""
        return bool((self.floor > 0).all())

    def multiplier(self) -> Array:
        """Standard deviation of each observation relative to the best of its kind, (n,): as stated tap by tap."""
        relative = np.ones(len(self.floor))
        for kind in np.unique(self.kind):
            mine = self.kind == kind
            if (self.floor[mine] > 0).all():
                relative[mine] = self.floor[mine] / self.floor[mine].min()
        return relative

    def of_runs(self, runs: slice | NDArray[np.intp]) -> Model:
        """Return the model of some of the runs."""
        return replace(
            self,
            velocity_head=self.velocity_head[runs],
            repeats=None if self.repeats is None else self.repeats[runs],
            spreads=None if self.spreads is None else self.spreads[runs],
            persistent=None if self.persistent is None else self.persistent[runs],
            common=None if self.common is None else self.common[runs],
        )
