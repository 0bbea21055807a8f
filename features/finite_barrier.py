"""Confinement by finite barriers: carriers leak into the surroundings, energies stay bounded.

Diameters in nm, energies in eV, masses in units of the free electron mass. All functions broadcast
over numpy arrays.
"""

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from features.confinement import KINETIC_eV_nm2, coulomb_energy_eV, positive

__all__ = ["finite_barrier_energy_eV", "finite_barrier_gap_eV"]

FloatArray = NDArray[np.float64]


def finite_barrier_energy_eV(
    diameter_nm: ArrayLike,
    mass_m0: ArrayLike,
    barrier_eV: ArrayLike,
    mass_outside_m0: ArrayLike = 1.0,
) -> FloatArray:
    """Return the ground-state energy of one carrier in a sphere with a finite barrier.

    Solves x cot x = 1 - (m/m_out) (1 + sqrt(x0^2 m_out/m - x^2 m_out/m)) for the s state with
    the boundary condition of BenDaniel and Duke (Phys. Rev. 152, 683 (1966)), where x = k R and
    x0 belongs to the barrier. Where no state is bound the barrier itself is returned.

    Parameters
    ----------
    diameter_nm : array-like
        Diameter, nm, > 0.
    mass_m0, mass_outside_m0 : array-like
        Mass inside and outside, units of the free electron mass, > 0.
    barrier_eV : array-like
        Height of the barrier, eV, > 0.

    Returns
    -------
    ndarray
        Energy above the band edge, eV, between 0 and the barrier.

    Raises
    ------
    PhysicsRangeError
        If an input is not positive.

    Examples
    --------
    >>> from features.confinement import sphere_confinement_eV
    >>> round(float(finite_barrier_energy_eV(4.0, 0.13, 1e6) / sphere_confinement_eV(4.0, 0.13)), 2)
    1.0
    """
    diameter, mass, barrier, outside = np.broadcast_arrays(
        *positive(
            diameter_nm=diameter_nm,
            mass_m0=mass_m0,
            barrier_eV=barrier_eV,
            mass_outside_m0=mass_outside_m0,
        )
    )
    radius = diameter / 2.0
    limit = radius * np.sqrt(mass * barrier / KINETIC_eV_nm2)
    low, high = np.full(limit.shape, 1e-9), np.minimum(limit, np.pi * (1.0 - 1e-12))
    ratio = mass / outside
    for _ in range(60):
        middle = 0.5 * (low + high)
        decay = (
            radius
            * np.sqrt(outside / KINETIC_eV_nm2 * barrier)
            * np.sqrt(np.maximum(1.0 - (middle / limit) ** 2, 0.0))
        )
        below = middle / np.tan(middle) - 1.0 + ratio * (1.0 + decay) > 0.0
        low, high = np.where(below, middle, low), np.where(below, high, middle)
    energy: Any = KINETIC_eV_nm2 * (0.5 * (low + high) / radius) ** 2 / mass
    return np.asarray(np.minimum(energy, barrier))


def finite_barrier_gap_eV(
    diameter_nm: ArrayLike,
    gap_eV: ArrayLike,
    electron_mass_m0: ArrayLike,
    hole_mass_m0: ArrayLike,
    dielectric: ArrayLike,
    electron_barrier_eV: ArrayLike = 3.5,
    hole_barrier_eV: ArrayLike = 3.5,
) -> FloatArray:
    """Return the effective-mass gap with finite barriers and the Coulomb term.

    Parameters
    ----------
    diameter_nm : array-like
        Diameter, nm, > 0.
    gap_eV : array-like
        Bulk gap, eV.
    electron_mass_m0, hole_mass_m0 : array-like
        Effective masses, units of the free electron mass, > 0.
    dielectric : array-like
        Dielectric constant of the crystal, > 0.
    electron_barrier_eV, hole_barrier_eV : array-like, default 3.5
        Barriers of the organic surroundings, eV; order of the offsets to common ligands
        (common practice).

    Returns
    -------
    ndarray
        Gap of the particle, eV.

    Raises
    ------
    PhysicsRangeError
        If an input but the gap is not positive.

    Examples
    --------
    >>> round(float(finite_barrier_gap_eV(1e4, 1.74, 0.13, 0.45, 9.6)), 3)
    1.74
    """
    electron = finite_barrier_energy_eV(diameter_nm, electron_mass_m0, electron_barrier_eV)
    hole = finite_barrier_energy_eV(diameter_nm, hole_mass_m0, hole_barrier_eV)
    gap = np.asarray(gap_eV, dtype=np.float64)
    return gap + electron + hole + coulomb_energy_eV(diameter_nm, dielectric)
