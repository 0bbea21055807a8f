"""Gaps to single conduction-band valleys of end members, by phase, and their bowing.

Gaps at 300 K in eV. Valleys are Gamma, X and L; a compound whose valleys are not on record has one
valley only, the lowest. Bowing: gap = x A + (1 - x) B - c x (1 - x).
"""

from dataclasses import dataclass
from functools import cache
from math import inf, isnan, sqrt
from typing import Any

import numpy as np

from features.charge import charge_balance
from features.errors import UnknownMaterialError, explain
from features.formula import parse_formula
from features.tables import read_table

__all__ = ["Bowing", "MemberEdges", "bowing", "lattice_in_phase_nm", "member_edges", "varshni_gap"]

_TETRAHEDRAL = ("zincblende", "wurtzite")
# Calculated and measured gaps of the two tetrahedral phases of one compound differ by this much.
_PHASE_SD_EV = 0.06
_UNKNOWN_BOWING_SD_EV = 0.25


def varshni_gap(gap_0K_eV: float, alpha_eV_K: float, beta_K: float, temperature_K: float) -> float:
    """Return a gap at a temperature.

    Parameters
    ----------
    gap_0K_eV : float
        Gap at 0 K, eV.
    alpha_eV_K, beta_K : float
        Varshni's coefficients.
    temperature_K : float
        At least 0; the law holds up to about 600 K.

    Returns
    -------
    float
        Gap in eV (Varshni, Physica 34, 149 (1967)).

    Examples
    --------
    >>> round(varshni_gap(1.519, 5.405e-4, 204.0, 300.0), 3)
    1.422
    """
    if temperature_K == 0.0:
        return gap_0K_eV
    return gap_0K_eV - alpha_eV_K * temperature_K**2 / (temperature_K + beta_K)


@dataclass(frozen=True)
class MemberEdges:
    """Gaps of an end member in one phase.

    Parameters
    ----------
    gaps_eV : dict of str to float
        By valley, at 300 K; negative for an inverted band order.
    sd_eV : float
        Standard deviation.
    note : str
        Set where the value belongs to another phase.
    """

    gaps_eV: dict[str, float]
    sd_eV: float
    note: str = ""


@cache
def _edges() -> dict[tuple[str, str], MemberEdges]:
    gaps: dict[tuple[str, str], dict[str, float]] = {}
    sd: dict[tuple[str, str], float] = {}
    for row in read_table("band_edges").to_dict("records"):
        key = (row["material"], row["structure"])
        law = (row["gap_0K_eV"], row["varshni_alpha_eV_K"], row["varshni_beta_K"])
        at_300K = row["gap_300K_eV"] if isnan(law[0]) else varshni_gap(*law, 300.0)
        gaps.setdefault(key, {})[row["valley"]] = at_300K
        sd[key] = min(sd.get(key, inf), row["gap_sd_eV"])
    return {key: MemberEdges(gaps[key], sd[key]) for key in gaps}


@cache
def _bulk() -> dict[str, dict[str, Any]]:
    table = read_table("bulk_semiconductors").set_index("material")
    return {str(name): dict(row) for name, row in table.iterrows()}


def _recorded(material: str) -> MemberEdges:
    """Return the gap on record as that of the valley which its phase usually has lowest."""
    row = _bulk()[material]
    direct = "L" if row["structure"] == "rocksalt" else "Gamma"
    valley = direct if row["gap_type"] == "direct" else "X"
    return MemberEdges({valley: float(row["gap_eV"])}, float(row["gap_sd_eV"]))


@cache
def member_edges(material: str, structure: str) -> MemberEdges:
    """Return the gaps of an end member in a phase.

    Parameters
    ----------
    material : str
        Name as in the table of bulk semiconductors.
    structure : str
        Phase, such as ``"zincblende"``.

    Returns
    -------
    MemberEdges
        Zincblende and wurtzite stand in for each other with 0.06 eV of further uncertainty.

    Raises
    ------
    UnknownMaterialError
        If the compound is on record in another phase only.

    Examples
    --------
    >>> member_edges("CdSe", "zincblende").gaps_eV
    {'Gamma': 1.66}
    """
    if (material, structure) in _edges():
        return _edges()[material, structure]
    on_record = str(_bulk()[material]["structure"])
    if on_record == structure:
        return _recorded(material)
    if on_record in _TETRAHEDRAL and structure in _TETRAHEDRAL:
        other = _edges().get((material, on_record)) or _recorded(material)
        sd = sqrt(other.sd_eV**2 + _PHASE_SD_EV**2)
        return MemberEdges(other.gaps_eV, sd, f"{material} as {on_record}")
    raise UnknownMaterialError(
        explain(
            "phases do not mix",
            where=f"end member {material}",
            expected=f"a record as {structure}",
            found=on_record,
            do="only end members of one phase are interpolated",
        )
    )


def lattice_in_phase_nm(material: str, structure: str) -> float:
    """Return the lattice constant a of an end member in a phase.

    Parameters
    ----------
    material, structure : str

    Returns
    -------
    float
        Nanometres; zincblende and wurtzite are converted by the ideal ratio, the square root of
        2. NaN where no constant is on record.

    Examples
    --------
    >>> round(lattice_in_phase_nm("CdSe", "zincblende"), 3)
    0.608
    """
    a_nm = float(_bulk()[material]["lattice_a_nm"])
    on_record = str(_bulk()[material]["structure"])
    if on_record == structure:
        return a_nm
    return a_nm * sqrt(2.0) if on_record == "wurtzite" else a_nm / sqrt(2.0)


@dataclass(frozen=True)
class Bowing:
    """Bowing of a pair: c in eV, its standard deviation, and where it comes from."""

    bowing_eV: float
    sd_eV: float
    rule: str


@cache
def _bowing_rows() -> dict[tuple[str, str, str], tuple[float, float, float, str]]:
    rows = {}
    for row in read_table("bowing").to_dict("records"):
        pair = [parse_formula(row[key]).formula for key in ("member_a", "member_b")]
        figures = (row["bowing_eV"], row["bowing_slope_eV"], row["bowing_sd_eV"], row["source"])
        rows[pair[0], pair[1], row["valley"]] = figures
    return rows


def bowing(first: str, second: str, valley: str, share_first: float, structure: str) -> Bowing:
    """Return the bowing of the gap between two end members.

    Parameters
    ----------
    first, second : str
        End members.
    valley : str
        ``"Gamma"``, ``"X"`` or ``"L"``.
    share_first : float
        Share of the first member in the pair, for a bowing that depends on composition.
    structure : str
        Phase.

    Returns
    -------
    Bowing
        Of the table; else, in a tetrahedral phase, the trend with the squared difference of the
        lattice constants that the table's pairs show; else zero with 0.25 eV of uncertainty.

    Examples
    --------
    >>> bowing("GaAs", "InAs", "Gamma", 0.5, "zincblende").bowing_eV
    0.477
    """
    a, b = parse_formula(first).formula, parse_formula(second).formula
    for key, share in (((a, b, valley), share_first), ((b, a, valley), 1.0 - share_first)):
        if key in _bowing_rows():
            value, slope, sd, source = _bowing_rows()[key]
            return Bowing(value + slope * share, sd, f"bowing of {source}")
    if structure not in _TETRAHEDRAL:
        return Bowing(0.0, _UNKNOWN_BOWING_SD_EV, "linear, no bowing on record")
    kind = _mixed_ion(first, second)
    slope, scatter = _mismatch_trend()[kind]
    value = slope * _mismatch(first, second) ** 2
    sd = sqrt((scatter * value) ** 2 + _UNKNOWN_BOWING_SD_EV**2)
    return Bowing(value, sd, f"bowing by the lattice mismatch of {kind}s")


def _mixed_ion(first: str, second: str) -> str:
    """Return whether the constituent in which two members differ is an anion or a cation."""
    compound = parse_formula(first)
    differ = set(compound.fractions) - set(parse_formula(second).fractions)
    states = charge_balance(compound).states
    return "anion" if any(states[symbol] < 0 for symbol in differ) else "cation"


def _mismatch(first: str, second: str) -> float:
    a, b = (lattice_in_phase_nm(name, "zincblende") for name in (first, second))
    return 2.0 * abs(a - b) / (a + b)


@cache
def _mismatch_trend() -> dict[str, tuple[float, float]]:
    """Fit c = k (mismatch)^2 to the direct gaps of tetrahedral pairs; k and relative scatter."""
    rows = read_table("bowing").query("valley == 'Gamma'")
    squares: dict[str, list[float]] = {"anion": [], "cation": []}
    values: dict[str, list[float]] = {"anion": [], "cation": []}
    for row in rows.to_dict("records"):
        pair = (row["member_a"], row["member_b"])
        if all(_bulk()[name]["structure"] in _TETRAHEDRAL for name in pair):
            kind = _mixed_ion(*pair)
            squares[kind].append(_mismatch(*pair) ** 2)
            values[kind].append(row["bowing_eV"])
    trend = {}
    for kind, square in squares.items():
        x, y = np.array(square), np.array(values[kind])
        slope = float(x @ y / (x @ x))
        trend[kind] = (slope, float(np.sqrt(np.mean((y - slope * x) ** 2) / np.mean(y**2))))
    return trend
