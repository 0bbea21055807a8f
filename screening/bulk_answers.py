"""Bulk gaps of compositions, and bulk constants for particles of compounds never measured small."""

from functools import lru_cache
from pathlib import Path

import pandas as pd

from features.errors import FewnmError, UnknownMaterialError
from features.semiconductors import bulk_constants, match_material
from screening.bulk_estimate import estimate_bulk
from screening.bulk_gap import BulkGapModel
from screening.user_tables import collect_faults, read_user_table

__all__ = ["answer_bulk_gaps", "any_constants", "bulk_gap_model", "is_on_record", "read_materials"]


@lru_cache(maxsize=1)
def bulk_gap_model() -> BulkGapModel:
    """Return the bulk-gap model of the packaged tables, trained once a process."""
    return BulkGapModel().fit()


def is_on_record(material: str) -> bool:
    """Return whether the bulk table holds the material.

    Raises
    ------
    FormulaError
        If the text is not a formula.
    """
    try:
        match_material(material)
    except UnknownMaterialError:
        return False
    return True


def read_materials(path: Path) -> pd.DataFrame:
    """Read a table with the one column ``material``.

    Raises
    ------
    TableError
        With all faulty rows at once.
    """
    frame = read_user_table(path, ("material",))
    frame["material"] = frame["material"].fillna("")
    model = bulk_gap_model()
    faults: dict[str, str] = {}
    for text in frame["material"].unique():
        try:
            model.check(text)
        except FewnmError as error:
            faults[text] = str(error)
    collect_faults(
        path.name,
        [f"row {n}: {faults[t]}" for n, t in enumerate(frame["material"], start=2) if t in faults],
    )
    return frame


def answer_bulk_gaps(materials: pd.DataFrame) -> pd.DataFrame:
    """Answer the bulk gap of each material, in the order given.

    Parameters
    ----------
    materials : pandas.DataFrame
        Column material.

    Returns
    -------
    pandas.DataFrame
        As ``BulkGapModel.predict``.
    """
    return bulk_gap_model().predict(materials["material"].tolist())


def any_constants(materials: list[str]) -> pd.DataFrame:
    """Return bulk constants of any compound: on record, by alloy rules, or estimated.

    Parameters
    ----------
    materials : list of str

    Returns
    -------
    pandas.DataFrame
        Columns of ``features.semiconductors.bulk_constants`` at least; for compounds that are
        not on record also the spread of each constant and the ``basis``.

    Raises
    ------
    FormulaError
        If a text is not a formula or not a compound that can have a gap.
    """
    if all(is_on_record(text) for text in materials):
        return bulk_constants(materials)
    unique = list(dict.fromkeys(materials))
    estimated = estimate_bulk(unique, lambda names: bulk_gap_model().predict(names))
    return estimated.set_index("material").loc[materials].reset_index()
