"""Optical gap of a small crystal from bulk constants: textbook models with hard walls.

Diameters and radii in nm, energies in eV, masses in units of the free electron mass, dielectric
constants relative. All functions broadcast over numpy arrays and never look anything up.
Constants: CODATA values as shipped with SciPy.
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import constants
from scipy.special import sici

from features.errors import PhysicsRangeError, explain

__all__ = [
    "BOHR_RADIUS_nm",
    "COULOMB_eV_nm",
    "KINETIC_eV_nm2",
    "brus_gap_eV",
    "coulomb_energy_eV",
    "exciton_bohr_radius_nm",
    "polarisation_energy_eV",
    "positive",
    "reduced_mass",
    "sphere_confinement_eV",
    "surface_fraction",
    "two_band_gap_eV",
]

FloatArray = NDArray[np.float64]

KINETIC_eV_nm2 = constants.hbar**2 / (2.0 * constants.m_e * constants.e) * 1e18
"""hbar^2 / (2 m0), eV nm^2."""
COULOMB_eV_nm = constants.e / (4.0 * np.pi * constants.epsilon_0) * 1e9
"""e^2 / (4 pi epsilon_0), eV nm."""
BOHR_RADIUS_nm = constants.physical_constants["Bohr radius"][0] * 1e9
"""Hydrogen Bohr radius, nm."""

_SERIES_TERMS = 60


def positive(**values: ArrayLike) -> list[FloatArray]:
    """Return the values as arrays, or refuse what is not positive and finite.

    Parameters
    ----------
    **values : array-like
        Values by the name that a message would use.

    Returns
    -------
    list of ndarray

    Raises
    ------
    PhysicsRangeError
        Naming the first value that is not positive and finite.

    Examples
    --------
    >>> positive(diameter_nm=3)[0].item()
    3.0
    """
    arrays = []
    for name, value in values.items():
        array = np.asarray(value, dtype=np.float64)
        if not np.all(np.isfinite(array)) or np.any(array <= 0.0):
            found = array.ravel()[~((array > 0.0) & np.isfinite(array)).ravel()][0]
            raise PhysicsRangeError(
                explain(f"{name} out of range", expected="> 0", found=f"{found}")
            )
        arrays.append(array)
    return arrays


def reduced_mass(electron_mass_m0: ArrayLike, hole_mass_m0: ArrayLike) -> FloatArray:
    """Return the reduced mass of an electron and a hole.

    Parameters
    ----------
    electron_mass_m0, hole_mass_m0 : array-like
        Effective masses, units of the free electron mass, > 0.

    Returns
    -------
    ndarray
        m_e m_h / (m_e + m_h), units of the free electron mass.

    Raises
    ------
    PhysicsRangeError
        If a mass is not positive.

    Examples
    --------
    >>> round(float(reduced_mass(0.13, 0.45)), 4)
    0.1009
    """
    electron, hole = positive(electron_mass_m0=electron_mass_m0, hole_mass_m0=hole_mass_m0)
    return electron * hole / (electron + hole)


def sphere_confinement_eV(diameter_nm: ArrayLike, reduced_mass_m0: ArrayLike) -> FloatArray:
    """Return the kinetic energy of an electron-hole pair in a hard sphere.

    hbar^2 pi^2 / (2 mu R^2), the ground state of the spherical box (Efros and Efros, Sov. Phys.
    Semicond. 16, 772 (1982)). Too large below about 4 nm, where barriers are finite and bands are
    not parabolic.

    Parameters
    ----------
    diameter_nm : array-like
        Diameter, nm, > 0.
    reduced_mass_m0 : array-like
        Reduced mass, units of the free electron mass, > 0.

    Returns
    -------
    ndarray
        Energy, eV.

    Raises
    ------
    PhysicsRangeError
        If an input is not positive.

    Examples
    --------
    >>> round(float(sphere_confinement_eV(4.0, 0.1)), 3)
    0.94
    """
    diameter, mass = positive(diameter_nm=diameter_nm, reduced_mass_m0=reduced_mass_m0)
    return KINETIC_eV_nm2 * np.pi**2 / (mass * (diameter / 2.0) ** 2)


def exciton_bohr_radius_nm(dielectric: ArrayLike, reduced_mass_m0: ArrayLike) -> FloatArray:
    """Return the exciton's Bohr radius, epsilon / mu times that of hydrogen.

    Parameters
    ----------
    dielectric : array-like
        Dielectric constant of the crystal, > 0.
    reduced_mass_m0 : array-like
        Reduced mass, units of the free electron mass, > 0.

    Returns
    -------
    ndarray
        Radius, nm.

    Raises
    ------
    PhysicsRangeError
        If an input is not positive.

    Examples
    --------
    >>> round(float(exciton_bohr_radius_nm(9.6, 0.1009)), 1)
    5.0
    """
    epsilon, mass = positive(dielectric=dielectric, reduced_mass_m0=reduced_mass_m0)
    return epsilon / mass * BOHR_RADIUS_nm


def coulomb_energy_eV(diameter_nm: ArrayLike, dielectric: ArrayLike) -> FloatArray:
    """Return the direct electron-hole attraction in a hard sphere (negative).

    The average of e^2 / (epsilon r) over two ground states of the sphere is
    (2 - Si(2 pi)/pi + Si(4 pi)/(2 pi)) e^2 / (epsilon R) = 1.786 e^2 / (epsilon R)
    (Brus, J. Chem. Phys. 80, 4403 (1984); coefficient in closed form by Kayanuma,
    Phys. Rev. B 38, 9797 (1988)).

    Parameters
    ----------
    diameter_nm : array-like
        Diameter, nm, > 0.
    dielectric : array-like
        Dielectric constant of the crystal, > 0.

    Returns
    -------
    ndarray
        Energy, eV, negative.
    """
    diameter, epsilon = positive(diameter_nm=diameter_nm, dielectric=dielectric)
    si2, si4 = sici(2.0 * np.pi)[0], sici(4.0 * np.pi)[0]
    coefficient = 2.0 - si2 / np.pi + si4 / (2.0 * np.pi)
    return -coefficient * COULOMB_eV_nm / (epsilon * diameter / 2.0)


def _even_moments(n_terms: int) -> FloatArray:
    """Return <(r/R)^(2n)> in the ground state of the sphere for n = 1 to n_terms."""
    nodes, weights = np.polynomial.legendre.leggauss(200)
    x = 0.5 * (nodes + 1.0)
    density = 2.0 * np.sin(np.pi * x) ** 2
    powers = np.arange(1, n_terms + 1)
    moments: FloatArray = 0.5 * weights @ (density[:, None] * x[:, None] ** (2 * powers))
    return moments


_MOMENTS = _even_moments(_SERIES_TERMS)


def polarisation_energy_eV(
    diameter_nm: ArrayLike, dielectric: ArrayLike, dielectric_outside: ArrayLike = 2.0
) -> FloatArray:
    """Return the mean surface polarisation energy of an electron-hole pair (Brus 1984, eq. 7).

    Parameters
    ----------
    diameter_nm : array-like
        Diameter, nm, > 0.
    dielectric : array-like
        Dielectric constant of the crystal, > 0.
    dielectric_outside : array-like, default 2.0
        Optical dielectric constant of the medium; 2 for common organic solvents.

    Returns
    -------
    ndarray
        Energy, eV; zero when both constants are equal.

    Examples
    --------
    >>> float(polarisation_energy_eV(3.0, 2.0, 2.0))
    0.0
    """
    diameter, inside, outside = positive(
        diameter_nm=diameter_nm, dielectric=dielectric, dielectric_outside=dielectric_outside
    )
    ratio = (inside / outside)[..., None]
    n = np.arange(1, _SERIES_TERMS + 1)
    alpha = (ratio - 1.0) * (n + 1.0) / (inside[..., None] * (ratio * n + n + 1.0))
    series: FloatArray = (alpha * _MOMENTS).sum(axis=-1)
    return COULOMB_eV_nm / (diameter / 2.0) * series


def brus_gap_eV(
    diameter_nm: ArrayLike,
    gap_eV: ArrayLike,
    electron_mass_m0: ArrayLike,
    hole_mass_m0: ArrayLike,
    dielectric: ArrayLike,
    dielectric_outside: ArrayLike = 2.0,
) -> FloatArray:
    """Return the effective-mass gap with Coulomb and polarisation terms.

    L. E. Brus, J. Chem. Phys. 80, 4403 (1984). Valid where the confinement is small beside the
    gap; overshoots strongly below about 3 nm.

    Parameters
    ----------
    diameter_nm : array-like
        Diameter, nm, > 0.
    gap_eV : array-like
        Bulk gap, eV.
    electron_mass_m0, hole_mass_m0 : array-like
        Effective masses, units of the free electron mass, > 0.
    dielectric, dielectric_outside : array-like
        Dielectric constants inside and outside, > 0.

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
    >>> round(float(brus_gap_eV(1e4, 1.74, 0.13, 0.45, 9.6)), 3)
    1.74
    """
    kinetic = sphere_confinement_eV(diameter_nm, reduced_mass(electron_mass_m0, hole_mass_m0))
    coulomb = coulomb_energy_eV(diameter_nm, dielectric)
    polarisation = polarisation_energy_eV(diameter_nm, dielectric, dielectric_outside)
    return np.asarray(gap_eV, dtype=np.float64) + kinetic + coulomb + polarisation


def two_band_gap_eV(
    diameter_nm: ArrayLike, gap_eV: ArrayLike, reduced_mass_m0: ArrayLike
) -> FloatArray:
    """Return the gap of the two-band (hyperbolic) model.

    sqrt(Eg^2 + 2 hbar^2 Eg (pi/R)^2 / m*) of Wang, Suna, Mahler and Kasowski, J. Chem. Phys. 87,
    7315 (1987), written with the reduced mass: sqrt(Eg^2 + 2 Eg E_sphere). No Coulomb term. For
    an inverted band order (negative gap) the product of gap and kinetic energy enters by its
    size, since gap over mass is what the two bands' coupling fixes.

    Parameters
    ----------
    diameter_nm : array-like
        Diameter, nm, > 0.
    gap_eV : array-like
        Bulk gap, eV.
    reduced_mass_m0 : array-like
        Reduced mass, units of the free electron mass, > 0.

    Returns
    -------
    ndarray
        Gap of the particle, eV.

    Raises
    ------
    PhysicsRangeError
        If diameter or mass is not positive.

    Examples
    --------
    >>> round(float(two_band_gap_eV(6.0, 0.41, 0.0387)), 2)
    1.03
    """
    gap = np.asarray(gap_eV, dtype=np.float64)
    kinetic = sphere_confinement_eV(diameter_nm, reduced_mass_m0)
    return np.sqrt(gap**2 + 2.0 * np.abs(gap) * kinetic)


def surface_fraction(diameter_nm: ArrayLike, shell_nm: ArrayLike) -> FloatArray:
    """Return the share of a sphere's volume within one shell of its surface.

    1 - (1 - 2 t/D)^3, a geometric identity; 1 where the shell reaches the centre.

    Parameters
    ----------
    diameter_nm : array-like
        Diameter, nm, > 0.
    shell_nm : array-like
        Thickness of the outer shell, nm, > 0; for instance one atomic layer.

    Returns
    -------
    ndarray
        Fraction, 0 to 1.

    Raises
    ------
    PhysicsRangeError
        If an input is not positive.

    Examples
    --------
    >>> round(float(surface_fraction(2.0, 0.288)), 2)
    0.64
    """
    diameter, shell = positive(diameter_nm=diameter_nm, shell_nm=shell_nm)
    return 1.0 - np.maximum(1.0 - 2.0 * shell / diameter, 0.0) ** 3
