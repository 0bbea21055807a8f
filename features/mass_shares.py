"""Mass shares of a composition, alone or as a core with its shell.

A composition maps element symbols, or the organic cations ``FA`` (formamidinium) and ``MA``
(methylammonium), to amounts (atoms or moles). Sizes in nm, densities in g/cm3. Atomic masses are
those shipped with pymatgen, which is imported only when a mass is asked for.
"""

import math
import re
from collections.abc import Mapping
from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from features.errors import FormulaError, PhysicsRangeError, explain

__all__ = [
    "ORGANIC_CATIONS",
    "checked_composition",
    "core_mass_share",
    "core_shell_composition",
    "mass_percent",
    "molar_mass_g",
]

ORGANIC_CATIONS = {"FA": {"C": 1, "H": 5, "N": 2}, "MA": {"C": 1, "H": 6, "N": 1}}
"""Atoms of the organic cations that may stand in a composition."""


def checked_composition(composition: Mapping[str, float]) -> dict[str, float]:
    """Return the constituents with amounts above zero, or refuse the composition.

    Parameters
    ----------
    composition : mapping of str to float
        Amount of each element, >= 0; ``FA`` and ``MA`` are organic cations.

    Returns
    -------
    dict of str to float
        Constituents with amounts above zero.

    Raises
    ------
    FormulaError
        If a symbol cannot be read, an amount is negative or not finite, or nothing is left.

    Examples
    --------
    >>> checked_composition({"Cd": 1, "Zn": 0})
    {'Cd': 1.0}
    """
    present = {}
    for symbol, amount in composition.items():
        if symbol not in ORGANIC_CATIONS and not re.fullmatch(r"[A-Z][a-z]?", symbol):
            raise FormulaError(
                explain("no such element", expected="a symbol such as Cd, or FA, MA", found=symbol)
            )
        if not math.isfinite(amount) or amount < 0:
            raise FormulaError(
                explain("amount out of range", where=symbol, expected=">= 0", found=f"{amount}")
            )
        if amount > 0:
            present[symbol] = float(amount)
    if not present:
        raise FormulaError(explain("empty composition", expected="at least one element"))
    return present


@cache
def _atomic_mass(symbol: str) -> float:
    """Return the atomic mass in u; organic cations by their atoms."""
    from pymatgen.core.periodic_table import Element  # noqa: PLC0415 - costly, only for masses

    if symbol in ORGANIC_CATIONS:
        return sum(n * _atomic_mass(part) for part, n in ORGANIC_CATIONS[symbol].items())
    if not Element.is_valid_symbol(symbol):
        raise FormulaError(explain("no such element", expected="a symbol such as Cd", found=symbol))
    return float(Element(symbol).atomic_mass)


def mass_percent(composition: Mapping[str, float]) -> dict[str, float]:
    """Return the mass share of each constituent.

    Parameters
    ----------
    composition : mapping of str to float
        As for `checked_composition`.

    Returns
    -------
    dict of str to float
        Percent by mass; the shares sum to 100. Atomic masses are those shipped with pymatgen.

    Raises
    ------
    FormulaError
        As for `checked_composition`, or if a symbol is no element.

    Examples
    --------
    >>> round(mass_percent({"Cs": 1, "Pb": 1, "Br": 3})["Pb"], 1)
    35.7
    """
    masses = {
        symbol: n * _atomic_mass(symbol) for symbol, n in checked_composition(composition).items()
    }
    total = sum(masses.values())
    return {symbol: 100.0 * mass / total for symbol, mass in masses.items()}


def molar_mass_g(composition: Mapping[str, float]) -> float:
    """Return the mass of one mole of a composition.

    Parameters
    ----------
    composition : mapping of str to float
        As for `checked_composition`.

    Returns
    -------
    float
        Mass, g/mol.

    Raises
    ------
    FormulaError
        As for `mass_percent`.

    Examples
    --------
    >>> round(molar_mass_g({"Cd": 1, "Se": 1}), 1)
    191.4
    """
    return sum(n * _atomic_mass(symbol) for symbol, n in checked_composition(composition).items())


def core_shell_composition(
    core: Mapping[str, float],
    shell: Mapping[str, float],
    *,
    core_diameter_nm: float,
    shell_thickness_nm: float,
    core_density_g_cm3: float,
    shell_density_g_cm3: float,
) -> dict[str, float]:
    """Return the composition of a spherical core with its shell.

    Parameters
    ----------
    core, shell : mapping of str to float
        Compositions as for `checked_composition`.
    core_diameter_nm, shell_thickness_nm : float
        Sizes, nm; the core > 0, the shell >= 0.
    core_density_g_cm3, shell_density_g_cm3 : float
        Bulk densities, g/cm3, > 0.

    Returns
    -------
    dict of str to float
        Moles of each constituent in 100 g of particles.

    Raises
    ------
    FormulaError
        As for `mass_percent`.
    PhysicsRangeError
        If a size or density is out of range.

    Examples
    --------
    >>> both = core_shell_composition({"Cd": 1, "Se": 1}, {"Zn": 1, "S": 1}, core_diameter_nm=4,
    ...     shell_thickness_nm=1, core_density_g_cm3=5.8, shell_density_g_cm3=4.1)
    >>> round(mass_percent(both)["Cd"])
    22
    """
    sizes = (core_diameter_nm, core_density_g_cm3, shell_density_g_cm3)
    if min(sizes) <= 0 or not shell_thickness_nm >= 0:
        raise PhysicsRangeError(
            explain("core or shell out of range", expected="sizes and densities > 0, shell >= 0")
        )
    core_mass = core_density_g_cm3 * core_diameter_nm**3
    outer_nm = core_diameter_nm + 2.0 * shell_thickness_nm
    shell_mass = shell_density_g_cm3 * (outer_nm**3 - core_diameter_nm**3)
    moles: dict[str, float] = {}
    for part, mass in ((core, core_mass), (shell, shell_mass)):
        for symbol, percent in mass_percent(part).items():
            share = percent * mass / (core_mass + shell_mass) / _atomic_mass(symbol)
            moles[symbol] = moles.get(symbol, 0.0) + share
    return moles


def core_mass_share(
    core_diameter_nm: ArrayLike,
    shell_thickness_nm: float,
    core_density_g_cm3: float,
    shell_density_g_cm3: float,
) -> NDArray[np.float64]:
    """Return the core's share of the mass of a spherical core with its shell.

    Parameters
    ----------
    core_diameter_nm : array-like
        Diameters, nm, > 0.
    shell_thickness_nm : float
        Thickness, nm, >= 0.
    core_density_g_cm3, shell_density_g_cm3 : float
        Bulk densities, g/cm3, > 0.

    Returns
    -------
    ndarray
        Share, above 0, at most 1.

    Examples
    --------
    >>> core_mass_share([4.0], 0.0, 5.8, 4.1).tolist()
    [1.0]
    """
    d = np.asarray(core_diameter_nm, dtype=np.float64)
    core = core_density_g_cm3 * d**3
    shell = shell_density_g_cm3 * ((d + 2.0 * shell_thickness_nm) ** 3 - d**3)
    return np.asarray(core / (core + shell))
