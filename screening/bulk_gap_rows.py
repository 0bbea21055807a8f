"""Rows that the bulk-gap model learns from, and the gaps that it answers from the record.

Three tables: semiconductors with a standard deviation each, well-known simple compounds, and the
large compilation, whose standard deviation is read off from where it meets the other two.
"""

from dataclasses import dataclass
from functools import cache

import numpy as np
import pandas as pd

from features.formula import parse_formula
from features.tables import read_table

__all__ = ["RecordedGap", "gap_rows", "recorded_gaps"]

_DOUBTFUL_SD_EV = 1.0
_LEAST_SD_EV = 0.05
# Median absolute deviation to standard deviation of a normal distribution.
_NORMAL_MAD = 1.4826


@dataclass(frozen=True)
class RecordedGap:
    """A gap on record.

    Parameters
    ----------
    gap_eV, sd_eV : float
        Value (negative for an inverted band order) and its standard deviation.
    table : str
        Packaged table that holds it.
    """

    gap_eV: float
    sd_eV: float
    table: str


def _canonical(frame: pd.DataFrame, column: str, table: str) -> pd.DataFrame:
    compounds = [parse_formula(text) for text in frame[column]]
    return frame.assign(
        material=[compound.formula for compound in compounds],
        chemical_system=[compound.chemical_system for compound in compounds],
        table=table,
    )


def _compilation_sd_eV(compiled: pd.DataFrame, known: pd.DataFrame) -> float:
    """Return the spread of the compilation about the tables that state their own."""
    both = compiled.merge(known, on="material", suffixes=("", "_known"))
    difference = (both["gap_eV"] - both["gap_eV_known"]).abs()
    return max(_NORMAL_MAD * float(difference.median()), _LEAST_SD_EV)


@cache
def _rows() -> pd.DataFrame:
    columns = ["material", "chemical_system", "gap_eV", "gap_sd_eV", "doubtful", "table"]
    known = pd.concat(
        [
            _canonical(read_table(name), "material", name).assign(doubtful=False)
            for name in ("bulk_semiconductors", "reference_gaps")
        ]
    )[columns]
    compiled = _canonical(read_table("bulk_gaps"), "formula", "bulk_gaps")
    compiled = compiled.assign(doubtful=compiled["remark"].notna())
    trusted = compiled[~compiled["doubtful"]]
    sd_eV = _compilation_sd_eV(trusted, known.drop_duplicates("material"))
    compiled["gap_sd_eV"] = np.where(compiled["doubtful"], _DOUBTFUL_SD_EV, sd_eV)
    return pd.concat([compiled[columns], known], ignore_index=True)


def gap_rows() -> pd.DataFrame:
    """Return all rows with a bulk gap, those of the compilation first.

    Returns
    -------
    pandas.DataFrame
        Columns material (canonical formula), chemical_system (elements in alphabetical order, the
        group that is left out together), gap_eV, gap_sd_eV, doubtful (a remark in the table
        speaks against the value), table.

    Examples
    --------
    >>> sorted(gap_rows()["table"].unique())
    ['bulk_gaps', 'bulk_semiconductors', 'reference_gaps']
    """
    return _rows().copy()


def recorded_gaps(rows: pd.DataFrame) -> dict[str, RecordedGap]:
    """Return the recorded gap of every material, from the table that is surest of it.

    Parameters
    ----------
    rows : pandas.DataFrame
        As from `gap_rows`. Doubtful rows are never an answer; of two rows in one table the mean
        stands, and half their distance adds to the standard deviation.

    Returns
    -------
    dict of str to RecordedGap
        By canonical formula.
    """
    answers: dict[str, RecordedGap] = {}
    for table in ("bulk_gaps", "reference_gaps", "bulk_semiconductors"):
        part = rows[(rows["table"] == table) & ~rows["doubtful"]]
        for material, group in part.groupby("material", sort=False):
            gaps = group["gap_eV"].to_numpy()
            sd_eV = float(np.hypot(group["gap_sd_eV"].max(), np.ptp(gaps) / 2.0))
            answers[str(material)] = RecordedGap(float(gaps.mean()), sd_eV, table)
    return answers
