"""Cautions, hazard classes and RoHS mass shares of a composition.

A composition is a mapping from element symbol (or the organic cations ``FA`` and ``MA``) to amount
(atoms, or moles). Everything here is a screening caution: it defers to the safety data sheet, to
local codes and to licensed practice, and an empty entry says nothing about harm. Hazard statement
codes follow the Globally Harmonised System; the tables say which were recalled.
"""

import re
from collections.abc import Hashable, Iterable, Mapping
from dataclasses import dataclass
from datetime import date
from functools import cache
from typing import Any

import pandas as pd

from features.mass_shares import ORGANIC_CATIONS, checked_composition, mass_percent
from features.tables import read_table

__all__ = [
    "DEFERRAL",
    "Caution",
    "RohsShare",
    "caution_text",
    "cautions_for",
    "exemptions_running",
    "hazard_class",
    "rohs_exemptions",
    "rohs_mass_fractions",
]

DEFERRAL = "Follow the safety data sheet, local codes and licensed practice."
"""Words that end every caution cell."""

_NON_METALS = frozenset(re.findall("[A-Z][a-z]?", "HHeBCNOFNeSiPSClArGeAsSeBrKrTeIXe"))
_CLASS_OF_CODE = {
    4: "H300 H310 H330 H340 H350 H360",
    3: "H250 H260 H301 H311 H314 H331 H334 H341 H351 H361 H362 H370 H372 EUH032",
    2: "H228 H251 H252 H261 H302 H312 H315 H317 H319 H332 H335 H371 H373 H400 H410 H411 EUH031",
}


@dataclass(frozen=True)
class Caution:
    """One caution that a composition calls for.

    Attributes
    ----------
    subject : str
        Name of the row in the table ``hazards``.
    short_text : str
        Words for a reader.
    h_codes : tuple of str
        Hazard statement codes; empty if none is on record, which does not mean harmless.
    regulation_status_with_date : str
        Status in law and the date of the act behind it.
    source : str
        Key into the table ``sources``.
    from_memory : bool
        Whether anything in it, the codes included, was recalled rather than read.
    hazard_class : int
        1 (no code on record) to 4 (fatal, or carcinogen, mutagen or reproductive toxin 1A/1B).
    """

    subject: str
    short_text: str
    h_codes: tuple[str, ...]
    regulation_status_with_date: str
    source: str
    from_memory: bool
    hazard_class: int


@dataclass(frozen=True)
class RohsShare:
    """Mass share of one restricted element against its limit.

    Attributes
    ----------
    element : str
        Symbol.
    mass_percent : float
        Share of the composition's mass, percent.
    limit_mass_percent : float
        Highest share allowed in a homogeneous material, percent.
    restricted_form : str
        What the limit is written for; chromium counts only as Cr(VI), so its share is an upper
        bound.
    exceeds : bool
        Whether the share is above the limit.
    limit_date : str
        Date of the act, ISO format.
    source : str
        Key into the table ``sources``.
    from_memory : bool
        Whether the limit was recalled.
    """

    element: str
    mass_percent: float
    limit_mass_percent: float
    restricted_form: str
    exceeds: bool
    limit_date: str
    source: str
    from_memory: bool


def _class_of(codes: Iterable[str]) -> int:
    """Return the gravest class of a set of hazard statement codes."""
    bare = {re.sub(r"[a-zA-Z]+$", "", code) for code in codes}
    return max(
        (grade for grade, text in _CLASS_OF_CODE.items() if bare & set(text.split())), default=1
    )


@cache
def _rows() -> tuple[tuple[str, frozenset[str], Caution], ...]:
    """Return kind, triggers and caution of every row of the table."""
    rows = []
    for row in read_table("hazards").fillna({"elements": "", "h_codes": ""}).to_dict("records"):
        codes = tuple(row["h_codes"].split())
        caution = Caution(
            subject=row["hazard"],
            short_text=row["caution"],
            h_codes=codes,
            regulation_status_with_date=f"{row['regulation_status']} ({row['status_date']})",
            source=row["source"],
            from_memory=bool(row["from_memory"]),
            hazard_class=_class_of(codes),
        )
        rows.append((row["kind"], frozenset(row["elements"].split()), caution))
    return tuple(rows)


def _kinds_that_apply(symbols: frozenset[str]) -> frozenset[str]:
    """Return which kinds of row a set of symbols can start."""
    organic = symbols & ORGANIC_CATIONS.keys()
    elements = symbols - organic
    metals, non_metals = elements - _NON_METALS, elements & _NON_METALS
    kinds = {"element", "compound", "organic", "always"}
    if metals and not non_metals and not organic:
        kinds.add("metal")
    # oxygen, from a coating say, does not cancel it: a caution too many is the lesser error
    if metals or len(non_metals) > 1:
        kinds.add("anion")
    if metals:
        kinds.add("halide")
    return frozenset(kinds)


def _is_started(kind: str, triggers: frozenset[str], symbols: frozenset[str]) -> bool:
    """Return whether the symbols start a row: any trigger, all of a compound, or always."""
    if kind == "compound":
        return triggers <= symbols
    return kind == "always" or bool(triggers & symbols)


def cautions_for(composition: Mapping[str, float]) -> tuple[Caution, ...]:
    """Return the cautions that a composition calls for, gravest first.

    Parameters
    ----------
    composition : mapping of str to float
        Amount of each element, >= 0, any unit; ``FA`` and ``MA`` are organic cations.

    Returns
    -------
    tuple of Caution
        Never empty: the caution on inhalable powder always stands, and elements without an entry
        of their own are named in one more caution.

    Raises
    ------
    FormulaError
        If a symbol cannot be read, an amount is negative, or nothing is left.

    Notes
    -----
    Screening caution only. An element without a code in the table may still do harm.

    Examples
    --------
    >>> [caution.subject for caution in cautions_for({"In": 1, "P": 1})]
    ['indium phosphide', 'phosphide', 'In', 'nano-powder']
    """
    symbols = frozenset(checked_composition(composition))
    kinds = _kinds_that_apply(symbols)
    found = [
        (triggers & symbols, caution)
        for kind, triggers, caution in _rows()
        if kind in kinds and _is_started(kind, triggers, symbols)
    ]
    covered = frozenset().union(*(triggers for triggers, _ in found))
    cautions = [caution for _, caution in found]
    if unknown := symbols - covered - {"H", "O"}:
        cautions.append(_no_entry(unknown))
    return tuple(sorted(cautions, key=lambda caution: -caution.hazard_class))


def _no_entry(symbols: Iterable[str]) -> Caution:
    """Return the caution that says that nothing is on record."""
    names = " ".join(sorted(symbols))
    return Caution(
        subject=names,
        short_text=f"{names}: no hazard on record here, which is not evidence of harmlessness",
        h_codes=(),
        regulation_status_with_date="no status on record",
        source="common_practice_lab",
        from_memory=True,
        hazard_class=1,
    )


def caution_text(composition: Mapping[str, float]) -> str:
    """Return the cautions of a composition as one cell of a table.

    Parameters
    ----------
    composition : mapping of str to float
        As for `cautions_for`.

    Returns
    -------
    str
        Cautions, gravest first, with their codes, ended by `DEFERRAL`.

    Raises
    ------
    FormulaError
        As for `cautions_for`.

    Examples
    --------
    >>> caution_text({"Cd": 1, "Se": 1}).endswith(DEFERRAL)
    True
    """
    parts = [_in_words(caution) for caution in cautions_for(composition)]
    return f"{'; '.join(parts)}. {DEFERRAL}"


def _in_words(caution: Caution) -> str:
    """Return one caution with its codes and, if so, the word recalled."""
    marks = [" ".join(caution.h_codes)] if caution.h_codes else []
    marks += ["recalled"] if caution.from_memory else []
    return f"{caution.short_text} [{', '.join(marks)}]" if marks else caution.short_text


def hazard_class(composition: Mapping[str, float]) -> int:
    """Return the gravest class among a composition's cautions.

    Parameters
    ----------
    composition : mapping of str to float
        As for `cautions_for`.

    Returns
    -------
    int
        4: fatal, or carcinogen, mutagen or reproductive toxin 1A/1B; 3: toxic, suspected of such
        harm, lung sensitiser, or ignites in air or with water; 2: harmful, irritant, skin
        sensitiser, harms water life, or releases toxic gas with acid; 1: no code on record, which
        is no clearance.

    Raises
    ------
    FormulaError
        As for `cautions_for`.

    Examples
    --------
    >>> hazard_class({"Cd": 1, "S": 1})
    4
    """
    return max(caution.hazard_class for caution in cautions_for(composition))


@cache
def _limits() -> tuple[dict[Hashable, Any], ...]:
    """Return the mass limits, one row each."""
    rules = read_table("hazard_rules")
    return tuple(rules[rules["kind"] == "limit"].to_dict("records"))


def rohs_mass_fractions(composition: Mapping[str, float]) -> dict[str, RohsShare]:
    """Return the mass shares of the elements that Directive 2011/65/EU limits.

    Parameters
    ----------
    composition : mapping of str to float
        As for `cautions_for`; for a coated particle use
        `features.mass_shares.core_shell_composition`.

    Returns
    -------
    dict of str to RohsShare
        One entry for each of Cd, Pb, Hg and Cr, zero share included.

    Raises
    ------
    FormulaError
        As for `mass_percent`.

    Notes
    -----
    The limit holds for each homogeneous material of a product, such as a film with its matrix; the
    bare particle's share is the worst case. Limits, dates and exemptions are those of the table
    ``hazard_rules``; the law in force decides.

    Examples
    --------
    >>> rohs_mass_fractions({"Cd": 1, "Se": 1})["Cd"].exceeds
    True
    """
    shares = mass_percent(composition)
    return {
        row["element"]: RohsShare(
            element=row["element"],
            mass_percent=shares.get(row["element"], 0.0),
            limit_mass_percent=row["limit_mass_percent"],
            restricted_form=row["applies_to"],
            exceeds=shares.get(row["element"], 0.0) > row["limit_mass_percent"],
            limit_date=row["valid_from"],
            source=row["source"],
            from_memory=bool(row["from_memory"]),
        )
        for row in _limits()
    }


def rohs_exemptions(element: str) -> tuple[str, ...]:
    """Return exemptions on record for an element, each with its last day.

    Parameters
    ----------
    element : str
        Symbol.

    Returns
    -------
    tuple of str
        Empty if none is on record, which is no legal advice.

    Examples
    --------
    >>> len(rohs_exemptions("Cd"))
    3
    """
    rules = read_table("hazard_rules").fillna({"valid_until": "none"})
    chosen = rules[rules.kind.isin(["exemption", "no exemption"]) & (rules.element == element)]
    return tuple(
        f"{row['applies_to']}: {row['text']} (last day: {row['valid_until']})"
        for row in chosen.to_dict("records")
    )


def exemptions_running(element: str, day: date) -> tuple[str, ...]:
    """Return exemptions on record for an element that have not ended by a day.

    Parameters
    ----------
    element : str
        Symbol.
    day : datetime.date

    Returns
    -------
    tuple of str
        Use and last day of each; an exemption without a last day on record is left out.

    Examples
    --------
    >>> len(exemptions_running("Cd", date(2026, 1, 1)))
    1
    """
    rules = read_table("hazard_rules")
    chosen = rules[rules["kind"].eq("exemption") & rules["element"].eq(element)]
    last = pd.to_datetime(chosen["valid_until"])
    running = chosen[last >= pd.Timestamp(day)]
    return tuple(
        f"{row['applies_to']} (last day {row['valid_until']})" for row in running.to_dict("records")
    )
