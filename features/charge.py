"""Charge balance of a composition by oxidation states.

Every element takes one state, or one element takes a mixture of two neighbouring states, so that
the charges sum to zero. Among the balanced assignments the one with the most usual states wins.
"""

import math
from dataclasses import dataclass
from functools import cache, lru_cache
from itertools import product

from features.elements import element_table, oxidation_states
from features.errors import FormulaError, explain
from features.formula import ORGANIC_SYMBOLS, Compound

__all__ = ["ChargeBalance", "charge_balance", "require_semiconductor", "usual_state"]

_TOLERANCE = 0.02
_MAX_INVERSION = 0.35
_HALOGENS = frozenset({"Cl", "Br", "I"})
_MAX_ASSIGNMENTS = 50_000
_NON_METALS = frozenset(
    {"H", "B", "C", "N", "O", "F", "Si", "P", "S", "Cl", "Ge", "As", "Se", "Br", "Sb", "Te", "I"}
)


@dataclass(frozen=True)
class ChargeBalance:
    """Oxidation states of a composition.

    Parameters
    ----------
    states : dict of str to float
        State of every constituent; a fraction for a mixture of two states.
    net : float
        Charge left over per atom; 0 if balanced.
    """

    states: dict[str, float]
    net: float

    @property
    def balanced(self) -> bool:
        """Whether the charges sum to zero within 0.02 per atom."""
        return abs(self.net) <= _TOLERANCE


@cache
def _electronegativities() -> dict[str, float]:
    return {str(k): float(v) for k, v in element_table()["electronegativity"].items()}


def _inversion(states: tuple[int, ...], symbols: tuple[str, ...]) -> float:
    """Return by how much a cation is more electronegative than an anion."""
    chi = _electronegativities()
    anions = [chi[s] for s, q in zip(symbols, states, strict=True) if q < 0]
    cations = [chi[s] for s, q in zip(symbols, states, strict=True) if q > 0]
    inverted = max(max(cations, default=0.0) - min(anions, default=9.0), 0.0)
    halogen_cation = any(q > 0 and s in _HALOGENS for s, q in zip(symbols, states, strict=True))
    return inverted + (1.0 if inverted and halogen_cation else 0.0)


def _strain(states: tuple[int, ...], symbols: tuple[str, ...], usual: dict[str, int]) -> float:
    """Return how unusual an assignment is: wrong order of electronegativity, rare states."""
    rare = sum(q != usual[s] for s, q in zip(symbols, states, strict=True))
    return rare + 5.0 * _inversion(states, symbols)


@cache
def usual_state(symbol: str, *, anion: bool) -> int:
    """Return the oxidation state that an element takes most often in semiconductors.

    Parameters
    ----------
    symbol : str
        Element, or the organic cations FA and MA.
    anion : bool
        Whether it stands on the sublattice of the anions.

    Returns
    -------
    int
        Copper, silver, gold and thallium 1, lead and mercury 2, otherwise the highest
        (anions: lowest) state on record.

    Examples
    --------
    >>> usual_state("In", anion=False), usual_state("Se", anion=True)
    (3, -2)
    """
    states = oxidation_states(symbol)
    if anion and states[0] < 0:
        return states[0]
    positive = [q for q in states if q > 0]
    if symbol in {"Cu", "Ag", "Au", "Tl"}:
        return 1
    return 2 if symbol in {"Pb", "Hg"} else max(positive, default=states[-1])


@cache
def _column(symbol: str) -> int:
    """Return the group of an element; oxygen and fluorine stand alone, they only make anions."""
    if symbol in {"O", "F", *ORGANIC_SYMBOLS}:
        return -1 if symbol in {"O", "F"} else 1
    return int(element_table()["group"].to_dict()[symbol])


def _neutralised(
    states: tuple[int, ...], symbols: tuple[str, ...], shares: tuple[float, ...], net: float
) -> dict[str, float] | None:
    """Return states with one element mixed between two of its states, if that balances."""
    for at, symbol in enumerate(symbols):
        wanted = states[at] - net / shares[at]
        same = [q for q in oxidation_states(symbol) if q * states[at] > 0]
        if len(same) > 1 and min(same) <= wanted <= max(same):
            mixed: dict[str, float] = {s: float(q) for s, q in zip(symbols, states, strict=True)}
            return mixed | {symbol: wanted}
    return None


@lru_cache(maxsize=16384)
def charge_balance(compound: Compound) -> ChargeBalance:
    """Assign oxidation states to a composition.

    Parameters
    ----------
    compound : Compound

    Returns
    -------
    ChargeBalance
        The most usual balanced assignment, else the one with the least charge left over. An
        element alone, or a solid solution of elements of one group, has state 0.

    Raises
    ------
    FormulaError
        If a constituent lies beyond plutonium, where no descriptors are at hand.

    Examples
    --------
    >>> from features.formula import parse_formula
    >>> charge_balance(parse_formula("CsPbBr3")).states
    {'Cs': 1.0, 'Pb': 2.0, 'Br': -1.0}
    >>> charge_balance(parse_formula("CdSe2Cl3")).balanced
    False
    """
    fractions = compound.fractions
    symbols, shares = tuple(fractions), tuple(fractions.values())
    unknown = [s for s in symbols if s not in _electronegativities()]
    if unknown:
        raise FormulaError(
            explain("no descriptors", where=f"element {unknown[0]}", expected="up to plutonium")
        )
    if len({_column(s) for s in symbols}) == 1:
        return ChargeBalance(dict.fromkeys(symbols, 0.0), 0.0)
    chi = _electronegativities()
    most = max(chi[s] for s in symbols)
    usual = {s: usual_state(s, anion=chi[s] > most - 0.5) for s in symbols}
    return _best_assignment(symbols, shares, usual)


def _best_assignment(
    symbols: tuple[str, ...], shares: tuple[float, ...], usual: dict[str, int]
) -> ChargeBalance:
    choices = [oxidation_states(s) or (0,) for s in symbols]
    if math.prod(map(len, choices)) > _MAX_ASSIGNMENTS:
        choices = [
            (usual[s],) if at < len(symbols) - 6 else c
            for at, (s, c) in enumerate(zip(symbols, choices, strict=True))
        ]
    best = (math.inf, math.inf, ChargeBalance({}, math.inf))
    for states in product(*choices):
        net = math.fsum(q * x for q, x in zip(states, shares, strict=True))
        if _inversion(states, symbols) > _MAX_INVERSION:
            continue
        strain = _strain(states, symbols, usual)
        named: dict[str, float] = {s: float(q) for s, q in zip(symbols, states, strict=True)}
        if abs(net) > _TOLERANCE and (mixed := _neutralised(states, symbols, shares, net)):
            named, net, strain = mixed, 0.0, strain + 1.5
        key = (0.0 if abs(net) <= _TOLERANCE else abs(net), strain)
        if key < best[:2]:
            best = (*key, ChargeBalance(named, net))
    return best[2]


def require_semiconductor(compound: Compound) -> None:
    """Refuse a composition that is a metal by rule.

    Parameters
    ----------
    compound : Compound

    Raises
    ------
    FormulaError
        If every constituent is a metal, so that no gap may be expected. Magnesium, calcium and
        alkali compounds of bismuth, tin and lead are Zintl phases and pass if charge-balanced.

    Examples
    --------
    >>> from features.formula import parse_formula
    >>> require_semiconductor(parse_formula("CdSe"))
    """
    if any(symbol in _NON_METALS for symbol, _ in compound.parts):
        return
    states = charge_balance(compound)
    zintl = any(q < 0 for q in states.states.values()) and states.balanced
    if not zintl:
        raise FormulaError(
            explain(
                "all constituents are metals",
                where=f"formula {compound.formula!r}",
                expected="a semiconductor",
                do="metals have no gap; a table with a column adsorbate asks about metal surfaces",
            )
        )
