"""Density of a crystal from its lattice constant and structure, g/cm3."""

from math import nan, sqrt

from features.errors import UnknownMaterialError
from features.formula import parse_formula
from features.mass_shares import molar_mass_g
from features.semiconductors import match_material
from features.tables import read_table

__all__ = ["crystal_density_g_cm3"]

_CELL = {
    "zincblende": (4, 1.0),
    "rocksalt": (4, 1.0),
    "diamond": (8, 1.0),
    "perovskite": (1, 1.0),
    "wurtzite": (2, sqrt(3.0) / 2.0 * sqrt(8.0 / 3.0)),
}
"""Formula units in a cell of volume factor x a^3 (wurtzite with the ideal c/a)."""
_AVOGADRO_x_nm3_IN_CM3 = 6.02214076e23 * 1e-21


def crystal_density_g_cm3(material: str) -> float:
    """Return the density of a semiconductor on record.

    Parameters
    ----------
    material : str
        Formula.

    Returns
    -------
    float
        Density, g/cm3, of the perfect crystal at room temperature; NaN where the structure is not
        cubic or wurtzite, or nothing is on record.

    Raises
    ------
    FormulaError
        If the text is not a formula.

    Examples
    --------
    >>> round(crystal_density_g_cm3("CdTe"), 2)
    5.85
    """
    try:
        name = match_material(material)
    except UnknownMaterialError:
        return nan
    row = read_table("bulk_semiconductors").set_index("material").to_dict("index")[name]
    if row["structure"] not in _CELL:
        return nan
    units, volume = _CELL[row["structure"]]
    mass = molar_mass_g(dict(parse_formula(name).amounts))
    return units * mass / (volume * float(row["lattice_a_nm"]) ** 3 * _AVOGADRO_x_nm3_IN_CM3)
