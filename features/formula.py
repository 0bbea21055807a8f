"""The door for chemical formulas: CdSe0.6S0.4, CsPb(Br0.6I0.4)3, FAPbBr3, Cu₂ZnSnS₄.

A formula is read whole or refused with one message; nothing is guessed. Elements are those up to
lawrencium, and the organic cations `FA` and `MA` count as one constituent each. The module
imports the standard library only, so that a command line can check formulas at once.
"""

import math
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property, lru_cache
from typing import Any, NoReturn

from features.errors import FormulaError, explain

__all__ = ["ELEMENTS", "ORGANIC_SYMBOLS", "Compound", "compound_from_amounts", "parse_formula"]

ORGANIC_SYMBOLS = ("FA", "MA")
"""Formamidinium and methylammonium, monovalent organic cations."""

# From the least to the most electronegative end, after table VI of the IUPAC Red Book (2005).
_BY_ELECTRONEGATIVITY = (
    "Rn Xe Kr Ar Ne He Fr Cs Rb K Na Li Ra Ba Sr Ca Mg Be "
    "Lr No Md Fm Es Cf Bk Cm Am Pu Np U Pa Th Ac "
    "Lu Yb Tm Er Ho Dy Tb Gd Eu Sm Pm Nd Pr Ce La Y Sc Hf Zr Ti Ta Nb V W Mo Cr Re Tc Mn "
    "Os Ru Fe Ir Rh Co Pt Pd Ni Au Ag Cu Hg Cd Zn Tl In Ga Al B Pb Sn Ge Si C "
    "Bi Sb As P N H Po Te Se S O At I Br Cl F"
)

ELEMENTS = tuple(re.findall(r"\w+", _BY_ELECTRONEGATIVITY))
"""Element symbols in the order in which a canonical formula lists them."""

_ORDER = {symbol: at for at, symbol in enumerate((*ORGANIC_SYMBOLS, *ELEMENTS))}

# Isovalent constituents: their total, not each amount, is brought to a whole number, so that a
# solid solution keeps the proportions of its end members.
_ISOVALENT = {
    symbol: at
    for at, line in enumerate(
        (
            "FA MA Cs Rb K Na Li",
            "Ba Sr Ca Mg Be Hg Cd Zn",
            "Au Ag Cu",
            "Tl In Ga Al B",
            "Pb Sn Ge Si",
            "Sb As P N",
            "Te Se S O",
            "I Br Cl F",
            "Lu Yb Tm Er Ho Dy Tb Gd Eu Sm Nd Pr Ce La Y Sc",
        )
    )
    for symbol in line.split()
}

_MAX_LENGTH = 200
_MAX_DEPTH = 4
_MAX_MULTIPLE = 12
_SMALLEST_FRACTION = 1e-6
_LARGEST_AMOUNT = 1e4
_SUBSCRIPTS = str.maketrans("₀₁₂₃₄₅₆₇₈₉", "0123456789")
_TOKEN = re.compile(
    r"(?P<symbol>FA(?![a-z])|MA(?![a-z])|[A-Z][a-z]?)"
    r"|(?P<number>\d+(?:\.\d+)?|\.\d+)|(?P<open>[(\[{])|(?P<close>[)\]}])"
)
_PAIRS = {"(": ")", "[": "]", "{": "}"}
_CHARGE = re.compile(r"[+\-−–^⁺⁻⁰¹²³⁴-⁹]")


@dataclass(frozen=True)
class Compound:
    """A chemical composition, independent of order and scale.

    Parameters
    ----------
    parts : tuple of (str, float)
        Constituents in canonical order with their amounts per formula unit.
    """

    parts: tuple[tuple[str, float], ...]

    @property
    def amounts(self) -> dict[str, float]:
        """Amount of each constituent per formula unit."""
        return dict(self.parts)

    @property
    def fractions(self) -> dict[str, float]:
        """Share of each constituent; the shares sum to 1."""
        total = math.fsum(amount for _, amount in self.parts)
        return {symbol: amount / total for symbol, amount in self.parts}

    @cached_property
    def formula(self) -> str:
        """Canonical formula: one text for every way to write the composition."""
        return "".join(symbol + _amount_text(amount) for symbol, amount in self.parts)

    @property
    def chemical_system(self) -> str:
        """Constituents in alphabetical order, such as ``"Cd-Se"``."""
        return "-".join(sorted(symbol for symbol, _ in self.parts))

    def __str__(self) -> str:
        return self.formula


def _amount_text(amount: float) -> str:
    text = f"{amount:.6f}".rstrip("0").rstrip(".")
    return "" if text == "1" else text


def _refuse(what: str, text: str, *, expected: str = "", found: str = "", do: str = "") -> NoReturn:
    shown = text if len(text) <= 60 else f"{text[:57]}..."
    raise FormulaError(
        explain(what, where=f"formula {shown!r}", expected=expected, found=found, do=do)
    )


def _checked_text(text: Any) -> str:
    """Return the text without spaces and with plain digits, or refuse it whole."""
    if not isinstance(text, str):
        _refuse("no text", str(text), expected="text such as CdSe", found=type(text).__name__)
    plain = "".join(text.split()).translate(_SUBSCRIPTS)
    if not plain:
        _refuse("empty formula", text, expected="text such as CdSe")
    if len(plain) > _MAX_LENGTH:
        _refuse(
            "too long", text, expected=f"at most {_MAX_LENGTH} characters", found=f"{len(plain)}"
        )
    if plain == "NaN":
        _refuse("missing value", text, do="write Na1N1 for sodium and nitrogen one to one")
    if mark := _CHARGE.search(plain):
        _refuse(
            "charge or isotope mark",
            text,
            expected="a neutral formula such as CdSe",
            found=repr(mark.group()),
            do="leave charges, isotopes and ranges out",
        )
    if plain[0].isdigit() or plain[0] == ".":
        _refuse(
            "number before the first element",
            text,
            expected="amounts after the symbols",
            found=repr(plain[0]),
            do="write Cd2Se2, not 2CdSe; isotopes are not read",
        )
    return plain


def _tokens(plain: str, text: str) -> Iterator[tuple[str, str]]:
    """Yield (kind, value) of every token, or refuse the first character that is none."""
    at = 0
    while at < len(plain):
        match = _TOKEN.match(plain, at)
        if match is None:
            _refuse(
                "unexpected character",
                text,
                expected="element symbols, amounts and brackets",
                found=repr(plain[at]),
                do="mind the capitals: CdSe, not cdse",
            )
        assert match.lastgroup is not None
        yield match.lastgroup, match.group()
        at = match.end()


class _Reader:
    """Stack of bracket levels; each level lists [symbol, amount] items of its last factor."""

    def __init__(self, text: str) -> None:
        self.text = text
        self.levels: list[list[tuple[str, float]]] = [[]]
        self.brackets: list[str] = []
        self.last: list[tuple[str, float]] = []

    def symbol(self, value: str) -> None:
        if value not in _ORDER:
            _refuse("unknown element", self.text, found=repr(value), do="mind the capitals")
        self._settle()
        self.last = [(value, 1.0)]

    def number(self, value: str) -> None:
        amount = float(value)
        if not self.last:
            _refuse("amount without an element", self.text, found=value)
        if not 0.0 < amount <= _LARGEST_AMOUNT:
            _refuse(
                "amount out of range",
                self.text,
                expected=f"above 0, at most {_LARGEST_AMOUNT:g}",
                found=value,
            )
        self.levels[-1] += [(symbol, n * amount) for symbol, n in self.last]
        self.last = []

    def open(self, value: str) -> None:
        self._settle()
        if len(self.brackets) == _MAX_DEPTH:
            _refuse("brackets nested too deep", self.text, expected=f"at most {_MAX_DEPTH} levels")
        self.brackets.append(value)
        self.levels.append([])

    def close(self, value: str) -> None:
        self._settle()
        if not self.brackets or _PAIRS[self.brackets.pop()] != value:
            _refuse("unbalanced bracket", self.text, found=repr(value))
        inside = self.levels.pop()
        if not inside:
            _refuse("empty bracket", self.text)
        self.last = inside

    def result(self) -> dict[str, float]:
        self._settle()
        if self.brackets:
            _refuse("unbalanced bracket", self.text, found=repr(self.brackets[-1]))
        amounts: dict[str, float] = {}
        for symbol, amount in self.levels[0]:
            amounts[symbol] = amounts.get(symbol, 0.0) + amount
        return amounts

    def _settle(self) -> None:
        self.levels[-1] += self.last
        self.last = []


def _whole_multiple(ratios: list[float]) -> int:
    """Return the smallest factor that makes all ratios whole numbers, or 1 if none does."""
    for multiple in range(1, _MAX_MULTIPLE + 1):
        if all(abs(r * multiple - round(r * multiple)) < 1e-5 * multiple for r in ratios):
            return multiple
    return 1


def _canonical(amounts: Mapping[str, float]) -> tuple[tuple[str, float], ...]:
    """Return ordered parts, scaled to the smallest whole totals of isovalent constituents."""
    totals: dict[object, float] = {}
    for symbol, amount in amounts.items():
        kind = _ISOVALENT.get(symbol, symbol)
        totals[kind] = totals.get(kind, 0.0) + amount
    smallest = min(totals.values())
    ratios = {kind: total / smallest for kind, total in totals.items()}
    multiple = _whole_multiple(list(ratios.values()))
    parts = []
    for symbol in sorted(amounts, key=_ORDER.__getitem__):
        kind = _ISOVALENT.get(symbol, symbol)
        wanted = ratios[kind] * multiple
        if abs(wanted - round(wanted)) < 1e-5 * multiple:
            wanted = float(round(wanted))
        parts.append((symbol, round(amounts[symbol] / totals[kind] * wanted, 6)))
    return tuple(parts)


def compound_from_amounts(amounts: Mapping[str, float]) -> Compound:
    """Build a compound from amounts of elements or organic cations.

    Parameters
    ----------
    amounts : mapping of str to float
        Amount of each constituent, above 0 and finite, in any scale.

    Returns
    -------
    Compound

    Raises
    ------
    FormulaError
        If a symbol is unknown, an amount is not positive and finite, or nothing is given.

    Examples
    --------
    >>> compound_from_amounts({"Se": 2, "Cd": 2}).formula
    'CdSe'
    """
    shown = ", ".join(f"{symbol}: {amount}" for symbol, amount in amounts.items())
    if not amounts:
        _refuse("empty formula", shown, expected="at least one element")
    for symbol, amount in amounts.items():
        if symbol not in _ORDER:
            _refuse("unknown element", shown, found=repr(symbol))
        if not (math.isfinite(amount) and amount > 0.0):
            _refuse("amount out of range", shown, expected="above 0, finite", found=f"{amount}")
    total = math.fsum(amounts.values())
    if min(amounts.values()) / total < _SMALLEST_FRACTION:
        _refuse("amount too small", shown, expected=f"a share of at least {_SMALLEST_FRACTION:g}")
    return Compound(_canonical(amounts))


@lru_cache(maxsize=65536)
def _parse_cached(text: str) -> Compound:
    plain = _checked_text(text)
    reader = _Reader(text)
    for kind, value in _tokens(plain, text):
        getattr(reader, kind)(value)
    return compound_from_amounts(reader.result())


def parse_formula(text: str) -> Compound:
    """Read a chemical formula.

    Parameters
    ----------
    text : str
        Element symbols with amounts, round, square or curly brackets up to four levels, spaces
        and Unicode subscripts; ``FA`` and ``MA`` are organic cations. At most 200 characters.

    Returns
    -------
    Compound
        Equal for every order and scale in which one composition is written.

    Raises
    ------
    FormulaError
        One message for the first fault: unknown element, unbalanced or empty bracket, zero or
        missing amount, empty or too long text, charge or isotope marks, missing values.

    Examples
    --------
    >>> parse_formula("CsPb(Br0.6I0.4)3").formula
    'CsPbI1.2Br1.8'
    >>> parse_formula("Se2Cd2") == parse_formula("CdSe")
    True
    >>> parse_formula("CdSe").chemical_system
    'Cd-Se'
    """
    return _parse_cached(text) if isinstance(text, str) else _parse_cached(_checked_text(text))
