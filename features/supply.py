"""Abundance, price class and criticality of a composition.

A composition maps element symbols (or ``FA``, ``MA``) to amounts, as in `features.mass_shares`.
Figures come from the table ``supply`` and carry their year: lists are revised, prices move, and a
price class is a decade of US dollars per kg, not a quotation.
"""

import math
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from typing import Any

from features.mass_shares import ORGANIC_CATIONS, checked_composition, mass_percent
from features.tables import read_table

__all__ = ["SupplyFigures", "element_supply", "supply_figures", "supply_text"]


@dataclass(frozen=True)
class SupplyFigures:
    """Supply of one composition.

    Attributes
    ----------
    scarcest_element : str
        Constituent with the lowest crustal abundance; empty if none is on record.
    scarcest_crust_ppm : float
        Its abundance, parts per million by mass.
    weighted_crust_ppm : float
        Geometric mean of the abundances, weighted by mass.
    worst_price_class : int
        Highest class among the constituents, 1 (below 10 US dollars per kg) to 5 (above 10,000).
    weighted_price_class : float
        Mean class, weighted by mass.
    supply_class : int
        1: on no list; 2: on the European or the United States list; 3: on both; 4: on both, and
        strategic in Europe. The worst constituent counts.
    eu_critical, us_critical : tuple of str
        Constituents on each list.
    weighted_hhi_production, worst_hhi_production : float
        Concentration of production by country (0 to 10,000), weighted by mass as in Gaultois et
        al. (2013), and the highest; nan if none is on record.
    without_figures : tuple of str
        Constituents that the table lacks, left out of every figure; a limit on supply cannot be
        passed with any. With nothing on record at all the classes are the worst.
    years : str
        Years of the figures, in words.
    """

    scarcest_element: str
    scarcest_crust_ppm: float
    weighted_crust_ppm: float
    worst_price_class: int
    weighted_price_class: float
    supply_class: int
    eu_critical: tuple[str, ...]
    us_critical: tuple[str, ...]
    weighted_hhi_production: float
    worst_hhi_production: float
    without_figures: tuple[str, ...]
    years: str


@cache
def _table() -> dict[str, dict[str, Any]]:
    """Return the rows of the table by element."""
    return read_table("supply").set_index("element").to_dict("index")  # type: ignore[return-value]


def element_supply() -> dict[str, dict[str, Any]]:
    """Return every element's figures.

    Returns
    -------
    dict of str to dict
        Columns of the table ``supply`` by symbol.

    Examples
    --------
    >>> bool(element_supply()["In"]["is_us_critical"])
    True
    """
    return {symbol: dict(row) for symbol, row in _table().items()}


def _class_of(row: Mapping[str, Any]) -> int:
    """Return the supply class of one element."""
    on_lists = int(row["is_eu_critical"]) + int(row["is_us_critical"])
    return 1 + on_lists + int(on_lists == 2 and row["is_eu_strategic"])


def _mean(shares: Mapping[str, float], values: Mapping[str, float]) -> float:
    """Return the mean over known values, weighted by mass; nan if nothing is known."""
    known = {s: v for s, v in values.items() if not math.isnan(v)}
    total = sum(shares[s] for s in known)
    return sum(shares[s] * v for s, v in known.items()) / total if known else math.nan


def _years(rows: Mapping[str, Mapping[str, Any]]) -> str:
    """Return the years behind the figures."""
    first = next(iter(rows.values()))
    return (
        f"European list {first['eu_list_year']}, United States list {first['us_list_year']}, "
        f"concentration 2013, price class {first['price_year']} or earlier"
    )


def _element_shares(composition: Mapping[str, float]) -> dict[str, float]:
    """Return mass shares of the elements, organic cations left out."""
    present = checked_composition(composition)
    elements = {s: amount for s, amount in present.items() if s not in ORGANIC_CATIONS}
    return mass_percent(elements) if elements else {}


def supply_figures(composition: Mapping[str, float]) -> SupplyFigures:
    """Return worst and mass-weighted supply figures of a composition.

    Parameters
    ----------
    composition : mapping of str to float
        Amount of each element, >= 0; ``FA`` and ``MA`` are organic cations, made from bulk
        chemicals and left out of every figure.

    Returns
    -------
    SupplyFigures

    Raises
    ------
    FormulaError
        If the composition cannot be read.

    Examples
    --------
    >>> figures = supply_figures({"In": 1, "P": 1})
    >>> figures.scarcest_element, figures.worst_price_class
    ('In', 3)
    """
    shares = _element_shares(composition)
    rows = {symbol: row for symbol, row in _table().items() if symbol in shares}
    without = tuple(sorted(shares.keys() - rows.keys()))
    if not rows:
        return SupplyFigures(
            "",
            math.nan,
            math.nan,
            5,
            math.nan,
            4,
            (),
            (),
            math.nan,
            math.nan,
            without,
            "no figures on record",
        )
    scarcest = min(rows, key=lambda symbol: float(rows[symbol]["crust_ppm"]))
    hhi = {symbol: float(row["hhi_production"]) for symbol, row in rows.items()}
    logs = {symbol: math.log(row["crust_ppm"]) for symbol, row in rows.items()}
    prices = {symbol: int(row["price_class"]) for symbol, row in rows.items()}
    return SupplyFigures(
        scarcest_element=scarcest,
        scarcest_crust_ppm=float(rows[scarcest]["crust_ppm"]),
        weighted_crust_ppm=math.exp(_mean(shares, logs)),
        worst_price_class=max(prices.values()),
        weighted_price_class=_mean(shares, prices),
        supply_class=max(_class_of(row) for row in rows.values()),
        eu_critical=tuple(sorted(s for s, row in rows.items() if row["is_eu_critical"])),
        us_critical=tuple(sorted(s for s, row in rows.items() if row["is_us_critical"])),
        weighted_hhi_production=_mean(shares, hhi),
        worst_hhi_production=max((v for v in hhi.values() if not math.isnan(v)), default=math.nan),
        without_figures=without,
        years=_years(rows),
    )


def supply_text(composition: Mapping[str, float]) -> str:
    """Return the supply of a composition as one cell of a table.

    Parameters
    ----------
    composition : mapping of str to float
        As for `supply_figures`.

    Returns
    -------
    str
        Class, critical elements, scarcest element, price class, and the years.

    Raises
    ------
    FormulaError
        As for `supply_figures`.

    Examples
    --------
    >>> supply_text({"Zn": 1, "S": 1}).startswith("supply class 2 of 4")
    True
    """
    figures = supply_figures(composition)
    critical = " ".join(sorted({*figures.eu_critical, *figures.us_critical})) or "none"
    missing = (
        f"; no figures for {' '.join(figures.without_figures)}" if figures.without_figures else ""
    )
    return (
        f"supply class {figures.supply_class} of 4; critical: {critical}; scarcest: "
        f"{figures.scarcest_element or 'unknown'} ({figures.scarcest_crust_ppm:g} ppm of the "
        f"crust); price class {figures.worst_price_class} of 5{missing} ({figures.years})"
    )
