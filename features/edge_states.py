"""Band-edge states of a crystallite: interior eigenvalues by shift-invert, with a residual check.

Energies in eV, lengths in nm.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import sparse
from scipy.sparse.linalg import LinearOperator, eigsh, splu

from features.confinement import COULOMB_eV_nm
from features.crystal_symmetry import block_basis, symmetry_blocks
from features.errors import PhysicsRangeError, explain
from features.nanocrystal import Crystallite
from features.tight_binding import ParameterSet, crystal_hamiltonian, orbital_columns

__all__ = ["EdgeStates", "coulomb_attraction_eV", "edge_states"]

FloatArray = NDArray[np.float64]

_LARGEST_RESIDUAL_eV = 1e-6
_SAME_LEVEL_eV = 1e-8


@dataclass(frozen=True)
class EdgeStates:
    """The highest occupied and lowest empty state.

    Attributes
    ----------
    homo_eV, lumo_eV : float
    residual_eV : float
        Larger of the two norms of H v - E v.
    homo_density, lumo_density : ndarray of shape (n_atoms,)
        Probability on each atom.
    largest_block : int
        Size of the largest matrix that was factored.
    """

    homo_eV: float
    lumo_eV: float
    residual_eV: float
    homo_density: FloatArray
    lumo_density: FloatArray
    largest_block: int

    @property
    def gap_eV(self) -> float:
        """Difference of the two levels."""
        return self.lumo_eV - self.homo_eV


def _pair_around(matrix: Any, energy_eV: float) -> tuple[FloatArray, NDArray[Any]]:
    """Return the eigenpairs next below and next above an energy."""
    n = matrix.shape[0]
    shifted = sparse.csc_matrix(matrix - energy_eV * sparse.eye_array(n))
    factors = splu(
        shifted,
        permc_spec="MMD_AT_PLUS_A",
        diag_pivot_thresh=0.01,
        options={"SymmetricMode": True},
    )
    inverse = LinearOperator((n, n), matvec=factors.solve, dtype=matrix.dtype)
    start = np.ones(n, dtype=matrix.dtype) + np.linspace(0.0, 1.0, n)
    below = eigsh(matrix, k=1, sigma=energy_eV, OPinv=inverse, which="SA", v0=start)
    above = eigsh(matrix, k=1, sigma=energy_eV, OPinv=inverse, which="LA", v0=start)
    return np.concatenate([below[0], above[0]]), np.hstack([below[1], above[1]])


def edge_states(
    parameters: ParameterSet,
    crystal: Crystallite,
    energy_in_gap_eV: float,
    *,
    spin_orbit: bool | None = None,
) -> EdgeStates:
    """Return the band-edge states of an atom-centred spherical crystallite.

    Parameters
    ----------
    parameters : ParameterSet
    crystal : Crystallite
    energy_in_gap_eV : float
        An energy inside the crystallite's gap; the middle of the bulk gap always is.
    spin_orbit : bool or None, default None
        Whether spins are coupled; None where the set has a coupling.

    Returns
    -------
    EdgeStates

    Raises
    ------
    PhysicsRangeError
        If an eigenpair misses the residual of 1e-6 eV.

    Examples
    --------
    >>> from features.nanocrystal import spherical_crystallite
    >>> from features.tight_binding import parameter_set
    >>> crystal = spherical_crystallite("zincblende", 0.5668, 1.5)
    >>> states = edge_states(parameter_set("ZnSe sp3s*"), crystal, 1.3)
    >>> bool(states.gap_eV > 2.8)
    True
    """
    coupled = parameters.has_spin_orbit if spin_orbit is None else spin_orbit
    matrix = crystal_hamiltonian(parameters, crystal, spin_orbit=coupled)
    orbitals = orbital_columns(parameters)
    best: dict[str, tuple[float, NDArray[Any]]] = {}
    largest = 0
    for block in symmetry_blocks(parameters.structure, spin_orbit=coupled):
        basis = block_basis(block, crystal.positions_nm, orbitals)
        if not basis.shape[1]:
            continue
        small = sparse.csc_matrix(basis.conj().T @ (matrix @ basis))
        largest = max(largest, small.shape[0])
        energies, vectors = _pair_around(small, energy_in_gap_eV)
        for name, i, upward in (("homo", 0, 1.0), ("lumo", 1, -1.0)):
            energy = float(energies[i])
            # Partners of a degenerate level differ by rounding: the first block's state is taken.
            if name not in best or upward * (energy - best[name][0]) > _SAME_LEVEL_eV:
                best[name] = energy, basis @ vectors[:, i]
    residual = max(float(np.linalg.norm(matrix @ v - e * v)) for e, v in best.values())
    if residual > _LARGEST_RESIDUAL_eV:
        raise PhysicsRangeError(
            explain(
                f"band-edge states of {parameters.name} did not converge",
                expected=f"residual below {_LARGEST_RESIDUAL_eV:g} eV",
                found=f"{residual:.2g} eV",
                do="choose an energy inside the gap",
            )
        )
    densities = {
        name: _density(vector, crystal, len(orbitals)) for name, (_, vector) in best.items()
    }
    return EdgeStates(
        homo_eV=best["homo"][0],
        lumo_eV=best["lumo"][0],
        residual_eV=residual,
        homo_density=densities["homo"],
        lumo_density=densities["lumo"],
        largest_block=largest,
    )


def _density(vector: NDArray[Any], crystal: Crystallite, n_orbitals: int) -> FloatArray:
    """Return the probability on each atom."""
    weights = np.abs(vector.reshape(-1, len(crystal.is_cation), n_orbitals)) ** 2
    return np.asarray(weights.sum(axis=(0, 2)) / weights.sum())


def coulomb_attraction_eV(
    crystal: Crystallite, states: EdgeStates, dielectric: float, rows_at_once: int = 500
) -> float:
    """Return the first-order attraction of electron and hole from their densities (negative).

    -sum over atoms of e^2 rho_e rho_h / (4 pi epsilon_0 epsilon r); on the same atom r is the mean
    distance of two points spread over the atom's share of volume, 36/35 of that sphere's radius.

    Parameters
    ----------
    crystal : Crystallite
    states : EdgeStates
    dielectric : float
        Relative dielectric constant, > 0.
    rows_at_once : int, default 500
        Atoms per step; bounds the memory.

    Returns
    -------
    float
        Energy, eV.
    """
    positions, electron, hole = crystal.positions_nm, states.lumo_density, states.homo_density
    radius = 0.5 * crystal.diameter_nm / len(positions) ** (1.0 / 3.0)
    total = 0.0
    for start in range(0, len(positions), rows_at_once):
        part = slice(start, start + rows_at_once)
        apart = np.linalg.norm(positions[part, None, :] - positions[None, :, :], axis=-1)
        inverse = 1.0 / np.where(apart < 1e-9, radius * 5.0 / 6.0, apart)
        total += float(electron[part] @ inverse @ hole)
    return -COULOMB_eV_nm / dielectric * total
