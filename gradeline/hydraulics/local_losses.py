"""Published loss coefficients of a sudden change of bore, in the smaller bore's velocity head, and of valves."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

__all__ = [
    "change_of_bore_loss_coefficient",
    "change_of_bore_sensitivity",
    "contraction_loss_coefficient",
    "expansion_loss_coefficient",
    "fully_rough_loss_coefficient",
]

#: Roughness of clean commercial steel, 0.00015 ft, m: L. F. Moody, Friction factors for pipe flow, Trans. ASME 66 (1944).
_CLEAN_STEEL = 4.572e-5

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


def change_of_bore_sensitivity(upstream_bore: npt.ArrayLike, downstream_bore: npt.ArrayLike) -> Array:
    """Return how the loss coefficient of a sudden change of bore goes with the ratio of the bores.

    Parameters
    ----------
    upstream_bore, downstream_bore : array_like
        Bores, m, above 0.

    Returns
    -------
    ndarray
        ∂K/∂ ln β, dimensionless, with β the smaller bore over the larger: −4 β² (1 − β²) of an expansion, −β² of a
        contraction.

    References
    ----------
    The derivatives of `expansion_loss_coefficient` and `contraction_loss_coefficient`.

    Examples
    --------
    >>> print(change_of_bore_sensitivity([0.1, 0.2], [0.2, 0.1]))
    [-0.75 -0.25]
    """
    up, down = _bores(upstream_bore, downstream_bore)
    square = (np.minimum(up, down) / np.maximum(up, down)) ** 2
    return np.asarray(np.where(down > up, -4.0 * square * (1.0 - square), -square))


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


def fully_rough_loss_coefficient(multiple: npt.ArrayLike, bore: npt.ArrayLike) -> Array:
    """Return the loss coefficient of a valve as a multiple of the friction factor of clean steel in fully rough flow.

    Parameters
    ----------
    multiple : array_like
        The equivalent length in bores, dimensionless, at least 0: 8 for a gate valve fully open.
    bore : array_like
        m, above 1 mm.

    Returns
    -------
    ndarray
        K = n f_T, dimensionless, with 1/√f_T = −2 log10(ε/3.7 D), ε = 0.04572 mm.

    Raises
    ------
    ValueError
        Where a multiple is negative or a bore is not above 1 mm.

    References
    ----------
    Crane Technical Paper 410, Flow of Fluids, appendix A: K of valves and fittings.

    Examples
    --------
    >>> print(f"{fully_rough_loss_coefficient(8, 0.0525):.3f}")
    0.152
    """
    times, size = np.asarray(multiple, dtype=np.float64), np.asarray(bore, dtype=np.float64)
    if (times < 0).any():
        raise ValueError(f"the multiple must not be negative: {times[times < 0].flat[0]}")
    if not (size > 1e-3).all():
        raise ValueError(f"the bore must be above 0.001 m: {size[~(size > 1e-3)].flat[0]}")
    return np.asarray(times * 0.25 / np.log10(3.7 * size / _CLEAN_STEEL) ** 2)
