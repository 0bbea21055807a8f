"""Spaces of compositions: sublattices with their elements, enumerated one composition at a time.

A space is a list of sublattices. Each lists its elements, the steps in which their shares run, how
many may be mixed, and how many atoms it holds a formula unit. One sublattice may leave that number
to charge balance. Compositions that are not charge-balanced are passed over.
"""

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from functools import cached_property
from itertools import combinations, pairwise, product

from features.charge import charge_balance, usual_state
from features.errors import FormulaError, SpecificationError, explain
from features.formula import Compound, compound_from_amounts, parse_formula

__all__ = ["CompositionSpace", "Sublattice"]

_MOST_SHARES = 200_000
_TOLERANCE = 1e-9


@dataclass(frozen=True)
class Sublattice:
    """One sublattice of a space.

    Parameters
    ----------
    elements : tuple of str
        Symbols, or the organic cations FA and MA.
    atoms : float or None, default None
        Atoms a formula unit, > 0; None where charge balance settles it.
    step_percent : float, default 10
        Step of the shares, percent; must divide 100.
    most_mixed : int, default 2
        Most elements at once.
    ranges : mapping of str to (float, float)
        Lowest and highest share of an element, 0 to 1; others are free.
    """

    elements: tuple[str, ...]
    atoms: float | None = None
    step_percent: float = 10.0
    most_mixed: int = 2
    ranges: Mapping[str, tuple[float, float]] = field(default_factory=dict)

    def __post_init__(self) -> None:
        """Refuse what cannot be enumerated."""
        steps = 100.0 / self.step_percent
        if not self.elements or len(set(self.elements)) < len(self.elements):
            raise SpecificationError(
                explain("elements of a sublattice", expected="one or more, none twice")
            )
        if abs(steps - round(steps)) > _TOLERANCE:
            raise SpecificationError(
                explain("step_percent", expected="a divisor of 100", found=f"{self.step_percent:g}")
            )
        if unknown := sorted(set(self.ranges) - set(self.elements)):
            raise SpecificationError(
                explain(f"range of {unknown[0]}", expected=f"one of {', '.join(self.elements)}")
            )
        for symbol in self.elements:
            parse_formula(symbol)

    @cached_property
    def mixtures(self) -> dict[tuple[str, ...], tuple[tuple[float, ...], ...]]:
        """Shares of every choice of elements, in a settled order.

        Raises
        ------
        SpecificationError
            If a sublattice alone has more mixtures than can be listed.
        """
        self._check_number()
        steps = round(100.0 / self.step_percent)
        found = {}
        for n_mixed in self._mixed():
            for chosen in combinations(self.elements, n_mixed):
                shares = tuple(
                    split
                    for split in _splits(steps, n_mixed)
                    if self._in_ranges(dict(zip(chosen, split, strict=True)))
                )
                if shares:
                    found[chosen] = shares
        return found

    @property
    def n_mixtures(self) -> int:
        """Number of mixtures of the sublattice."""
        return sum(len(shares) for shares in self.mixtures.values())

    def _mixed(self) -> range:
        return range(1, min(self.most_mixed, len(self.elements)) + 1)

    def _check_number(self) -> None:
        """Refuse a sublattice with too many mixtures, before any is made."""
        steps = round(100.0 / self.step_percent)
        number = sum(
            math.comb(len(self.elements), k) * math.comb(steps - 1, k - 1) for k in self._mixed()
        )
        if number > _MOST_SHARES:
            raise SpecificationError(
                explain(
                    "a sublattice has too many mixtures",
                    where=", ".join(self.elements),
                    expected=f"at most {_MOST_SHARES}",
                    found=f"{number}",
                    do="widen step_percent or lower most_mixed",
                )
            )

    def _in_ranges(self, shares: Mapping[str, float]) -> bool:
        return all(
            low - _TOLERANCE <= shares.get(symbol, 0.0) <= high + _TOLERANCE
            for symbol, (low, high) in self.ranges.items()
        )


def _splits(n_steps: int, n_parts: int) -> Iterator[tuple[float, ...]]:
    """Yield every way to split 1 into parts of whole steps, none of them zero."""
    for cuts in combinations(range(1, n_steps), n_parts - 1):
        edges = (0, *cuts, n_steps)
        yield tuple((b - a) / n_steps for a, b in pairwise(edges))


@dataclass(frozen=True)
class CompositionSpace:
    """Every charge-balanced composition of some sublattices, made one at a time.

    Parameters
    ----------
    sublattices : tuple of Sublattice
        Cations first, anions last; at most one without a number of atoms.

    Examples
    --------
    >>> space = CompositionSpace(
    ...     (Sublattice(("Zn", "In"), 1, most_mixed=1), Sublattice(("S", "Se"), step_percent=50)))
    >>> [compound.formula for compound in space]
    ['ZnS', 'ZnSe', 'ZnSe0.5S0.5', 'In2S3', 'In2Se3', 'In2Se1.5S1.5']
    >>> space.n_mixtures
    6
    """

    sublattices: tuple[Sublattice, ...]

    def __post_init__(self) -> None:
        """Refuse a space whose composition is left open."""
        if len(self.sublattices) < 2 or sum(s.atoms is None for s in self.sublattices) > 1:
            raise SpecificationError(
                explain(
                    "sublattices",
                    expected="two or more, at most one without a number of atoms",
                )
            )

    @property
    def n_mixtures(self) -> int:
        """Number of mixtures to try: an upper bound of the number of compositions."""
        return math.prod(part.n_mixtures for part in self.sublattices)

    def __iter__(self) -> Iterator[Compound]:
        """Yield the charge-balanced compositions, each once, in a settled order."""
        for elements in self.choices():
            yield from self.compounds(elements)

    def choices(self) -> Iterator[tuple[tuple[str, ...], ...]]:
        """Yield every choice of the elements on the sublattices.

        Yields
        ------
        tuple of tuple of str
            Elements of each sublattice.
        """
        yield from product(*(part.mixtures for part in self.sublattices))

    def n_of(self, elements: tuple[tuple[str, ...], ...]) -> int:
        """Return the number of mixtures of a choice of elements."""
        parts = zip(self.sublattices, elements, strict=True)
        return math.prod(len(part.mixtures[chosen]) for part, chosen in parts)

    def compounds(self, elements: tuple[tuple[str, ...], ...]) -> Iterator[Compound]:
        """Yield the charge-balanced compositions of a choice of elements.

        Parameters
        ----------
        elements : tuple of tuple of str
            As from `choices`.

        Yields
        ------
        Compound
        """
        parts = zip(self.sublattices, elements, strict=True)
        charges = [
            [_charge(symbol, at, len(elements)) for symbol in chosen]
            for at, chosen in enumerate(elements)
        ]
        for shares in product(*(part.mixtures[chosen] for part, chosen in parts)):
            compound = self._compound(elements, shares, charges)
            if compound is not None:
                yield compound

    def _compound(
        self,
        elements: tuple[tuple[str, ...], ...],
        shares: tuple[tuple[float, ...], ...],
        unit_charges: list[list[int]],
    ) -> Compound | None:
        charges = [
            sum(share * charge for share, charge in zip(part, units, strict=True))
            for part, units in zip(shares, unit_charges, strict=True)
        ]
        atoms = _balanced_atoms([part.atoms for part in self.sublattices], charges)
        if atoms is None:
            return None
        amounts: dict[str, float] = {}
        for chosen, part, number in zip(elements, shares, atoms, strict=True):
            for symbol, share in zip(chosen, part, strict=True):
                amounts[symbol] = amounts.get(symbol, 0.0) + share * number
        try:
            compound = compound_from_amounts(amounts)
        except FormulaError:
            return None
        net = sum(n * q for n, q in zip(atoms, charges, strict=True))
        balanced = abs(net) < _TOLERANCE or charge_balance(compound).balanced
        return compound if balanced else None


def _charge(symbol: str, at: int, n_parts: int) -> int:
    """Return the usual charge of an element; the last sublattice holds the anions."""
    return usual_state(symbol, anion=at == n_parts - 1)


def _balanced_atoms(atoms: Sequence[float | None], charges: Sequence[float]) -> list[float] | None:
    """Fill in the number of atoms that charge balance settles; None where none does."""
    if None not in atoms:
        return [float(number) for number in atoms if number is not None]
    rest = sum(n * q for n, q in zip(atoms, charges, strict=True) if n is not None)
    open_charge = charges[atoms.index(None)]
    if rest * open_charge >= 0.0:
        return None
    return [-rest / open_charge if number is None else number for number in atoms]
