"""Questions about surfaces: reading a table, and the names of structures and faces."""

from collections.abc import Collection
from functools import lru_cache

import pandas as pd

from features.adsorption_descriptors import alloy_parts
from features.errors import SpecificationError, TableError, explain
from features.tables import read_table
from screening.adsorption_pure import facet_openness

__all__ = ["close_packed_structure", "read_surfaces"]

_STRUCTURES = ("fcc", "hcp", "bcc", "L10", "L12")
_FACETS = ("111", "0001", "110", "100", "211", "101")
# fcc stands for the fcc form of any metal, which the reference tables hold
_ORDERED = {"L10": 0.5, "L12": 0.75}
_SHARE_TOLERANCE = 0.01
_FACE_OF = {"0001": "hcp", "101": "L10"}
_CLOSE_PACKED = frozenset({"101", "111", "0001"})


def read_surfaces(frame: pd.DataFrame, adsorbates: Collection[str]) -> pd.DataFrame:
    """Check a table of questions and split its materials into metals and shares.

    Parameters
    ----------
    frame : pandas.DataFrame
        Columns material and adsorbate, optionally structure and facet.
    adsorbates : collection of str
        Adsorbates that can be answered.

    Returns
    -------
    pandas.DataFrame
        One row a question, numbered from 0: first, second, share, adsorbate, openness, hollow.

    Raises
    ------
    TableError
        If a column is missing, a structure or facet is unknown, or they do not fit the metal or
        each other.
    SpecificationError
        If an adsorbate is unknown.
    FormulaError, UnknownMaterialError
        If a material cannot be read or has an element without data.
    """
    _check(frame, adsorbates)
    parts = [alloy_parts(str(material)) for material in frame["material"]]
    rows = pd.DataFrame(parts, columns=["first", "second", "share"])
    structure = _choices(frame, "structure", _STRUCTURES)
    facet = _choices(frame, "facet", _FACETS)
    for position, asked in enumerate(zip(parts, structure, facet, strict=True)):
        _check_structure(position, *asked)
    openness = [
        _openness(first, s, f) for first, s, f in zip(rows["first"], structure, facet, strict=True)
    ]
    return rows.assign(adsorbate=frame["adsorbate"].to_numpy(), openness=openness, hollow=False)


def _check(frame: pd.DataFrame, adsorbates: Collection[str]) -> None:
    missing = [c for c in ("material", "adsorbate") if c not in frame]
    if missing:
        raise TableError(
            explain(f"no column {missing[0]!r}", found=", ".join(map(str, frame.columns)))
        )
    for position, adsorbate in enumerate(frame["adsorbate"]):
        if adsorbate not in adsorbates:
            raise SpecificationError(
                explain(
                    "unknown adsorbate",
                    where=f"row {position + 1}",
                    expected=f"one of {', '.join(sorted(adsorbates))}",
                    found=repr(adsorbate),
                )
            )


@lru_cache(maxsize=1)
def _structures() -> dict[str, str]:
    table = read_table("metals")
    return dict(zip(table["element"].astype(str), table["structure"].astype(str), strict=True))


def close_packed_structure(metal: str) -> str:
    """Return the structure whose close-packed face stands for a metal: fcc, hcp or bcc.

    Examples
    --------
    >>> close_packed_structure("W"), close_packed_structure("Ga")
    ('bcc', 'fcc')
    """
    found = _structures()[metal]
    return found if found in {"hcp", "bcc"} else "fcc"


def _choices(frame: pd.DataFrame, column: str, known: tuple[str, ...]) -> list[str]:
    """Return an optional column as text, empty where nothing is given."""
    if column not in frame:
        return [""] * len(frame)
    texts = ["" if pd.isna(v) else str(v).strip().removesuffix(".0") for v in frame[column]]
    texts = ["0001" if t == "1" and column == "facet" else t for t in texts]
    for position, text in enumerate(texts):
        if text and text not in known:
            raise TableError(
                explain(
                    f"unknown {column}",
                    where=f"row {position + 1}",
                    expected=f"one of {', '.join(known)}, or empty",
                    found=repr(text),
                )
            )
    return texts


def _check_structure(
    position: int, parts: tuple[str, str, float], structure: str, facet: str
) -> None:
    """Refuse a structure that the metal does not have, and a face that the structure does not."""
    first, second, share = parts
    fitting = {close_packed_structure(first), "fcc"}
    if first != second:
        fitting |= {name for name, x in _ORDERED.items() if abs(share - x) < _SHARE_TOLERANCE}
    if structure and structure not in fitting:
        raise TableError(
            explain(
                f"structure does not fit {first}" + ("" if first == second else f" with {second}"),
                where=f"row {position + 1}",
                expected=f"one of {', '.join(sorted(fitting))}, or empty",
                found=repr(structure),
            )
        )
    owner = _FACE_OF.get(facet)
    if owner and owner != (structure or owner):
        raise TableError(
            explain(
                f"face {facet} belongs to {owner}",
                where=f"row {position + 1}",
                found=f"structure {structure!r}",
            )
        )


def _openness(first: str, structure: str, facet: str) -> float:
    if not facet or facet in _CLOSE_PACKED:
        return 0.0
    return facet_openness(structure or close_packed_structure(first), facet)
