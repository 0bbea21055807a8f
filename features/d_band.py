"""The d band at a surface site: width by coordination, strain and neighbours, and its centre.

Energies in eV against the Fermi level. The second moment of the local density of states is the sum
of the squared hopping elements to the neighbours, so the width goes with the square root of their
number. Hopping between d states falls with the fifth power of the distance and is the geometric
mean of two metals' parameters (Andersen, Phys. Rev. B 12, 3060 (1975); Harrison, Electronic
Structure (1980)). At constant filling the centre of a band of any fixed form moves with its width
(Hammer and Norskov, Adv. Catal. 45, 71 (2000)). The rule overstates shifts where the d band is
full (group 11 and beyond).
"""

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from features.errors import PhysicsRangeError, UnknownMaterialError, explain
from features.formula import parse_formula
from features.strain import alloy_mismatch_strain
from features.tables import read_table

__all__ = ["alloy_width_ratio", "d_band_width_ratio", "shifted_d_band_centre_eV"]

FloatArray = NDArray[np.float64]

_HOPPING_POWER = 5.0


def d_band_width_ratio(
    coordination: ArrayLike, reference_coordination: ArrayLike, strain: ArrayLike = 0.0
) -> FloatArray:
    """Return the width of the d band at a site over that at a reference site.

    Parameters
    ----------
    coordination, reference_coordination : array-like
        Nearest neighbours of the site and of the reference (9 for the close-packed face of fcc and
        hcp, 6 for bcc (110)), > 0.
    strain : array-like, default 0
        Relative change of the neighbour distance, > -1.

    Returns
    -------
    ndarray
        sqrt(coordination / reference) / (1 + strain)^5.

    Raises
    ------
    PhysicsRangeError
        If a coordination is not positive or a strain not above -1.

    Examples
    --------
    >>> float(d_band_width_ratio(4.0, 9.0).round(6))
    0.666667
    """
    number = np.asarray(coordination, dtype=np.float64)
    reference = np.asarray(reference_coordination, dtype=np.float64)
    stretch = 1.0 + np.asarray(strain, dtype=np.float64)
    if not (np.all(number > 0.0) and np.all(reference > 0.0) and np.all(stretch > 0.0)):
        raise PhysicsRangeError(
            explain("no d-band width", expected="coordination above 0 and strain above -1")
        )
    return np.asarray(np.sqrt(number / reference) / stretch**_HOPPING_POWER)


def shifted_d_band_centre_eV(centre_eV: ArrayLike, width_ratio: ArrayLike) -> FloatArray:
    """Return the centre of a band that was widened or narrowed at constant filling.

    Parameters
    ----------
    centre_eV : array-like
        Centre at the reference site, against the Fermi level.
    width_ratio : array-like
        As given by `d_band_width_ratio`, times that of `alloy_width_ratio` in an alloy.

    Returns
    -------
    ndarray
        Their product.

    Examples
    --------
    >>> float(shifted_d_band_centre_eV(-2.25, d_band_width_ratio(7.0, 9.0)).round(2))
    -1.98
    """
    centre = np.asarray(centre_eV, dtype=np.float64)
    return np.asarray(centre * np.asarray(width_ratio, dtype=np.float64))


def _hopping_strength(metals: list[str], material: str) -> pd.Series:
    """Return the factor of each metal in the squared hopping element, in arbitrary units."""
    table = read_table("metals").set_index("element")
    strength = table["d_width_parameter_mRy"] * table["sphere_radius_bohr"] ** _HOPPING_POWER
    strength = strength.dropna()
    unknown = sorted(set(metals) - set(strength.index))
    if unknown:
        raise UnknownMaterialError(
            explain(
                "no d band on record",
                where=f"material {material!r}",
                expected=f"one of {', '.join(strength.index)}",
                found=", ".join(unknown),
            )
        )
    return strength[metals]


def alloy_width_ratio(material: str) -> dict[str, float]:
    """Return the width of each metal's d band in a random alloy over that in the pure metal.

    Ligand effect (neighbours with wider or narrower d states) and strain (the alloy's lattice)
    together, for random neighbours.

    Parameters
    ----------
    material : str
        Formula such as ``Pt3Ni``.

    Returns
    -------
    dict of str to float
        Ratio by metal, 1 for a pure metal.

    Raises
    ------
    FormulaError
        If the formula cannot be read.
    UnknownMaterialError
        If a metal has no d band or no lattice on record.

    Examples
    --------
    >>> {metal: round(ratio, 2) for metal, ratio in alloy_width_ratio("Pt3Ni").items()}
    {'Ni': 1.09, 'Pt': 1.02}
    """
    shares = parse_formula(material).fractions
    strain = alloy_mismatch_strain(material)
    strength = _hopping_strength(list(shares), material)
    mean = float(sum(share * strength[metal] for metal, share in shares.items()))
    return {
        metal: float(np.sqrt(mean / strength[metal]) / (1.0 + strain[metal]) ** _HOPPING_POWER)
        for metal in sorted(shares)
    }
