"""Atoms, surface atoms and sites of metal particles by shape and diameter.

The diameter is that of the sphere of equal volume: d = (6 N v / pi)^(1/3), N atoms of volume v in
the bulk. Sizes between closed shells are interpolated monotonically; nothing is built for large
particles, whose counts follow closed forms (`features.particle_ladder`). Surface atoms are those
with fewer nearest neighbours than in the bulk (12 for fcc and hcp, 8 for bcc). Crystals are
perfect: steps, islands and rounding of real particles are not described.
"""

from dataclasses import dataclass
from functools import cache

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from features.errors import PhysicsRangeError, UnknownMaterialError, explain
from features.particle_ladder import Ladder, shell_ladder
from features.particle_lattice import crystal_lattice
from features.particle_metal import MetalLattice, metal_lattice
from features.particle_polyhedron import ExplicitParticle, SiteClass
from features.particle_shapes import WULFF, explicit_particle, require_shape
from features.particle_wulff import wulff_ladder, wulff_particle

__all__ = [
    "FEWEST_ATOMS",
    "LARGEST_DIAMETER_nm",
    "ParticleCounts",
    "atoms_at_size",
    "atoms_in_sphere",
    "equivalent_diameter_nm",
    "magic_sizes",
    "nearest_particle",
    "particle_counts",
    "site_table",
]

FloatArray = NDArray[np.float64]

FEWEST_ATOMS = 13
"""Smallest particle described: one atom with a full shell of twelve neighbours."""

LARGEST_DIAMETER_nm = 30.0
"""Largest particle described, nm."""

_N_EXPLICIT_SHELLS = 7
# atoms of the lattice with the smallest volume per atom (10 cubic angstrom) at the largest diameter
_LARGEST_N_ATOMS = 1.5e6


@dataclass(frozen=True)
class ParticleCounts:
    """Sites of particles of one shape at many sizes.

    Attributes
    ----------
    classes : tuple of SiteClass
    diameter_nm, n_atoms, n_surface : ndarray, shape (n_sizes,)
        Numbers of atoms are means over sizes nearby, hence not whole.
    n_sites : ndarray, shape (n_sizes, n_classes)
    generalised_coordination : ndarray, shape (n_sizes, n_classes)
        Mean over the sites of the class.
    bulk_coordination : int
    """

    classes: tuple[SiteClass, ...]
    diameter_nm: FloatArray
    n_atoms: FloatArray
    n_surface: FloatArray
    n_sites: FloatArray
    generalised_coordination: FloatArray
    bulk_coordination: int

    @property
    def dispersion(self) -> FloatArray:
        """Surface atoms over all atoms."""
        return self.n_surface / self.n_atoms


def equivalent_diameter_nm(n_atoms: ArrayLike, atomic_volume_nm3: float) -> FloatArray:
    """Return the diameter of the sphere that holds a number of atoms.

    Parameters
    ----------
    n_atoms : array-like
        > 0.
    atomic_volume_nm3 : float
        > 0.

    Returns
    -------
    ndarray
        Diameter, nm.

    Examples
    --------
    >>> round(float(equivalent_diameter_nm(309, 0.015059)), 2)
    2.07
    """
    return np.cbrt(6.0 * np.asarray(n_atoms, dtype=np.float64) * atomic_volume_nm3 / np.pi)


def atoms_in_sphere(diameter_nm: ArrayLike, atomic_volume_nm3: float) -> FloatArray:
    """Return the number of atoms in a sphere, the inverse of `equivalent_diameter_nm`.

    Parameters
    ----------
    diameter_nm : array-like
        > 0.
    atomic_volume_nm3 : float
        > 0.

    Returns
    -------
    ndarray

    Examples
    --------
    >>> round(float(atoms_in_sphere(3.0, 0.015059)))
    939
    """
    diameter = np.asarray(diameter_nm, dtype=np.float64)
    return np.pi * diameter**3 / (6.0 * atomic_volume_nm3)


def atoms_at_size(diameter_nm: ArrayLike, metal: MetalLattice) -> tuple[FloatArray, FloatArray]:
    """Return diameters and atoms as flat arrays, or refuse sizes that are not described.

    Parameters
    ----------
    diameter_nm : array-like
        From the size of 13 atoms to 30 nm.
    metal : MetalLattice

    Returns
    -------
    diameter_nm, n_atoms : ndarray, shape (n_sizes,)

    Raises
    ------
    PhysicsRangeError
        If a size is out of range.

    Examples
    --------
    >>> atoms_at_size(2.0, metal_lattice("Pt"))[1].round().tolist()
    [278.0]
    """
    diameter = np.atleast_1d(np.asarray(diameter_nm, dtype=np.float64))
    least = float(equivalent_diameter_nm(FEWEST_ATOMS, metal.atomic_volume_nm3))
    # a diameter written with three decimals may fall a hair short of thirteen atoms
    inside = (diameter > least - 1e-3) & (diameter <= LARGEST_DIAMETER_nm)
    if not inside.all():
        raise PhysicsRangeError(
            explain(
                f"no particle of {metal.name} at this size",
                expected=f"{least:.3f} nm ({FEWEST_ATOMS} atoms) to {LARGEST_DIAMETER_nm:g} nm",
                found=f"{diameter[~inside][0]:g} nm",
            )
        )
    atoms = np.maximum(atoms_in_sphere(diameter, metal.atomic_volume_nm3), float(FEWEST_ATOMS))
    return diameter, atoms


def _require_energies(metal: MetalLattice) -> None:
    if not metal.surface_energies_J_m2:
        raise UnknownMaterialError(
            explain(
                "no surface energies for a Wulff shape",
                where=f"material {metal.name!r}",
                do="name another shape of the metal's structure",
            )
        )


@cache
def _series_ladder(structure: str, shape: str) -> Ladder:
    return shell_ladder(
        lambda n: explicit_particle(structure, shape, n), _N_EXPLICIT_SHELLS, _LARGEST_N_ATOMS
    )


def _ladder(metal: MetalLattice, shape: str) -> Ladder:
    require_shape(metal.structure, shape)
    if shape != WULFF:
        return _series_ladder(metal.structure, shape)
    _require_energies(metal)
    energies = metal.surface_energies_J_m2
    return wulff_ladder(metal.structure, energies, _LARGEST_N_ATOMS, metal.c_over_a)


def _as_metal(material: str | MetalLattice) -> MetalLattice:
    return metal_lattice(material) if isinstance(material, str) else material


def particle_counts(
    material: str | MetalLattice, shape: str, diameter_nm: ArrayLike
) -> ParticleCounts:
    """Count atoms and sites of particles at many diameters.

    Parameters
    ----------
    material : str or MetalLattice
        Formula such as ``Pt`` or ``Pt3Ni``.
    shape : str
        One of `features.particle_shapes.available_shapes` for the metal's structure.
    diameter_nm : array-like, shape (n_sizes,)
        Volume-equivalent diameters, from that of 13 atoms to 30 nm.

    Returns
    -------
    ParticleCounts

    Raises
    ------
    FormulaError, UnknownMaterialError
        If the material cannot be read, or nothing is known of it.
    PhysicsRangeError
        If the shape belongs to another structure or is unknown, or a size is out of range.

    Examples
    --------
    >>> shells = particle_counts("Pt", "cuboctahedron", [2.0721, 20.0])
    >>> shells.dispersion.round(3).tolist()
    [0.524, 0.067]
    """
    metal = _as_metal(material)
    ladder = _ladder(metal, shape)
    diameter, atoms = atoms_at_size(diameter_nm, metal)
    counts = ladder.counts_at(atoms)
    return ParticleCounts(
        ladder.classes,
        diameter,
        atoms,
        counts.sum(axis=1),
        counts,
        ladder.generalised_at(atoms),
        crystal_lattice(metal.structure).bulk_coordination,
    )


def site_table(material: str | MetalLattice, shape: str, diameter_nm: float) -> pd.DataFrame:
    """Return the sites of one particle, one row a class.

    Parameters
    ----------
    material, shape
        As for `particle_counts`.
    diameter_nm : float

    Returns
    -------
    pandas.DataFrame
        Columns ``site`` (terrace, edge, vertex), ``facet``, ``coordination``,
        ``generalised_coordination``, ``n_sites`` and ``fraction`` (of the surface atoms); the most
        frequent class first. Classes with less than a hundredth of a site are left out.

    Raises
    ------
    FormulaError, UnknownMaterialError, PhysicsRangeError
        As for `particle_counts`.

    Examples
    --------
    >>> table = site_table("Pt", "cuboctahedron", 2.0721)
    >>> table.loc[0, "site"], table.loc[0, "facet"], int(table.loc[0, "n_sites"].round())
    ('edge', '(111)/(100)', 72)
    """
    counts = particle_counts(material, shape, [diameter_nm])
    table = pd.DataFrame(
        {
            "site": [c.site for c in counts.classes],
            "facet": [c.facet for c in counts.classes],
            "coordination": [c.coordination for c in counts.classes],
            "generalised_coordination": counts.generalised_coordination[0],
            "n_sites": counts.n_sites[0],
            "fraction": counts.n_sites[0] / counts.n_surface[0],
        }
    )
    frequent = table[table["n_sites"] >= 0.01]
    return frequent.sort_values("n_sites", ascending=False, kind="stable").reset_index(drop=True)


def magic_sizes(
    material: str | MetalLattice, shape: str, largest_diameter_nm: float = 20.0
) -> pd.DataFrame:
    """List the closed shells of a shape.

    Parameters
    ----------
    material, shape
        As for `particle_counts`; not ``wulff``.
    largest_diameter_nm : float, default 20

    Returns
    -------
    pandas.DataFrame
        Columns ``shell``, ``n_atoms``, ``n_surface``, ``diameter_nm``.

    Raises
    ------
    FormulaError, UnknownMaterialError, PhysicsRangeError
        As for `particle_counts`.

    Examples
    --------
    >>> magic_sizes("Au", "icosahedron", 2.2)["n_atoms"].tolist()
    [13, 55, 147, 309]
    """
    metal = _as_metal(material)
    explicit_particle(metal.structure, shape, 1)
    ladder = _series_ladder(metal.structure, shape)
    table = pd.DataFrame(
        {
            "shell": np.arange(1, len(ladder.n_atoms) + 1),
            "n_atoms": np.rint(ladder.n_atoms).astype(np.int64),
            "n_surface": np.rint(ladder.counts.sum(axis=1)).astype(np.int64),
            "diameter_nm": equivalent_diameter_nm(ladder.n_atoms, metal.atomic_volume_nm3),
        }
    )
    return table[table["diameter_nm"] <= largest_diameter_nm].reset_index(drop=True)


def nearest_particle(
    material: str | MetalLattice, shape: str, diameter_nm: float
) -> ExplicitParticle:
    """Build the particle of whole layers that comes nearest to a diameter.

    Parameters
    ----------
    material, shape, diameter_nm
        As for `site_table`.

    Returns
    -------
    ExplicitParticle
        Positions in nearest-neighbour distances: times `MetalLattice.nearest_distance_nm` for nm.

    Raises
    ------
    FormulaError, UnknownMaterialError, PhysicsRangeError
        As for `particle_counts`.

    Examples
    --------
    >>> nearest_particle("Pt", "truncated_octahedron", 1.7).n_atoms
    201
    """
    metal = _as_metal(material)
    ladder = _ladder(metal, shape)
    atoms = float(atoms_at_size(diameter_nm, metal)[1][0])
    if shape == WULFF:
        return wulff_particle(metal.structure, metal.surface_energies_J_m2, atoms, metal.c_over_a)
    shell = int(np.argmin(np.abs(np.cbrt(ladder.n_atoms) - np.cbrt(atoms)))) + 1
    return explicit_particle(metal.structure, shape, shell, metal.c_over_a)
