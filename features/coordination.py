"""Coordination and generalised coordination of atoms given by their positions.

Generalised coordination of a site: the sum of its neighbours' coordination numbers over the
greatest value that the sum's length can have in the bulk (12 for a top site of a close-packed
metal, 18 bridge, 22 three-fold hollow, 26 four-fold hollow): Calle-Vallejo et al., Angew. Chem.
Int. Ed. 53, 8316 (2014).
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from features.errors import PhysicsRangeError, explain

__all__ = [
    "MAXIMUM_COORDINATION",
    "coordination_numbers",
    "generalised_coordination",
    "shared_generalised_coordination",
]

IntArray = NDArray[np.int64]
FloatArray = NDArray[np.float64]

MAXIMUM_COORDINATION = {"top": 12, "bridge": 18, "hollow3": 22, "hollow4": 26}
"""Neighbours of one, two, three and four adjoining atoms in a close-packed bulk."""


def _pairs(positions: FloatArray, cutoff: float) -> IntArray:
    from scipy.spatial import cKDTree  # noqa: PLC0415 - scipy.spatial is slow to load

    pairs = cKDTree(positions).query_pairs(cutoff, output_type="ndarray")
    return np.concatenate([pairs, pairs[:, ::-1]]).astype(np.int64)


def coordination_numbers(positions: ArrayLike, cutoff: float) -> tuple[IntArray, IntArray]:
    """Count the atoms within a cutoff of each atom.

    Parameters
    ----------
    positions : array-like, shape (n_atoms, 3)
    cutoff : float, > 0
        In the unit of the positions; between the first and the second neighbour distance.

    Returns
    -------
    coordination : ndarray of int, shape (n_atoms,)
    pairs : ndarray of int, shape (n_pairs, 2)
        Every neighbouring pair, in both orders.

    Raises
    ------
    PhysicsRangeError
        If positions are not three-dimensional or the cutoff is not positive.

    Examples
    --------
    >>> coordination_numbers([[0, 0, 0], [1, 0, 0], [2, 0, 0]], 1.2)[0].tolist()
    [1, 2, 1]
    """
    points = np.asarray(positions, dtype=np.float64)
    if points.ndim != 2 or points.shape[1] != 3 or not cutoff > 0.0:
        raise PhysicsRangeError(
            explain(
                "positions or cutoff out of range",
                expected="shape (n_atoms, 3) and a cutoff above zero",
                found=f"shape {points.shape}, cutoff {cutoff}",
            )
        )
    pairs = _pairs(points, cutoff)
    return np.bincount(pairs[:, 0], minlength=len(points)).astype(np.int64), pairs


def generalised_coordination(
    coordination: ArrayLike, pairs: IntArray, maximum: float = 12.0
) -> FloatArray:
    """Return the generalised coordination of every atom as a top site.

    Parameters
    ----------
    coordination : array-like, shape (n_atoms,)
    pairs : ndarray of int, shape (n_pairs, 2)
        As given by `coordination_numbers`.
    maximum : float, default 12
        Coordination in the bulk (8 for bcc with nearest neighbours).

    Returns
    -------
    ndarray, shape (n_atoms,)

    Examples
    --------
    >>> number, pairs = coordination_numbers([[0, 0, 0], [1, 0, 0], [2, 0, 0]], 1.2)
    >>> (12 * generalised_coordination(number, pairs)).round(6).tolist()
    [2.0, 2.0, 2.0]
    """
    weights = np.asarray(coordination, dtype=np.float64)
    sums = np.bincount(pairs[:, 0], weights[pairs[:, 1]], minlength=len(weights))
    return sums / maximum


def shared_generalised_coordination(
    members: ArrayLike, coordination: ArrayLike, pairs: IntArray, maximum: float
) -> float:
    """Return the generalised coordination of a bridge or hollow site.

    The sum runs over all atoms that neighbour at least one member of the site and are no members.

    Parameters
    ----------
    members : array-like of int
        Atoms that the adsorbate touches.
    coordination, pairs
        As given by `coordination_numbers`.
    maximum : float
        One of `MAXIMUM_COORDINATION`, by the number of members.

    Returns
    -------
    float

    Examples
    --------
    >>> number, pairs = coordination_numbers([[0, 0, 0], [1, 0, 0], [2, 0, 0]], 1.2)
    >>> round(18 * shared_generalised_coordination([0, 1], number, pairs, 18), 6)
    1.0
    """
    site = np.asarray(members, dtype=np.int64)
    around = np.setdiff1d(pairs[np.isin(pairs[:, 0], site), 1], site)
    return float(np.asarray(coordination)[around].sum() / maximum)
