"""Empirical tight binding of two-sublattice crystals: parameter sets, bulk bands, crystallites.

Nearest-neighbour models with s, p, s* and where published d orbitals (P. Vogl, H. P. Hjalmarson
and J. D. Dow, J. Phys. Chem. Solids 44, 365 (1983); J.-M. Jancu, R. Scholz, F. Beltram and
F. Bassani, Phys. Rev. B 57, 6493 (1998)). Energies in eV, lengths in nm, wave vectors in units of
2 pi / a.
"""

from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray
from scipy import sparse

from features.nanocrystal import Crystallite, bond_vectors
from features.tables import read_table
from features.two_centre import N_ORBITALS, spin_orbit_block, two_centre_blocks

__all__ = [
    "PASSIVATION_eV",
    "ParameterSet",
    "bloch_hamiltonian",
    "crystal_hamiltonian",
    "orbital_columns",
    "parameter_set",
    "parameter_sets",
]

PASSIVATION_eV = 30.0
"""Shift of a dangling sp3 hybrid, which takes it out of the gap (S. Lee, F. Oyafuso, P. von Allmen
and G. Klimeck, Phys. Rev. B 69, 045316 (2004))."""

ComplexArray = NDArray[np.complex128]

_LEVELS = ("s", "p", "d", "e")
_WIDTHS = {"s": 1, "p": 3, "d": 5, "e": 1}
_INTEGRALS = (
    *("ss", "ee", "se", "es", "sp", "ps", "ep", "pe", "sd", "ds", "ed", "de"),
    *("pp_sigma", "pp_pi", "pd_sigma", "pd_pi", "dp_sigma", "dp_pi"),
    *("dd_sigma", "dd_pi", "dd_delta"),
)


@dataclass(frozen=True)
class ParameterSet:
    """One published set.

    Attributes
    ----------
    name, material, structure : str
    lattice_a_nm : float
        Edge of the cubic cell, nm.
    levels_eV : dict
        On-site energies of ``(orbital, sublattice)``, sublattice "anion" or "cation".
    integrals_eV : dict
        Two-centre integrals as in `features.two_centre.two_centre_blocks`.
    spin_orbit_eV : dict
        lambda of each sublattice's p orbitals; all zero where the set has none.
    """

    name: str
    material: str
    structure: str
    lattice_a_nm: float
    levels_eV: dict[tuple[str, str], float]
    integrals_eV: dict[str, float]
    spin_orbit_eV: dict[str, float] = field(default_factory=dict)

    @property
    def has_spin_orbit(self) -> bool:
        """Whether the set couples spins."""
        return any(self.spin_orbit_eV.values())

    @property
    def passivated(self) -> bool:
        """Whether cut bonds are sp3 hybrids that need passivation (all but rocksalt)."""
        return self.structure != "rocksalt"


def parameter_sets() -> pd.DataFrame:
    """Return the cited table of parameter sets, by name."""
    return read_table("tight_binding").set_index("parameter_set")


def parameter_set(name: str) -> ParameterSet:
    """Return one set of the table.

    Parameters
    ----------
    name : str
        Value of the column ``parameter_set``.

    Returns
    -------
    ParameterSet

    Raises
    ------
    KeyError
        If there is no such set.

    Examples
    --------
    >>> parameter_set("GaAs sp3s*").structure
    'zincblende'
    """
    row: dict[Any, Any] = parameter_sets().loc[name].to_dict()
    levels = {
        (orbital, side): float(row[f"{orbital}_{side}_eV"])
        for orbital in _LEVELS
        for side in ("anion", "cation")
        if not pd.isna(row[f"{orbital}_{side}_eV"])
    }
    integrals = {
        key: float(row[f"{key}_eV"]) for key in _INTEGRALS if not pd.isna(row[f"{key}_eV"])
    }
    coupling: dict[str, float] = {
        side: 0.0 if pd.isna(row[f"spin_orbit_{side}_eV"]) else float(row[f"spin_orbit_{side}_eV"])
        for side in ("anion", "cation")
    }
    return ParameterSet(
        name=name,
        material=str(row["material"]),
        structure=str(row["structure"]),
        lattice_a_nm=float(row["lattice_a_nm"]),
        levels_eV=levels,
        integrals_eV=integrals,
        spin_orbit_eV=coupling,
    )


def orbital_columns(parameters: ParameterSet) -> NDArray[np.intp]:
    """Return which of the ten orbitals of `features.two_centre` the set uses."""
    start = 0
    used: list[int] = []
    for orbital in ("s", "p", "d", "e"):
        width = _WIDTHS[orbital]
        if (orbital, "anion") in parameters.levels_eV:
            used.extend(range(start, start + width))
        start += width
    return np.asarray(used, dtype=np.intp)


def _levels(parameters: ParameterSet, side: str) -> NDArray[np.float64]:
    """Return the on-site energies of all ten orbitals; 0 where the set has none."""
    return np.concatenate(
        [np.full(_WIDTHS[o], parameters.levels_eV.get((o, side), 0.0)) for o in _LEVELS]
    )


def bloch_hamiltonian(
    parameters: ParameterSet, wave_vectors: ArrayLike, *, spin_orbit: bool = False
) -> ComplexArray:
    """Return the bulk Hamiltonian at wave vectors.

    Parameters
    ----------
    parameters : ParameterSet
    wave_vectors : array-like of shape (n, 3)
        Units of 2 pi / a.
    spin_orbit : bool, default False
        Whether spins are coupled; doubles the matrix.

    Returns
    -------
    ndarray of shape (n, m, m), complex
        Hermitian.

    Examples
    --------
    >>> bands = np.linalg.eigvalsh(bloch_hamiltonian(parameter_set("GaAs sp3s*"), [[0, 0, 0]]))
    >>> round(float(bands[0, 4] - bands[0, 3]), 2)
    1.55
    """
    k = np.atleast_2d(np.asarray(wave_vectors, dtype=np.float64))
    steps = bond_vectors(parameters.structure)
    blocks = two_centre_blocks(steps / np.linalg.norm(steps[0]), parameters.integrals_eV)
    phases = np.exp(2j * np.pi * k @ steps.T)
    used = orbital_columns(parameters)
    n = len(used)
    matrix = np.zeros((len(k), 2 * n, 2 * n), dtype=np.complex128)
    coupling = np.einsum("kb,bij->kij", phases, blocks)[:, used][:, :, used]
    matrix[:, :n, n:] = coupling
    matrix[:, n:, :n] = coupling.conj().transpose(0, 2, 1)
    energies = [_levels(parameters, side)[used] for side in ("anion", "cation")]
    matrix[:, range(2 * n), range(2 * n)] = np.concatenate(energies)
    if not spin_orbit:
        return matrix
    doubled = np.einsum("st,kij->ksitj", np.eye(2), matrix).reshape(len(k), 4 * n, 4 * n)
    return np.asarray(doubled + _bulk_spin_orbit(parameters, used), dtype=np.complex128)


def _bulk_spin_orbit(parameters: ParameterSet, used: NDArray[np.intp]) -> ComplexArray:
    """Return the spin-orbit part of the bulk matrix, spins outermost."""
    n = len(used)
    part = np.zeros((2, 2, n, 2, 2, n), dtype=np.complex128)
    for atom, side in enumerate(("anion", "cation")):
        block = _spin_blocks(parameters, side, used)
        part[:, atom, :, :, atom, :] = block
    return part.reshape(4 * n, 4 * n)


def _spin_blocks(parameters: ParameterSet, side: str, used: NDArray[np.intp]) -> ComplexArray:
    block = spin_orbit_block(parameters.spin_orbit_eV.get(side, 0.0))
    full = block.reshape(2, N_ORBITALS, 2, N_ORBITALS)
    return full[:, used][:, :, :, used]


def crystal_hamiltonian(
    parameters: ParameterSet,
    crystal: Crystallite,
    *,
    spin_orbit: bool = False,
    passivation_eV: float = PASSIVATION_eV,
) -> sparse.csr_matrix:
    """Return the sparse Hamiltonian of a crystallite.

    Parameters
    ----------
    parameters : ParameterSet
    crystal : Crystallite
    spin_orbit : bool, default False
        Whether spins are coupled; doubles the matrix and makes it complex.
    passivation_eV : float, default PASSIVATION_eV
        Shift of each dangling sp3 hybrid; rocksalt surfaces have none.

    Returns
    -------
    scipy.sparse.csr_matrix
        Order: spin, then atom, then orbital.

    Examples
    --------
    >>> from features.nanocrystal import spherical_crystallite
    >>> crystal = spherical_crystallite("zincblende", 0.5653, 1.2)
    >>> matrix = crystal_hamiltonian(parameter_set("GaAs sp3s*"), crystal)
    >>> bool(abs(matrix - matrix.T).max() == 0.0)
    True
    """
    used = orbital_columns(parameters)
    n = len(used)
    size = (n * len(crystal.is_cation),) * 2
    blocks = two_centre_blocks(crystal.bond_directions, parameters.integrals_eV)
    blocks = blocks[:, used][:, :, used]
    anion, cation = crystal.bonds.T
    matrix = _scatter(blocks, anion, cation, size)
    matrix = matrix + matrix.T
    levels = np.where(
        crystal.is_cation[:, None],
        _levels(parameters, "cation")[used],
        _levels(parameters, "anion")[used],
    )
    matrix = matrix + sparse.diags_array(levels.ravel())
    if parameters.passivated:
        hybrids = np.zeros((len(crystal.dangling_atoms), N_ORBITALS))
        hybrids[:, 0] = 0.5
        hybrids[:, 1:4] = np.sqrt(0.75) * crystal.dangling_directions
        hybrids = hybrids[:, used]
        shift = passivation_eV * hybrids[:, :, None] * hybrids[:, None, :]
        matrix = matrix + _scatter(shift, crystal.dangling_atoms, crystal.dangling_atoms, size)
    if not spin_orbit:
        return sparse.csr_matrix(matrix)
    return _with_spin(parameters, crystal, sparse.csr_matrix(matrix), used)


def _scatter(
    blocks: NDArray[np.float64],
    rows: NDArray[np.intp],
    columns: NDArray[np.intp],
    size: tuple[int, int],
) -> sparse.csr_matrix:
    """Put the block of each pair of atoms at its place; equal places add up."""
    n = blocks.shape[1]
    inner = np.arange(n)
    i = np.broadcast_to(n * rows[:, None, None] + inner[:, None], blocks.shape)
    j = np.broadcast_to(n * columns[:, None, None] + inner, blocks.shape)
    keep = blocks != 0.0
    return sparse.csr_matrix((blocks[keep], (i[keep], j[keep])), shape=size)


def _with_spin(
    parameters: ParameterSet,
    crystal: Crystallite,
    matrix: sparse.csr_matrix,
    used: NDArray[np.intp],
) -> sparse.csr_matrix:
    doubled = sparse.kron(sparse.eye_array(2), matrix)
    for side, on_side in (("anion", ~crystal.is_cation), ("cation", crystal.is_cation)):
        block = _spin_blocks(parameters, side, used)
        atoms = sparse.diags_array(on_side.astype(float))
        for s in range(2):
            for t in range(2):
                where = sparse.csr_matrix(([1.0], ([s], [t])), shape=(2, 2))
                doubled = doubled + sparse.kron(where, sparse.kron(atoms, block[s, :, t, :]))
    return sparse.csr_matrix(doubled)
