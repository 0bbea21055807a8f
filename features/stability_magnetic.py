"""Is a particle of a material on record superparamagnetic, and how sure.

Diameters in nm, anisotropy in J/m3, temperatures in K. Formulas: `features.magnetism`; constants:
the table ``magnetic``.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy.stats import norm

from features.errors import PhysicsRangeError, UnknownMaterialError, explain
from features.magnetism import barrier_density_J_m3, superparamagnetic_diameter_nm
from features.stability_inputs import FloatArray, positive
from features.tables import read_table

__all__ = [
    "MagneticConstants",
    "SuperparamagneticDiameter",
    "magnetic_constants",
    "superparamagnetic_chance",
    "superparamagnetic_estimate",
]

_RANGE_SIGMAS = 3.0
_LEAST_SIGMA_LN_D = 0.1


@dataclass(frozen=True)
class MagneticConstants:
    """Magnetic constants of one material near 300 K.

    Attributes
    ----------
    material, structure : str
        Names.
    anisotropy : {"uniaxial", "cubic"}
        Symmetry.
    K1_J_m3, abs_K_low_J_m3, abs_K_high_J_m3 : float
        First anisotropy constant, and the published range of its size, J/m3.
    curie_temperature_K : float
        Above it there is no magnetic order; nan if not on record.
    source : str
        Key into the table ``sources``.
    """

    material: str
    structure: str
    anisotropy: str
    K1_J_m3: float
    abs_K_low_J_m3: float
    abs_K_high_J_m3: float
    curie_temperature_K: float
    source: str


@dataclass(frozen=True)
class SuperparamagneticDiameter:
    """Largest superparamagnetic diameter of a material.

    Attributes
    ----------
    diameter_nm : float
        With the convention ``full``.
    barrier_diameter_nm : float
        With the convention ``barrier``: the same for uniaxial crystals, larger for cubic ones.
    sigma_low, sigma_high : float
        Standard uncertainty of the logarithm of the diameter, downwards and upwards; upwards it
        spans the two conventions.
    """

    diameter_nm: float
    barrier_diameter_nm: float
    sigma_low: float
    sigma_high: float


def magnetic_constants(material: str, structure: str | None = None) -> MagneticConstants:
    """Return the constants of a material on record.

    Parameters
    ----------
    material : str
        Formula as in the table ``magnetic``.
    structure : str, optional
        Needed only to tell two structures apart; the first on record otherwise.

    Returns
    -------
    MagneticConstants

    Raises
    ------
    UnknownMaterialError
        If the table has no such row.

    Examples
    --------
    >>> magnetic_constants("Fe").anisotropy
    'cubic'
    """
    table = read_table("magnetic")
    chosen = table[table["material"] == material]
    if structure is not None:
        chosen = chosen[chosen["structure"] == structure]
    if chosen.empty:
        known = ", ".join(sorted(set(table["material"])))
        raise UnknownMaterialError(
            explain(
                "no magnetic constants",
                where=material,
                expected=f"one of {known}",
                found=structure or "",
            )
        )
    row = chosen.to_dict("records")[0]
    size = abs(row["K1_J_m3"])
    low, high = row["abs_K_low_J_m3"], row["abs_K_high_J_m3"]
    return MagneticConstants(
        material=row["material"],
        structure=row["structure"],
        anisotropy=row["anisotropy"],
        K1_J_m3=row["K1_J_m3"],
        abs_K_low_J_m3=size / 2.0 if np.isnan(low) else low,
        abs_K_high_J_m3=size * 2.0 if np.isnan(high) else high,
        curie_temperature_K=row["curie_temperature_K"],
        source=row["source"],
    )


def superparamagnetic_estimate(
    material: str,
    structure: str | None = None,
    *,
    temperature_K: float = 300.0,
    measurement_time_s: float = 100.0,
) -> SuperparamagneticDiameter:
    """Return the superparamagnetic diameter in both conventions, with its uncertainty.

    Parameters
    ----------
    material, structure : str
        As for `magnetic_constants`.
    temperature_K, measurement_time_s : float
        As for `superparamagnetic_diameter_nm`.

    Returns
    -------
    SuperparamagneticDiameter
        The published range of |K| counts as three standard deviations of its logarithm, never less
        than 10 % of the diameter (30 % of K); upwards the second convention lies at two.

    Raises
    ------
    UnknownMaterialError
        If the material is not on record.
    PhysicsRangeError
        If the temperature is not below the Curie temperature.

    Examples
    --------
    >>> iron = superparamagnetic_estimate("Fe")
    >>> round(iron.diameter_nm), round(iron.barrier_diameter_nm)
    (16, 26)
    """
    row = magnetic_constants(material, structure)
    if temperature_K >= row.curie_temperature_K:
        raise PhysicsRangeError(
            explain(
                "no magnetic order",
                where=material,
                expected=f"below {row.curie_temperature_K:g} K",
                found=f"{temperature_K:g} K",
            )
        )
    full, barrier = (
        float(
            superparamagnetic_diameter_nm(
                barrier_density_J_m3(row.K1_J_m3, anisotropy=row.anisotropy, convention=name),
                temperature_K=temperature_K,
                measurement_time_s=measurement_time_s,
            )
        )
        for name in ("full", "barrier")
    )
    size = abs(row.K1_J_m3)
    down = np.log(max(row.abs_K_high_J_m3 / size, 1.0)) / 3.0 / _RANGE_SIGMAS
    up = np.log(max(size / row.abs_K_low_J_m3, 1.0)) / 3.0 / _RANGE_SIGMAS
    return SuperparamagneticDiameter(
        diameter_nm=full,
        barrier_diameter_nm=barrier,
        sigma_low=max(_LEAST_SIGMA_LN_D, float(down)),
        sigma_high=max(_LEAST_SIGMA_LN_D, float(up), float(np.log(barrier / full)) / 2.0),
    )


def superparamagnetic_chance(
    diameter_nm: ArrayLike, estimate: SuperparamagneticDiameter
) -> FloatArray:
    """Return the chance that particles are superparamagnetic.

    Parameters
    ----------
    diameter_nm : array-like
        Diameter, nm, > 0.
    estimate : SuperparamagneticDiameter
        From `superparamagnetic_estimate`.

    Returns
    -------
    ndarray
        Chance that the limit lies above the diameter, its logarithm taken as two halves of normal
        distributions with the two uncertainties.

    Raises
    ------
    PhysicsRangeError
        If a diameter is not positive.

    Examples
    --------
    >>> iron = superparamagnetic_estimate("Fe")
    >>> superparamagnetic_chance([8.0, 60.0], iron).round(2).tolist()
    [1.0, 0.0]
    """
    (d,) = positive(diameter_nm=diameter_nm)
    low, high = estimate.sigma_low, estimate.sigma_high
    x = np.log(d / estimate.diameter_nm)
    below = 2.0 * low / (low + high) * norm.cdf(x / low)
    above = 2.0 * high / (low + high) * norm.sf(x / high)
    return np.asarray(np.where(x < 0.0, 1.0 - below, above), dtype=np.float64)
