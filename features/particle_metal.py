"""The lattice of a metal or alloy particle: structure, volume per atom, surface energies.

Lengths in nm, energies in J/m2, from the tables ``metals`` and ``metal_surfaces``. An alloy takes
the structure of its most abundant metal, the mean volume per atom (Vegard's law in volume, good to
about 1 % of the lattice constant) and the mean surface energies.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np

from features.errors import UnknownMaterialError, explain
from features.formula import parse_formula
from features.particle_lattice import IDEAL_C_OVER_A, crystal_lattice
from features.particle_wulff import broken_bond_energies
from features.tables import read_table

__all__ = ["MetalLattice", "metal_lattice"]

# the only set that holds several facets of fcc and bcc metals on one footing
_SURFACE_SET = "vitos1998"


@dataclass(frozen=True)
class MetalLattice:
    """What a particle needs to know of its metal.

    Attributes
    ----------
    name : str
        Formula.
    structure : {"fcc", "bcc", "hcp"}
    atomic_volume_nm3 : float
    c_over_a : float
    surface_energies_J_m2 : tuple of (str, float)
        By facet, the close-packed one first; empty if none is on record.
    """

    name: str
    structure: str
    atomic_volume_nm3: float
    c_over_a: float
    surface_energies_J_m2: tuple[tuple[str, float], ...]

    @property
    def nearest_distance_nm(self) -> float:
        """Mean distance of neighbouring atoms."""
        volume = abs(float(np.linalg.det(crystal_lattice(self.structure).cartesian)))
        lattice = crystal_lattice(self.structure)
        per_atom = volume * float(lattice.box.prod()) / len(lattice.basis)
        return float(np.cbrt(self.atomic_volume_nm3 / per_atom))


def _known_metals(shares: Mapping[str, float], name: str) -> list[dict[str, Any]]:
    table = read_table("metals").set_index("element")
    unknown = sorted(set(shares) - set(table.index))
    if unknown:
        raise UnknownMaterialError(
            explain(
                "no metal on record",
                where=f"material {name!r}",
                expected=f"one of {', '.join(table.index)}",
                found=", ".join(unknown),
            )
        )
    return [{str(k): v for k, v in table.loc[symbol].items()} for symbol in shares]


def _energies(shares: Mapping[str, float], structure: str) -> tuple[tuple[str, float], ...]:
    """Return mean surface energies; a metal of another structure lends its close-packed one."""
    table = read_table("metal_surfaces")
    table = table[table["source"] == _SURFACE_SET]
    first = next(iter(crystal_lattice(structure).facets))
    total: dict[str, float] = {}
    for symbol, share in shares.items():
        own = table[table["element"] == symbol].set_index("facet")["surface_energy_J_m2"].to_dict()
        if not own:
            return ()
        known = own if first in own and len(own) > 1 else {first: next(iter(own.values()))}
        known = {f: e for f, e in known.items() if f in crystal_lattice(structure).facets}
        for facet, energy in broken_bond_energies(structure, known).items():
            total[facet] = total.get(facet, 0.0) + share * energy
    return tuple((facet, round(energy, 6)) for facet, energy in total.items())


@cache
def metal_lattice(material: str) -> MetalLattice:
    """Look up the lattice of a metal, or mix that of an alloy.

    Parameters
    ----------
    material : str
        Formula such as ``Pt`` or ``Pt3Ni``.

    Returns
    -------
    MetalLattice

    Raises
    ------
    FormulaError
        If the formula cannot be read.
    UnknownMaterialError
        If an element is no metal of the table, or its structure is not fcc, bcc or hcp.

    Examples
    --------
    >>> platinum = metal_lattice("Pt")
    >>> platinum.structure, round(platinum.nearest_distance_nm, 3)
    ('fcc', 0.277)
    """
    fractions = parse_formula(material).fractions
    shares = dict(sorted(fractions.items(), key=lambda item: (-item[1], item[0])))
    rows = _known_metals(shares, material)
    structure = str(rows[0]["structure"])
    crystal_lattice(structure)
    ratio = float(rows[0]["c_over_a"]) if structure == "hcp" else IDEAL_C_OVER_A
    volume = sum(
        share * float(row["atomic_volume_A3"])
        for share, row in zip(shares.values(), rows, strict=True)
    )
    return MetalLattice(
        parse_formula(material).formula,
        structure,
        1e-3 * volume,
        ratio,
        _energies(shares, structure),
    )
