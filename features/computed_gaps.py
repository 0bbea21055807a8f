"""Optical gaps from computed crystallites: bulk gap at 300 K, confinement and screened attraction.

Energies in eV, lengths in nm. Nothing here is fitted to a measured crystallite.
"""

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray
from scipy import constants

from features.confinement import positive
from features.semiconductors import bulk_constants
from features.tables import read_table
from features.tight_binding import parameter_sets

__all__ = ["computed_gaps", "penn_gap_eV", "size_dielectric"]

FloatArray = NDArray[np.float64]

_ELECTRONS_PER_CELL = 32
"""Valence electrons in the cubic cell of zincblende and diamond: four pairs of eight."""


def penn_gap_eV(dielectric: ArrayLike, lattice_a_nm: ArrayLike) -> FloatArray:
    """Return the mean gap that explains a tetrahedral crystal's dielectric constant.

    Plasma energy of the valence electrons over sqrt(epsilon - 1) (D. R. Penn, Phys. Rev. 128,
    2093 (1962)).

    Parameters
    ----------
    dielectric : array-like
        High-frequency dielectric constant, > 1.
    lattice_a_nm : array-like
        Edge of the cubic cell, nm, > 0.

    Returns
    -------
    ndarray
        Energy, eV.

    Raises
    ------
    PhysicsRangeError
        If the edge is not positive or the dielectric constant not above 1.

    Examples
    --------
    >>> round(float(penn_gap_eV(11.7, 0.5431)), 1)
    5.1
    """
    edge, above_one = positive(
        lattice_a_nm=lattice_a_nm, dielectric_above_1=np.asarray(dielectric, dtype=float) - 1.0
    )
    density = _ELECTRONS_PER_CELL / (edge * 1e-9) ** 3
    frequency = np.sqrt(density * constants.e**2 / (constants.epsilon_0 * constants.m_e))
    return np.asarray(constants.hbar * frequency / constants.e / np.sqrt(above_one))


def size_dielectric(dielectric: ArrayLike, penn_eV: ArrayLike, shift_eV: ArrayLike) -> FloatArray:
    """Return the dielectric constant of a crystallite whose gap confinement has widened.

    1 + (epsilon - 1) (E / (E + shift))^2 with Penn's gap E (generalised Penn model; A.
    Franceschetti, H. Fu, L. W. Wang and A. Zunger, Phys. Rev. B 60, 1819 (1999)).

    Parameters
    ----------
    dielectric : array-like
        Of the bulk, > 1.
    penn_eV : array-like
        Penn's gap of the bulk, eV, > 0.
    shift_eV : array-like
        How much wider the gap is than in the bulk, eV, >= 0.

    Returns
    -------
    ndarray
        Between 1 and the bulk's.

    Examples
    --------
    >>> size_dielectric(6.2, 6.2, [0.0, 1.0]).round(2).tolist()
    [6.2, 4.86]
    """
    bulk, penn, shift = (np.asarray(v, dtype=float) for v in (dielectric, penn_eV, shift_eV))
    return np.asarray(1.0 + (bulk - 1.0) * (penn / (penn + shift)) ** 2)


def computed_gaps() -> pd.DataFrame:
    """Return the computed optical gap of every crystallite size, both centres averaged.

    Returns
    -------
    pandas.DataFrame
        Columns material, diameter_nm, confinement_eV, attraction_eV (screened) and
        optical_gap_eV, sorted by material and size; bulk gap and high-frequency dielectric
        constant are those of ``bulk_semiconductors``.

    Examples
    --------
    >>> gaps = computed_gaps()
    >>> bool((gaps["confinement_eV"] > 0.0).all())
    True
    """
    table = read_table("computed_dots")
    table["lattice_a_nm"] = table["parameter_set"].map(parameter_sets()["lattice_a_nm"])
    keys = ["material", "cutting_diameter_nm"]
    means = ["diameter_nm", "confinement_eV", "attraction_eV", "lattice_a_nm"]
    dots = table.groupby(keys, as_index=False)[means].mean()
    bulk = bulk_constants(dots["material"].tolist())
    epsilon = bulk["dielectric"].to_numpy()
    penn = penn_gap_eV(epsilon, dots["lattice_a_nm"])
    screened = size_dielectric(epsilon, penn, dots["confinement_eV"])
    dots["attraction_eV"] = dots["attraction_eV"] / screened
    dots["optical_gap_eV"] = bulk["gap_eV"] + dots["confinement_eV"] + dots["attraction_eV"]
    return dots.drop(columns=["cutting_diameter_nm", "lattice_a_nm"])
