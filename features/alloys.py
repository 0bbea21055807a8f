"""Bulk constants of solid solutions by published interpolation rules.

Gap: per conduction-band valley, multilinear in the end members with pairwise bowing (Olesberg,
J. Appl. Phys. 136, 215105 (2024)), then the lowest valley. Electron mass: k.p expression with
interpolated Kane energy, spin-orbit splitting, remote-band term and Gamma gap (Vurgaftman, Meyer,
Ram-Mohan, J. Appl. Phys. 89, 5815 (2001)), else linear in the inverse mass. Hole mass: linear.
Dielectric constant: linear in the Clausius-Mossotti ratio (Adachi, J. Appl. Phys. 58, R1 (1985)).
Lattice: Vegard (1921). All at 300 K; phases are never mixed.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cache, lru_cache
from math import isnan, nan, sqrt
from typing import Any

import pandas as pd

from features.band_edges import MemberEdges, bowing, lattice_in_phase_nm, member_edges
from features.errors import UnknownMaterialError
from features.formula import Compound, parse_formula
from features.semiconductors import bulk_constants
from features.solid_solutions import SolidSolution, solid_solution
from features.tables import read_table
from features.trends import kane_electron_mass

__all__ = [
    "Alloy",
    "Interpolated",
    "alloy_constants",
    "alloy_gap",
    "alloy_row",
    "interpolate_alloy",
]

_VALLEYS = ("Gamma", "L", "X")
# Share of a constant by which published alloys scatter about the rule at equal mixing of two.
_RULE_SCATTER = {"electron_mass_m0": 0.06, "hole_mass_m0": 0.1, "dielectric": 0.03}
_VEGARD_SCATTER = 0.002
_NARROWEST_KP_GAP_EV = 0.05


@dataclass(frozen=True)
class Interpolated:
    """A value between end members.

    Parameters
    ----------
    value : float
        NaN where an end member lacks the constant.
    sd : float
        Standard deviation of the interpolation itself: 0 at the end members, above 0 between.
    rule : str
        The rule that gave the value.
    """

    value: float
    sd: float
    rule: str


@dataclass(frozen=True)
class Alloy:
    """Bulk constants of a solid solution at 300 K.

    Parameters
    ----------
    material : str
        Canonical formula.
    structure : str
        Phase.
    members : dict of str to float
        Shares of the end members.
    valley : str
        Lowest conduction-band valley.
    gap_eV : Interpolated
        Gap to that valley, negative for an inverted band order.
    gap_sd_eV : float
        Standard deviation of the gap, that of the end members included.
    valleys_eV : dict of str to float
        Gaps to all valleys on record.
    electron_mass_m0, hole_mass_m0, dielectric, lattice_a_nm : Interpolated
        The electron mass is that of the Gamma valley where this is on record.
    note : str
        What is uncertain about the phase.
    """

    material: str
    structure: str
    members: dict[str, float]
    valley: str
    gap_eV: Interpolated
    gap_sd_eV: float
    valleys_eV: dict[str, float]
    electron_mass_m0: Interpolated
    hole_mass_m0: Interpolated
    dielectric: Interpolated
    lattice_a_nm: Interpolated
    note: str


@cache
def _constants() -> dict[str, dict[str, Any]]:
    table = read_table("bulk_semiconductors").set_index("material")
    filled = bulk_constants(list(table.index)).set_index("material")
    for name in ("electron_mass_m0", "hole_mass_m0", "dielectric"):
        table[name] = filled[name]
    return {str(name): dict(row) for name, row in table.iterrows()}


def _constant(name: str) -> Callable[[str], float]:
    """Return the look-up of one constant by end member."""
    return lambda member: float(_constants()[member][name])


def _main_phase(solution: SolidSolution) -> str:
    """Return the phase of the end member with the largest share."""
    largest = max(sorted(solution.shares), key=solution.shares.__getitem__)
    return str(_constants()[largest]["structure"])


def _linear(solution: SolidSolution, value: Callable[[str], float]) -> float:
    return sum(share * value(member) for member, share in solution.shares.items())


def _valley_gap(
    solution: SolidSolution, edges: dict[str, MemberEdges], valley: str, structure: str
) -> Interpolated:
    """Return the gap to one valley: multilinear minus the bowing of every pair."""
    value = sum(share * edges[name].gaps_eV[valley] for name, share in solution.shares.items())
    variance, rules = 0.0, []
    for first, second, weight, share in solution.pairs:
        bow = bowing(first, second, valley, share, structure)
        value -= weight * bow.bowing_eV
        variance += (weight * bow.sd_eV) ** 2
        rules.append(bow.rule)
    rule = "; ".join(dict.fromkeys(rules)) or "on record"
    return Interpolated(float(value), sqrt(variance), rule)


def _gaps(
    solution: SolidSolution, edges: dict[str, MemberEdges], structure: str
) -> dict[str, Interpolated]:
    """Return gaps by valley that all members have; else the lowest gaps under one name."""
    common = [v for v in _VALLEYS if all(v in e.gaps_eV for e in edges.values())]
    if common:
        return {v: _valley_gap(solution, edges, v, structure) for v in common}
    lowest = {
        name: MemberEdges({"lowest": min(edge.gaps_eV.values())}, edge.sd_eV)
        for name, edge in edges.items()
    }
    return {"lowest": _valley_gap(solution, lowest, "lowest", structure)}


def _scattered(
    name: str, solution: SolidSolution, value: float, other: float, rule: str
) -> Interpolated:
    """Add the rule's uncertainty: published scatter and the distance to another rule's value."""
    if solution.mixing == 0.0:
        return Interpolated(value, 0.0, "on record")
    scatter = 2.0 * solution.mixing * _RULE_SCATTER[name] * abs(value)
    return Interpolated(value, sqrt(scatter**2 + (value - other) ** 2 / 3.0), rule)


def _electron_mass(
    solution: SolidSolution, edges: dict[str, MemberEdges], gaps: dict[str, Interpolated]
) -> Interpolated:
    mass = _constant("electron_mass_m0")
    inverse = 1.0 / _linear(solution, lambda member: 1.0 / mass(member))
    linear = _linear(solution, mass)
    gamma = gaps["Gamma"].value if "Gamma" in gaps else nan
    lowest = min(edge.gaps_eV.get("Gamma", nan) for edge in edges.values())
    kane, split = _constant("kane_energy_eV"), _constant("spin_orbit_eV")
    mean_kane, mean_split = _linear(solution, kane), _linear(solution, split)
    usable = not isnan(gamma + lowest + mean_kane + mean_split)
    if not usable or min(gamma, lowest) < _NARROWEST_KP_GAP_EV:
        rule = "linear in the inverse mass"
        return _scattered("electron_mass_m0", solution, inverse, linear, rule)

    def remote(member: str) -> float:
        gap_eV = edges[member].gaps_eV["Gamma"]
        bare = 1.0 / kane_electron_mass(gap_eV, kane(member), split(member))
        return (1.0 / mass(member) - bare) / 2.0

    value = kane_electron_mass(gamma, mean_kane, mean_split, _linear(solution, remote))
    rule = "k.p with interpolated Kane energy"
    return _scattered("electron_mass_m0", solution, value, inverse, rule)


def _clausius_mossotti(solution: SolidSolution) -> Interpolated:
    constant = _constant("dielectric")
    ratio = _linear(solution, lambda m: (constant(m) - 1.0) / (constant(m) + 2.0))
    value = (1.0 + 2.0 * ratio) / (1.0 - ratio)
    rule = "linear in the Clausius-Mossotti ratio"
    return _scattered("dielectric", solution, value, _linear(solution, constant), rule)


def _hole_mass(solution: SolidSolution) -> Interpolated:
    linear = _linear(solution, _constant("hole_mass_m0"))
    return _scattered("hole_mass_m0", solution, linear, linear, "linear in the mass")


def _lattice(solution: SolidSolution, structure: str) -> Interpolated:
    value = _linear(solution, lambda member: lattice_in_phase_nm(member, structure))
    return Interpolated(value, 2.0 * solution.mixing * _VEGARD_SCATTER * value, "Vegard")


@lru_cache(maxsize=16384)
def interpolate_alloy(material: str, structure: str = "") -> Alloy:
    """Interpolate the bulk constants of a solid solution at 300 K.

    Parameters
    ----------
    material : str
        Formula such as ``"In0.8Ga0.2P"``; an end member on record gives its own constants.
    structure : str, default ""
        Phase; empty for the phase of the end member with the largest share.

    Returns
    -------
    Alloy

    Raises
    ------
    FormulaError
        If the text is not a formula.
    UnknownMaterialError
        If an end member is not on record, or not in that phase.

    Examples
    --------
    >>> alloy = interpolate_alloy("In0.53Ga0.47As")
    >>> round(alloy.gap_eV.value, 2), alloy.valley, alloy.gap_eV.rule
    (0.74, 'Gamma', 'bowing of vurgaftman2001')
    """
    compound = parse_formula(material)
    solution = solid_solution(compound)
    phase = structure or _main_phase(solution)
    edges = {name: member_edges(name, phase) for name in solution.shares}
    gaps = _gaps(solution, edges, phase)
    valley = min(gaps, key=lambda v: gaps[v].value)
    variance = sum((share * edges[name].sd_eV) ** 2 for name, share in solution.shares.items())
    return Alloy(
        material=compound.formula,
        structure=phase,
        members=dict(solution.shares),
        valley=valley,
        gap_eV=gaps[valley],
        gap_sd_eV=sqrt(variance + gaps[valley].sd ** 2),
        valleys_eV={v: gap.value for v, gap in gaps.items()},
        electron_mass_m0=_electron_mass(solution, edges, gaps),
        hole_mass_m0=_hole_mass(solution),
        dielectric=_clausius_mossotti(solution),
        lattice_a_nm=_lattice(solution, phase),
        note=", ".join(edge.note for edge in edges.values() if edge.note),
    )


def alloy_gap(compound: Compound) -> tuple[float, float, str] | None:
    """Return the interpolated gap of a solid solution, or None for any other compound.

    Parameters
    ----------
    compound : Compound

    Returns
    -------
    gap_eV, gap_sd_eV : float
        At 300 K; the standard deviation includes that of the end members.
    rule : str
        Or None as a whole, unless the compound mixes two or more end members of one phase.

    Examples
    --------
    >>> gap_eV, sd_eV, rule = alloy_gap(parse_formula("In0.53Ga0.47As"))
    >>> round(gap_eV, 2), rule
    (0.74, 'bowing of vurgaftman2001')
    >>> alloy_gap(parse_formula("CdSe")) is None
    True
    """
    try:
        alloy = interpolate_alloy(compound.formula)
    except UnknownMaterialError:
        return None
    if len(alloy.members) < 2:
        return None
    return alloy.gap_eV.value, alloy.gap_sd_eV, alloy.gap_eV.rule


_QUANTITIES = ("electron_mass_m0", "hole_mass_m0", "dielectric", "lattice_a_nm")


def alloy_constants(materials: Sequence[str]) -> pd.DataFrame:
    """Return the interpolated constants of solid solutions, in the order given.

    Parameters
    ----------
    materials : sequence of str

    Returns
    -------
    pandas.DataFrame
        Columns material (as given), structure, family (of the main end member), gap_eV,
        gap_sd_eV, gap_rule, valley, then value, ``_sd`` and ``_rule`` of the electron and hole
        mass, the dielectric constant and the lattice constant, and note.

    Raises
    ------
    FormulaError
        If a text is not a formula.
    UnknownMaterialError
        If an end member is not on record, or not in the phase of the main one.

    Examples
    --------
    >>> alloy_constants(["CdSe0.5S0.5"])["structure"].tolist()
    ['wurtzite']
    """
    return pd.DataFrame([alloy_row(material) for material in materials])


def alloy_row(material: str) -> dict[str, Any]:
    """Return one row of `alloy_constants` as a dictionary.

    Parameters
    ----------
    material : str

    Returns
    -------
    dict

    Raises
    ------
    FormulaError, UnknownMaterialError
        As for `alloy_constants`.

    Examples
    --------
    >>> alloy_row("CdSe0.5S0.5")["structure"]
    'wurtzite'
    """
    alloy = interpolate_alloy(material)
    main = max(sorted(alloy.members), key=alloy.members.__getitem__)
    row: dict[str, Any] = {
        "material": material,
        "structure": alloy.structure,
        "family": _constants()[main]["family"],
        "gap_eV": alloy.gap_eV.value,
        "gap_sd_eV": alloy.gap_sd_eV,
        "gap_rule": alloy.gap_eV.rule,
        "valley": alloy.valley,
    }
    for name in _QUANTITIES:
        part: Interpolated = getattr(alloy, name)
        row |= {name: part.value, f"{name}_sd": part.sd, f"{name}_rule": part.rule}
    return row | {"note": alloy.note}
