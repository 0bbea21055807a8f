"""Explicit particles cut from a lattice by facets, every site classed and counted.

A surface atom is one with fewer nearest neighbours than in the bulk. It belongs to every facet
whose missing half space holds at least one of its neighbours: one facet makes it a terrace atom,
two an edge atom, three or more a vertex atom. Generalised coordination is the sum of the
neighbours' coordination over the bulk's (top sites): Calle-Vallejo et al., Angew. Chem. Int. Ed.
53, 8316 (2014).
"""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from features.particle_lattice import CrystalLattice, IntArray

__all__ = [
    "ExplicitParticle",
    "ResolvedClass",
    "SiteClass",
    "cut_particle",
    "resolved",
    "surroundings",
]

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, order=True)
class SiteClass:
    """What makes two surface atoms alike.

    Attributes
    ----------
    site : {"terrace", "edge", "vertex"}
    facet : str
        Facet, or the facets that meet, such as ``(111)/(100)``.
    coordination : int
        Nearest neighbours.
    """

    site: str
    facet: str
    coordination: int


@dataclass(frozen=True, order=True)
class ResolvedClass(SiteClass):
    """A class of atoms that share their generalised coordination as well.

    Attributes
    ----------
    generalised_coordination : float
    """

    generalised_coordination: float

    @property
    def whole(self) -> SiteClass:
        """The class without the distinction."""
        return SiteClass(self.site, self.facet, self.coordination)


@dataclass(frozen=True)
class ExplicitParticle:
    """Atoms of one particle.

    Attributes
    ----------
    positions : ndarray, shape (n_atoms, 3)
        In nearest-neighbour distances, centred.
    coordination : ndarray of int, shape (n_atoms,)
    generalised_coordination : ndarray, shape (n_atoms,)
    classes : tuple of SiteClass
        Site classes of the surface.
    class_index : ndarray of int, shape (n_atoms,)
        Position in ``classes``; -1 for an atom of the bulk.
    """

    positions: FloatArray
    coordination: IntArray
    generalised_coordination: FloatArray
    classes: tuple[SiteClass, ...]
    class_index: IntArray

    @property
    def n_atoms(self) -> int:
        """Number of atoms."""
        return len(self.coordination)

    @property
    def n_surface(self) -> int:
        """Number of atoms with fewer neighbours than in the bulk."""
        return int(np.count_nonzero(self.class_index >= 0))

    def site_counts(self) -> dict[SiteClass, int]:
        """Return the number of atoms of each class."""
        counts = np.bincount(self.class_index + 1, minlength=len(self.classes) + 1)[1:]
        return dict(zip(self.classes, counts.tolist(), strict=True))

    def coordination_sums(self) -> dict[SiteClass, float]:
        """Return the sum of generalised coordination over the atoms of each class."""
        sums = np.bincount(
            self.class_index + 1, self.generalised_coordination, minlength=len(self.classes) + 1
        )[1:]
        return dict(zip(self.classes, sums.tolist(), strict=True))


def resolved(particle: ExplicitParticle) -> ExplicitParticle:
    """Return the particle with its surface atoms classed by generalised coordination as well.

    Parameters
    ----------
    particle : ExplicitParticle

    Returns
    -------
    ExplicitParticle
        Classes are `ResolvedClass`.
    """
    surface = particle.class_index >= 0
    values = particle.generalised_coordination.round(6)
    key = np.column_stack([particle.class_index[surface], values[surface]])
    rows, index = np.unique(key, axis=0, return_inverse=True)
    old = [particle.classes[int(i)] for i in rows[:, 0]]
    classes = tuple(
        ResolvedClass(c.site, c.facet, c.coordination, float(value))
        for c, value in zip(old, rows[:, 1], strict=True)
    )
    class_index = np.full(particle.n_atoms, -1, dtype=np.int64)
    class_index[surface] = index.reshape(-1)
    return ExplicitParticle(
        particle.positions,
        particle.coordination,
        particle.generalised_coordination,
        classes,
        class_index,
    )


def _candidates(
    lattice: CrystalLattice, half_width: IntArray, shift: IntArray
) -> tuple[IntArray, IntArray]:
    """Return all sites in a box about the origin, and the basis index of each."""
    cells = [
        np.arange(-w // b - 1, w // b + 2) * b for w, b in zip(half_width, lattice.box, strict=True)
    ]
    corner = np.stack(np.meshgrid(*cells, indexing="ij"), axis=-1).reshape(-1, 3)
    sites = (corner[None, :, :] + lattice.basis[:, None, :] + shift).reshape(-1, 3)
    return sites, np.repeat(np.arange(len(lattice.basis)), len(corner))


def _half_width(normals: IntArray, offsets: IntArray) -> IntArray:
    """Return how far the polyhedron can reach along each coordinate: a bound by its own facets."""
    from scipy.spatial import HalfspaceIntersection  # noqa: PLC0415 - scipy.spatial is slow to load

    planes = np.column_stack([normals, -(offsets + 0.5)]).astype(np.float64)
    corners = HalfspaceIntersection(planes, np.zeros(3)).intersections
    return np.asarray(np.ceil(np.abs(corners).max(axis=0)), dtype=np.int64)


def surroundings(
    lattice: CrystalLattice, layers: Mapping[str, int]
) -> tuple[IntArray, IntArray, IntArray, IntArray]:
    """Return all lattice sites in and around a particle, occupied or not.

    Parameters
    ----------
    lattice, layers
        As for `cut_particle`.

    Returns
    -------
    sites : ndarray of int, shape (n_sites, 3)
    table : ndarray of int, shape (n_sites, n_neighbours)
        Row of each neighbour; ``n_sites`` where it lies outside of the region.
    normals, planes : ndarray of int
        Atoms are the sites with ``sites @ normals.T <= planes``.

    Examples
    --------
    >>> from features.particle_lattice import crystal_lattice
    >>> sites, _, normals, planes = surroundings(crystal_lattice("fcc"), {"(111)": 2, "(100)": 1})
    >>> int((sites @ normals.T <= planes).all(axis=1).sum())
    13
    """
    normals, planes, _ = _planes(lattice, layers)
    width = _half_width(normals, planes) + np.abs(lattice.neighbours).max(axis=(0, 1)) + 1
    sites, kind = _candidates(lattice, width, _shift(lattice, layers))
    return sites, _neighbour_table(lattice, sites, kind), normals, planes


def _neighbour_table(lattice: CrystalLattice, sites: IntArray, kind: IntArray) -> IntArray:
    """Return the row of each neighbour of each site, or the number of sites where it is missing."""
    low = sites.min(axis=0) - np.abs(lattice.neighbours).max(axis=(0, 1))
    span = sites.max(axis=0) + np.abs(lattice.neighbours).max(axis=(0, 1)) - low + 1
    strides = np.array([span[1] * span[2], span[2], 1])
    row_at = np.full(int(span.prod()), len(sites), dtype=np.int64)
    cell = (sites - low) @ strides
    row_at[cell] = np.arange(len(sites))
    return np.asarray(row_at[cell[:, None] + (lattice.neighbours @ strides)[kind]])


def _name(site_families: tuple[str, ...], n_facets: int) -> tuple[str, str]:
    kind = ("terrace", "edge", "vertex")[min(n_facets, 3) - 1]
    families = site_families * 2 if kind == "edge" and len(site_families) == 1 else site_families
    return kind, "/".join(families)


def _classify(
    touching: NDArray[np.bool_], family_of: IntArray, names: tuple[str, ...], coordination: IntArray
) -> tuple[tuple[SiteClass, ...], IntArray]:
    """Class the surface atoms by the facets that they touch and by coordination."""
    n_facets = np.minimum(touching.sum(axis=1), 3)
    touched = np.stack([touching[:, family_of == i].any(axis=1) for i in range(len(names))], axis=1)
    key = np.column_stack([n_facets, touched, coordination])
    rows, index = np.unique(key, axis=0, return_inverse=True)
    classes = tuple(
        SiteClass(
            *_name(tuple(n for n, is_in in zip(names, row[1:-1], strict=True) if is_in), row[0]),
            int(row[-1]),
        )
        for row in rows
    )
    return classes, index.reshape(-1)


def _inside(lattice: CrystalLattice, layers: Mapping[str, int]) -> tuple[IntArray, IntArray]:
    """Return the sites inside of all facets, and the basis index of each."""
    normals, planes, _ = _planes(lattice, layers)
    sites, kind = _candidates(lattice, _half_width(normals, planes), _shift(lattice, layers))
    # floating point holds these whole numbers exactly and multiplies them many times faster
    heights = sites.astype(np.float64) @ normals.T.astype(np.float64)
    kept = np.all(heights <= planes, axis=1)
    return sites[kept], kind[kept]


def cut_particle(lattice: CrystalLattice, layers: Mapping[str, int]) -> ExplicitParticle:
    """Cut a particle out of a lattice.

    Parameters
    ----------
    lattice : CrystalLattice
    layers : mapping of str to int
        For fcc, the value of a family's normals times the coordinates (half lattice constants) of
        its outermost layer; the particle is centred on an atom or on the octahedral hole,
        whichever makes its corners atoms. For bcc and hcp, centred on an atom, that many whole
        periods of a family beyond its first favourable termination.

    Returns
    -------
    ExplicitParticle

    Examples
    --------
    >>> from features.particle_lattice import crystal_lattice
    >>> shell = cut_particle(crystal_lattice("fcc"), {"(100)": 1, "(111)": 2})
    >>> shell.n_atoms, shell.n_surface
    (13, 12)
    """
    normals, planes, family_of = _planes(lattice, layers)
    sites, kind = _inside(lattice, layers)
    table = _neighbour_table(lattice, sites, kind)
    coordination = np.count_nonzero(table < len(sites), axis=1).astype(np.int64)
    generalised = np.append(coordination, 0)[table].sum(axis=1) / lattice.bulk_coordination
    surface = np.flatnonzero(coordination < lattice.bulk_coordination)
    reach = (lattice.neighbours @ normals.T).max(axis=1)
    touching = planes - sites[surface] @ normals.T < reach[kind[surface]]
    classes, index = _classify(touching, family_of, tuple(layers), coordination[surface])
    class_index = np.full(len(sites), -1, dtype=np.int64)
    class_index[surface] = index
    positions = sites @ lattice.cartesian
    return ExplicitParticle(
        positions - positions.mean(axis=0), coordination, generalised, classes, class_index
    )


def _planes(
    lattice: CrystalLattice, layers: Mapping[str, int]
) -> tuple[IntArray, IntArray, IntArray]:
    """Return normals, plane offsets and family numbers of all facets."""
    families = [lattice.facets[name] for name in layers]
    planes = [
        np.full(len(f.normals), n) if lattice.structure == "fcc" else f.terminations + f.period * n
        for f, n in zip(families, layers.values(), strict=True)
    ]
    family_of = np.repeat(np.arange(len(families)), [len(f.normals) for f in families])
    return np.concatenate([f.normals for f in families]), np.concatenate(planes), family_of


def _shift(lattice: CrystalLattice, layers: Mapping[str, int]) -> IntArray:
    """Return the origin's shift that makes an fcc polyhedron's corners atoms."""
    corner = layers.get("(111)", layers.get("(100)", 0))
    is_odd = lattice.structure == "fcc" and corner % 2 == 1
    return np.array([int(is_odd), 0, 0], dtype=np.int64)
