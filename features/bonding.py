"""Descriptors of the chemical bond that decide a bulk gap, from the composition alone.

The gap separates the highest filled from the lowest empty level. Which levels these are follows
from the oxidation states: an empty s shell (Zn2+, In3+), an empty d shell (Ti4+), a half-filled
one, a lone pair (Pb2+, Bi3+) or a filled d shell (Cu+) of the cations, the p shell of the anions.
Added are the ionic model (charges over Shannon distances, a Madelung-like energy) and the share of
cations that only give electrons (alkali and alkaline-earth metals).
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cache, lru_cache
from typing import Literal

import numpy as np
import pandas as pd

from features.charge import charge_balance
from features.composition import ion_shares
from features.elements import element_table, shannon_radius_nm
from features.formula import Compound, parse_formula

__all__ = ["bond_descriptors", "cation_shell"]

Shell = Literal["empty s", "empty d", "open d", "filled d", "lone pair", "open p"]
_SHELLS: tuple[Shell, ...] = ("empty s", "empty d", "open d", "filled d", "lone pair", "open p")
_USUAL_ANION = {
    **dict.fromkeys(("F", "Cl", "Br", "I", "H"), -1),
    **dict.fromkeys(("O", "S", "Se", "Te"), -2),
    **dict.fromkeys(("N", "P", "As", "Sb", "Bi"), -3),
    **dict.fromkeys(("C", "Si", "Ge", "Sn", "Pb"), -4),
    "B": -5,
}
_NON_METALS = frozenset(
    {"H", "B", "C", "N", "O", "F", "Si", "P", "S", "Cl", "Ge", "As", "Se", "Br", "Te", "I"}
)
_OPEN_F = frozenset({"Ce", "Pr", "Nd", "Sm", "Eu", "Gd", "Tb", "Dy", "Ho", "Er", "Tm", "Yb"})
_COINAGE = frozenset({"Cu", "Ag", "Au"})
_NETWORK = (
    "electronegativity",
    "mendeleev_number",
    "row",
    "s_level_eV",
    "p_level_eV",
    "ionisation_eV",
)


@dataclass(frozen=True)
class _Ions:
    """One side of a compound: symbols, shares that sum to 1, oxidation states."""

    symbols: tuple[str, ...]
    shares: np.ndarray
    states: np.ndarray

    def mean(self, values: np.ndarray) -> float:
        return float(self.shares @ values)


@cache
def _elements() -> dict[str, dict[str, float]]:
    table = element_table()
    return {
        str(s): dict(zip(table.columns, row, strict=True))
        for s, row in zip(table.index, table.to_numpy(dtype=float).tolist(), strict=True)
    }


def _figures(ions: _Ions, name: str) -> np.ndarray:
    return np.array([_elements()[symbol][name] for symbol in ions.symbols])


def _ions(shares: Mapping[str, float], states: Mapping[str, float]) -> _Ions:
    charges = np.array([states.get(symbol, 0.0) for symbol in shares])
    return _Ions(tuple(shares), np.array(list(shares.values())), charges)


def _d_shell(symbol: str, left: float) -> tuple[Shell, float, float | None]:
    figures = _elements()[symbol]
    if left < 0.5:
        return "empty d", figures["d_level_eV"] or figures["s_level_eV"], None
    return "open d", figures["d_level_eV"], figures["d_level_eV"]


def _p_shell(symbol: str, left: float) -> tuple[Shell, float, float | None]:
    figures = _elements()[symbol]
    if left < 0.5:
        return "empty s", figures["s_level_eV"], None
    if left < 2.5:
        return "lone pair", figures["p_level_eV"], figures["s_level_eV"]
    return "open p", figures["p_level_eV"], figures["p_level_eV"]


@lru_cache(maxsize=4096)
def cation_shell(symbol: str, state: float) -> tuple[Shell, float, float | None]:
    """Return the frontier shell of a cation.

    Parameters
    ----------
    symbol : str
        Element or organic cation.
    state : float
        Oxidation state.

    Returns
    -------
    shell : str
        One of "empty s", "empty d", "open d", "filled d", "lone pair", "open p".
    empty_eV : float
        Free-atom energy of the lowest empty level, eV.
    filled_eV : float or None
        Free-atom energy of the highest filled level, eV; None where the shell is empty.

    Examples
    --------
    >>> [cation_shell(s, q)[0] for s, q in (("Zn", 2), ("Ti", 4), ("Pb", 2), ("Cu", 1))]
    ['empty s', 'empty d', 'lone pair', 'filled d']
    """
    figures = _elements()[symbol]
    group = figures["group"]
    if group <= 2:
        return "empty s", figures["s_level_eV"], None
    if symbol in _COINAGE and state <= 1.01:
        return "filled d", figures["s_level_eV"], figures["d_level_eV"]
    if group <= 11:
        return _d_shell(symbol, group - state)
    if group == 12:
        return "empty s", figures["s_level_eV"], figures["d_level_eV"]
    return _p_shell(symbol, group - 10 - state)


def _levels(cations: _Ions, anions: _Ions) -> dict[str, float]:
    """Return frontier levels and their differences, eV, and the shares of the shells."""
    shells = [
        cation_shell(s, float(q)) for s, q in zip(cations.symbols, cations.states, strict=True)
    ]
    empty = np.array([level for _, level, _ in shells])
    p_level, s_level = _figures(anions, "p_level_eV"), _figures(anions, "s_level_eV")
    filled = np.where(p_level == 0.0, s_level, p_level)
    highest = max([float(filled.max()), *(top for _, _, top in shells if top is not None)])
    empty_mean, filled_mean = cations.mean(empty), anions.mean(filled)
    shares = {
        f"{name.replace(' ', '_')}_share": float(
            sum(x for x, (kind, _, _) in zip(cations.shares, shells, strict=True) if kind == name)
        )
        for name in _SHELLS
    }
    return shares | {
        "empty_min_eV": float(empty.min()),
        "empty_mean_eV": empty_mean,
        "anion_filled_max_eV": float(filled.max()),
        "anion_filled_mean_eV": filled_mean,
        "filled_max_eV": highest,
        "frontier_anion_eV": float(empty.min() - filled.max()),
        "frontier_mean_eV": empty_mean - filled_mean,
        "frontier_eV": float(empty.min()) - highest,
    }


def _radii(ions: _Ions, sign: int) -> np.ndarray:
    return np.array(
        [
            shannon_radius_nm(symbol, round(state) or sign)
            for symbol, state in zip(ions.symbols, ions.states, strict=True)
        ]
    )


def _ionic_model(cations: _Ions, anions: _Ions) -> dict[str, float]:
    """Return radii (nm), charges over distances (1/nm) and a Madelung-like sum (1/nm)."""
    radii, anion_radius = _radii(cations, 1), anions.mean(_radii(anions, -1))
    charges, anion_charge = np.abs(cations.states), anions.mean(np.abs(anions.states))
    fields = charges / (radii + anion_radius)
    usual = np.array([_USUAL_ANION.get(symbol, -2) for symbol in anions.symbols])
    return {
        "anion_radius_nm": anion_radius,
        "cation_radius_nm": cations.mean(radii),
        "cation_radius_max_nm": float(radii.max()),
        "cation_radius_min_nm": float(radii.min()),
        "madelung_per_nm": cations.mean(fields) * anion_charge,
        "field_per_nm": cations.mean(fields),
        "field_max_per_nm": float(fields.max()),
        "field_min_per_nm": float(fields.min()),
        "charge_mean": cations.mean(charges),
        "charge_max": float(charges.max()),
        "anion_charge_missing": anions.mean(anions.states - usual),
    }


def _polarity(cations: _Ions, anions: _Ions) -> dict[str, float]:
    """Return differences of electronegativity and Pauling's ionic character."""
    anion, cation = (
        anions.mean(_figures(anions, "electronegativity")),
        _figures(cations, "electronegativity"),
    )
    difference = anion - cations.mean(cation)
    return {
        "polarity": difference,
        "polarity_min": float(anion - cation.max()),
        "polarity_max": float(anion - cation.min()),
        "ionic_character": float(1.0 - np.exp(-0.25 * difference**2)),
    }


def _network(cations: _Ions, fractions: Mapping[str, float]) -> dict[str, float]:
    """Return the shares of spectator cations and means over the cations that bind."""
    spectator = _figures(cations, "group") <= 2
    binding = ~spectator if not spectator.all() else np.ones(len(spectator), dtype=bool)
    weights = cations.shares[binding] / cations.shares[binding].sum()
    share = np.array([fractions[symbol] for symbol in cations.symbols])
    anion_share = 1.0 - share.sum() if share.sum() < 1.0 - 1e-9 else 1.0
    names = {
        f"network_{name}": float(weights @ _figures(cations, name)[binding]) for name in _NETWORK
    }
    return names | {
        "anion_share": float(anion_share),
        "spectator_share": float(share[spectator].sum()),
        "binding_share": float(share[~spectator].sum()),
        "anions_per_binding": float(anion_share / np.sqrt(max(share[binding].sum(), 0.05))),
        "open_f_share": float(
            sum(x for s, x in zip(cations.symbols, share, strict=True) if s in _OPEN_F)
        ),
        "non_metal_cation_share": float(
            sum(x for s, x in zip(cations.symbols, cations.shares, strict=True) if s in _NON_METALS)
        ),
    }


def _describe(compound: Compound) -> dict[str, float]:
    fractions, balance = compound.fractions, charge_balance(compound)
    cation_shares, anion_shares = ion_shares(compound)
    cations, anions = _ions(cation_shares, balance.states), _ions(anion_shares, balance.states)
    shares = np.array(list(fractions.values()))
    return {
        **_levels(cations, anions),
        **_ionic_model(cations, anions),
        **_polarity(cations, anions),
        **_network(cations, fractions),
        "charge_left_over": min(abs(balance.net), 4.0),
        "constituents": float(len(fractions)),
        "mixing_entropy": float(-np.sum(shares * np.log(shares))),
    }


@lru_cache(maxsize=16384)
def _row(text: str) -> tuple[tuple[str, ...], tuple[float, ...]]:
    described = _describe(parse_formula(text))
    return tuple(described), tuple(described.values())


def bond_descriptors(formulas: Sequence[str]) -> pd.DataFrame:
    """Return bond descriptors of compositions.

    Parameters
    ----------
    formulas : sequence of str

    Returns
    -------
    pandas.DataFrame
        One row a formula, in the order given. Energies in eV (free-atom levels in the local-
        density approximation), radii in nm, fields in elementary charges over nm.

    Raises
    ------
    FormulaError
        If a text is not a formula, or an element lies beyond plutonium.

    Examples
    --------
    >>> frame = bond_descriptors(["CdSe", "TiO2"])
    >>> frame["empty_d_share"].tolist()
    [0.0, 1.0]
    """
    names = _row("CdSe")[0]
    return pd.DataFrame([_row(formula)[1] for formula in formulas], columns=list(names))
