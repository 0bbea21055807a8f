"""Symmetry blocks: the Hamiltonian of a round crystallite splits into small independent parts.

A sphere around an atom of a cubic crystal keeps the site's point group. Commuting operations of it
(with spin: of its double group) label states; each label has its own, four or eight times smaller
matrix. Factoring a sparse matrix costs about the square of its size, so this is most of the speed.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import sparse
from scipy.spatial import cKDTree

from features.two_centre import orbital_rotation

__all__ = ["Operation", "SymmetryBlock", "block_basis", "symmetry_blocks"]

ComplexArray = NDArray[np.complex128]


@dataclass(frozen=True)
class Operation:
    """A rotation or reflection, what it does to spin, and the character of a block under it."""

    rotation: NDArray[np.float64]
    spin: ComplexArray
    character: complex


@dataclass(frozen=True)
class SymmetryBlock:
    """One label and its commuting operations.

    Attributes
    ----------
    label : str
    operations : tuple of Operation
    """

    label: str
    operations: tuple[Operation, ...]


def symmetry_blocks(structure: str, *, spin_orbit: bool) -> list[SymmetryBlock]:
    """Return the blocks that hold the band edges of an atom-centred sphere.

    Without spin: the three twofold axes; blocks whose states only repeat others by the threefold
    axis are left out. With spin: the fourfold rotation-reflection (tetrahedral) or the fourfold
    rotation with inversion (rocksalt) of the double group; blocks that only repeat others by
    time reversal are left out.

    Parameters
    ----------
    structure : {"zincblende", "diamond", "rocksalt"}
    spin_orbit : bool

    Returns
    -------
    list of SymmetryBlock

    Examples
    --------
    >>> [block.label for block in symmetry_blocks("zincblende", spin_orbit=False)]
    ['A', 'B']
    """
    if not spin_orbit:
        return [_twofold("A", (1, 1, 1, 1)), _twofold("B", (1, 1, -1, -1))]
    if structure == "rocksalt":
        return [_fourfold(j, parity) for parity in (1, -1) for j in (0.5, 1.5)]
    return [_fourfold(j, 0) for j in (0.5, 1.5)]


def _twofold(label: str, characters: tuple[int, ...]) -> SymmetryBlock:
    signs = ((1, 1, 1), (-1, -1, 1), (1, -1, -1), (-1, 1, -1))
    operations = tuple(
        Operation(np.diag(np.array(s, dtype=float)), np.eye(1, dtype=np.complex128), complex(c))
        for s, c in zip(signs, characters, strict=True)
    )
    return SymmetryBlock(label, operations)


def _fourfold(momentum: float, parity: int) -> SymmetryBlock:
    """Return the block of angular momentum about z; parity 0 stands for rotation-reflections."""
    turn = np.array([[0.0, -1.0, 0.0], [1.0, 0.0, 0.0], [0.0, 0.0, 1.0]])
    step = turn if parity else -turn
    operations = []
    for k in range(4):
        spin = np.diag(np.exp(np.array([-0.25j, 0.25j]) * np.pi * k))
        character = complex(np.exp(-0.5j * np.pi * momentum * k))
        rotation = np.linalg.matrix_power(step, k)
        operations.append(Operation(rotation, spin, character))
        if parity:
            operations.append(Operation(-rotation, spin, character * parity))
    sign = {0: "", 1: "+", -1: "-"}[parity]
    return SymmetryBlock(f"{momentum:g}{sign}", tuple(operations))


def block_basis(
    block: SymmetryBlock, positions_nm: NDArray[np.float64], orbitals: NDArray[np.intp]
) -> sparse.csc_matrix:
    """Return orthonormal columns that span a block.

    Parameters
    ----------
    block : SymmetryBlock
    positions_nm : ndarray of shape (n, 3)
        Atoms, symmetric under the block's operations.
    orbitals : ndarray of int
        Orbitals on each atom, as from `features.tight_binding.orbital_columns`.

    Returns
    -------
    scipy.sparse.csc_matrix
        Rows as in `features.tight_binding.crystal_hamiltonian`; real where all characters are.

    Examples
    --------
    >>> block = symmetry_blocks("zincblende", spin_orbit=False)[0]
    >>> block_basis(block, np.zeros((1, 3)), np.arange(4)).shape
    (4, 1)
    """
    images = _images(block, positions_nm)
    first = images.min(axis=0) == np.arange(len(positions_nm))
    atoms = np.flatnonzero(first)
    here = [_on_atom(op, orbitals) for op in block.operations]
    fixed = images[:, atoms] == atoms
    rows, columns, values = [], [], []
    start = 0
    for pattern in np.unique(fixed, axis=1).T:
        members = atoms[(fixed == pattern[:, None]).all(axis=0)]
        inside = _fixed_space(here, pattern, block)
        width = inside.shape[1]
        columns_here = start + np.arange(len(members) * width).reshape(len(members), width)
        norm = np.sqrt(len(block.operations) * pattern.sum())
        for matrix, operation, image in zip(here, block.operations, images, strict=True):
            turned = np.conj(operation.character) * (matrix @ inside) / norm
            place = _rows_of(image[members], len(positions_nm), len(orbitals), turned.shape[0])
            keep = np.abs(turned) > 1e-14
            local_row, local_column = np.nonzero(keep)
            rows.append(place[:, local_row].ravel())
            columns.append(columns_here[:, local_column].ravel())
            values.append(np.tile(turned[keep], len(members)))
        start += len(members) * width
    size = len(positions_nm) * here[0].shape[0]
    data = np.concatenate(values)
    data = data.real if np.abs(data.imag).max(initial=0.0) < 1e-12 else data
    place_all = (np.concatenate(rows), np.concatenate(columns))
    return sparse.csc_matrix((data, place_all), shape=(size, start))


def _images(block: SymmetryBlock, positions_nm: NDArray[np.float64]) -> NDArray[np.intp]:
    """Return where each operation takes each atom."""
    tree = cKDTree(positions_nm)
    return np.stack([tree.query(positions_nm @ op.rotation.T)[1] for op in block.operations])


def _on_atom(operation: Operation, orbitals: NDArray[np.intp]) -> ComplexArray:
    turned = orbital_rotation(operation.rotation)[np.ix_(orbitals, orbitals)]
    return np.asarray(np.kron(operation.spin, turned), dtype=np.complex128)


def _fixed_space(
    here: list[ComplexArray], pattern: NDArray[np.bool_], block: SymmetryBlock
) -> ComplexArray:
    """Return what of an atom's orbitals belongs to the block under operations that keep it."""
    used = [i for i, keeps in enumerate(pattern) if keeps]
    total = sum(np.conj(block.operations[i].character) * here[i] for i in used)
    weight, vectors = np.linalg.eigh(np.asarray(total) / len(used))
    return np.asarray(vectors[:, weight > 0.5], dtype=np.complex128)


def _rows_of(
    atoms: NDArray[np.intp], n_atoms: int, n_orbitals: int, width: int
) -> NDArray[np.intp]:
    """Return the Hamiltonian's rows of atoms' spin-orbitals."""
    spin, orbital = np.divmod(np.arange(width), n_orbitals)
    return spin * n_atoms * n_orbitals + atoms[:, None] * n_orbitals + orbital
