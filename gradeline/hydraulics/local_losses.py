"""Published loss coefficients of a sudden change of bore; each refers to the velocity in the smaller bore."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

__all__ = [
    "change_of_bore_loss_coefficient",
    "contraction_loss_coefficient",
    "expansion_loss_coefficient",
]

Array = npt.NDArray[np.float64]


def _bores(upstream_bore: npt.ArrayLike, downstream_bore: npt.ArrayLike) -> tuple[Array, Array]:
    up, down = np.broadcast_arrays(
        np.asarray(upstream_bore, dtype=np.float64), np.asarray(downstream_bore, dtype=np.float64)
    )
    for where, bore in (("upstream", up), ("downstream", down)):
        if (bore <= 0).any():
            raise ValueError(f"the {where} bore must be above 0 m: {bore[bore <= 0].flat[0]}")
    return up, down


def expansion_loss_coefficient(upstream_bore: npt.ArrayLike, downstream_bore: npt.ArrayLike) -> Array:
    """Return the loss coefficient of a sudden expansion (Borda–Carnot).

    Parameters
    ----------
    upstream_bore : array_like
        The smaller bore, m, above 0.
    downstream_bore : array_like
        The larger bore, m, not below the upstream one.

    Returns
    -------
    ndarray
        K = (1 − β²)², dimensionless, of the velocity head V²/2g in the smaller bore, β the ratio of the bores.

    Raises
    ------
    ValueError
        Where a bore is not above 0 or the line narrows.

    References
    ----------
    Borda–Carnot, by the momentum balance over the step: any text on hydraulics. Crane TP-410, sudden
    enlargement, has the same form.

    Examples
    --------
    >>> print(expansion_loss_coefficient(0.5, 1.0))
    0.5625
    """
    up, down = _bores(upstream_bore, downstream_bore)
    if (up > down).any():
        raise ValueError("an expansion needs a downstream bore not below the upstream one; this line narrows")
    return np.asarray((1.0 - (up / down) ** 2) ** 2)


def contraction_loss_coefficient(upstream_bore: npt.ArrayLike, downstream_bore: npt.ArrayLike) -> Array:
    """Return the loss coefficient of a sudden contraction with a sharp edge.

    Parameters
    ----------
    upstream_bore : array_like
        The larger bore, m, not below the downstream one.
    downstream_bore : array_like
        The smaller bore, m, above 0.

    Returns
    -------
    ndarray
        K = 0.5 (1 − β²), dimensionless, of the velocity head V²/2g in the smaller bore, β the ratio of the
        bores; 0.5 for a sharp entrance from a tank.

    Raises
    ------
    ValueError
        Where a bore is not above 0 or the line widens.

    References
    ----------
    Crane Technical Paper 410, Flow of Fluids, appendix A, sudden contraction; an empirical rule, good to some
    tens of percent.

    Examples
    --------
    >>> print(f"{contraction_loss_coefficient(3.0, 2.0):.5f}")
    0.27778
    """
    up, down = _bores(upstream_bore, downstream_bore)
    if (up < down).any():
        raise ValueError("a contraction needs a downstream bore not above the upstream one; this line widens")
    return np.asarray(0.5 * (1.0 - (down / up) ** 2))


def change_of_bore_loss_coefficient(upstream_bore: npt.ArrayLike, downstream_bore: npt.ArrayLike) -> Array:
    """Return the loss coefficient of a sudden change of bore, whichever way it goes; 0 where there is none.

    Parameters
    ----------
    upstream_bore : array_like
        m, above 0.
    downstream_bore : array_like
        m, above 0.

    Returns
    -------
    ndarray
        Loss coefficient, dimensionless, of the velocity head V²/2g in the smaller bore.

    Raises
    ------
    ValueError
        Where a bore is not above 0.

    References
    ----------
    `expansion_loss_coefficient` and `contraction_loss_coefficient`.

    Examples
    --------
    >>> print(change_of_bore_loss_coefficient([0.5, 0.5, 1.0], [1.0, 0.5, 0.5]))
    [0.5625 0.     0.375 ]
    """
    up, down = _bores(upstream_bore, downstream_bore)
    small, large = np.minimum(up, down), np.maximum(up, down)
    return np.where(
        up < down, expansion_loss_coefficient(small, large), contraction_loss_coefficient(large, small)
    )
