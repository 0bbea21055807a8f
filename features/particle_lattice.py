"""Crystal lattices in whole numbers: sites, neighbours, facets and their broken bonds.

Cubic coordinates are in half lattice constants. Hexagonal ones are thirds of the two basal vectors
(120 degrees apart) and halves of the c axis. Neighbours are the nearest ones: 12 (fcc, hcp) or
8 (bcc). Distances are in nearest-neighbour distances unless a name says nm.
"""

from dataclasses import dataclass
from functools import cache
from itertools import permutations, product

import numpy as np
from numpy.typing import NDArray

from features.errors import UnknownMaterialError, explain

__all__ = ["CrystalLattice", "FacetFamily", "IntArray", "crystal_lattice"]

IntArray = NDArray[np.int64]
FloatArray = NDArray[np.float64]

IDEAL_C_OVER_A = float(np.sqrt(8.0 / 3.0))


@dataclass(frozen=True)
class FacetFamily:
    """Symmetry-equivalent facets.

    Attributes
    ----------
    name : str
        Miller indices in parentheses.
    normals : ndarray of int, shape (n_facets, 3)
        An atom at x lies on or below a facet's plane if ``normals @ x <= offset``.
    period : int
        Offsets that differ by this much give the same termination.
    terminations : ndarray of int, shape (n_facets,)
        Offset, modulo the period, of the termination with the fewest broken bonds.
    broken_bonds : float
        Broken nearest-neighbour bonds per area, in one over the squared nearest distance.
    length : float
        Euclidean length of a normal, so that ``offset / length`` is a distance.
    """

    name: str
    normals: IntArray
    period: int
    terminations: IntArray
    broken_bonds: float
    length: float


@dataclass(frozen=True)
class CrystalLattice:
    """A lattice by its sites modulo a box, and the neighbour vectors of each of them.

    Attributes
    ----------
    structure : {"fcc", "bcc", "hcp"}
    box : ndarray of int, shape (3,)
    basis : ndarray of int, shape (n_basis, 3)
    neighbours : ndarray of int, shape (n_basis, n_neighbours, 3)
    cartesian : ndarray, shape (3, 3)
        ``x @ cartesian`` is a position in nearest-neighbour distances.
    facets : dict of str to FacetFamily
    """

    structure: str
    box: IntArray
    basis: IntArray
    neighbours: IntArray
    cartesian: FloatArray
    facets: dict[str, FacetFamily]

    @property
    def bulk_coordination(self) -> int:
        """Number of nearest neighbours of an atom in the bulk."""
        return int(self.neighbours.shape[1])


def _signed(*index: int) -> IntArray:
    """Return all distinct permutations of an index with all signs."""
    signs = product((1, -1), repeat=3)
    every = {
        tuple(s * i for s, i in zip(sign, order, strict=True))
        for sign in signs
        for order in permutations(index)
    }
    return np.array(sorted(every), dtype=np.int64)


_HEXAGON = ((1, 0), (0, 1), (-1, 1), (-1, 0), (0, -1), (1, -1))
_NORMALS: dict[str, dict[str, tuple[IntArray, int]]] = {
    "fcc": {
        "(111)": (_signed(1, 1, 1), 2),
        "(100)": (_signed(1, 0, 0), 1),
        "(110)": (_signed(1, 1, 0), 1),
    },
    "bcc": {"(110)": (_signed(1, 1, 0), 2), "(100)": (_signed(1, 0, 0), 1)},
    "hcp": {
        "(0001)": (np.array([[0, 0, 1], [0, 0, -1]], dtype=np.int64), 2),
        "(10-10)": (np.array([(h, k, 0) for h, k in _HEXAGON], dtype=np.int64), 3),
        "(10-11)": (
            np.array([(2 * h, 2 * k, s) for h, k in _HEXAGON for s in (3, -3)], dtype=np.int64),
            6,
        ),
    },
}


def _sites(structure: str) -> tuple[IntArray, IntArray, IntArray]:
    """Return box, basis and neighbour vectors."""
    if structure == "hcp":
        basal = [(3, 0, 0), (0, 3, 0), (3, 3, 0)]
        out = [(u, v, w) for u, v in ((2, 1), (-1, 1), (-1, -2)) for w in (1, -1)]
        first = np.array([*basal, *(tuple(-i for i in b) for b in basal), *out], dtype=np.int64)
        basis = np.array([(0, 0, 0), (2, 1, 1)], dtype=np.int64)
        return np.array([3, 3, 2], dtype=np.int64), basis, np.stack([first, -first])
    index = (1, 1, 0) if structure == "fcc" else (1, 1, 1)
    cells = np.array([(0, 0, 0), *_signed(*index) % 2], dtype=np.int64)
    basis = np.unique(cells, axis=0)
    neighbours = np.broadcast_to(_signed(*index), (len(basis), *_signed(*index).shape))
    return np.array([2, 2, 2], dtype=np.int64), basis, neighbours


def _cartesian(structure: str, c_over_a: float) -> FloatArray:
    if structure == "hcp":
        a1, a2 = np.array([1.0, 0.0, 0.0]), np.array([-0.5, np.sqrt(0.75), 0.0])
        return np.stack([a1 / 3.0, a2 / 3.0, np.array([0.0, 0.0, c_over_a / 2.0])])
    return np.asarray(np.eye(3) / np.sqrt(2.0 if structure == "fcc" else 3.0))


def _broken_by_offset(
    normal: IntArray, period: int, basis: IntArray, neighbours: IntArray
) -> IntArray:
    """Return, for each offset modulo the period, the bonds that a cut above it breaks."""
    height = basis @ normal
    reach = neighbours @ normal
    offsets = np.arange(period)[:, None, None]
    # layers of one sublattice with offset - reach < layer <= offset
    above = (offsets - height[:, None]) // period
    below = (offsets - reach - height[:, None]) // period
    return np.asarray(np.where(reach > 0, above - below, 0).sum(axis=(1, 2)), dtype=np.int64)


def _family(
    name: str,
    normals: IntArray,
    period: int,
    sites: tuple[IntArray, IntArray, IntArray],
    cart: FloatArray,
) -> FacetFamily:
    box, basis, neighbours = sites
    broken = np.stack([_broken_by_offset(n, period, basis, neighbours) for n in normals])
    reciprocal = np.linalg.inv(cart)
    length = float(np.linalg.norm(reciprocal @ normals[0]))
    cell_volume = abs(float(np.linalg.det(cart))) * int(box.prod())
    return FacetFamily(
        name,
        normals,
        period,
        np.argmin(broken, axis=1).astype(np.int64),
        float(broken.min()) * period / length / cell_volume,
        length,
    )


@cache
def crystal_lattice(structure: str, c_over_a: float = IDEAL_C_OVER_A) -> CrystalLattice:
    """Return the lattice of a structure with its low-index facets.

    Parameters
    ----------
    structure : {"fcc", "bcc", "hcp"}
    c_over_a : float, default sqrt(8/3)
        Axial ratio of hcp; the others ignore it.

    Returns
    -------
    CrystalLattice

    Raises
    ------
    UnknownMaterialError
        If there is no lattice for the structure.

    Examples
    --------
    >>> crystal_lattice("fcc").bulk_coordination
    12
    >>> facets = crystal_lattice("fcc").facets
    >>> round(facets["(100)"].broken_bonds / facets["(111)"].broken_bonds, 4)
    1.1547
    """
    if structure not in _NORMALS:
        raise UnknownMaterialError(
            explain(
                f"no particle can be built on the structure {structure!r}",
                expected="fcc, bcc or hcp",
                do="choose a metal with one of these structures",
            )
        )
    box, basis, neighbours = _sites(structure)
    cart = _cartesian(structure, c_over_a)
    families = {
        name: _family(name, normals, period, (box, basis, neighbours), cart)
        for name, (normals, period) in _NORMALS[structure].items()
    }
    return CrystalLattice(structure, box, basis, neighbours, cart, families)
