"""Candidates of the emission track: material x diameter, with the reason for each refusal."""

from collections.abc import Iterable
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from features.errors import (
    FewnmError,
    NothingQualifiesError,
    SpecificationError,
    UnknownMaterialError,
    explain,
)
from features.formula import parse_formula
from features.semiconductors import bulk_constants, find_material, known_materials

if TYPE_CHECKING:
    from screening.specification import Candidates

__all__ = ["candidate_grid", "choose_materials", "constants_of", "pair_frame", "size_grid"]

_USUAL_SHAPE = {"halide perovskite": "cube"}
"""Shape in which a family is usually made; sphere otherwise (common practice)."""


def choose_materials(
    wanted: "Candidates", on_record: Iterable[str]
) -> tuple[list[str], pd.DataFrame]:
    """Return the materials of a specification and those refused, with reasons.

    Parameters
    ----------
    wanted : Candidates
    on_record : iterable of str
        Materials with size data.

    Returns
    -------
    materials : list of str
        Names as in the bulk table, or canonical formulas of compounds whose constants are
        interpolated or estimated; in the order given or sorted.
    refused : pandas.DataFrame
        Columns material, reason, limit, verdict.

    Raises
    ------
    SpecificationError
        If a text is no compound that can have a gap, or a family is not in the tables.
    NothingQualifiesError
        If no material is left.
    """
    names = _named(wanted)
    table = constants_of(names)
    _check_families(wanted, bulk_constants(known_materials())["family"])
    recorded = set(on_record)
    kept: list[str] = []
    refused: list[dict[str, str]] = []
    for name, family in zip(table["material"], table["family"], strict=True):
        reason = _refusal(name, family, wanted, recorded)
        if reason:
            refused.append(
                {"material": name, "reason": reason, "limit": "candidates", "verdict": "fail"}
            )
        else:
            kept.append(name)
    if not kept:
        raise NothingQualifiesError(
            explain(
                "no material is left",
                where="candidates",
                found="; ".join(f"{r['material']}: {r['reason']}" for r in refused[:5]),
                do="allow more materials, families or elements",
            )
        )
    return kept, pd.DataFrame(refused, columns=["material", "reason", "limit"]).assign(
        verdict="fail"
    )


def _named(wanted: "Candidates") -> list[str]:
    if not wanted.materials:
        return known_materials()
    try:
        names = [find_material(text) or parse_formula(text).formula for text in wanted.materials]
        constants_of(names)
    except FewnmError as error:
        raise SpecificationError(f"candidates.materials: {error}") from None
    return list(dict.fromkeys(names))


def _check_families(wanted: "Candidates", families: pd.Series) -> None:
    known = sorted(families.unique())
    for family in wanted.families:
        if family not in known:
            raise SpecificationError(
                explain(
                    f"unknown family {family!r}",
                    where="candidates.families",
                    expected=f"one of {', '.join(known)}",
                )
            )


def _refusal(name: str, family: str, wanted: "Candidates", recorded: set[str]) -> str:
    excluded = sorted(set(parse_formula(name).amounts) & set(wanted.exclude_elements))
    if excluded:
        return f"contains excluded {', '.join(excluded)}"
    if name in wanted.exclude_materials:
        return "excluded by name"
    if wanted.families and family not in wanted.families:
        return f"family {family} is not in the list"
    if not wanted.unmeasured and name not in recorded:
        return "no size data, and unmeasured materials are not wanted"
    return ""


def constants_of(materials: list[str]) -> pd.DataFrame:
    """Return bulk constants, estimated for compounds that are not on record.

    Raises
    ------
    FormulaError
        If a text is not a formula or not a compound that can have a gap.
    """
    try:
        return bulk_constants(materials)
    except UnknownMaterialError:
        from screening.bulk_answers import any_constants  # noqa: PLC0415 - trains more models

        return any_constants(materials)


def pair_frame(pairs: pd.DataFrame) -> pd.DataFrame:
    """Join material-diameter pairs with bulk constants.

    Parameters
    ----------
    pairs : pandas.DataFrame
        Columns material, diameter_nm, optional structure and shape.

    Returns
    -------
    pandas.DataFrame
        One row a pair, in the order and with the index given.
    """
    bulk = constants_of(pairs["material"].tolist()).set_index(pairs.index)
    frame = bulk.drop(columns=["source"])
    frame["diameter_nm"] = pairs["diameter_nm"].astype(float)
    usual = frame["family"].map(_USUAL_SHAPE).fillna("sphere")
    frame["shape"] = pairs["shape"].fillna(usual) if "shape" in pairs else usual
    if "structure" in pairs:
        frame["structure"] = pairs["structure"].fillna(frame["structure"])
    return frame


def candidate_grid(materials: list[str], wanted: "Candidates") -> pd.DataFrame:
    """Return every material at every diameter of the specification.

    Parameters
    ----------
    materials : list of str
    wanted : Candidates

    Returns
    -------
    pandas.DataFrame
        As `pair_frame`, materials in the order given, diameters rising.
    """
    diameters = size_grid(wanted)
    pairs = pd.DataFrame(
        {
            "material": np.repeat(materials, len(diameters)),
            "diameter_nm": np.tile(diameters, len(materials)),
        }
    )
    return pair_frame(pairs)


def size_grid(wanted: "Candidates") -> NDArray[np.float64]:
    """Return the diameters of a specification, nm, rising."""
    low, high = wanted.diameter_nm
    steps = int(np.floor((high - low) / wanted.step_nm + 1e-9))
    return np.round(low + wanted.step_nm * np.arange(steps + 1), 6)
