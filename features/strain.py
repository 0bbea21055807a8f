"""Lattice strain of metal particles: contraction by size, mismatch of an alloy's lattice.

Strains are relative changes of lengths, negative for compression. The surface stress f of a sphere
presses with 4 f / d, so a particle of bulk modulus B contracts by 4 f / (3 B d): Mays, Vermaak and
Kuhlmann-Wilsdorf, Surf. Sci. 12, 134 (1968). Bare particles; adsorbed or dissolved gases can
reverse the sign, and measured surface stresses of one metal differ by half their value.
"""

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from features.errors import PhysicsRangeError, UnknownMaterialError, explain
from features.formula import parse_formula
from features.particle_metal import metal_lattice
from features.tables import read_table

__all__ = ["SizeStrain", "alloy_mismatch_strain", "particle_strain", "size_strain"]

FloatArray = NDArray[np.float64]

# where no surface stress was measured the surface energy stands in; the four measured metals have
# ratios of stress to energy between 0.8 and 3
_STAND_IN_SHARE = 1.0


@dataclass(frozen=True)
class SizeStrain:
    """Strain of particles of one material.

    Attributes
    ----------
    strain, sigma : ndarray
        Value and standard uncertainty.
    is_measured : bool
        Whether the surface stress of every metal was measured; else surface energies stand in.
    """

    strain: FloatArray
    sigma: FloatArray
    is_measured: bool


def size_strain(
    diameter_nm: ArrayLike, *, surface_stress_N_m: ArrayLike, bulk_modulus_GPa: ArrayLike
) -> FloatArray:
    """Return the strain of a sphere by its surface stress.

    Parameters
    ----------
    diameter_nm : array-like
        > 0; continuum elasticity, above about 1.5 nm.
    surface_stress_N_m : array-like
        Positive contracts.
    bulk_modulus_GPa : array-like
        > 0.

    Returns
    -------
    ndarray
        -4 f / (3 B d).

    Raises
    ------
    PhysicsRangeError
        If a diameter or modulus is not positive.

    Examples
    --------
    >>> float(size_strain(4.0, surface_stress_N_m=3.0, bulk_modulus_GPa=200.0).round(6))
    -0.005
    """
    diameter = np.asarray(diameter_nm, dtype=np.float64)
    modulus = np.asarray(bulk_modulus_GPa, dtype=np.float64)
    if not (np.all(diameter > 0.0) and np.all(modulus > 0.0)):
        raise PhysicsRangeError(
            explain("no strain", expected="diameter and bulk modulus above zero")
        )
    # N/m over GPa times nm is dimensionless
    stress = np.asarray(surface_stress_N_m, dtype=np.float64)
    return np.asarray(-4.0 * stress / (3.0 * modulus * diameter))


def _elasticity() -> pd.DataFrame:
    """Return modulus, surface stress and its uncertainty by metal, stand-ins filled in."""
    table = read_table("metal_elasticity").set_index("element")
    surfaces = read_table("metal_surfaces")
    energy = surfaces[surfaces["facet"] == "average"].set_index("element")["surface_energy_J_m2"]
    stress = table["surface_stress_N_m"]
    return pd.DataFrame(
        {
            "modulus": table["bulk_modulus_GPa"],
            "stress": stress.fillna(energy),
            "sigma": table["surface_stress_uncertainty_N_m"].fillna(_STAND_IN_SHARE * energy),
            "is_measured": stress.notna(),
        }
    ).dropna()


def particle_strain(material: str, diameter_nm: ArrayLike) -> SizeStrain:
    """Return the contraction of bare particles of a metal or alloy.

    Parameters
    ----------
    material : str
        Formula; an alloy takes the means of its metals' stress and modulus.
    diameter_nm : array-like
        > 0.

    Returns
    -------
    SizeStrain

    Raises
    ------
    FormulaError
        If the formula cannot be read.
    UnknownMaterialError
        If a metal has no bulk modulus or surface energy on record.
    PhysicsRangeError
        If a diameter is not positive.

    Examples
    --------
    >>> platinum = particle_strain("Pt", 3.0)
    >>> round(float(platinum.strain), 4), platinum.is_measured
    (-0.0041, True)
    """
    shares = parse_formula(material).fractions
    table = _elasticity()
    unknown = sorted(set(shares) - set(table.index))
    if unknown:
        raise UnknownMaterialError(
            explain(
                "no elastic constants",
                where=f"material {material!r}",
                expected=f"one of {', '.join(table.index)}",
                found=", ".join(unknown),
            )
        )
    rows = table.loc[list(shares)]
    weights = np.array(list(shares.values()))
    stress, sigma, modulus = (weights @ rows[c].to_numpy() for c in ("stress", "sigma", "modulus"))
    strain = size_strain(diameter_nm, surface_stress_N_m=stress, bulk_modulus_GPa=modulus)
    return SizeStrain(strain, np.abs(strain) * sigma / stress, bool(rows["is_measured"].all()))


def alloy_mismatch_strain(material: str) -> dict[str, float]:
    """Return how far each metal of an alloy is stretched from its own lattice.

    Lengths go with the cube root of the volume per atom, which the alloy averages (Vegard's law in
    volume); relaxation around single atoms is not described, so it is an upper bound.

    Parameters
    ----------
    material : str
        Formula such as ``Pt3Ni``.

    Returns
    -------
    dict of str to float
        Strain by metal; negative where the alloy compresses it.

    Raises
    ------
    FormulaError, UnknownMaterialError
        As for `features.particle_metal.metal_lattice`.

    Examples
    --------
    >>> {metal: round(strain, 3) for metal, strain in alloy_mismatch_strain("Pt3Ni").items()}
    {'Ni': 0.087, 'Pt': -0.024}
    """
    volume = metal_lattice(material).atomic_volume_nm3
    own = {m: metal_lattice(m).atomic_volume_nm3 for m in sorted(parse_formula(material).fractions)}
    return {metal: float(np.cbrt(volume / v) - 1.0) for metal, v in own.items()}
