"""Does a metal particle survive: melting with its uncertainty, cohesion, sintering, surface share.

Diameters in nm (films: thickness), temperatures in K, energies in eV per atom. Constants come from
the table ``thermo_metals``. The melting answer is the median of five models in `features.melting`
and its uncertainty is their spread: no parameter is fitted to measured points, so
`features.stability_scorecard` is an outside check.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray
from scipy.stats import norm

from features import melting
from features.errors import UnknownMaterialError, explain
from features.stability_inputs import FloatArray, positive
from features.tables import read_table

__all__ = [
    "FEWEST_ATOMS",
    "MeltingEstimate",
    "cohesive_energy_eV",
    "cuboctahedron_atoms",
    "melting_estimate",
    "sintering_temperatures_K",
    "surface_atom_fraction",
    "survival_chance",
    "thermo_constants",
]

FEWEST_ATOMS = 200
"""Below this many atoms melting is not monotonic in size and no model here is valid."""

_SHELL_ATOMS = 2.0
_LEAST_SIGMA_K = 1e-9


@dataclass(frozen=True)
class MeltingEstimate:
    """Melting temperature of particles of one metal.

    Attributes
    ----------
    temperature_K : ndarray
        Median of the models.
    sigma_K : ndarray
        Standard uncertainty: spread of the models, of the heat of fusion, and, for an alloy, of the
        constituents' bulk melting temperatures.
    low_K, high_K : ndarray
        Lowest and highest model.
    n_atoms : ndarray
        Atoms in a sphere of that diameter.
    is_valid : ndarray of bool
        False below `FEWEST_ATOMS`.
    models : dict of str to ndarray
        Each model's temperature, K; not a number where a model does not apply.
    """

    temperature_K: FloatArray
    sigma_K: FloatArray
    low_K: FloatArray
    high_K: FloatArray
    n_atoms: FloatArray
    is_valid: NDArray[np.bool_]
    models: dict[str, FloatArray]


@cache
def _thermo() -> pd.DataFrame:
    """Return the constants by element, with gaps filled by published rules."""
    table = read_table("thermo_metals").set_index("element")
    interface = melting.turnbull_interface_energy_J_m2(
        table["heat_of_fusion_J_mol"], table["atom_volume_diameter_nm"]
    )
    table["solid_liquid_energy_J_m2"] = table["solid_liquid_energy_J_m2"].fillna(
        pd.Series(interface, index=table.index)
    )
    table["heat_of_fusion_spread_percent"] = table["heat_of_fusion_spread_percent"].fillna(5.0)
    numbers = table.select_dtypes("number")
    median_ratio = (numbers["liquid_density_kg_m3"] / numbers["solid_density_kg_m3"]).median()
    guess = median_ratio * numbers["solid_density_kg_m3"]
    return numbers.assign(liquid_density_kg_m3=numbers["liquid_density_kg_m3"].fillna(guess))


def thermo_constants(metal: str | Mapping[str, float]) -> dict[str, float]:
    """Return the constants of an element, or the mean over an alloy by atom share.

    Parameters
    ----------
    metal : str or mapping of str to float
        Symbol, or amounts by symbol. The mean knows no phase diagram; its error is put down as the
        deviation of the constituents' melting temperatures.

    Returns
    -------
    dict of str to float
        Columns of ``thermo_metals``, and ``alloy_deviation_K``. A missing interface energy follows
        Turnbull's rule, a missing liquid density the median ratio of the other metals.

    Raises
    ------
    UnknownMaterialError
        If an element is not in the table.

    Examples
    --------
    >>> thermo_constants("Au")["melting_temperature_K"]
    1337.33
    """
    amounts = {metal: 1.0} if isinstance(metal, str) else dict(metal)
    table = _thermo()
    if unknown := [symbol for symbol in amounts if symbol not in table.index]:
        raise UnknownMaterialError(
            explain(
                "no melting constants",
                where=" ".join(unknown),
                expected=f"one of {', '.join(table.index)}",
                do="leave the temperature limit out for this material",
            )
        )
    rows = table.loc[list(amounts)]
    weights = np.array(list(amounts.values())) / sum(amounts.values())
    means = {str(name): float(weights @ rows[name].to_numpy()) for name in rows.columns}
    deviation = rows["melting_temperature_K"].to_numpy() - means["melting_temperature_K"]
    return {**means, "alloy_deviation_K": float(np.sqrt(weights @ deviation**2))}


def _models(c: Mapping[str, float], diameter_nm: FloatArray, shape: str) -> dict[str, FloatArray]:
    """Return the five models' temperatures, K."""
    bulk: dict[str, Any] = {
        "bulk_melting_K": c["melting_temperature_K"],
        "heat_of_fusion_J_kg": c["heat_of_fusion_J_kg"],
        "solid_density_kg_m3": c["solid_density_kg_m3"],
        "shape": shape,
    }
    surface = c["liquid_surface_energy_J_m2"]
    interface, liquid = c["solid_liquid_energy_J_m2"], c["liquid_density_kg_m3"]
    return {
        "pawlow": melting.pawlow_melting_K(
            diameter_nm,
            liquid_density_kg_m3=liquid,
            solid_surface_energy_J_m2=melting.SOLID_OVER_LIQUID_ENERGY * surface,
            liquid_surface_energy_J_m2=surface,
            **bulk,
        ),
        "gibbs_thomson": melting.gibbs_thomson_melting_K(
            diameter_nm, interface_energy_J_m2=interface, **bulk
        ),
        "liquid_shell": melting.liquid_shell_melting_K(
            diameter_nm,
            shell_nm=_SHELL_ATOMS * c["atom_diameter_nm"],
            liquid_density_kg_m3=liquid,
            liquid_surface_energy_J_m2=surface,
            interface_energy_J_m2=interface,
            **bulk,
        ),
        "bond_energy": c["melting_temperature_K"]
        * melting.bond_energy_ratio(diameter_nm, c["atom_diameter_nm"], shape=shape),
        "liquid_drop": melting.liquid_drop_melting_K(
            diameter_nm,
            bulk_melting_K=c["melting_temperature_K"],
            atom_volume_diameter_nm=c["atom_volume_diameter_nm"],
            liquid_surface_energy_J_m2=surface,
            shape=shape,
        ),
    }


def melting_estimate(
    metal: str | Mapping[str, float], diameter_nm: ArrayLike, *, shape: str = "sphere"
) -> MeltingEstimate:
    """Return the melting temperature of particles with the spread of five models.

    Pawlow, Gibbs-Thomson, liquid shell of two atom diameters, bond energy and liquid drop, each
    with the constants of `thermo_constants`; the recommended value is their median, chosen before
    any comparison. It tends to lie high at published points, see
    `features.stability_scorecard.melting_scorecard`.

    Parameters
    ----------
    metal : str or mapping of str to float
        Symbol, or amounts by symbol.
    diameter_nm : array-like
        Diameter, or thickness of a film, nm, > 0.
    shape : {"sphere", "wire", "film"}
        Shape. Long wires break into beads near half the melting temperature, well before melting.

    Returns
    -------
    MeltingEstimate
        Arrays of the shape of ``diameter_nm``.

    Raises
    ------
    UnknownMaterialError
        If an element is not in the table.
    PhysicsRangeError
        If a diameter is not positive or the shape is unknown.

    Examples
    --------
    >>> estimate = melting_estimate("Sn", [5.0, 1.0])
    >>> bool(estimate.temperature_K[0] < 505.08), estimate.is_valid.tolist()
    (True, [True, False])
    """
    (d,) = positive(diameter_nm=diameter_nm)
    c = thermo_constants(metal)
    models = _models(c, d, shape)
    stack = np.clip(np.stack(list(models.values())), 0.0, None)
    middle = np.nanmedian(stack, axis=0)
    fall_K = c["melting_temperature_K"] - middle
    heat_part = c["heat_of_fusion_spread_percent"] / 100.0 * fall_K
    spread = np.nanstd(stack, axis=0, ddof=1)
    n_atoms = (d / c["atom_volume_diameter_nm"]) ** 3
    return MeltingEstimate(
        temperature_K=middle,
        sigma_K=np.sqrt(spread**2 + heat_part**2 + c["alloy_deviation_K"] ** 2),
        low_K=np.nanmin(stack, axis=0),
        high_K=np.nanmax(stack, axis=0),
        n_atoms=n_atoms,
        is_valid=n_atoms >= FEWEST_ATOMS,
        models=models,
    )


def survival_chance(temperature_K: ArrayLike, limit_K: ArrayLike, sigma_K: ArrayLike) -> FloatArray:
    """Return the chance that a limit lies above an operating temperature.

    Parameters
    ----------
    temperature_K : array-like
        Operating temperature, > 0.
    limit_K, sigma_K : array-like
        Melting or sintering temperature, >= 0, and its standard uncertainty, >= 0.

    Returns
    -------
    ndarray
        Chance for a normal uncertainty. The margin in sigmas is (limit - temperature) / sigma.

    Raises
    ------
    PhysicsRangeError
        If the operating temperature is not positive.

    Examples
    --------
    >>> float(survival_chance(500.0, 500.0, 20.0))
    0.5
    """
    (operating,) = positive(temperature_K=temperature_K)
    sigma = np.maximum(np.asarray(sigma_K, dtype=np.float64), _LEAST_SIGMA_K)
    margin = (np.asarray(limit_K, dtype=np.float64) - operating) / sigma
    return np.asarray(norm.cdf(margin), dtype=np.float64)


def cohesive_energy_eV(
    metal: str | Mapping[str, float], diameter_nm: ArrayLike, *, shape: str = "sphere"
) -> FloatArray:
    """Return the cohesive energy per atom by the bond-energy model.

    Parameters
    ----------
    metal, diameter_nm, shape
        As for `melting_estimate`.

    Returns
    -------
    ndarray
        Energy, eV per atom; see `features.melting.bond_energy_ratio`.

    Raises
    ------
    UnknownMaterialError, PhysicsRangeError
        As for `melting_estimate`.

    Examples
    --------
    >>> round(float(cohesive_energy_eV("Au", 5.0)), 2)
    3.6
    """
    c = thermo_constants(metal)
    ratio = melting.bond_energy_ratio(diameter_nm, c["atom_diameter_nm"], shape=shape)
    return np.asarray(c["atomisation_energy_eV"] * ratio, dtype=np.float64)


def sintering_temperatures_K(melting_K: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Return the Huttig and Tammann temperatures.

    0.3 and 0.5 of the absolute melting temperature (rules of practice): surface atoms, then bulk
    atoms, become mobile. Given a size-dependent melting temperature they follow it.

    Parameters
    ----------
    melting_K : array-like
        Melting temperature, K, > 0.

    Returns
    -------
    huttig_K, tammann_K : ndarray

    Raises
    ------
    PhysicsRangeError
        If a temperature is not positive.

    Examples
    --------
    >>> [round(float(t)) for t in sintering_temperatures_K(2000.0)]
    [600, 1000]
    """
    (melts,) = positive(melting_K=melting_K)
    return 0.3 * melts, 0.5 * melts


def surface_atom_fraction(diameter_nm: ArrayLike, atom_diameter_nm: ArrayLike) -> FloatArray:
    """Return the share of atoms in the outer shell of one atom diameter.

    1 - (1 - 2 d/D)^3, and 1 below two atom diameters; 20 to 30 % above the cuboctahedral count
    for particles over 3 nm, see `cuboctahedron_atoms`.

    Parameters
    ----------
    diameter_nm, atom_diameter_nm : array-like
        All > 0.

    Returns
    -------
    ndarray
        Share, 0 to 1.

    Raises
    ------
    PhysicsRangeError
        If an input is not positive.

    Examples
    --------
    >>> round(float(surface_atom_fraction(5.0, 0.288)), 2)
    0.31
    """
    d, atom = positive(diameter_nm=diameter_nm, atom_diameter_nm=atom_diameter_nm)
    return 1.0 - np.clip(1.0 - 2.0 * atom / d, 0.0, None) ** 3


def cuboctahedron_atoms(n_shells: ArrayLike) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return atoms and surface atoms of closed cuboctahedral shells.

    (10 n^3 + 15 n^2 + 11 n + 3) / 3 and 10 n^2 + 2 (Mackay, Acta Cryst. 15, 916 (1962)).

    Parameters
    ----------
    n_shells : array-like of int
        Shells around the central atom, >= 1.

    Returns
    -------
    n_atoms, n_surface : ndarray of int

    Raises
    ------
    PhysicsRangeError
        If there is no shell.

    Examples
    --------
    >>> [part.tolist() for part in cuboctahedron_atoms([1, 2])]
    [[13, 55], [12, 42]]
    """
    positive(n_shells=n_shells)
    n = np.asarray(n_shells, dtype=np.int64)
    return (10 * n**3 + 15 * n**2 + 11 * n + 3) // 3, 10 * n**2 + 2
