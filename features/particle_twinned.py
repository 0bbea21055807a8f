"""Explicit multiply twinned particles: Mackay icosahedron and Ino decahedron.

Positions are in nearest-neighbour distances of the unstrained lattice along the shell (icosahedron)
or along the axis (decahedron). Mackay, Acta Cryst. 15, 916 (1962); Ino, J. Phys. Soc. Jpn. 27, 941
(1969).
"""

import numpy as np
from numpy.typing import NDArray

from features.coordination import coordination_numbers, generalised_coordination
from features.particle_lattice import IntArray
from features.particle_polyhedron import ExplicitParticle, SiteClass

__all__ = ["decahedron_particle", "icosahedron_particle"]

FloatArray = NDArray[np.float64]

# tangential neighbours of a Mackay icosahedron are 5 % farther apart than radial ones, and the
# second neighbours of the lattice 41 % farther
_CUTOFF = 1.2
_BULK_COORDINATION = 12


def _label(
    positions: FloatArray, kind: IntArray, names: tuple[tuple[str, str], ...]
) -> ExplicitParticle:
    """Class atoms by the kind that their construction gave them (-1 inside) and coordination."""
    coordination, table = coordination_numbers(positions, _CUTOFF)
    generalised = generalised_coordination(coordination, table, _BULK_COORDINATION)
    surface = np.flatnonzero(kind >= 0)
    key = np.column_stack([kind[surface], coordination[surface]])
    rows, index = np.unique(key, axis=0, return_inverse=True)
    class_index = np.full(len(positions), -1, dtype=np.int64)
    class_index[surface] = index.reshape(-1)
    classes = tuple(SiteClass(names[k][0], names[k][1], int(c)) for k, c in rows)
    centred = positions - positions.mean(axis=0)
    return ExplicitParticle(centred, coordination, generalised, classes, class_index)


def _icosahedron_corners() -> FloatArray:
    golden = (1.0 + np.sqrt(5.0)) / 2.0
    pairs = [(a, b * golden) for a in (1.0, -1.0) for b in (1.0, -1.0)]
    corners = [c for a, b in pairs for c in ((0.0, a, b), (a, b, 0.0), (b, 0.0, a))]
    return np.array(corners) / 2.0


def _icosahedron_shell(shell: int) -> tuple[FloatArray, IntArray]:
    """Return positions of one shell and, for each atom, on how many corners it depends."""
    corners = _icosahedron_corners()
    near = np.abs(np.linalg.norm(corners[:, None] - corners[None], axis=2) - 1.0) < 1e-9
    edges = [(i, j) for i in range(12) for j in range(i + 1, 12) if near[i, j]]
    faces = [(i, j, k) for i, j in edges for k in range(j + 1, 12) if near[i, k] and near[j, k]]
    steps = np.arange(1, shell)[:, None]
    on_edges = [corners[i] * steps + corners[j] * (shell - steps) for i, j in edges]
    inner = np.array([(a, b) for a in range(1, shell) for b in range(1, shell - a)], dtype=int)
    weights = np.column_stack([inner, shell - inner.sum(axis=1)]) if len(inner) else inner
    on_faces = [weights @ corners[list(face)] for face in faces] if len(inner) else []
    groups = [
        shell * corners,
        np.concatenate(on_edges),
        np.concatenate([np.empty((0, 3)), *on_faces]),
    ]
    kind = np.repeat([0, 1, 2], [len(g) for g in groups])
    return np.concatenate(groups), kind.astype(np.int64)


def icosahedron_particle(n_shells: int) -> ExplicitParticle:
    """Build a Mackay icosahedron.

    Parameters
    ----------
    n_shells : int, >= 1
        Shells around the central atom.

    Returns
    -------
    ExplicitParticle

    Examples
    --------
    >>> icosahedron_particle(2).n_atoms
    55
    """
    shells = [_icosahedron_shell(n) for n in range(1, n_shells + 1)]
    positions = np.concatenate([np.zeros((1, 3)), *(p for p, _ in shells)])
    kind = np.full(len(positions), -1, dtype=np.int64)
    kind[-len(shells[-1][1]) :] = shells[-1][1]
    names = (("vertex", "(111)"), ("edge", "(111)/(111)"), ("terrace", "(111)"))
    return _label(positions, kind, names)


def _decahedron_columns(ring: int) -> tuple[FloatArray, NDArray[np.bool_]]:
    """Return the column positions of one ring, and which columns lie on a twin plane."""
    if ring == 0:
        return np.zeros((1, 2)), np.ones(1, dtype=np.bool_)
    angle = 2.0 * np.pi * np.arange(5) / 5.0
    # neighbouring columns of a (110) net are sqrt(3)/2 nearest distances apart along a twin plane
    corner = np.sqrt(0.75) * np.column_stack([np.cos(angle), np.sin(angle)])
    steps = np.arange(ring)[:, None]
    sides = [corner[i] * (ring - steps) + corner[(i + 1) % 5] * steps for i in range(5)]
    return np.concatenate(sides), np.tile(np.arange(ring) == 0, 5)


def _decahedron_ring(ring: int, last: int, height: int) -> tuple[FloatArray, IntArray]:
    """Return positions and kinds of the columns of one ring."""
    columns, is_twin = _decahedron_columns(ring)
    n = height - ring
    z = np.arange(n) - (n - 1) / 2.0
    positions = np.column_stack([np.repeat(columns, n, axis=0), np.tile(z, len(columns))])
    twin = np.repeat(is_twin, n)
    is_end = np.tile((np.arange(n) == 0) | (np.arange(n) == n - 1), len(columns))
    if ring == last:
        kind = np.where(is_end, np.where(twin, 0, 2), np.where(twin, 3, 5))
    else:
        kind = np.where(is_end, np.where(twin, 6 if ring == 0 else 1, 4), -1)
    return positions, kind.astype(np.int64)


def decahedron_particle(n_rings: int) -> ExplicitParticle:
    """Build an Ino decahedron with square (100) sides.

    Parameters
    ----------
    n_rings : int, >= 1
        Rings of columns around the five-fold axis; a side has ``n_rings + 1`` atoms each way.

    Returns
    -------
    ExplicitParticle

    Examples
    --------
    >>> decahedron_particle(1).n_atoms
    13
    """
    height = 2 * n_rings + 1
    rings = [_decahedron_ring(k, n_rings, height) for k in range(n_rings + 1)]
    names = (
        ("vertex", "(111)/(100)"),
        ("edge", "(111)/(111)"),
        ("edge", "(111)/(100)"),
        ("edge", "(100)/(100)"),
        ("terrace", "(111)"),
        ("terrace", "(100)"),
        ("vertex", "(111)"),
    )
    return _label(
        np.concatenate([p for p, _ in rings]), np.concatenate([k for _, k in rings]), names
    )
