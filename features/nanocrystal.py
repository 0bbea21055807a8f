"""Crystallites atom by atom: spheres cut from cubic crystals, bonds and dangling bonds.

Lengths in nm. Structures with two sublattices, anion and cation, each bonded only to the other:
zincblende, diamond (both sublattices alike) and rocksalt.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from features.errors import PhysicsRangeError, explain

__all__ = ["ATOMS_PER_CELL", "Crystallite", "bond_vectors", "spherical_crystallite"]

ATOMS_PER_CELL = 8
"""Atoms in the cubic cell, both sublattices."""

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.intp]

_FCC = np.array([[0.0, 0.0, 0.0], [0.0, 0.5, 0.5], [0.5, 0.0, 0.5], [0.5, 0.5, 0.0]])
_TETRAHEDRAL = np.array([[1, 1, 1], [1, -1, -1], [-1, 1, -1], [-1, -1, 1]]) / 4.0
_OCTAHEDRAL = np.vstack([np.eye(3), -np.eye(3)]) / 2.0
_FEWEST_BONDS = {"zincblende": 2, "diamond": 2, "rocksalt": 3}


@dataclass(frozen=True)
class Crystallite:
    """Atoms of a crystallite.

    Attributes
    ----------
    positions_nm : ndarray of shape (n, 3)
        Positions; the centre of the sphere, an atom, is the origin.
    is_cation : ndarray of bool
        Sublattice of each atom.
    bonds : ndarray of shape (m, 2)
        Indices of the anion and the cation of each bond.
    bond_directions : ndarray of shape (m, 3)
        Unit vectors from anion to cation.
    dangling_atoms, dangling_directions : ndarray
        Atom and unit vector of each bond that the surface cut.
    diameter_nm : float
        Diameter of the sphere with the same number of atoms at the crystal's density.
    """

    positions_nm: FloatArray
    is_cation: NDArray[np.bool_]
    bonds: IntArray
    bond_directions: FloatArray
    dangling_atoms: IntArray
    dangling_directions: FloatArray
    diameter_nm: float


def bond_vectors(structure: str) -> FloatArray:
    """Return the vectors from an anion to its nearest cations, in units of the cell's edge.

    Parameters
    ----------
    structure : {"zincblende", "diamond", "rocksalt"}

    Returns
    -------
    ndarray of shape (4 or 6, 3)

    Raises
    ------
    PhysicsRangeError
        If the structure is not one of the three.

    Examples
    --------
    >>> len(bond_vectors("rocksalt"))
    6
    """
    if structure not in _FEWEST_BONDS:
        raise PhysicsRangeError(
            explain(
                "no crystallites of this structure",
                expected=f"one of {', '.join(_FEWEST_BONDS)}",
                found=structure,
            )
        )
    return _OCTAHEDRAL if structure == "rocksalt" else _TETRAHEDRAL


def spherical_crystallite(
    structure: str, lattice_a_nm: float, diameter_nm: float, *, cation_centred: bool = False
) -> Crystallite:
    """Cut a sphere around an atom and drop atoms that hang by too few bonds.

    Parameters
    ----------
    structure : {"zincblende", "diamond", "rocksalt"}
    lattice_a_nm : float
        Edge of the cubic cell, nm.
    diameter_nm : float
        Diameter of the cutting sphere, nm, > twice the bond.
    cation_centred : bool, default False
        Whether a cation sits at the centre; else an anion.

    Returns
    -------
    Crystallite

    Raises
    ------
    PhysicsRangeError
        If the structure is unknown or the sphere holds no bond.

    Examples
    --------
    >>> spherical_crystallite("zincblende", 0.5668, 2.0).is_cation.size
    163
    """
    steps = bond_vectors(structure)
    reach = int(np.ceil(diameter_nm / lattice_a_nm / 2.0)) + 1
    cells = np.stack(np.meshgrid(*[np.arange(-reach, reach + 1)] * 3, indexing="ij"), axis=-1)
    anions = (cells.reshape(-1, 1, 3) + _FCC).reshape(-1, 3)
    shift = -steps[0] if cation_centred else np.zeros(3)
    sites = np.vstack([anions + shift, anions + shift + steps[0]])
    cation = np.repeat([False, True], len(anions))
    inside = np.linalg.norm(sites, axis=1) * lattice_a_nm <= diameter_nm / 2.0 + 1e-9
    sites, cation = sites[inside], cation[inside]
    while True:
        bonds = _bonds(sites, cation, steps)
        enough = np.bincount(bonds.ravel(), minlength=len(sites)) >= _FEWEST_BONDS[structure]
        if enough.all():
            break
        sites, cation = sites[enough], cation[enough]
    if not len(bonds):
        raise PhysicsRangeError(
            explain("no crystal fits", expected="a larger sphere", found=f"{diameter_nm} nm")
        )
    return _finish(sites, cation, bonds, steps, lattice_a_nm)


def _neighbours(sites: FloatArray, cation: NDArray[np.bool_], steps: FloatArray) -> IntArray:
    """Return the atom at the end of each bond vector of each atom; -1 where there is none."""
    if not len(sites):
        return np.empty((0, len(steps)), dtype=np.intp)
    signs = np.where(cation, -1.0, 1.0)[:, None, None]
    distance, found = cKDTree(sites).query(sites[:, None, :] + signs * steps)
    return np.where(distance < 1e-6, found, -1)


def _bonds(sites: FloatArray, cation: NDArray[np.bool_], steps: FloatArray) -> IntArray:
    near = _neighbours(sites, cation, steps)
    near[cation] = -1
    anion, which = np.nonzero(near >= 0)
    return np.column_stack([anion, near[anion, which]])


def _finish(
    sites: FloatArray,
    cation: NDArray[np.bool_],
    bonds: IntArray,
    steps: FloatArray,
    lattice_a_nm: float,
) -> Crystallite:
    """Collect bonds and dangling bonds of the atoms that stay."""
    along = sites[bonds[:, 1]] - sites[bonds[:, 0]]
    cut, which = np.nonzero(_neighbours(sites, cation, steps) < 0)
    outward = steps[which] * np.where(cation[cut], -1.0, 1.0)[:, None]
    unit = np.linalg.norm(steps[0])
    return Crystallite(
        positions_nm=sites * lattice_a_nm,
        is_cation=cation,
        bonds=bonds,
        bond_directions=along / unit,
        dangling_atoms=cut,
        dangling_directions=outward / unit,
        diameter_nm=float(lattice_a_nm * (6.0 * len(sites) / (np.pi * ATOMS_PER_CELL)) ** (1 / 3)),
    )
