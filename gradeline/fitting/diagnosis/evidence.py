"""What all runs together say of a suspicion: exact likelihood gains by generalised least squares.

Every suspicion is a column over runs and observations (one unknown size), or a direction that each run has of its own.
The lines of the runs are projected out by their weights, stated errors are random effects of unit variance, and what
is left are inner products of columns: any set of suspicions is then compared by the algebra of one small matrix.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Evidence", "freed", "gather"]

Array = NDArray[np.float64]

#: A column with less than this share of its information left is one that others make up.
_NOTHING = 1e-9
#: Share of the information on an effect that has to be left for a short cut to its covariance.
_LEFT = 1e-6


@dataclass(frozen=True)
class Evidence:
    """Inner products of c candidate columns, given what is accepted already.

    Parameters
    ----------
    information : (c, c) array
        Of the candidates' sizes, 1/size² (sizes are in m or dimensionless).
    score : (c,) array
        Its right-hand side, 1/size (dimensionless or 1/m).
    rest : (F, n) array
        Observations less the accepted effects at their best, m; zero where not used.
    weight : (F, n, n) array
        Inverse covariance with the lines projected out, 1/m².
    basis : (F, n, b) array
        Accepted columns, m per size, and stated errors, m.
    basis_inverse : (b, b) array
        Inverse of their information, size² (stated errors: dimensionless), the stated errors' unit variances in it.
    chi_square : float
        Weighted sum of squares of what is left, stated errors included, dimensionless.
    own : (c,) array
        What its information would be were nothing else unknown, at most, 1/size² (dimensionless or 1/m²).
    whole : bool
        Whether `basis_inverse` is an inverse, every effect determined.
    """

    information: Array
    score: Array
    rest: Array
    weight: Array
    basis: Array
    basis_inverse: Array
    chi_square: float
    own: Array
    whole: bool = False

    def sizes(self, columns: tuple[int, ...]) -> tuple[Array, Array, float]:
        """Return (sizes, their covariance, gain in χ²) of candidates taken together."""
        pick = list(columns)
        block = self.information[np.ix_(pick, pick)]
        if (np.diagonal(block) <= _NOTHING * self.own[pick]).any():
            return np.zeros(len(pick)), np.full((len(pick),) * 2, np.inf), 0.0
        scale = np.sqrt(np.diagonal(block))
        relative = block / np.outer(scale, scale)
        if np.linalg.eigvalsh(relative)[0] < _NOTHING:
            return np.zeros(len(pick)), np.full((len(pick),) * 2, np.inf), 0.0
        covariance = np.linalg.inv(relative) / np.outer(scale, scale)
        size = covariance @ self.score[pick]
        return size, covariance, float(size @ self.score[pick])

    def gains(self) -> Array:
        """Gain in χ² of each candidate alone (c,)."""
        diagonal = np.diagonal(self.information)
        sound = diagonal > _NOTHING * self.own
        return np.where(sound, self.score**2 / np.where(sound, diagonal, 1.0), 0.0)

    def reading_gains(self) -> Array:
        """Gain in χ² of taking out each single reading (F, n), all else fitted anew."""
        turned = np.einsum("rij,rj->ri", self.weight, self.rest)
        along = self.weight @ self.basis
        before = np.einsum("rii->ri", self.weight)
        own = before - np.einsum("rib,bc,ric->ri", along, self.basis_inverse, along)
        sound = own > _NOTHING * np.maximum(before, 1e-300)
        return np.where(sound, turned**2 / np.where(sound, own, 1.0), 0.0)

    def pair_gains(self, run: int) -> Array:
        """Gain in χ² of taking out each two readings of a run together (n, n), all else fitted anew; 0 on the diagonal."""
        own, turned = self._of_run(run)
        each = np.diagonal(own)
        product = np.outer(each, each)
        determinant = product - own**2
        sound = (determinant > _NOTHING * product) & (product > 0)
        both = np.outer(turned**2, each)
        gain = both + both.T - 2.0 * own * np.outer(turned, turned)
        return np.where(sound, gain / np.where(sound, determinant, 1.0), 0.0)

    def swap_gains(self, run: int) -> Array:
        """The same of each two neighbours (n − 1,) that are off by one amount, one up and one down."""
        own, turned = self._of_run(run)
        information = np.diagonal(own)[:-1] + np.diagonal(own)[1:] - 2.0 * np.diagonal(own, 1)
        sound = information > _NOTHING * (np.diagonal(own)[:-1] + np.diagonal(own)[1:])
        along = turned[:-1] - turned[1:]
        return np.where(sound, along**2 / np.where(sound, information, 1.0), 0.0)

    def _of_run(self, run: int) -> tuple[Array, Array]:
        """Information on each reading of a run (n, n), all else fitted anew, and its right-hand side (n,)."""
        weight, along = self.weight[run], self.weight[run] @ self.basis[run]
        return weight - along @ self.basis_inverse @ along.T, weight @ self.rest[run]

    def errors_along(self, direction: Array) -> tuple[Array, Array]:
        """Error of each run along a direction (n,), as its other readings show it, and its standard deviation, (F,)."""
        turned, core, _ = _projected(self, direction[:, None])
        moved, covariance = _moved(self, turned, core)
        rest = self.rest + self.basis @ moved
        own = np.einsum("i,ri->r", direction, turned[:, :, 0])
        along = np.einsum("ri,ri->r", turned[:, :, 0], rest)
        sound = own > 0
        safe = np.where(sound, own, 1.0)
        # What was accepted, and the stated errors, are known only so well from the other readings.
        shared = np.einsum("ri,rib->rb", turned[:, :, 0], self.basis) / safe[:, None]
        variance = 1.0 / safe + np.einsum("rb,bc,rc->r", shared, covariance, shared)
        return np.where(sound, along / safe, np.nan), np.where(sound, np.sqrt(variance), np.nan)


def gather(observations: Array, weight: Array, candidates: Array, accepted: Array, stated: Array) -> Evidence:
    """Work out the inner products.

    Parameters
    ----------
    observations : (F, n) array
        m; any number where not used.
    weight : (F, n, n) array
        Inverse covariance of a run's observations with its line projected out, 1/m²; zero where not used.
    candidates : (F, n, c) array
        Change of the observations for a candidate of size 1, m per size.
    accepted : (F, n, a) array
        The same of what is accepted already, m per size: free sizes.
    stated : (F, n, q) array
        Change for one standard uncertainty of each stated error that all runs share, m.

    Returns
    -------
    Evidence
        The candidates' information, given the rest.

    Notes
    -----
    With W the weights, X the columns and u ~ N(0, 1) the stated errors, min over sizes and u of
    (y − Xb − Ju)'W(y − Xb − Ju) + u'u (C. R. Henderson's mixed model equations; S. R. Searle, G. Casella and
    C. E. McCulloch, *Variance Components*, 1992, ch. 7): what the candidates add is the Schur complement.

    Examples
    --------
    >>> x = np.arange(5.0)
    >>> design = np.column_stack([np.ones(5), -x])
    >>> weight = np.eye(5) - design @ np.linalg.pinv(design)
    >>> heads = 9.0 - np.array([[0.1], [0.2], [0.3]]) * x
    >>> heads[:, 2] += 0.5
    >>> column = np.zeros((3, 5, 1))
    >>> column[:, 2] = 1.0
    >>> none = np.zeros((3, 5, 0))
    >>> evidence = gather(heads, np.repeat(weight[None], 3, axis=0), column, none, none)
    >>> evidence.sizes((0,))[0].round(6).tolist()
    [0.5]
    """
    flat = observations.shape[0] * observations.shape[1]
    basis = np.concatenate([accepted, stated], axis=2)
    free = accepted.shape[2]
    turned_y = np.einsum("rij,rj->ri", weight, observations)
    turned_basis = weight @ basis
    turned = weight @ candidates
    b, c = basis.shape[2], candidates.shape[2]
    columns = basis.reshape(flat, b)
    inner = columns.T @ turned_basis.reshape(flat, b)
    inner[np.arange(free, b), np.arange(free, b)] += 1.0
    inverse, whole = _inverse(inner) if b else (inner, False)
    cross = columns.T @ turned.reshape(flat, c)
    right = columns.T @ turned_y.reshape(flat)
    sizes = inverse @ right
    own = candidates.reshape(flat, c).T @ turned.reshape(flat, c)
    total = float(observations.reshape(flat) @ turned_y.reshape(flat))
    used = np.einsum("rii->ri", weight) > 0
    return Evidence(
        information=own - cross.T @ inverse @ cross,
        score=candidates.reshape(flat, c).T @ turned_y.reshape(flat) - cross.T @ sizes,
        rest=np.where(used, observations - basis @ sizes, 0.0),
        weight=weight,
        basis=basis,
        basis_inverse=inverse,
        whole=whole,
        chi_square=total - float(right @ sizes),
        # By the heaviest reading of each run: a column that the lines make up has next to nothing of it left.
        own=np.einsum("rnc,r->c", candidates**2, np.einsum("rii->ri", weight).max(axis=1, initial=0.0)),
    )


def _inverse(inner: Array) -> tuple[Array, bool]:
    """Inverse of the information over all that it determines, and whether that is all of it."""
    values, vectors = np.linalg.eigh(inner)
    sound = values > 1e-12 * values.max()
    part = vectors[:, sound]
    return np.asarray((part / values[sound]) @ part.T), bool(sound.all())


def freed(evidence: Evidence, directions: Array) -> tuple[float, int]:
    """Return what is gained in χ² by giving each run directions of its own, and how many unknowns that takes.

    Parameters
    ----------
    evidence : Evidence
        Of what is accepted so far.
    directions : (n, d) array
        Change of the observations along each direction, m per unit of it.

    Returns
    -------
    gain : float
        In χ², the accepted effects and stated errors fitted anew.
    unknowns : int
        Directions that the runs' observations determine.

    Examples
    --------
    >>> weight = (np.eye(4) - 0.25)[None]
    >>> none = np.zeros((1, 4, 0))
    >>> evidence = gather(np.array([[0.0, 0.0, 3.0, 0.0]]), weight, none, none, none)
    >>> freed(evidence, np.array([[0.0], [0.0], [1.0], [0.0]]))
    (6.75, 1)
    """
    turned, core, unknowns = _projected(evidence, directions)
    along = np.einsum("rid,ri->rd", turned, evidence.rest)
    direct = float(np.einsum("rd,rde,re->", along, core, along))
    if evidence.basis.shape[2] == 0:
        return direct, unknowns
    pull = np.einsum("rib,rid,rde,re->b", evidence.basis, turned, core, along, optimize=True)
    return direct + float(pull @ _moved(evidence, turned, core)[0]), unknowns


def _projected(evidence: Evidence, directions: Array) -> tuple[Array, Array, int]:
    """Directions times the weights, the inverse of their information per run, and how many the runs determine."""
    turned = evidence.weight @ directions
    core = directions.T @ turned
    if directions.shape[1] == 1:
        sound = core > _NOTHING * core.max(initial=0.0)
        inverse = np.where(sound, 1.0 / np.where(sound, core, 1.0), 0.0)
        return turned, inverse, int(sound.sum())
    inverse = np.linalg.pinv(core, rcond=_NOTHING, hermitian=True)
    return turned, np.asarray(inverse), round(float(np.einsum("rde,red->", inverse, core)))


def _moved(evidence: Evidence, turned: Array, core: Array) -> tuple[Array, Array]:
    """How the accepted effects move back once each run is free along the directions (b,), and their covariance then."""
    along = np.einsum("rid,ri->rd", turned, evidence.rest)
    shared = turned.transpose(0, 2, 1) @ evidence.basis
    pull = np.einsum("rdb,rde,re->b", shared, core, along, optimize=True)
    short = _freed_covariance(evidence, shared, core)
    if short is not None:
        return np.asarray(short @ pull), short
    lost = np.einsum("rdb,rde,rec->bc", shared, core, shared, optimize=True)
    left = np.linalg.pinv(evidence.basis_inverse, rcond=1e-12, hermitian=True) - lost
    covariance = np.linalg.pinv(left, rcond=1e-10, hermitian=True)
    return np.asarray(covariance @ pull), np.asarray(covariance)


def _freed_covariance(evidence: Evidence, shared: Array, core: Array) -> Array | None:
    """Covariance of the accepted effects with each run free along d directions, by Woodbury's identity.

    With many stated errors it is the inverse of a large matrix, the freedom a change of small rank, R d, to one whose
    inverse stands. None where that inverse is not whole, or where so much freedom leaves an effect undetermined.
    """
    if not evidence.whole:
        return None
    values, vectors = np.linalg.eigh(core)
    root = vectors * np.sqrt(np.maximum(values, 0.0))[:, None, :]
    rows = np.einsum("rdb,rde->reb", shared, root).reshape(-1, shared.shape[2])
    across = rows @ evidence.basis_inverse
    left = np.eye(len(rows)) - across @ rows.T
    if np.linalg.eigvalsh(left)[0] < _LEFT:
        return None
    return np.asarray(evidence.basis_inverse + across.T @ np.linalg.solve(left, across))
