"""Bulk constants of semiconductors, by material, from the cited table.

Energies in eV, masses over the free electron mass, lengths in nm. Constants that the table lacks
are filled with the median of the material's family, and the answer says which.
"""

from collections.abc import Sequence
from difflib import get_close_matches
from functools import cache

import numpy as np
import pandas as pd

from features.errors import UnknownMaterialError, explain
from features.formula import Compound, parse_formula
from features.tables import read_table

__all__ = [
    "CONSTANTS",
    "bulk_constants",
    "find_material",
    "has_indirect_gap",
    "known_materials",
    "match_material",
    "recorded_name",
]

CONSTANTS = ("gap_eV", "electron_mass_m0", "hole_mass_m0", "dielectric")
"""Columns that the confinement models read."""


@cache
def _filled_table() -> pd.DataFrame:
    table = read_table("bulk_semiconductors").set_index("material")
    table["hole_mass_m0"] = table["heavy_hole_mass_m0"]
    table["dielectric"] = table["dielectric_optical"].fillna(table["dielectric_static"])
    numeric = ["electron_mass_m0", "hole_mass_m0", "dielectric"]
    missing = table[numeric].isna()
    by_family = table.groupby("family")[numeric].transform("median")
    table[numeric] = table[numeric].fillna(by_family).fillna(table[numeric].median())
    table["filled"] = [", ".join(c for c in numeric if row[c]) for _, row in missing.iterrows()]
    return table


@cache
def _by_canonical() -> dict[str, str]:
    return {parse_formula(name).formula: name for name in _filled_table().index}


def known_materials() -> list[str]:
    """Return the materials of the bulk table, sorted."""
    return sorted(_filled_table().index)


def find_material(text: str) -> str | None:
    """Return the table's name of a material, or None where no bulk constants are on record.

    Raises
    ------
    FormulaError
        If the text is not a formula.

    Examples
    --------
    >>> find_material("SeCd"), find_material("NaCl")
    ('CdSe', None)
    """
    return recorded_name(parse_formula(text))


def recorded_name(compound: Compound) -> str | None:
    """Return the table's name of a compound, or None where no bulk constants are on record.

    Examples
    --------
    >>> recorded_name(parse_formula("SeCd"))
    'CdSe'
    """
    return _by_canonical().get(compound.formula)


@cache
def match_material(text: str) -> str:
    """Return the table's name of a material, whatever order its formula is written in.

    Parameters
    ----------
    text : str
        A formula such as ``"CdSe"`` or ``"SeCd"``.

    Returns
    -------
    str

    Raises
    ------
    FormulaError
        If the text is not a formula.
    UnknownMaterialError
        If no bulk constants are on record for it.

    Examples
    --------
    >>> match_material("SeCd")
    'CdSe'
    """
    name = find_material(text)
    if name is not None:
        return name
    near = get_close_matches(text, known_materials(), n=3, cutoff=0.5)
    raise UnknownMaterialError(
        explain(
            f"no bulk constants on record for {text!r}",
            expected="a material of the table bulk_semiconductors",
            do=(f"did you mean {', '.join(near)}? " if near else "")
            + "`fewnm data bulk_semiconductors` lists them",
        )
    )


@cache
def has_indirect_gap(material: str) -> bool:
    """Return whether the lowest bulk gap on record is indirect; False where nothing is on record.

    Raises
    ------
    FormulaError
        If the text is not a formula.

    Examples
    --------
    >>> has_indirect_gap("Si"), has_indirect_gap("CdSe")
    (True, False)
    """
    try:
        return bool(_filled_table().loc[match_material(material), "gap_type"] == "indirect")
    except UnknownMaterialError:
        return False


def bulk_constants(materials: Sequence[str]) -> pd.DataFrame:
    """Return bulk constants for each material, in the order given.

    Parameters
    ----------
    materials : sequence of str

    Returns
    -------
    pandas.DataFrame
        Columns material, structure, family, gap_eV, gap_sd_eV, electron_mass_m0, hole_mass_m0,
        dielectric (high-frequency where on record, else static), lattice_a_nm, filled (constants
        taken from the family), source.

    Raises
    ------
    FormulaError
        If a text is not a formula.
    UnknownMaterialError
        If a material is not in the table.

    Examples
    --------
    >>> bulk_constants(["CdSe", "PbS"])["gap_eV"].tolist()
    [1.74, 0.41]
    """
    names = [match_material(str(text)) for text in materials]
    columns = ["structure", "family", "gap_eV", "gap_sd_eV", "electron_mass_m0", "hole_mass_m0"]
    columns += ["dielectric", "lattice_a_nm", "filled", "source"]
    table = _filled_table().loc[names, columns].reset_index()
    table["lattice_a_nm"] = table["lattice_a_nm"].fillna(float(np.nanmedian(table["lattice_a_nm"])))
    return table
