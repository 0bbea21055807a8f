"""Slater-Koster blocks: coupling of two atoms' orbitals from two-centre integrals.

Orbital order on an atom: s, x, y, z, xy, yz, zx, x2-y2, 3z2-r2, s* (named ``e``, excited). Energies
in eV. The blocks are written with vectors and symmetric traceless tensors in place of the usual
table of direction cosines (J. C. Slater and G. F. Koster, Phys. Rev. 94, 1498 (1954)); both are
the same, and a test compares them.
"""

from collections.abc import Mapping

import numpy as np
from numpy.typing import ArrayLike, NDArray

__all__ = ["N_ORBITALS", "orbital_rotation", "spin_orbit_block", "two_centre_blocks"]

N_ORBITALS = 10
_S, _P, _D, _E = 0, slice(1, 4), slice(4, 9), 9

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]


def _tensors() -> FloatArray:
    """Return the five d orbitals as symmetric traceless tensors of norm one."""
    tensors = np.zeros((5, 3, 3))
    for i, (a, b) in enumerate(((0, 1), (1, 2), (2, 0))):
        tensors[i, a, b] = tensors[i, b, a] = np.sqrt(0.5)
    tensors[3] = np.diag([1.0, -1.0, 0.0]) / np.sqrt(2.0)
    tensors[4] = np.diag([-1.0, -1.0, 2.0]) / np.sqrt(6.0)
    return tensors


_TENSORS = _tensors()


def two_centre_blocks(direction: ArrayLike, integrals: Mapping[str, float]) -> FloatArray:
    """Return the coupling of an anion's orbitals (rows) with a cation's (columns).

    Parameters
    ----------
    direction : array-like of shape (n, 3)
        Unit vectors from anion to cation.
    integrals : mapping of str to float
        Two-centre integrals, eV, first letter on the anion: ``ss``, ``ee``, ``se``, ``es``,
        ``sp``, ``ps``, ``ep``, ``pe``, ``sd``, ``ds``, ``ed``, ``de``, ``pp_sigma``, ``pp_pi``,
        ``pd_sigma``, ``pd_pi``, ``dp_sigma``, ``dp_pi``, ``dd_sigma``, ``dd_pi``, ``dd_delta``.
        Integrals of s and p are positive in the published sign convention; what is missing is 0.

    Returns
    -------
    ndarray of shape (n, 10, 10)

    Examples
    --------
    >>> two_centre_blocks([[0.0, 0.0, 1.0]], {"sp": 2.0, "ps": 3.0})[0, [0, 3], [3, 0]].tolist()
    [2.0, -3.0]
    """
    u = np.atleast_2d(np.asarray(direction, dtype=np.float64))

    def get(name: str) -> float:
        return float(integrals.get(name, 0.0))

    qu = np.einsum("iab,nb->nia", _TENSORS, u)
    uqu = np.einsum("nia,na->ni", qu, u)
    d_sigma = np.sqrt(1.5) * uqu
    d_pi = np.sqrt(2.0) * (qu - uqu[:, :, None] * u[:, None, :])
    p_sigma = u[:, :, None] * u[:, None, :]
    block = np.zeros((len(u), N_ORBITALS, N_ORBITALS))
    block[:, _S, _S], block[:, _E, _E] = get("ss"), get("ee")
    block[:, _S, _E], block[:, _E, _S] = get("se"), get("es")
    block[:, _S, _P], block[:, _P, _S] = get("sp") * u, -get("ps") * u
    block[:, _E, _P], block[:, _P, _E] = get("ep") * u, -get("pe") * u
    block[:, _S, _D], block[:, _D, _S] = get("sd") * d_sigma, get("ds") * d_sigma
    block[:, _E, _D], block[:, _D, _E] = get("ed") * d_sigma, get("de") * d_sigma
    block[:, _P, _P] = get("pp_sigma") * p_sigma + get("pp_pi") * (np.eye(3) - p_sigma)
    mixed = u[:, :, None] * d_sigma[:, None, :]
    turned = d_pi.transpose(0, 2, 1)
    block[:, _P, _D] = get("pd_sigma") * mixed + get("pd_pi") * turned
    block[:, _D, _P] = -(get("dp_sigma") * mixed + get("dp_pi") * turned).transpose(0, 2, 1)
    sigma = d_sigma[:, :, None] * d_sigma[:, None, :]
    pi = d_pi @ turned
    block[:, _D, _D] = (
        get("dd_sigma") * sigma + get("dd_pi") * pi + get("dd_delta") * (np.eye(5) - sigma - pi)
    )
    return block


def orbital_rotation(rotation: ArrayLike) -> FloatArray:
    """Return how an atom's ten orbitals turn under a rotation or reflection.

    Parameters
    ----------
    rotation : array-like of shape (3, 3)
        Orthogonal matrix.

    Returns
    -------
    ndarray of shape (10, 10)
        Column j holds the orbitals that orbital j turns into.

    Examples
    --------
    >>> orbital_rotation([[0, -1, 0], [1, 0, 0], [0, 0, 1]])[2, 1].item()
    1.0
    """
    matrix = np.asarray(rotation, dtype=np.float64)
    turned = np.eye(N_ORBITALS)
    turned[_P, _P] = matrix
    moved = np.einsum("ab,jbc,dc->jad", matrix, _TENSORS, matrix)
    turned[_D, _D] = np.einsum("iad,jad->ij", _TENSORS, moved)
    return turned


def spin_orbit_block(strength_eV: float) -> ComplexArray:
    """Return the spin-orbit coupling of one atom's p orbitals, spin up before spin down.

    lambda L.sigma, which splits the p level by 3 lambda (D. J. Chadi, Phys. Rev. B 16, 790
    (1977)).

    Parameters
    ----------
    strength_eV : float
        lambda, eV: one third of the atomic splitting.

    Returns
    -------
    ndarray of shape (20, 20), complex

    Examples
    --------
    >>> levels = np.linalg.eigvalsh(spin_orbit_block(0.1))
    >>> round(float(levels[-1] - levels[0]), 6)
    0.3
    """
    momentum = np.zeros((3, 3, 3), dtype=np.complex128)
    for a, b, c in ((0, 1, 2), (1, 2, 0), (2, 0, 1)):
        momentum[a, b, c], momentum[a, c, b] = -1j, 1j
    pauli = np.array([[[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]])
    block = np.zeros((2, N_ORBITALS, 2, N_ORBITALS), dtype=np.complex128)
    block[:, _P, :, _P] = strength_eV * np.einsum("ast,aij->sitj", pauli, momentum)
    return block.reshape(2 * N_ORBITALS, 2 * N_ORBITALS)
