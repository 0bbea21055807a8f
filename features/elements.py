"""Elemental descriptors, all taken from pymatgen through this one module.

Figures are those that pymatgen ships (electronegativity after Pauling, Shannon radii, ionisation
energies, electron affinities, orbital energies of the free atom in the local-density
approximation). A figure that pymatgen lacks is taken from the element next to it on the
Mendeleev scale, and `filled_descriptors` says where. pymatgen is imported when a descriptor is
first asked for.
"""

import math
import warnings
from functools import cache
from typing import Any

import numpy as np
import pandas as pd

from features.errors import FormulaError, explain
from features.formula import ELEMENTS, ORGANIC_SYMBOLS

__all__ = [
    "DESCRIPTORS",
    "element_table",
    "filled_descriptors",
    "oxidation_states",
    "shannon_radius_nm",
]

DESCRIPTORS = (
    "electronegativity",
    "atomic_radius_nm",
    "calculated_radius_nm",
    "ionic_radius_nm",
    "van_der_waals_radius_nm",
    "polarizability_nm3",
    "molar_volume_cm3",
    "mass_u",
    "valence_electrons",
    "group",
    "row",
    "mendeleev_number",
    "melting_point_K",
    "ionisation_eV",
    "electron_affinity_eV",
    "s_level_eV",
    "p_level_eV",
    "d_level_eV",
    "highest_level_eV",
)
"""Columns of `element_table`."""

_HARTREE_EV = 27.211386
_LAST_Z = 94

# Effective radii of Kieslich, Sun and Cheetham, Chem. Sci. 5, 4712 (2014); from memory.
_ORGANIC = {"FA": (0.253, {"C": 1, "H": 5, "N": 2}), "MA": (0.217, {"C": 1, "H": 6, "N": 1})}

_COMMON_ANIONS = {"F": -1, "Cl": -1, "Br": -1, "I": -1, "O": -2, "S": -2, "Se": -2, "Te": -2}

# States that the field's compounds show and that pymatgen's short list of common ones omits.
_FURTHER_STATES = {
    "Ag": (1,),
    "As": (-3, 3, 5),
    "Au": (1, 3),
    "B": (-3, 3),
    "Bi": (-3, 3, 5),
    "C": (-4, 2, 4),
    "Cu": (1, 2),
    "Ga": (1, 2, 3),
    "Ge": (-4, 2, 4),
    "H": (-1, 1),
    "Hg": (1, 2),
    "In": (1, 2, 3),
    "N": (-3, 3, 5),
    "P": (-3, 3, 4, 5),
    "Pb": (-4, 2, 4),
    "Sb": (-3, 3, 5),
    "Si": (-4, 4),
    "Sn": (-4, 2, 4),
    "Tl": (1, 3),
}


def _number(value: Any) -> float:
    """Return pymatgen's value as a float; missing ones as NaN."""
    try:
        return float(value)
    except (TypeError, ValueError):
        return math.nan


def _levels_eV(element: Any) -> dict[str, float]:
    """Return the valence orbital energies; 0 (the vacuum level) for an empty shell."""
    orbitals = element.atomic_orbitals or {}
    if not orbitals:
        return dict.fromkeys(
            ("s_level_eV", "p_level_eV", "d_level_eV", "highest_level_eV"), math.nan
        )
    row = element.row
    named = {"s_level_eV": f"{row}s", "p_level_eV": f"{row}p", "d_level_eV": f"{row - 1}d"}
    levels = {key: _HARTREE_EV * orbitals.get(name, 0.0) for key, name in named.items()}
    return levels | {"highest_level_eV": _HARTREE_EV * max(orbitals.values())}


def _valence_electrons(element: Any) -> float:
    """Return the electrons outside closed inner shells: group number without filled d shells."""
    if element.is_lanthanoid or element.is_actinoid:
        return 3.0
    group = int(element.group)
    return float(group - 10 if group > 12 else group)


def _figures(symbol: str) -> dict[str, float]:
    from pymatgen.core.periodic_table import Element  # noqa: PLC0415 - costly, only when asked

    element = Element(symbol)
    radius = _number(element.atomic_radius_calculated) / 10.0
    return {
        "electronegativity": _number(element.X),
        "atomic_radius_nm": _number(element.atomic_radius) / 10.0,
        "calculated_radius_nm": radius,
        "ionic_radius_nm": _number(element.average_ionic_radius) / 10.0 or math.nan,
        "van_der_waals_radius_nm": _number(element.van_der_waals_radius) / 10.0,
        "polarizability_nm3": radius**3,
        "molar_volume_cm3": _number(element.data.get("Molar volume")),
        "mass_u": _number(element.atomic_mass),
        "valence_electrons": _valence_electrons(element),
        "group": 3.0 if element.is_lanthanoid or element.is_actinoid else _number(element.group),
        "row": _number(element.row),
        "mendeleev_number": _number(element.mendeleev_no),
        "melting_point_K": _number(element.melting_point),
        "ionisation_eV": _number(element.ionization_energy),
        "electron_affinity_eV": _number(element.electron_affinity),
        **_levels_eV(element),
    }


@cache
def _raw_table() -> pd.DataFrame:
    from pymatgen.core.periodic_table import Element  # noqa: PLC0415 - costly, only when asked

    with warnings.catch_warnings():
        # pymatgen warns of every figure that it lacks; `filled_descriptors` reports them instead.
        warnings.simplefilter("ignore")
        rows = {s: _figures(s) for s in ELEMENTS if Element(s).Z <= _LAST_Z}
    return pd.DataFrame.from_dict(rows, orient="index")[list(DESCRIPTORS)]


def _fill(column: pd.Series, scale: pd.Series) -> pd.Series:
    """Fill missing values from the nearest element on the Mendeleev scale."""
    known = column.dropna()
    nearest = {
        symbol: known[(scale[known.index] - scale[symbol]).abs().idxmin()]
        for symbol in column.index[column.isna()]
    }
    return column.fillna(pd.Series(nearest, dtype=float))


@cache
def _filled_table() -> pd.DataFrame:
    raw = _raw_table()
    table = raw.apply(_fill, scale=raw["mendeleev_number"])
    for symbol, (radius_nm, atoms) in _ORGANIC.items():
        row = table.loc["Cs"].copy()
        row["mass_u"] = sum(n * table["mass_u"][part] for part, n in atoms.items())
        row["ionic_radius_nm"] = radius_nm
        table.loc[symbol] = row
    return table


def element_table() -> pd.DataFrame:
    """Return the descriptors of all constituents that a composition may hold.

    Returns
    -------
    pandas.DataFrame
        One row an element up to plutonium, and one for each organic cation ``FA`` and ``MA``;
        columns `DESCRIPTORS`. Radii in nm, energies in eV, mass in u. ``polarizability_nm3`` is
        the polarizability volume of a conducting sphere, the cube of the calculated radius.
        Levels are 0 where the shell is empty. The organic cations carry their own mass and
        effective radius and otherwise the figures of caesium: like it they give one electron and
        take no part in the band edges.

    Examples
    --------
    >>> float(element_table().loc["Se", "electronegativity"])
    2.55
    """
    return _filled_table().copy(deep=True)


def filled_descriptors() -> dict[str, list[str]]:
    """Return, by descriptor, the elements whose figure was taken from a neighbour."""
    missing = _raw_table().isna()
    return {name: list(missing.index[missing[name]]) for name in DESCRIPTORS if missing[name].any()}


@cache
def oxidation_states(symbol: str) -> tuple[int, ...]:
    """Return the oxidation states that a constituent may take in a compound, without zero.

    Parameters
    ----------
    symbol : str
        Element or organic cation.

    Returns
    -------
    tuple of int
        Sorted from the lowest.

    Raises
    ------
    FormulaError
        If the symbol is unknown.

    Examples
    --------
    >>> oxidation_states("Cd"), oxidation_states("Se")[0]
    ((2,), -2)
    """
    if symbol in ORGANIC_SYMBOLS:
        return (1,)
    if symbol not in ELEMENTS:
        raise FormulaError(explain("unknown element", found=repr(symbol)))
    from pymatgen.core.periodic_table import Element  # noqa: PLC0415 - costly, only when asked

    element = Element(symbol)
    states = {int(s) for s in (*element.common_oxidation_states, *element.icsd_oxidation_states)}
    states |= set(_FURTHER_STATES.get(symbol, ()))
    states |= {_COMMON_ANIONS[symbol]} if symbol in _COMMON_ANIONS else set()
    if symbol not in _FURTHER_STATES and symbol not in _COMMON_ANIONS:
        states = {s for s in states if s > 0}
    return tuple(sorted(states - {0}))


@cache
def shannon_radius_nm(symbol: str, state: int) -> float:
    """Return the Shannon ionic radius at the coordination nearest to six.

    Parameters
    ----------
    symbol : str
        Element or organic cation.
    state : int
        Oxidation state; the nearest tabulated one of the same sign is used.

    Returns
    -------
    float
        Radius in nm (Shannon, Acta Cryst. A 32, 751 (1976), as shipped with pymatgen); the mean
        ionic radius where none is tabulated.

    Examples
    --------
    >>> shannon_radius_nm("Cd", 2)
    0.095
    """
    if symbol in ORGANIC_SYMBOLS:
        return _ORGANIC[symbol][0]
    from pymatgen.core.periodic_table import Element  # noqa: PLC0415 - costly, only when asked

    by_state = Element(symbol).data.get("Shannon radii") or {}
    same_sign = [s for s in by_state if s and int(s) * state > 0]
    if not same_sign:
        return float(_filled_table()["ionic_radius_nm"][symbol])
    shells = by_state[min(same_sign, key=lambda s: abs(int(s) - state))]
    order = ("VI", "IV", "VIII", "VII", "V", *shells)
    spins = shells[next(name for name in order if name in shells)]
    return float(np.mean([spin["ionic_radius"] for spin in spins.values()])) / 10.0
