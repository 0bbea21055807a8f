"""Solid solutions: a composition as a mixture of end members on record.

Constituents of one column of the periodic table, or else of one oxidation state, share a
sublattice, so that CsPb(Br0.6I0.4)3 is 0.6 of CsPbBr3 and 0.4 of CsPbI3. Sublattices are taken as
filled at random: the share of an end member is the product of the shares of its constituents.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache, lru_cache
from itertools import combinations, product
from math import fsum, prod

from features.charge import charge_balance
from features.elements import element_table
from features.errors import UnknownMaterialError, explain
from features.formula import Compound, compound_from_amounts, parse_formula
from features.semiconductors import known_materials

__all__ = ["SolidSolution", "element_column", "is_solid_solution", "solid_solution"]

_MAX_MEMBERS = 64


@dataclass(frozen=True)
class SolidSolution:
    """A composition split into end members.

    Parameters
    ----------
    shares : dict of str to float
        Share of every end member, named as in the table of bulk semiconductors; they sum to 1.
    pairs : tuple of (str, str, float, float)
        Pairs of end members that differ in one constituent: names, product of the two
        constituents' shares times the share of the rest, and the first one's share of the pair.
    """

    shares: dict[str, float]
    pairs: tuple[tuple[str, str, float, float], ...]

    @property
    def mixing(self) -> float:
        """One minus the sum of squared shares: 0 for an end member alone."""
        return 1.0 - fsum(share**2 for share in self.shares.values())


@cache
def _names() -> dict[str, str]:
    return {parse_formula(name).formula: name for name in known_materials()}


@cache
def _columns() -> dict[str, float]:
    return {str(symbol): float(group) for symbol, group in element_table()["group"].items()}


def _grouped(compound: Compound, kinds: Mapping[str, float]) -> list[dict[str, float]]:
    """Group the constituents by kind, the highest first."""
    groups: dict[float, dict[str, float]] = {}
    for symbol, amount in compound.parts:
        groups.setdefault(round(kinds.get(symbol, 0.0), 3), {})[symbol] = amount
    return [groups[kind] for kind in sorted(groups, reverse=True)]


def _member_formula(choice: tuple[str, ...], totals: list[float]) -> str:
    amounts: dict[str, float] = {}
    for symbol, total in zip(choice, totals, strict=True):
        amounts[symbol] = amounts.get(symbol, 0.0) + total
    return compound_from_amounts(amounts).formula


def _missing(compound: Compound, found: str) -> UnknownMaterialError:
    return UnknownMaterialError(
        explain(
            "no solid solution of end members on record",
            where=f"formula {compound.formula!r}",
            expected="end members in the table bulk_semiconductors",
            found=found,
        )
    )


@lru_cache(maxsize=16384)
def solid_solution(compound: Compound) -> SolidSolution:
    """Split a composition into end members on record.

    Parameters
    ----------
    compound : Compound

    Returns
    -------
    SolidSolution
        A compound on record is its own only end member.

    Raises
    ------
    UnknownMaterialError
        If the charges do not balance or an end member is not on record.

    Examples
    --------
    >>> solid_solution(parse_formula("CdSe0.6S0.4")).shares
    {'CdSe': 0.6, 'CdS': 0.4}
    """
    if compound.formula in _names():
        return SolidSolution({_names()[compound.formula]: 1.0}, ())
    found = _split(compound, _grouped(compound, _columns()))
    if isinstance(found, SolidSolution):
        return found
    balance = charge_balance(compound)
    if not balance.balanced:
        raise _missing(compound, f"{found}, and charges that do not balance")
    second = _split(compound, _grouped(compound, balance.states))
    if isinstance(second, SolidSolution):
        return second
    raise _missing(compound, second)


def _split(compound: Compound, sublattices: list[dict[str, float]]) -> SolidSolution | str:
    """Return the end members of given sublattices, or what is missing."""
    if prod(len(group) for group in sublattices) > _MAX_MEMBERS:
        return f"more than {_MAX_MEMBERS} end members of {compound.formula}"
    totals = [fsum(group.values()) for group in sublattices]
    fractions = [
        {symbol: amount / total for symbol, amount in group.items()}
        for group, total in zip(sublattices, totals, strict=True)
    ]
    members: dict[tuple[str, ...], str] = {}
    for choice in product(*fractions):
        formula = _member_formula(choice, totals)
        if formula not in _names():
            return f"no record of {formula}"
        members[choice] = _names()[formula]
    return SolidSolution(_shares(members, fractions), _pairs(members, fractions))


def _weight(choice: tuple[str, ...], fractions: list[dict[str, float]]) -> float:
    return prod(group[symbol] for symbol, group in zip(choice, fractions, strict=True))


def _shares(
    members: dict[tuple[str, ...], str], fractions: list[dict[str, float]]
) -> dict[str, float]:
    return {name: round(_weight(choice, fractions), 12) for choice, name in members.items()}


def _pairs(
    members: dict[tuple[str, ...], str], fractions: list[dict[str, float]]
) -> tuple[tuple[str, str, float, float], ...]:
    pairs = []
    for (left, a), (right, b) in combinations(members.items(), 2):
        differ = [at for at, (s, t) in enumerate(zip(left, right, strict=True)) if s != t]
        if len(differ) == 1:
            at = differ[0]
            first, second = fractions[at][left[at]], fractions[at][right[at]]
            rest = _weight(left, fractions) / first
            pairs.append((a, b, first * second * rest, first / (first + second)))
    return tuple(pairs)


def is_solid_solution(compound: Compound) -> bool:
    """Return whether a composition is a mixture of two or more end members on record.

    Parameters
    ----------
    compound : Compound

    Returns
    -------
    bool

    Examples
    --------
    >>> is_solid_solution(parse_formula("In0.8Ga0.2P"))
    True
    >>> is_solid_solution(parse_formula("CdSe"))
    False
    """
    try:
        return len(solid_solution(compound).shares) > 1
    except UnknownMaterialError:
        return False


def element_column(symbol: str) -> float:
    """Return the column of the periodic table of an element, 0 for an organic cation.

    Examples
    --------
    >>> element_column("Zn"), element_column("Se")
    (12.0, 16.0)
    """
    return _columns().get(symbol, 0.0)
