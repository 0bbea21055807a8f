"""Metal or molecule: the Kubo gap and the size band in which the metallic state sets in.

Diameters in nm, energies in eV, temperatures in K. Free-electron constants and published bands come
from the table ``metallicity``. A plasmon does not need a closed gap, and a gap of about kT remains
in gold clusters that count as metallic, so the answer is a chance across a band, never an edge.
"""

from collections.abc import Hashable
from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike
from scipy import constants
from scipy.stats import norm

from features.errors import UnknownMaterialError, explain
from features.stability_inputs import FloatArray, positive
from features.tables import read_table

__all__ = [
    "MetallicEstimate",
    "kubo_diameter_nm",
    "kubo_electrons",
    "kubo_gap_eV",
    "metallic_band_atoms",
    "metallic_estimate",
]

_NUMBERS = (
    "fermi_energy_eV",
    "valence",
    "electron_density_per_m3",
    "sp_gap_metal",
    "band_low_atoms",
    "band_high_atoms",
)
_BAND_SIGMAS = 1.645
_FACTOR_KUBO, _FACTOR_SP_GAP = 3.0, 10.0


@dataclass(frozen=True)
class MetallicEstimate:
    """Metallic character of particles of one element.

    Attributes
    ----------
    gap_eV : ndarray
        Kubo gap.
    n_atoms : ndarray
        Atoms in the sphere.
    chance : ndarray
        Chance that the particle behaves as a metal.
    band_low_atoms, band_high_atoms : float
        Ends of the band, where the chance is 5 % and 95 %.
    is_published_band : bool
        True if the band was observed, false if it is a factor around the Kubo estimate.
    is_valid : bool
        False for divalent metals, whose free-electron estimate does not hold.
    """

    gap_eV: FloatArray
    n_atoms: FloatArray
    chance: FloatArray
    band_low_atoms: float
    band_high_atoms: float
    is_published_band: bool
    is_valid: bool


def kubo_gap_eV(n_electrons: ArrayLike, fermi_energy_eV: ArrayLike) -> FloatArray:
    """Return the mean spacing of electron levels at the Fermi energy.

    4 E_F / (3 N): Kubo, J. Phys. Soc. Jpn. 17, 975 (1962). Free electrons; not for divalent metals.

    Parameters
    ----------
    n_electrons : array-like
        Conduction electrons in the particle, > 0.
    fermi_energy_eV : array-like
        Fermi energy, eV, > 0.

    Returns
    -------
    ndarray
        Spacing, eV.

    Raises
    ------
    PhysicsRangeError
        If an input is not positive.

    Examples
    --------
    >>> round(float(kubo_gap_eV(285, 5.53)) * 1e3, 1)
    25.9
    """
    n, fermi = positive(n_electrons=n_electrons, fermi_energy_eV=fermi_energy_eV)
    return 4.0 * fermi / (3.0 * n)


def kubo_electrons(fermi_energy_eV: ArrayLike, *, temperature_K: ArrayLike = 300.0) -> FloatArray:
    """Return the number of electrons at which the Kubo gap equals kT.

    Parameters
    ----------
    fermi_energy_eV, temperature_K : array-like
        All > 0.

    Returns
    -------
    ndarray
        Electrons.

    Raises
    ------
    PhysicsRangeError
        If an input is not positive.

    Examples
    --------
    >>> round(float(kubo_electrons(5.53)))
    285
    """
    fermi, temperature = positive(fermi_energy_eV=fermi_energy_eV, temperature_K=temperature_K)
    return np.asarray(
        4.0 * fermi * constants.e / (3.0 * constants.k * temperature), dtype=np.float64
    )


@cache
def _table() -> dict[Hashable, Any]:
    """Return the constants by element."""
    return read_table("metallicity").set_index("element").to_dict("index")


def _row(element: str) -> dict[str, float]:
    """Return the constants of an element."""
    table = _table()
    if element not in table:
        raise UnknownMaterialError(
            explain(
                "no free-electron constants",
                where=element,
                expected=f"one of {', '.join(sorted(map(str, table)))}",
                do="leave the metallic limit out for this material",
            )
        )
    row = table[element]
    return {name: float("nan") if pd.isna(row[name]) else float(row[name]) for name in _NUMBERS}


def kubo_diameter_nm(element: str, *, temperature_K: ArrayLike = 300.0) -> FloatArray:
    """Return the diameter at which the Kubo gap equals kT.

    Parameters
    ----------
    element : str
        Symbol.
    temperature_K : array-like
        Temperature, > 0.

    Returns
    -------
    ndarray
        Diameter of a sphere of bulk density, nm.

    Raises
    ------
    UnknownMaterialError
        If the element is not in the table.
    PhysicsRangeError
        If a temperature is not positive.

    Examples
    --------
    >>> round(float(kubo_diameter_nm("Au")), 1)
    2.1
    """
    row = _row(element)
    electrons = kubo_electrons(row["fermi_energy_eV"], temperature_K=temperature_K)
    volume_nm3 = electrons / row["electron_density_per_m3"] * 1e27
    return np.asarray(np.cbrt(6.0 * volume_nm3 / np.pi), dtype=np.float64)


def metallic_band_atoms(element: str, *, temperature_K: float = 300.0) -> tuple[float, float]:
    """Return the band of atoms in which the metallic state sets in.

    Parameters
    ----------
    element : str
        Symbol.
    temperature_K : float
        Temperature, K, > 0; a published band does not move with it.

    Returns
    -------
    low, high : float
        Published ends, or a third and three times the Kubo estimate (a tenth and ten times for
        divalent metals, for which the estimate does not hold). The factors are judgement: sodium
        clusters are metallic from tens of atoms (Kubo: 167), magnesium from about 18 (183).

    Raises
    ------
    UnknownMaterialError
        If the element is not in the table.

    Examples
    --------
    >>> metallic_band_atoms("Au")
    (144.0, 279.0)
    """
    row = _row(element)
    if not np.isnan(row["band_low_atoms"]):
        return row["band_low_atoms"], row["band_high_atoms"]
    electrons = float(kubo_electrons(row["fermi_energy_eV"], temperature_K=temperature_K))
    atoms = electrons / row["valence"]
    factor = _FACTOR_SP_GAP if row["sp_gap_metal"] else _FACTOR_KUBO
    return atoms / factor, atoms * factor


def metallic_estimate(
    element: str, diameter_nm: ArrayLike, *, temperature_K: float = 300.0
) -> MetallicEstimate:
    """Return the Kubo gap and the chance that particles behave as a metal.

    Parameters
    ----------
    element : str
        Symbol.
    diameter_nm : array-like
        Diameter of a sphere, nm, > 0. Flat islands are governed by their thickness instead.
    temperature_K : float
        Temperature, K, > 0.

    Returns
    -------
    MetallicEstimate
        The chance rises with the logarithm of the number of atoms, 5 % and 95 % at the ends of
        `metallic_band_atoms`.

    Raises
    ------
    UnknownMaterialError
        If the element is not in the table.
    PhysicsRangeError
        If an input is not positive.

    Examples
    --------
    >>> metallic_estimate("Au", [1.2, 2.0, 4.0]).chance.round(1).tolist()
    [0.0, 0.9, 1.0]
    """
    (d,) = positive(diameter_nm=diameter_nm)
    row = _row(element)
    electrons = row["electron_density_per_m3"] * np.pi / 6.0 * (d * 1e-9) ** 3
    low, high = metallic_band_atoms(element, temperature_K=temperature_K)
    n_atoms = electrons / row["valence"]
    sigma = np.log(high / low) / (2.0 * _BAND_SIGMAS)
    chance = norm.cdf(np.log(n_atoms / np.sqrt(low * high)) / sigma)
    return MetallicEstimate(
        gap_eV=kubo_gap_eV(electrons, row["fermi_energy_eV"]),
        n_atoms=np.asarray(n_atoms, dtype=np.float64),
        chance=np.asarray(chance, dtype=np.float64),
        band_low_atoms=low,
        band_high_atoms=high,
        is_published_band=not np.isnan(row["band_low_atoms"]),
        is_valid=not row["sp_gap_metal"],
    )
