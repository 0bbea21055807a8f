"""Melting temperature against size: six published models, as plain functions on arrays.

Sizes are diameters in nm (for a film its thickness), temperatures in K, heats of fusion in J/kg,
densities in kg/m3, surface energies in J/m2. Every model tends to the bulk value for large sizes.
None holds below about 200 atoms, where melting is not even monotonic in size; there a function may
return a negative temperature, and `features.stability.melting_estimate` marks the answer invalid.

Shapes: curvature models scale with the mean curvature (sphere 1, wire 1/2, flat film 0), models of
broken bonds with surface over volume (sphere 1, wire 2/3, film 1/3).
"""

import numpy as np
from numpy.typing import ArrayLike
from scipy import constants

from features.stability_inputs import FloatArray, known_shape, positive

__all__ = [
    "SOLID_OVER_LIQUID_ENERGY",
    "bond_energy_ratio",
    "gibbs_thomson_melting_K",
    "liquid_drop_melting_K",
    "liquid_shell_melting_K",
    "nucleation_growth_band_K",
    "pawlow_melting_K",
    "turnbull_interface_energy_J_m2",
]

SOLID_OVER_LIQUID_ENERGY = 1.18
"""Surface energy of a solid over that of its melt at melting (Tyson and Miller, Surf. Sci. 62, 267
(1977)); tables at 0 K lie 15 to 30 % higher and would double the depression."""

CURVATURE = {"sphere": 1.0, "wire": 0.5, "film": 0.0}
BROKEN_BONDS = {"sphere": 1.0, "wire": 2.0 / 3.0, "film": 1.0 / 3.0}
_DROP_SLOPE_eV_K = 0.0005736


def _pawlow_energy(
    surface_solid: FloatArray, surface_liquid: FloatArray, solid: FloatArray, liquid: FloatArray
) -> FloatArray:
    """Return g_s - g_l (rho_s / rho_l)^(2/3), J/m2."""
    return surface_solid - surface_liquid * (solid / liquid) ** (2.0 / 3.0)


def pawlow_melting_K(
    diameter_nm: ArrayLike,
    *,
    bulk_melting_K: ArrayLike,
    heat_of_fusion_J_kg: ArrayLike,
    solid_density_kg_m3: ArrayLike,
    liquid_density_kg_m3: ArrayLike,
    solid_surface_energy_J_m2: ArrayLike,
    liquid_surface_energy_J_m2: ArrayLike,
    shape: str = "sphere",
) -> FloatArray:
    """Return the triple point of a solid and a liquid particle of equal mass.

    T0 {1 - 4 / (rho_s L D) [g_s - g_l (rho_s / rho_l)^(2/3)]}: Pawlow, Z. Phys. Chem. 65, 1
    (1909); first model of Buffat and Borel, Phys. Rev. A 13, 2287 (1976).

    Parameters
    ----------
    diameter_nm, bulk_melting_K, heat_of_fusion_J_kg, solid_density_kg_m3 : array-like
        All > 0.
    liquid_density_kg_m3, solid_surface_energy_J_m2, liquid_surface_energy_J_m2 : array-like
        All > 0; the surface energies at the melting point.
    shape : {"sphere", "wire", "film"}
        A flat film has no curvature, so the model leaves it at the bulk value.

    Returns
    -------
    ndarray
        Temperature, K.

    Raises
    ------
    PhysicsRangeError
        If an input is not positive or the shape unknown.

    Examples
    --------
    >>> round(float(pawlow_melting_K(5.0, bulk_melting_K=1337.33, heat_of_fusion_J_kg=63716,
    ...     solid_density_kg_m3=18400, liquid_density_kg_m3=17310, solid_surface_energy_J_m2=1.38,
    ...     liquid_surface_energy_J_m2=1.135)))
    1157
    """
    d, t0, heat, solid, liquid, gs, gl = positive(
        diameter_nm=diameter_nm,
        bulk_melting_K=bulk_melting_K,
        heat_of_fusion_J_kg=heat_of_fusion_J_kg,
        solid_density_kg_m3=solid_density_kg_m3,
        liquid_density_kg_m3=liquid_density_kg_m3,
        solid_surface_energy_J_m2=solid_surface_energy_J_m2,
        liquid_surface_energy_J_m2=liquid_surface_energy_J_m2,
    )
    slope_nm = 4e9 * _pawlow_energy(gs, gl, solid, liquid) / (solid * heat)
    return t0 * (1.0 - known_shape(shape, CURVATURE) * slope_nm / d)


def gibbs_thomson_melting_K(
    diameter_nm: ArrayLike,
    *,
    bulk_melting_K: ArrayLike,
    heat_of_fusion_J_kg: ArrayLike,
    solid_density_kg_m3: ArrayLike,
    interface_energy_J_m2: ArrayLike,
    shape: str = "sphere",
) -> FloatArray:
    """Return the melting temperature of a crystal inside its own melt.

    T0 {1 - 4 g_sl / (rho_s L D)}, the classical Gibbs-Thomson relation.

    Parameters
    ----------
    diameter_nm, bulk_melting_K, heat_of_fusion_J_kg, solid_density_kg_m3 : array-like
        All > 0.
    interface_energy_J_m2 : array-like
        Between solid and melt, > 0.
    shape : {"sphere", "wire", "film"}
        As for `pawlow_melting_K`.

    Returns
    -------
    ndarray
        Temperature, K.

    Raises
    ------
    PhysicsRangeError
        If an input is not positive or the shape unknown.

    Examples
    --------
    >>> round(float(gibbs_thomson_melting_K(5.0, bulk_melting_K=1337.33, heat_of_fusion_J_kg=63716,
    ...     solid_density_kg_m3=18400, interface_energy_J_m2=0.132)))
    1217
    """
    d, t0, heat, solid, gsl = positive(
        diameter_nm=diameter_nm,
        bulk_melting_K=bulk_melting_K,
        heat_of_fusion_J_kg=heat_of_fusion_J_kg,
        solid_density_kg_m3=solid_density_kg_m3,
        interface_energy_J_m2=interface_energy_J_m2,
    )
    slope_nm = 4e9 * gsl / (solid * heat)
    return t0 * (1.0 - known_shape(shape, CURVATURE) * slope_nm / d)


def liquid_shell_melting_K(
    diameter_nm: ArrayLike,
    *,
    shell_nm: ArrayLike,
    bulk_melting_K: ArrayLike,
    heat_of_fusion_J_kg: ArrayLike,
    solid_density_kg_m3: ArrayLike,
    liquid_density_kg_m3: ArrayLike,
    liquid_surface_energy_J_m2: ArrayLike,
    interface_energy_J_m2: ArrayLike,
    shape: str = "sphere",
) -> FloatArray:
    """Return the melting temperature of a core under a liquid shell.

    T0 {1 - 2 / (rho_s L) [g_sl / (r - d) + (g_l / r)(1 - rho_s / rho_l)]}: Reiss and Wilson, J.
    Colloid Sci. 3, 551 (1948); Sambles, Proc. R. Soc. A 324, 339 (1971). Valid for a radius above
    two shells.

    Parameters
    ----------
    diameter_nm, shell_nm : array-like
        Diameter and thickness of the liquid shell, nm, > 0; about 0.6 nm for gold.
    bulk_melting_K, heat_of_fusion_J_kg, solid_density_kg_m3, liquid_density_kg_m3 : array-like
        All > 0.
    liquid_surface_energy_J_m2, interface_energy_J_m2 : array-like
        All > 0.
    shape : {"sphere", "wire", "film"}
        As for `pawlow_melting_K`.

    Returns
    -------
    ndarray
        Temperature, K; not a number where the radius is at most two shells.

    Raises
    ------
    PhysicsRangeError
        If an input is not positive or the shape unknown.

    Examples
    --------
    >>> round(float(liquid_shell_melting_K(5.0, shell_nm=0.62, bulk_melting_K=1337.33,
    ...     heat_of_fusion_J_kg=63716, solid_density_kg_m3=18400, liquid_density_kg_m3=17310,
    ...     liquid_surface_energy_J_m2=1.135, interface_energy_J_m2=0.132)))
    1242
    """
    d, shell, t0, heat, solid, liquid, gl, gsl = positive(
        diameter_nm=diameter_nm,
        shell_nm=shell_nm,
        bulk_melting_K=bulk_melting_K,
        heat_of_fusion_J_kg=heat_of_fusion_J_kg,
        solid_density_kg_m3=solid_density_kg_m3,
        liquid_density_kg_m3=liquid_density_kg_m3,
        liquid_surface_energy_J_m2=liquid_surface_energy_J_m2,
        interface_energy_J_m2=interface_energy_J_m2,
    )
    core = np.where(d > 4.0 * shell, d / 2.0 - shell, np.nan)
    energy = gsl / core + gl / (d / 2.0) * (1.0 - solid / liquid)
    return t0 * (1.0 - known_shape(shape, CURVATURE) * 2e9 * energy / (solid * heat))


def nucleation_growth_band_K(
    diameter_nm: ArrayLike,
    *,
    bulk_melting_K: ArrayLike,
    heat_of_fusion_J_kg: ArrayLike,
    solid_density_kg_m3: ArrayLike,
    liquid_density_kg_m3: ArrayLike,
    solid_surface_energy_J_m2: ArrayLike,
    liquid_surface_energy_J_m2: ArrayLike,
    interface_energy_J_m2: ArrayLike,
) -> tuple[FloatArray, FloatArray]:
    """Return the band in which a sphere melts by nucleation and growth of liquid.

    2 g_sl / (rho_s L r) < 1 - T/T0 < 3 / (rho_s L r) [g_s - g_l (rho_s / rho_l)^(2/3)]: Couchman
    and Jesser, Nature 269, 481 (1977). The coefficient 2 was recalled. With recalled surface
    energies the two ends can cross; they are returned in order.

    Parameters
    ----------
    diameter_nm, bulk_melting_K, heat_of_fusion_J_kg, solid_density_kg_m3 : array-like
        All > 0.
    liquid_density_kg_m3, solid_surface_energy_J_m2, liquid_surface_energy_J_m2 : array-like
        All > 0.
    interface_energy_J_m2 : array-like
        Between solid and melt, > 0.

    Returns
    -------
    low_K, high_K : ndarray
        Temperatures, K.

    Raises
    ------
    PhysicsRangeError
        If an input is not positive.

    Examples
    --------
    >>> low, high = nucleation_growth_band_K(10.0, bulk_melting_K=505.08,
    ...     heat_of_fusion_J_kg=60231, solid_density_kg_m3=7287, liquid_density_kg_m3=6979,
    ...     solid_surface_energy_J_m2=0.642, liquid_surface_energy_J_m2=0.544,
    ...     interface_energy_J_m2=0.0545)
    >>> round(float(low)), round(float(high))
    (448, 480)
    """
    upper = gibbs_thomson_melting_K(
        diameter_nm,
        bulk_melting_K=bulk_melting_K,
        heat_of_fusion_J_kg=heat_of_fusion_J_kg,
        solid_density_kg_m3=solid_density_kg_m3,
        interface_energy_J_m2=interface_energy_J_m2,
    )
    pawlow = pawlow_melting_K(
        diameter_nm,
        bulk_melting_K=bulk_melting_K,
        heat_of_fusion_J_kg=heat_of_fusion_J_kg,
        solid_density_kg_m3=solid_density_kg_m3,
        liquid_density_kg_m3=liquid_density_kg_m3,
        solid_surface_energy_J_m2=solid_surface_energy_J_m2,
        liquid_surface_energy_J_m2=liquid_surface_energy_J_m2,
    )
    lower = np.asarray(bulk_melting_K) * -0.5 + 1.5 * pawlow
    return np.minimum(lower, upper), np.maximum(lower, upper)


def bond_energy_ratio(
    diameter_nm: ArrayLike, atom_diameter_nm: ArrayLike, *, shape: str = "sphere"
) -> FloatArray:
    """Return cohesive energy, or melting temperature, over its bulk value.

    Sphere 1 - d/D, wire 1 - 2d/(3D), film 1 - d/(3h), from half of each surface atom's bonds
    being broken: Qi, Physica B 368, 46 (2005); Qi and Wang, J. Mater. Sci. Lett. 21, 1743 (2002).

    Parameters
    ----------
    diameter_nm, atom_diameter_nm : array-like
        All > 0.
    shape : {"sphere", "wire", "film"}
        Which of the three forms.

    Returns
    -------
    ndarray
        Ratio, at most 1.

    Raises
    ------
    PhysicsRangeError
        If an input is not positive or the shape unknown.

    Examples
    --------
    >>> round(float(1337.33 * bond_energy_ratio(5.0, 0.288)))
    1260
    """
    d, atom = positive(diameter_nm=diameter_nm, atom_diameter_nm=atom_diameter_nm)
    return 1.0 - known_shape(shape, BROKEN_BONDS) * atom / d


def liquid_drop_melting_K(
    diameter_nm: ArrayLike,
    *,
    bulk_melting_K: ArrayLike,
    atom_volume_diameter_nm: ArrayLike,
    liquid_surface_energy_J_m2: ArrayLike,
    shape: str = "sphere",
) -> FloatArray:
    """Return the melting temperature by the liquid-drop model.

    T0 (1 - b/D) with b = 6 v0 g / (0.0005736 eV/K T0): Nanda, Sahu and Behera, Phys. Rev. A 66,
    013208 (2002). The constant was recalled; wires and films take 2/3 and 1/3 of the depression.

    Parameters
    ----------
    diameter_nm, bulk_melting_K : array-like
        All > 0.
    atom_volume_diameter_nm : array-like
        Diameter of a sphere with the volume per atom, nm, > 0.
    liquid_surface_energy_J_m2 : array-like
        Surface energy, > 0.
    shape : {"sphere", "wire", "film"}
        Shape.

    Returns
    -------
    ndarray
        Temperature, K.

    Raises
    ------
    PhysicsRangeError
        If an input is not positive or the shape unknown.

    Examples
    --------
    >>> round(float(liquid_drop_melting_K(5.0, bulk_melting_K=1337.33,
    ...     atom_volume_diameter_nm=0.3187, liquid_surface_energy_J_m2=1.135)), -1)
    1090.0
    """
    d, t0, atom, gl = positive(
        diameter_nm=diameter_nm,
        bulk_melting_K=bulk_melting_K,
        atom_volume_diameter_nm=atom_volume_diameter_nm,
        liquid_surface_energy_J_m2=liquid_surface_energy_J_m2,
    )
    surface_eV_nm2 = gl / constants.e * 1e-18
    fall_K_nm = np.pi * atom**3 * surface_eV_nm2 / _DROP_SLOPE_eV_K
    return t0 - known_shape(shape, BROKEN_BONDS) * fall_K_nm / d


def turnbull_interface_energy_J_m2(
    heat_of_fusion_J_mol: ArrayLike, atom_volume_diameter_nm: ArrayLike
) -> FloatArray:
    """Return an estimate of the energy of the solid-melt interface of a metal.

    0.45 times the heat of fusion per atom, over the area per atom V^(2/3): Turnbull, J. Appl.
    Phys. 21, 1022 (1950). For metals; semiconductors and semimetals lie nearer 0.32.

    Parameters
    ----------
    heat_of_fusion_J_mol, atom_volume_diameter_nm : array-like
        All > 0.

    Returns
    -------
    ndarray
        Energy, J/m2.

    Raises
    ------
    PhysicsRangeError
        If an input is not positive.

    Examples
    --------
    >>> round(float(turnbull_interface_energy_J_m2(12550.0, 0.3187)), 3)
    0.142
    """
    heat, atom = positive(
        heat_of_fusion_J_mol=heat_of_fusion_J_mol, atom_volume_diameter_nm=atom_volume_diameter_nm
    )
    area_m2 = (np.pi / 6.0) ** (2.0 / 3.0) * (atom * 1e-9) ** 2
    return np.asarray(0.45 * heat / constants.N_A / area_m2, dtype=np.float64)
